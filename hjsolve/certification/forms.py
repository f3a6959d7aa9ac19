"""Closed forms differentiated back: what is to vanish, where, and what is known of it."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import replace
from itertools import product
from typing import TypeVar

import sympy as sp
from sympy import Basic, Dummy, Expr, Symbol
from sympy.core.relational import Relational

from hjsolve.algebra.budget import limit
from hjsolve.algebra.identity import REFEREES, Finding, refute, vanish
from hjsolve.algebra.named import Names
from hjsolve.algebra.regimes import regime
from hjsolve.algebra.sampling import Range
from hjsolve.algebra.tower import Claim, prove
from hjsolve.errors import OutOfTime
from hjsolve.records import Antiderivative, Formula, Hamiltonian, Truth

PROOF_SECONDS = 2.0
"""How long one proof may take."""

TRIES = 60

UNPROVED = "named roots: seen in balls at random parameters when the form was made"
UNSEEN = "proved of the formulas, but no point of the regime was found to look at in balls"

_Sympy = TypeVar("_Sympy", bound=Basic)


def differentiated(
    form: Formula,
    anti: Antiderivative,
    h: Hamiltonian,
    ranges: Mapping[Symbol, Range],
    inside: Sequence[Relational],
) -> list[Finding]:
    """d(form)/dq − integrand inside the regime of the form, for each sign of a |letter|.

    ``inside`` are the ends of q's interval where they have letters in them.
    """
    return [_finding(c, ranges, h.functions) for c in _claims(form, anti, h, ranges, inside)]


def _finding(claim: Claim, ranges: Mapping[Symbol, Range], functions: Sequence[str]) -> Finding:
    """Proved where it is both zero in every vector of signs and seen in balls."""
    proof = None
    try:
        with limit(PROOF_SECONDS):
            proof = prove(claim)
    except OutOfTime:
        pass
    if proof is None and not claim.where:
        return vanish(
            [claim.expression], ranges, functions, TRIES, claim.conditions, claim.positive
        )[0]
    seen = refute(
        claim.expression,
        ranges,
        functions,
        TRIES,
        claim.conditions,
        REFEREES,
        Names(claim.where) if claim.where else None,
        proof.places if proof else (),
    )
    if seen.truth is Truth.REFUTED:
        return seen
    if proof is None:
        return Finding(Truth.UNDECIDED, UNPROVED, seen.bound or 0.0)
    if seen.bound is None:
        return Finding(Truth.UNDECIDED, UNSEEN, proof.bound)
    return Finding(Truth.PROVED, "modular", proof.bound)


def _claims(
    form: Formula,
    anti: Antiderivative,
    h: Hamiltonian,
    ranges: Mapping[Symbol, Range],
    inside: Sequence[Relational],
) -> Iterator[Claim]:
    q = anti.variable
    names = {d.symbol for d in form.where}
    valid = (*form.valid, *inside, *_ends(q, ranges))
    put, conditions = regime(valid, (q, *names))
    whole = sp.Tuple(form.expression, anti.integrand).xreplace(put)
    shown = {
        s: Dummy(s.name, positive=True) * sign
        for s, sign in _signs_shown(whole, q)
        if s not in names
    }
    whole = whole.xreplace(shown)
    free = [
        a.args[0]
        for a in whole.atoms(sp.Abs)
        if a.args[0].is_Symbol and a.args[0] != q and a.args[0] not in names
    ]
    positive = tuple(
        sp.sin(c) for c, d in zip(h.coordinates, h.domains, strict=True) if d.kind == "polar-angle"
    )
    for signs in product((1, -1), repeat=min(len(free), 2)):
        case = {
            s: sign * Dummy(s.name, positive=True) for s, sign in zip(free, signs, strict=False)
        }
        antiderivative, integrand = whole.xreplace(case)
        antiderivative = antiderivative.replace(sp.acosh, _acosh).replace(sp.log, _log)
        residue = _derivative(antiderivative, q) - integrand
        within = [c.xreplace(shown).xreplace(case) for c in conditions]
        sided = _side([c for c in within if c != sp.true], q)

        def fixed(e: _Sympy, case: dict[Symbol, Expr] = case) -> _Sympy:
            return e.xreplace(put).xreplace(shown).xreplace(case)

        yield Claim(
            residue.xreplace(sided),
            tuple(
                replace(
                    d,
                    definition=None if d.definition is None else fixed(d.definition),
                    root_of=None if d.root_of is None else fixed(d.root_of),
                )
                for d in form.where
            ),
            tuple(c for c in (c.xreplace(sided) for c in within) if c != sp.true),
            positive,
            (sided.get(q, q).free_symbols.pop(),),
        )


def _derivative(e: Expr, q: Symbol) -> Expr:
    """With the constant factors of every term set aside: SymPy looks into each of them."""
    parts = (t.as_independent(q, as_Add=False) for t in sp.Add.make_args(e))
    return sp.Add(*(constant * sp.diff(rest, q) for constant, rest in parts))


def _ends(q: Symbol, ranges: Mapping[Symbol, Range]) -> Iterator[Relational]:
    """The numbers between which the variable lies."""
    lower, upper = ranges.get(q, (-sp.oo, sp.oo))
    if lower.is_finite and lower.is_number:
        yield sp.Lt(lower, q, evaluate=False)
    if upper.is_finite and upper.is_number:
        yield sp.Lt(q, upper, evaluate=False)


def _side(conditions: Sequence[Relational], q: Symbol) -> dict[Symbol, Expr]:
    """The coordinate as a letter with the sign that the conditions give it."""
    for c in (c for c in conditions if c != sp.false):
        factor, letter = (c.rhs - c.lhs).as_coeff_Mul()
        if letter == q and q.is_positive is None:
            return {q: (1 if factor > 0 else -1) * Dummy(q.name, positive=True)}
    return {}


def _acosh(u: Expr) -> Expr:
    """Acosh for u ≥ 1, without the product of two roots that SymPy's derivative has."""
    return sp.log(u + sp.sqrt(u**2 - 1))


def _log(u: Expr) -> Expr:
    """Log u for log |u|: the derivative is the same, and SymPy knows it for complex u too."""
    return sp.log(u.args[0] if isinstance(u, sp.Abs) else u)


def _signs_shown(expression: Expr, q: Symbol) -> list[tuple[Symbol, int]]:
    """Letters whose sign a root shows: the form is real only where they have it."""
    found = {}
    for power in expression.atoms(sp.Pow):
        if power.exp.is_Rational and power.exp.q == 2:
            sign, base = power.base.as_coeff_Mul()
            if base.is_Symbol and base != q and base.is_positive is None and sign != 0:
                found[base] = 1 if sign > 0 else -1
    return list(found.items())

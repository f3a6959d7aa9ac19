"""The certificate: every claim an answer makes, checked by a route of its own.

The checks go back to H and the separated momenta; none repeats the way by
which a result was found.  A refuted check is a fault of this program and
raises, so that it never ships as an answer; "undecided" ships, labelled.
"""

from __future__ import annotations

from collections.abc import Sequence
from itertools import product

import sympy as sp
from sympy import Dummy, Expr, Integral, Symbol
from sympy.core.relational import Relational

from hjsolve.algebra.brackets import brackets, independent
from hjsolve.algebra.identity import Finding, vanish
from hjsolve.algebra.sampling import Range
from hjsolve.errors import Fault
from hjsolve.records import (
    Antiderivative,
    Certificate,
    Check,
    CompleteIntegral,
    Formula,
    Hamiltonian,
    Motion,
    SeparatedEquation,
    Separation,
    Truth,
)

ZERO_METHODS = {
    "modular": "identity modulo a random prime; bound: probability of a false zero",
    "balls": "ball arithmetic at points of the domain; bound: size of the balls",
}
BRANCH_LIMIT = 3
"""With more coordinates of two branches, the branches are checked at random signs."""


def certify(
    separation: Separation, integral: CompleteIntegral | None, motion: Motion | None
) -> Certificate:
    """All checks that the answer allows.

    Raises:
        Fault: a check was refuted.
    """
    h = separation.hamiltonian
    ranges = {
        q: (d.lower, d.upper)
        for q, d in zip(h.coordinates, h.domains, strict=True)
        if d.lower.is_finite
    }
    checks = [_verdict(separation), *_first_integrals(separation, ranges)]
    if len(separation.equations) == len(h.coordinates):
        checks += [_equation(separation, ranges), _independence(separation, ranges)]
    if integral is not None:
        checks += [c for t in integral.terms for c in _quadratures(t.drift, t.root, h, ranges)]
    if motion is not None:
        checks += _motion(separation, motion, ranges)
    for check in checks:
        if check.verdict is Truth.REFUTED:
            raise Fault(f"refuted by its own certificate: {check.claim}")
    return Certificate(tuple(checks))


def _verdict(separation: Separation) -> Check:
    v = separation.verdict
    claim = f"the verdict is {v.separability}, with the blocks as listed"
    if v.separability == "undecided":
        return Check(claim, Truth.UNDECIDED, v.limit or "a limit was reached")
    method = (
        "Levi-Civita's expressions: zeros modulo a random prime, non-zeros in ball arithmetic; "
        "bound: probability of a false zero"
        if v.proof == "symbolic"
        else "Levi-Civita's expressions in ball arithmetic; bound: size of what is called zero"
    )
    truth = Truth.PROVED if v.proof == "symbolic" else Truth.UNDECIDED
    return Check(claim, truth, method, v.bound)


def _check(claim: str, findings: Sequence[Finding]) -> Check:
    """One claim that several expressions vanish."""
    worst = next((f for f in findings if f.truth is Truth.REFUTED), None) or next(
        (f for f in findings if f.truth is Truth.UNDECIDED), None
    )
    if worst is not None:
        bound = None if worst.truth is Truth.REFUTED else worst.bound
        method = ZERO_METHODS.get(worst.method, worst.method)
        if worst.truth is Truth.UNDECIDED and worst.bound is None:
            method = "no point was found at which the expression is real; nothing is known"
        return Check(claim, worst.truth, method, bound)
    bound = max((f.bound or 0.0 for f in findings), default=0.0)
    return Check(claim, Truth.PROVED, ZERO_METHODS["modular"], bound)


# ------------------------------------------------------------ conservation


def _first_integrals(separation: Separation, ranges: dict[Symbol, Range]) -> list[Check]:
    h = separation.hamiltonian
    known = [c for c in separation.constants if c.first_integral is not None]
    if not known:
        return []
    integrals = [c.first_integral for c in known]
    names = ", ".join(c.symbol.name for c in known)
    commuting, conserved = brackets(h, integrals, ranges)
    checks = [_check(f"the first integrals {names} are constant along the motion", conserved)]
    if commuting:
        checks.append(
            _check(f"the first integrals {names} are in involution with one another", commuting)
        )
    return checks


# --------------------------------------------------------- the equation


def _branches(equations: Sequence[SeparatedEquation]) -> list[dict[Symbol, Expr]]:
    signs = [e.sign for e in equations if e.root != 0]
    if len(signs) > BRANCH_LIMIT:
        alternating = [
            {s: sp.Integer((-1) ** (n + k)) for n, s in enumerate(signs)} for k in (0, 1)
        ]
        same = [dict.fromkeys(signs, sp.Integer(v)) for v in (1, -1)]
        return alternating + same
    choices = product((sp.S.One, sp.S.NegativeOne), repeat=len(signs))
    return [dict(zip(signs, c, strict=True)) for c in choices]


def _equation(separation: Separation, ranges: dict[Symbol, Range]) -> Check:
    """S solves the Hamilton–Jacobi equation: H(q, p(q; α), t) + ∂S/∂t = 0."""
    h = separation.hamiltonian
    claim = "S solves the Hamilton–Jacobi equation on every branch of the momenta"
    if separation.time_momentum is None or any(e.where for e in separation.equations):
        return Check(claim, Truth.UNDECIDED, "a momentum or time has no explicit formula")
    residues = []
    conditions = list(dict.fromkeys(v for e in separation.equations for v in e.valid))
    for branch in _branches(separation.equations):
        put = {e.momentum: e.solution.xreplace(branch) for e in separation.equations}
        residues.append(h.expression.xreplace(put) + separation.time_momentum)
    positive = [v.rhs for v in conditions]
    return _check(claim, vanish(residues, ranges, h.functions, 60, conditions, positive))


def _independence(separation: Separation, ranges: dict[Symbol, Range]) -> Check:
    """Whether det ∂²S/∂q∂α is not identically zero.

    The momenta p(q, α) invert the first integrals α(q, p), so the determinant
    is 1/det ∂α/∂p, which has no radicals and is finite wherever it is met.
    """
    claim = "det ∂²S/∂q∂α ≠ 0: S is a complete integral"
    integrals = [c.first_integral for c in separation.constants if c.first_integral is not None]
    if len(integrals) != len(separation.equations):
        return Check(claim, Truth.UNDECIDED, "constants are missing")
    found = independent(separation.hamiltonian, integrals, ranges)
    if found.truth is Truth.REFUTED:
        method = "ball arithmetic: a point of phase space at which det ∂α/∂p excludes 0"
        return Check(claim, Truth.PROVED, method, 0.0)
    return Check(claim, Truth.UNDECIDED, "no point was found at which det ∂α/∂p excludes 0")


# -------------------------------------------------------------- quadratures


def _quadratures(
    drift: Antiderivative,
    root: Antiderivative,
    h: Hamiltonian,
    ranges: dict[Symbol, Range],
) -> list[Check]:
    """Each closed form, differentiated back."""
    checks = []
    for part, anti in (("", root), (" (part linear in the momentum)", drift)):
        if anti.integrand == 0 or not anti.closed_forms:
            continue
        q = anti.variable
        claim = f"the closed forms of W_{q.name}{part} differentiate back to its integrand"
        findings = [
            f
            for form in anti.closed_forms
            if not form.where and not form.expression.has(Integral)
            for f in _differentiated(form, anti, h, ranges)
        ]
        checks.append(_check(claim, findings))
    return checks


def _differentiated(
    form: Formula, anti: Antiderivative, h: Hamiltonian, ranges: dict[Symbol, Range]
) -> list[Finding]:
    """d(form)/dq − integrand inside the regime of the form, for each sign of a |letter|."""
    put, conditions = regime(form.valid)
    q = anti.variable
    whole = sp.Tuple(form.expression, anti.integrand).xreplace(put)
    shown = {s: Dummy(s.name, positive=True) * sign for s, sign in _signs_shown(whole, q)}
    whole = whole.xreplace(shown)
    conditions = [c.xreplace(shown) for c in conditions]
    free = [a.args[0] for a in whole.atoms(sp.Abs) if a.args[0].is_Symbol and a.args[0] != q]
    findings: list[Finding] = []
    positive = [
        sp.sin(c) for c, d in zip(h.coordinates, h.domains, strict=True) if d.kind == "polar-angle"
    ]
    for signs in product((1, -1), repeat=min(len(free), 2)):
        case = {
            s: sign * Dummy(s.name, positive=True) for s, sign in zip(free, signs, strict=False)
        }
        antiderivative, integrand = whole.xreplace(case)
        antiderivative = antiderivative.replace(sp.acosh, _acosh).replace(sp.log, _log)
        residue = sp.diff(antiderivative, q) - integrand
        within = [c.xreplace(case) for c in conditions]
        within = [c for c in within if c != sp.true]
        findings += vanish([residue], ranges, h.functions, 60, within, positive)
    return findings


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


def regime(valid: Sequence[Relational]) -> tuple[dict[Symbol, Expr], list[Relational]]:
    """What a regime says of single symbols, and the conditions that are left.

    A symbol with a sign becomes a letter with that sign, a boundary (a ≤ b and
    b ≤ a with a symbol on one side) the value it has there.
    """
    put: dict[Symbol, Expr] = {}
    pairs = list(dict.fromkeys((v.lhs, v.rhs) for v in valid))
    for low, high in pairs:
        if (high, low) in pairs:
            letter, value = (low, high) if low.is_Symbol and not low.is_positive else (high, low)
            if letter.is_Symbol and not value.has(letter):
                put[letter] = value
        elif low == 0 and high.is_Symbol and not high.is_positive:
            put.setdefault(high, Dummy(high.name, positive=True))
        elif high == 0 and low.is_Symbol and not low.is_negative:
            put.setdefault(low, -Dummy(low.name, positive=True))
    left = [v.xreplace(put) for v in valid]
    return put, [v for v in left if v not in (sp.true, sp.false)]


# ------------------------------------------------------------------- motion


def _motion(separation: Separation, motion: Motion, ranges: dict[Symbol, Range]) -> list[Check]:
    """q̇ = ∂H/∂p and ṗ = −∂H/∂q for the coordinates that are explicit."""
    h = separation.hamiltonian
    known = {q: f.expression for q, f in motion.coordinates if f is not None}
    known |= {p: f.expression for p, f in motion.momenta if f is not None}
    formulas = [f for _, f in (*motion.coordinates, *motion.momenta) if f is not None]
    valid = tuple(dict.fromkeys(v for f in formulas for v in f.valid))
    checks = []
    for q, p in zip(h.coordinates, h.momenta, strict=True):
        if q not in known or p not in known:
            continue
        rate, force = sp.diff(h.expression, p), -sp.diff(h.expression, q)
        needed = (rate.free_symbols | force.free_symbols) & {*h.coordinates, *h.momenta}
        claim = f"{q.name}({h.time.name}), {p.name}({h.time.name}) satisfy Hamilton's equations"
        if not needed <= set(known):
            checks.append(Check(claim, Truth.UNDECIDED, "it rests on a coordinate left implicit"))
            continue
        residues = []
        branches = _branches(separation.equations)
        for branch in branches[:1] + branches[-1:]:
            put = {s: e.xreplace(branch) for s, e in known.items()}
            residues.append(sp.diff(put[q], h.time) - rate.xreplace(put))
            residues.append(sp.diff(put[p], h.time) - force.xreplace(put))
        signs, conditions = regime(tuple(v.xreplace(known) for v in valid))
        residues = [r.xreplace(signs) for r in residues]
        positive = [c.rhs for c in conditions if c.lhs == 0]
        found = vanish(residues, ranges, h.functions, 60, conditions, positive)
        checks.append(_check(claim, found))
    return checks

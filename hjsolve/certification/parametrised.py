"""The certificate of a motion given by a parameter.

With the rates dt/dλ and dφ/dλ as functions of the coordinates, Hamilton's
equations by the chain rule are an identity between algebraic functions of the
coordinates on each branch; what is left of elliptic functions is that p(λ) lies
on its separated equation, that dq/dλ has the right value, and that the laws are
the integrals of the rates.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import sympy as sp
from sympy import Expr, Symbol

from hjsolve.algebra.identity import Finding, vanish
from hjsolve.algebra.named import Names
from hjsolve.algebra.regimes import boundary_values, has_value, inside, regime
from hjsolve.algebra.sampling import Range
from hjsolve.certification.along import vanish_along
from hjsolve.records import Parametrisation, Separation


def parametrised(
    separation: Separation,
    given: Parametrisation,
    branches: Sequence[Mapping[Symbol, Expr]],
    ranges: Mapping[Symbol, Range],
) -> list[Finding]:
    """The findings on the branches; empty where H holds a coordinate that is not given."""
    findings: list[Finding] = []
    seen: set[tuple[Expr, ...]] = set()
    for branch in branches:
        found = _on(branch, separation, given, ranges)
        if found is None:
            return []
        algebraic, moving, known = found
        findings += algebraic
        if moving not in seen:  # a path that turns holds no sign of a branch
            seen.add(moving)
            findings += _along(moving, separation, given, known, ranges)
    return findings


def _on(
    branch: Mapping[Symbol, Expr],
    separation: Separation,
    given: Parametrisation,
    ranges: Mapping[Symbol, Range],
) -> tuple[list[Finding], tuple[Expr, ...], dict[Symbol, Expr]] | None:
    """What is found in the coordinates, what must vanish along the motion, and the motion."""
    h, parameter = separation.hamiltonian, given.parameter
    formulas = (*given.coordinates, *given.momenta)
    pairs = tuple(zip(h.coordinates, h.momenta, strict=True))
    known = {e.momentum: e.drift for e in separation.equations if e.root == 0}
    known |= {s: f.expression.xreplace(dict(branch)) for s, f in formulas}
    rates = {s: f.expression for s, f in given.rates}
    needed = h.expression.free_symbols & set(h.coordinates)
    if h.time not in rates or not needed <= set(known):
        return None
    valid = tuple(dict.fromkeys(v for _, f in formulas for v in f.valid))
    put = boundary_values(valid)
    clock = rates.pop(h.time)
    velocity = {q: sp.cancel(clock * sp.diff(h.expression, p)) for q, p in pairs}
    # on the separated equations, in the coordinates themselves
    equations = {e.momentum: e for e in separation.equations}
    solved = {p: e.solution.xreplace(dict(branch)).xreplace(put) for p, e in equations.items()}
    algebraic = [rate - velocity[q].xreplace(solved) for q, rate in rates.items()]
    for q, p in pairs:
        if q in known:
            slope = sp.diff(solved[p], q) * velocity[q]
            algebraic.append((slope + clock * sp.diff(h.expression, q)).xreplace(solved))
    own = [v for v in valid if not v.free_symbols & _named(given)]
    signs, conditions = regime(own)
    findings = vanish([e.xreplace(signs) for e in algebraic], ranges, h.functions, 60, conditions)
    # along the motion
    moving: list[Expr] = []
    for q, p in pairs:
        if q in known:
            e = equations[p]
            root = (known[p] - e.drift.xreplace(known)) ** 2 - (e.root**2).xreplace(known)
            moving += [
                root.xreplace(put),
                sp.diff(known[q], parameter) - velocity[q].xreplace(known),
            ]
    for symbol, law in given.laws:
        rate = dict(given.rates)[symbol].expression.xreplace(known)
        moving.append(sp.diff(law.expression.xreplace(dict(branch)), parameter) - rate)
    return findings, tuple(moving), known


def _named(given: Parametrisation) -> set[Symbol]:
    return {d.symbol for _, f in given.coordinates for d in f.where}


def _along(
    residues: Sequence[Expr],
    separation: Separation,
    given: Parametrisation,
    known: Mapping[Symbol, Expr],
    ranges: Mapping[Symbol, Range],
) -> list[Finding]:
    """Whether functions of λ vanish, for the constants of the regime."""
    valid = dict.fromkeys(v for _, f in given.coordinates for v in f.valid)
    where = tuple(dict.fromkeys(d for _, f in given.coordinates for d in f.where))
    names = Names(where) if where else None
    kept = names.held if names is not None else ()
    signs, conditions = regime(tuple(v.xreplace(dict(known)) for v in valid), kept)
    h = separation.hamiltonian
    domain = dict(zip(h.coordinates, h.domains, strict=True))
    for q, _ in given.coordinates:
        at = known[q].xreplace(signs)
        conditions += [has_value(at), *inside(domain[q], at)]
    functions = h.functions
    return vanish_along([r.xreplace(signs) for r in residues], ranges, functions, conditions, names)

"""What both ways in share: inverting, the record of a branch, and what is checked of it."""

from __future__ import annotations

from collections.abc import Sequence

import sympy as sp
from sympy import Expr, Symbol

from hjsolve.algebra.identity import vanish
from hjsolve.records import (
    Branch,
    Check,
    Formula,
    Frame,
    Truth,
)
from hjsolve.transformation.branches import (
    Candidate,
    Setting,
    as_map,
    valid,
)
from hjsolve.transformation.kinds import Maps
from hjsolve.transformation.probe import Point
from hjsolve.transformation.symplectic import bracket
from hjsolve.transformation.system import Answer, solve
from hjsolve.transformation.tidy import derivative, in_grammar, length, tidied

INVERSION_SECONDS = 1.0
"""For one inversion; a hopeless one ends here and the relations stay implicit."""


def solved(equations: Sequence[Expr], frame: Frame) -> list[Answer]:
    """The variables of a frame from equations, within the time of one inversion."""
    return solve(equations, frame.variables, INVERSION_SECONDS, last_resorts=1)


def maps_of(f: Candidate | None, g: Candidate | None, relations: tuple[Expr, ...] = ()) -> Maps:
    """A branch for the search of generating functions."""
    favoured: tuple[Point, ...] = ()
    if f is not None:
        count = len(f.values) // 2
        images = zip(f.positive, f.images, strict=False)
        favoured = tuple(p for p, image in images if all(v > 0 for v in image[:count]))
    return Maps(
        g.values if g else None,
        f.values if f else None,
        f.conditions if f else (),
        favoured,
        tuple(f.positive) if f else (),
        tuple(f.points) if f else (),
        relations,
    )


def branch_record(
    setting: Setting,
    f: Candidate | None,
    g: Candidate | None,
    shift: Expr | None,
    multiplier: Expr = sp.S.One,
) -> Branch:
    """The record of a branch; ``shift`` is K − cH in any variables, None when not found."""
    old, new = setting.problem.old, setting.problem.new
    h = setting.problem.hamiltonian
    k = None
    added = None
    if f is not None and shift is not None:
        added_value = in_grammar(tidied(shift.xreplace(f.values)))
        if not added_value.free_symbols & set(old.variables):
            added = Formula(added_value, (), valid(added_value))
            if h is not None:
                terms = [multiplier * a.xreplace(f.values) for a in sp.Add.make_args(h)]
                apart = sp.Add(*map(tidied, terms), added_value)
                whole = tidied(sp.Add(*terms, added_value))
                value = in_grammar(min(apart, whole, key=length))
                k = Formula(value, (), valid(value, f.conditions))
    return Branch(
        as_map(f, old.variables) if f else None,
        as_map(g, new.variables) if g else None,
        k,
        bool(f and f.positive),
        added,
    )


def inverse_checks(
    setting: Setting, pair: tuple[Candidate | None, Candidate | None]
) -> tuple[Check, ...]:
    """What was checked of the two maps of a branch."""
    f, g = pair
    checks = [c.proof for c in (f, g) if c is not None and c.proof is not None]
    if f is None or g is None:
        return tuple(checks)
    claim = "one map after the other is the identity"
    for one, other in ((f, g), (g, f)):
        composed = [e.xreplace(dict(other.values)) - s for s, e in one.values.items()]
        findings = vanish(composed, setting.ranges, setting.functions)
        if all(x.truth is Truth.PROVED for x in findings):
            bound = max((x.bound or 0.0 for x in findings), default=0.0)
            return (*checks, Check(claim, Truth.PROVED, "modular", bound))
    len(f.positive) + len(f.points)
    return (*checks, Check(f"{claim}, at points of the branch", Truth.UNDECIDED, "balls", 1e-30))


def flow_checks(
    setting: Setting, maps: Maps, shift: Expr | None, multiplier: Expr
) -> tuple[Check, ...]:
    """∂Z/∂t = [Z, K − cH]/c for every new variable Z: Hamilton's equations carry over."""
    problem = setting.problem
    g = maps.new_in_old
    if g is None or shift is None:
        return ()
    if not any(problem.time in e.free_symbols for e in g.values()):
        return ()
    r = shift.xreplace(dict(g))
    if r.free_symbols & set(problem.new.variables):
        return ()
    rates = [
        multiplier * derivative(e, problem.time) - bracket(e, r, problem.old) for e in g.values()
    ]
    findings = vanish(rates, setting.ranges, setting.functions)
    truths = {x.truth for x in findings}
    truth = Truth.PROVED if truths == {Truth.PROVED} else Truth.UNDECIDED
    if Truth.REFUTED in truths:
        truth = Truth.REFUTED
    bound = max((x.bound or 0.0 for x in findings), default=0.0)
    claim = "the new variables obey Hamilton's equations with the new Hamiltonian, for every H"
    return (Check(claim, truth, findings[0].method, bound),)


def pairs_of(frame: Frame) -> list[tuple[Symbol, Symbol]]:
    """(coordinate, momentum), pair by pair."""
    return list(zip(frame.coordinates, frame.momenta, strict=True))

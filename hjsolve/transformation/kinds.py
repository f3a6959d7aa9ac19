"""All generating functions of one transformation, and why some do not exist.

A combination of kinds exists where its variables x, X are independent, that is
where det ∂X/∂y does not vanish.  There is one function A on phase space behind
them all (see ``relations``), so that one integration serves every kind.
"""

from __future__ import annotations

import time as clock
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from itertools import product

from sympy import Expr, S, Symbol

from hjsolve.algebra.budget import limit
from hjsolve.algebra.identity import vanish
from hjsolve.errors import OutOfTime
from hjsolve.records import Formula, GeneratingFunction, Truth
from hjsolve.transformation.branches import Setting, valid
from hjsolve.transformation.potential import Integrate, potential
from hjsolve.transformation.probe import Point, Probe
from hjsolve.transformation.relations import Variables, legendre, residues, variables
from hjsolve.transformation.system import solve
from hjsolve.transformation.tidy import derivative, determinant, in_grammar, length, tidied

SECONDS = 1.0
"""For all the mixed kinds together; those left over are said to have been left."""

UNIFORM_SECONDS = 5.0
"""For the four combinations of one kind, divided by the number of pairs."""

EACH_SECONDS = 2.0
"""For one combination, divided by the number of pairs."""

PART = "generates a part of the branch: its relations have more than one solution"

EVERYWHERE = (2.0,)
"""The share of a function that is right at every point of its branch."""

NO_VALUE = (S.NaN, S.ComplexInfinity, S.Infinity, S.NegativeInfinity, S.ImaginaryUnit)

MOST_PAIRS = 3
"""With more pairs only the combinations of one kind are looked at: there are 4ⁿ."""

LENGTH = 220
"""A longer function is no use to a reader, and no surer than the maps."""


@dataclass(frozen=True, slots=True)
class Maps:
    """One branch; at least one of its maps.  The points are of the new variables."""

    new_in_old: Mapping[Symbol, Expr] | None
    old_in_new: Mapping[Symbol, Expr] | None
    conditions: tuple[Expr, ...] = ()
    favoured: tuple[Point, ...] = ()
    positive: tuple[Point, ...] = ()
    points: tuple[Point, ...] = ()
    relations: tuple[Expr, ...] = ()


def all_kinds(
    setting: Setting,
    maps: Maps,
    area: Expr | None,
    integrate: Integrate,
    known: Sequence[GeneratingFunction] = (),
) -> tuple[GeneratingFunction, ...]:
    """One entry a combination of kinds.

    ``area`` is A in any of the variables, None when it was not found.
    """
    problem = setting.problem
    done = {g.kinds: g for g in known}
    n = len(problem.old.coordinates)
    every = product((1, 2, 3, 4), repeat=n) if n <= MOST_PAIRS else ((k,) * n for k in (1, 2, 3, 4))
    order = sorted({*every, *done}, key=lambda k: (len(set(k)) > 1, k))
    found = []
    stop, mixed = clock.monotonic() + UNIFORM_SECONDS / n, False
    for kinds in order:
        if kinds in done:
            found.append(done[kinds])
            continue
        missing = _dependent(kinds, setting, maps)
        if missing is not None:
            found.append(missing)
            continue
        if len(set(kinds)) > 1 and not mixed:
            stop, mixed = clock.monotonic() + SECONDS, True
        left = min(EACH_SECONDS / n, stop - clock.monotonic())
        reason = "left out at the time limit of this stage"
        function = None
        if left > 0.05:
            try:
                with limit(left):
                    function = _function(kinds, setting, maps, area, integrate)
                    reason = "no closed form of moderate length was found"
            except OutOfTime:
                pass
        if function is None:
            found.append(GeneratingFunction(kinds, Truth.PROVED, None, reason))
        else:
            formula = Formula(function[0], (), valid(function[0]))
            remark = "" if function[1] else PART
            found.append(GeneratingFunction(kinds, Truth.PROVED, formula, remark))
    return tuple(found)


def _dependent(kinds: tuple[int, ...], setting: Setting, maps: Maps) -> GeneratingFunction | None:
    """The entry of a combination whose variables are not independent."""
    v = variables(setting.problem.old, setting.problem.new, kinds)
    if maps.new_in_old is not None:
        made, free, values = v.X, v.y, maps.new_in_old
    else:
        made, free, values = v.x, v.Y, maps.old_in_new or {}
    jacobian = [[derivative(values[a], b) for b in free] for a in made]
    (finding,) = vanish([determinant(jacobian)], setting.ranges, setting.functions)
    if finding.truth is Truth.REFUTED:
        return None
    names = ", ".join(s.name for s in v.generating)
    if finding.truth is Truth.PROVED:
        above, below = (", ".join(s.name for s in side) for side in (made, free))
        reason = f"{names} are not independent: det ∂({above})/∂({below}) vanishes identically"
        return GeneratingFunction(kinds, Truth.REFUTED, None, reason)
    reason = f"whether {names} are independent was not decided"
    return GeneratingFunction(kinds, Truth.UNDECIDED, None, reason)


def _function(
    kinds: tuple[int, ...],
    setting: Setting,
    maps: Maps,
    area: Expr | None,
    integrate: Integrate,
) -> tuple[Expr, bool] | None:
    """F of these kinds, checked at points of the branch, and whether it is right at all of them."""
    problem = setting.problem
    v = variables(problem.old, problem.new, kinds)
    best: tuple[tuple[float, ...], Expr] | None = None
    for values in _determined(v, maps):
        function = None
        if area is not None:
            whole = area + legendre(problem.old, problem.new, kinds)
            function = in_grammar(tidied(whole.xreplace(values)))
            if function.free_symbols & set(v.determined):
                function = None
        if function is None:
            differential = {
                g: sign * values[d]
                for g, d, sign in zip(v.generating, v.determined, v.signs, strict=True)
            }
            function = potential(
                differential, setting.domains, setting.ranges, setting.functions, integrate
            )
        if function is not None and (length(function) > LENGTH or function.has(*NO_VALUE)):
            function = None
        if function is None:
            continue
        share = _agreement(function, v, setting, maps)
        sought = next((x for x, side in zip(share, _sides(maps), strict=False) if side), share[0])
        if sought and (best is None or share > best[0]):
            best = (share, function)
        if share == EVERYWHERE:
            break
    return (best[1], best[0] == EVERYWHERE) if best else None


def _determined(v: Variables, maps: Maps) -> Iterator[dict[Symbol, Expr]]:
    """Y and Y as functions of x and X, each on a branch that may be the one wanted."""
    systems = [[s - e for s, e in m.items()] for m in (maps.new_in_old, maps.old_in_new) if m]
    if maps.relations:
        systems.insert(0, list(maps.relations))
    seen = set()
    for equations in systems:
        answers = solve(equations, v.determined, EACH_SECONDS / 2)
        for a in sorted(answers, key=lambda a: sum(length(e) for e in a.values.values())):
            values = {s: in_grammar(e) for s, e in a.values.items()}
            key = tuple(values[s] for s in v.determined)
            if key not in seen:
                seen.add(key)
                yield values


def _sides(maps: Maps) -> tuple[Sequence[Point], ...]:
    """The points of the branch, those first at which a function has to be right."""
    return maps.favoured, maps.positive, (*maps.positive, *maps.points)


def _agreement(function: Expr, v: Variables, setting: Setting, maps: Maps) -> tuple[float, ...]:
    """The share of the branch's points at which the relations of F hold on the transformation.

    First at those with all new variables and old coordinates positive, then at
    those with all new variables positive, then at all; EVERYWHERE where they
    hold identically.  A function that gives another branch has a share of 0, and
    one that fails at all points of the first kind there is is of no use.
    """
    left = residues(function, v)
    values = maps.old_in_new or maps.new_in_old or {}
    put = [r.xreplace(dict(values)) for r in left]
    if maps.old_in_new is not None and (maps.positive or maps.points):
        probe = Probe(put, maps.conditions, [], setting.functions)
        every = (*maps.positive, *maps.points)
        met = [probe.at(p) is not None for p in every]
        if all(met):
            return EVERYWHERE
        there = [p for p, m in zip(every, met, strict=True) if m]
        return tuple(sum(p in there for p in side) / max(len(side), 1) for side in _sides(maps))
    findings = vanish(put, setting.ranges, setting.functions)
    proved = all(f.truth is Truth.PROVED for f in findings)
    return EVERYWHERE if proved else (0.0,)

"""A generating function given: its relations, the maps, the other kinds."""

from __future__ import annotations

from collections.abc import Sequence

import sympy as sp
from sympy import Expr

from hjsolve.algebra.identity import vanish
from hjsolve.errors import InputError
from hjsolve.records import (
    Certificate,
    Check,
    Formula,
    GeneratingFunction,
    Transformation,
    Truth,
)
from hjsolve.transformation.assemble import (
    branch_record,
    flow_checks,
    inverse_checks,
    maps_of,
    solved,
)
from hjsolve.transformation.branches import (
    Candidate,
    Setting,
    admitted,
    partner,
    valid,
)
from hjsolve.transformation.kinds import all_kinds
from hjsolve.transformation.potential import Integrate
from hjsolve.transformation.relations import (
    legendre,
    mixed_hessian,
    residues,
    variables,
)
from hjsolve.transformation.symplectic import Brackets, test_brackets
from hjsolve.transformation.tidy import derivative, determinant, length, tidied


def from_function(setting: Setting, function: Expr, integrate: Integrate) -> Transformation:
    """Everything that follows from a generating function; InputError when it is degenerate."""
    problem = setting.problem
    function = problem.function if problem.function is not None else function
    v = variables(problem.old, problem.new, problem.kinds)
    _refuse_degenerate(setting, function)
    left = residues(function, v)
    pairs = _both_ways(setting, left)
    shift = tidied(derivative(function, problem.time))
    branches = tuple(branch_record(setting, f, g, shift) for f, g in pairs)
    checks = list(inverse_checks(setting, pairs[0])) if pairs else []
    tested = _test(setting, *pairs[0]) if pairs else None
    canonical = Truth.PROVED  # whatever a test could not tell, by the theorem below
    if tested:
        # a map that holds on a part of the variables only may fail outside of it
        checks += [c for c in tested.checks if c.verdict is not Truth.REFUTED]
    claim = "det ∂²F/∂x∂X does not vanish, so that the relations define a canonical transformation"
    checks.insert(0, Check(claim, Truth.PROVED, "balls"))
    own = GeneratingFunction(problem.kinds, Truth.PROVED, Formula(function, (), valid(function)))
    others: tuple[GeneratingFunction, ...] = (own,)
    if pairs:
        maps = maps_of(*pairs[0], left)
        area = function - legendre(problem.old, problem.new, problem.kinds)
        others = all_kinds(setting, maps, area, integrate, [own])
        checks += flow_checks(setting, maps, shift, sp.S.One)
    relations = tuple(
        sp.Eq(d, tidied(d - r), evaluate=False) for d, r in zip(v.determined, left, strict=True)
    )
    return Transformation(
        problem, canonical, None, branches, relations, own, others, None, Certificate(tuple(checks))
    )


def _refuse_degenerate(setting: Setting, function: Expr) -> None:
    problem = setting.problem
    v = variables(problem.old, problem.new, problem.kinds)
    hessian = mixed_hessian(function, v)
    (finding,) = vanish([determinant(hessian)], setting.ranges, setting.functions, tries=60)
    if finding.truth is Truth.REFUTED:
        return
    old, new = (", ".join(s.name for s in side) for side in (v.x, v.X))
    if finding.truth is Truth.PROVED:
        detail = (
            f"det ∂²F/∂({old})∂({new}) vanishes identically, so the relations cannot be solved: "
            "this function generates no transformation"
        )
        code = "degenerate"
    else:
        detail = (
            f"no real point was found at which det ∂²F/∂({old})∂({new}) is proved not to vanish; "
            "declare the signs and domains it needs"
        )
        code = "undecided"
    raise InputError(
        detail,
        pointer="/generating_function/function",
        expected="a function whose mixed second derivatives have a determinant that is not 0",
        code=code,
    )


def _both_ways(
    setting: Setting, left: Sequence[Expr]
) -> list[tuple[Candidate | None, Candidate | None]]:
    """(old in new, new in old) branch by branch, the one of the top level first."""
    old, new = setting.problem.old, setting.problem.new
    relations = "the relations of the generating function hold"
    forward = admitted(solved(left, old), left, new.variables, setting, claim=relations)
    backward = admitted(solved(left, new), left, old.variables, setting, claim=relations)
    if not forward:
        for g in backward:
            equations = [s - e for s, e in g.values.items()]
            forward += admitted(
                solved(equations, old), left, new.variables, setting, claim=relations
            )
    pairs: list[tuple[Candidate | None, Candidate | None]] = []
    for f in forward:
        equations = [s - e for s, e in f.values.items()]
        inverse = admitted(
            solved(equations, new), equations, old.variables, setting, claim="the maps are inverse"
        )
        pairs.append((f, partner(f, [*inverse, *backward], setting)))
    if not forward:
        pairs = [(None, g) for g in backward]
        pairs.sort(key=lambda pair: -_positive_image(setting, pair[1]))
    return pairs


def _positive_image(setting: Setting, g: Candidate | None) -> int:
    """At how many points the new variables are all positive."""
    return 0 if g is None else sum(all(v > 0 for v in image) for image in g.images)


def _test(setting: Setting, f: Candidate | None, g: Candidate | None) -> Brackets:
    """The brackets of the map with the shorter formulas."""
    old, new = setting.problem.old, setting.problem.new
    sides = [(c, a, b) for c, a, b in ((g, old, new), (f, new, old)) if c is not None]
    chosen, here, there = min(
        sides, key=lambda side: sum(length(v) for v in side[0].values.values())
    )
    problem = setting.problem
    return test_brackets(
        chosen.values, here, there, problem.time, setting.ranges, problem.functions
    )

"""A map given: canonical or not, its inverse, its generating functions."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import sympy as sp
from sympy import Expr, Symbol

from hjsolve.algebra.budget import limit
from hjsolve.algebra.identity import vanish
from hjsolve.errors import InputError, OutOfTime
from hjsolve.records import (
    Certificate,
    Frame,
    GeneratingFunction,
    Transformation,
    Truth,
)
from hjsolve.transformation.assemble import (
    INVERSION_SECONDS,
    branch_record,
    flow_checks,
    inverse_checks,
    maps_of,
    pairs_of,
    solved,
)
from hjsolve.transformation.branches import (
    Candidate,
    Setting,
    admitted,
    partner,
)
from hjsolve.transformation.kinds import Maps, all_kinds
from hjsolve.transformation.potential import Integrate, potential
from hjsolve.transformation.symplectic import Brackets, test_brackets
from hjsolve.transformation.system import Answer, solve
from hjsolve.transformation.tidy import derivative, determinant, in_grammar, length, tidied

AREA_SECONDS = 4.0

Values = Mapping[Symbol, Expr]


def from_map(
    setting: Setting, integrate: Integrate, hint: Mapping[str, Expr] | None = None
) -> Transformation:
    """Everything that follows from a map; InputError when it is none.

    ``hint`` may give the inverse, by names of the variables; it is checked as any other is.
    """
    problem = setting.problem
    here, there = (problem.new, problem.old) if problem.backward else (problem.old, problem.new)
    given = _completed(setting, here, there)
    _refuse_singular(setting, given, here, there)
    tested = test_brackets(given, here, there, problem.time, setting.ranges, problem.functions)
    checks = list(tested.checks)
    c = tested.multiplier
    equations = [s - e for s, e in given.items()]
    inverse = _inverse(setting, equations, here, there, hint)
    own = Candidate(dict(given), ())
    if problem.backward:
        whole = admitted(
            [Answer(dict(given))], equations, here.variables, setting, claim="as given"
        )
        own = whole[0] if whole else own
        pairs: list[tuple[Candidate | None, Candidate | None]] = [
            (own, partner(own, inverse, setting))
        ]
    else:
        pairs = [(f, own) for f in inverse] or [(None, own)]
    own.proof = None
    maps = maps_of(*pairs[0])
    shift: Expr | None = None
    functions: tuple[GeneratingFunction, ...] = ()
    chosen = None
    if c is not None:
        c = in_grammar(_factor_from(c, tested, problem.backward))
        area = _area(setting, maps, c, integrate)
        shift = _shift(setting, maps, area, c, integrate)
        if c == 1:
            functions = all_kinds(setting, maps, area, integrate)
            chosen = _shown(functions)
    if len(pairs[0]) == 2:
        checks += inverse_checks(setting, pairs[0])
    if shift is not None and c is not None:
        checks += flow_checks(setting, maps, shift, c)
    canonical = tested.canonical
    multiplier = None if canonical is not Truth.REFUTED else c
    branches = tuple(
        branch_record(setting, f, g, shift, c if c is not None else sp.S.One) for f, g in pairs
    )
    return Transformation(
        problem,
        canonical,
        multiplier,
        branches,
        (),
        chosen,
        functions,
        tested.obstruction,
        Certificate(tuple(checks)),
    )


def _inverse(
    setting: Setting,
    equations: list[Expr],
    here: Frame,
    there: Frame,
    hint: Mapping[str, Expr] | None,
) -> list[Candidate]:
    """The inverse as hinted, where that holds, else as found."""
    claim = "the inverse solves the given formulas"
    inverse: list[Candidate] = []
    if hint is not None:
        letters = {Symbol(s.name, real=True): s for s in there.variables if s.is_positive}
        known = Answer({s: hint[s.name].xreplace(letters) for s in here.variables})
        inverse = admitted([known], equations, there.variables, setting, claim=claim)
    if not inverse:
        answers = solved(equations, here)
        inverse = admitted(answers, equations, there.variables, setting, claim=claim)
    return inverse


def _factor_from(c: Expr, tested: Brackets, backward: bool) -> Expr:
    """The bracket of the new variables: given backward, the inverse of the bracket found."""
    return tidied(1 / c) if backward else c


def _completed(setting: Setting, here: Frame, there: Frame) -> dict[Symbol, Expr]:
    """The given formulas, a point transformation with its momenta: p_here = Jᵀ p_there."""
    given = dict(setting.problem.given)
    if len(given) == 2 * len(there.coordinates):
        return given
    jacobian = [[derivative(given[Q], q) for q in here.coordinates] for Q in there.coordinates]
    (finding,) = vanish([determinant(jacobian)], setting.ranges, setting.functions, tries=60)
    if finding.truth is Truth.PROVED:
        raise _degenerate("the new coordinates are not independent functions of the old ones")
    equations = [
        p - sum((jacobian[k][i] * P for k, P in enumerate(there.momenta)), sp.S.Zero)
        for i, p in enumerate(here.momenta)
    ]
    solved = solve(equations, there.momenta, INVERSION_SECONDS)
    if not solved:
        whole = determinant(jacobian)
        for k, P in enumerate(there.momenta):  # Cramer's rule
            rows = [[*here.momenta] if i == k else row for i, row in enumerate(jacobian)]
            given[P] = tidied(determinant(rows) / whole)
        return given
    return given | {P: solved[0].values[P] for P in there.momenta}


def _refuse_singular(setting: Setting, given: Values, here: Frame, there: Frame) -> None:
    jacobian = [[derivative(given[s], z) for z in here.variables] for s in there.variables]
    if len(jacobian) > 6:
        return
    (finding,) = vanish([determinant(jacobian)], setting.ranges, setting.functions)
    if finding.truth is Truth.PROVED:
        raise _degenerate("the new variables are not independent functions of the old ones")


def _degenerate(why: str) -> InputError:
    return InputError(
        f"{why}: the determinant of the Jacobian vanishes identically",
        pointer="/transformation",
        expected="as many independent functions as variables",
        code="degenerate",
    )


def _area(setting: Setting, maps: Maps, c: Expr, integrate: Integrate) -> Expr | None:
    """A with dA = c Σ p dq − Σ P dQ at fixed time, in the old or in the new variables."""
    old, new = setting.problem.old, setting.problem.new
    ways = []
    if maps.new_in_old is not None:
        g = dict(maps.new_in_old)
        part = {
            z: -sp.Add(*(g[P] * derivative(g[Q], z) for Q, P in pairs_of(new)))
            for z in old.variables
        }
        for q, p in pairs_of(old):
            part[q] += c * p
        ways.append(part)
    if maps.old_in_new is not None:
        f = dict(maps.old_in_new)
        part = {
            z: c * sp.Add(*(f[p] * derivative(f[q], z) for q, p in pairs_of(old)))
            for z in new.variables
        }
        for Q, P in pairs_of(new):
            part[Q] -= P
        ways.append(part)
    ways.sort(key=lambda way: sum(length(a) for a in way.values()))
    try:
        with limit(AREA_SECONDS):
            for way in ways:
                found = potential(
                    way, setting.domains, setting.ranges, setting.functions, integrate
                )
                if found is not None:
                    return found
    except OutOfTime:
        pass
    return None


def _shift(
    setting: Setting, maps: Maps, area: Expr | None, c: Expr, integrate: Integrate
) -> Expr | None:
    """K − cH: ∂A/∂t plus what the moving variables add, in the variables of A."""
    problem = setting.problem
    t = problem.time
    every = [e for m in (maps.new_in_old, maps.old_in_new) if m for e in m.values()]
    if not any(t in e.free_symbols for e in every):
        return sp.S.Zero
    if area is not None:
        if area.free_symbols & set(problem.new.variables) and maps.old_in_new is not None:
            f = dict(maps.old_in_new)
            moved = sp.Add(*(f[p] * derivative(f[q], t) for q, p in pairs_of(problem.old)))
            return tidied(derivative(area, t) - c * moved)
        if maps.new_in_old is not None:
            g = dict(maps.new_in_old)
            moved = sp.Add(*(g[P] * derivative(g[Q], t) for Q, P in pairs_of(problem.new)))
            return tidied(derivative(area, t) + moved)
    if maps.new_in_old is None or maps.old_in_new is None:
        return None
    f = dict(maps.old_in_new)
    rates = {s: tidied(derivative(e, t).xreplace(f)) for s, e in maps.new_in_old.items()}
    differential = {P: rates[Q] for Q, P in pairs_of(problem.new)}
    differential |= {Q: -rates[P] for Q, P in pairs_of(problem.new)}
    return potential(differential, setting.domains, setting.ranges, setting.functions, integrate)


def _shown(functions: Sequence[GeneratingFunction]) -> GeneratingFunction | None:
    """The shortest of the functions found."""
    found = [g for g in functions if g.function is not None]
    if not found:
        return None
    return min(
        found,
        key=lambda g: (len(set(g.kinds)) > 1, length(g.function.expression) if g.function else 0),
    )

"""What an entry of FAMILIES is, and the search and check that algebraic families share."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from functools import partial
from typing import Literal

from sympy import Expr, Le

from hjsolve.algebra.balls import NotSupported
from hjsolve.algebra.factors import Key
from hjsolve.algebra.graph import TooLarge
from hjsolve.quadrature import check
from hjsolve.quadrature.factored import Unclear, with_names
from hjsolve.quadrature.points import sample
from hjsolve.quadrature.problem import Problem, Reading
from hjsolve.quadrature.ratios import GivenUp
from hjsolve.quadrature.reduction import Reduction
from hjsolve.quadrature.regimes import PieceFormula, boundary, regimes
from hjsolve.quadrature.signs import Assumption, Signs
from hjsolve.records import Domain, Formula

READINGS_TRIED = 2
"""Kernels whose formulas are worked out; the best by cost nearly always holds."""

BOUNDARIES = 2
"""Regimes of equality (zero energy, threshold) worked out for one integral."""


RESTRICTED = 10.0
"""The cost of a condition on the variable."""


@dataclass(frozen=True)
class Example:
    """An integrand of the family in SymPy's notation.

    ``positive`` names the positive symbols, all others are real.
    """

    integrand: str
    variable: str
    domain: Domain
    positive: tuple[str, ...] = ()


@dataclass(frozen=True)
class Outcome:
    """The formulas of a family, and the kernel they were found in."""

    formulas: tuple[Formula, ...]
    substitution: Expr


@dataclass(frozen=True)
class Family:
    """One class of integrals.

    To add one: a new file with ``integrate``, a line in ``FAMILIES``.
    ``integrate`` returns None, or raises GivenUp with the reason, for an
    integral that is not of the family.  Its formulas have passed
    ``check.holds``; ``kind`` is what the answer says.
    """

    name: str
    source: str
    kind: Literal["elementary", "elliptic", "unevaluated"]
    examples: tuple[Example, ...]
    integrate: Callable[[Problem], Outcome | None]


def algebraic(
    problem: Problem,
    cost: Callable[[Reduction, Signs], float],
    formula: PieceFormula,
    terms: Callable[[Reduction], int],
    *,
    boundaries: bool = True,
    read: Callable[[Problem], list[Reading]] = Problem.readings,
    restricted: float = RESTRICTED,
) -> Outcome | None:
    """The checked formulas in the cheapest kernel in which every piece has one.

    ``read`` gives the readings to choose from; ``restricted`` is the cost of a
    condition on the variable.
    """
    priced = [(r.cost(cost, restricted), i, r) for i, r in enumerate(read(problem))]
    ranked = sorted((c, i, r) for c, i, r in priced if c < float("inf"))
    reason: GivenUp | None = None
    if ranked:
        reason = GivenUp("no point of the domain was found at which the integrand is real")
    for _, _, reading in ranked[:READINGS_TRIED]:
        try:
            found, borders = _checked(problem, reading, formula, terms)
        except GivenUp as failure:
            reason = failure
            continue
        if found:
            if boundaries:
                again = partial(
                    algebraic,
                    cost=cost,
                    formula=formula,
                    terms=terms,
                    boundaries=False,
                    read=read,
                    restricted=restricted if problem.domain.kind == "angle" else RESTRICTED,
                )
                for border in borders[:BOUNDARIES]:
                    found += _on(problem, reading, border, again)
            return Outcome(tuple(found), reading.pieces[0].kernel.expression)
    if reason is not None:
        raise reason
    return None


def _checked(
    problem: Problem,
    reading: Reading,
    formula: PieceFormula,
    terms: Callable[[Reduction], int],
) -> tuple[list[Formula], list[Assumption]]:
    """The formulas that hold, and the assumptions on whose borders others may lie."""
    kept: list[Formula] = []
    borders: dict[Key, Assumption] = {}
    for candidate, assumed in regimes(reading, formula, terms):
        problem.left()
        try:
            points = sample(problem.integrand, problem.variable, problem.domain, candidate.valid)
        except (NotSupported, TooLarge, TypeError) as failure:
            raise GivenUp("the integrand cannot be evaluated for the check") from failure
        if points is None:
            continue
        if candidate.where:
            try:
                points = with_names(points, candidate.where)
            except Unclear as failure:
                raise GivenUp("a root could not be evaluated for the check") from failure
        if not check.holds(
            candidate.expression,
            problem.integrand,
            problem.variable,
            problem.domain,
            points,
            problem.deadline,
        ):
            raise GivenUp("a formula did not differentiate back to the integrand")
        kept.append(candidate)
        for a in assumed:
            borders.setdefault(Key(a.poly), a)
    return kept, list(borders.values())


def _on(
    problem: Problem,
    reading: Reading,
    border: Assumption,
    integrate: Callable[[Problem], Outcome | None],
) -> list[Formula]:
    """The formulas where a sign that tells regimes apart is zero; none when not simple."""
    solved = boundary(reading, border)
    if solved is None:
        return []
    symbol, value = solved
    integrand = problem.integrand.subs(symbol, value)
    if not integrand.has(problem.variable):
        return []
    try:
        outcome = integrate(Problem(integrand, problem.variable, problem.domain, problem.deadline))
    except GivenUp:
        return []
    if outcome is None:
        return []
    equality = (Le(symbol, value), Le(value, symbol))
    return [Formula(f.expression, f.where, (*equality, *f.valid)) for f in outcome.formulas]

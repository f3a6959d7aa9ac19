"""The family of elliptic integrals: square roots of cubics and quartics in a kernel."""

from __future__ import annotations

import contextlib

from sympy import Symbol, pi
from sympy.core.relational import Relational

from hjsolve.quadrature import check, even, ordered
from hjsolve.quadrature.family import Example, Family, Outcome, algebraic
from hjsolve.quadrature.points import sample
from hjsolve.quadrature.problem import Problem, Reading, rooted
from hjsolve.quadrature.ratios import GivenUp
from hjsolve.records import Domain, Formula

RESTRICTED = 0.1
"""Half an angle with a condition is still better than a quarter without."""


def integrate(problem: Problem) -> Outcome | None:
    """Explicit roots where P is even, else named ones."""
    if not rooted(problem.integrand, problem.variable):
        return None
    outcome = None
    with contextlib.suppress(GivenUp):
        outcome = algebraic(
            problem,
            even.cost,
            even.formula,
            even.terms,
            read=_readings,
            restricted=RESTRICTED,
        )
    if outcome is None:
        return ordered.integrate(problem, _readings(problem))
    return Outcome(tuple(_freed(problem, f) for f in outcome.formulas), outcome.substitution)


def _readings(problem: Problem) -> list[Reading]:
    try:
        plain = problem.readings()
    except GivenUp:
        plain = []
    return [*plain, *problem.further_readings()]


def _freed(problem: Problem, formula: Formula) -> Formula:
    """Without the range of the kernel among its conditions, where it holds beyond it."""
    q = problem.variable
    plain = (_scaled(v, q) for v in formula.valid)
    valid = tuple(v for v in plain if not _trivial(v, problem))
    formula = Formula(formula.expression, formula.where, valid)
    kept = tuple(v for v in valid if not _range_only(v, problem))
    if len(kept) == len(formula.valid) or any(v.has(q) for v in kept):
        return formula
    points = sample(problem.integrand, q, problem.domain, kept, 1)
    if (
        formula.where
        or points is None
        or not check.holds(
            formula.expression, problem.integrand, q, problem.domain, points, problem.deadline
        )
    ):
        return formula
    return Formula(formula.expression, formula.where, kept)


def _scaled(relation: Relational, q: Symbol) -> Relational:
    """A bound on a multiple of the variable as one on the variable."""
    for side, other in ((relation.lhs, relation.rhs), (relation.rhs, relation.lhs)):
        factor, rest = side.as_coeff_Mul()
        if rest == q and factor.is_positive and other.is_number:
            return relation.func(relation.lhs / factor, relation.rhs / factor)
    return relation


def _range_only(relation: Relational, problem: Problem) -> bool:
    """Whether a condition bounds the variable by numbers."""
    return relation.free_symbols == {problem.variable}


def _trivial(relation: Relational, problem: Problem) -> bool:
    """Whether the domain alone says it."""
    lower, upper = problem.domain.lower, problem.domain.upper
    low = relation.rhs == problem.variable and lower.is_number and relation.lhs.is_number
    high = relation.lhs == problem.variable and upper.is_number and relation.rhs.is_number
    return bool((low and relation.lhs <= lower) or (high and upper <= relation.rhs))


POLAR = Domain("polar-angle", pi * 0, pi)
ANGLE = Domain("angle", pi * 0, 2 * pi)

ELLIPTIC = Family(
    name="square root of a cubic or quartic in a kernel",
    source="Byrd & Friedman, Handbook of Elliptic Integrals, 1971 (from memory)",
    kind="elliptic",
    examples=(
        Example("sqrt(2*m*(alpha_1 + A*cos(theta)))", "theta", ANGLE, ("m", "A")),
        Example("m/sqrt(2*m*(alpha_1 - k*x**2/2 - A*x**4))", "x", Domain(), ("m", "k", "A")),
        Example("1/sqrt(alpha_3 - alpha_2**2/sin(t)**2 + A*cos(t))", "t", POLAR, ("A",)),
    ),
    integrate=integrate,
)

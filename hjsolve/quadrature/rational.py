"""The family of rational functions of a kernel: no root depends on the variable."""

from __future__ import annotations

from hjsolve.quadrature import quadratic
from hjsolve.quadrature.family import Example, Family, Outcome, algebraic
from hjsolve.quadrature.problem import Problem
from hjsolve.quadrature.reduction import Reduction
from hjsolve.quadrature.signs import Signs
from hjsolve.records import Domain


def cost(reduction: Reduction, signs: Signs) -> float:
    """As for the radical family, ∞ when a root depends on the variable."""
    return float("inf") if reduction.degree > 0 else quadratic.cost(reduction, signs)


def integrate(problem: Problem) -> Outcome | None:
    """Partial fractions with logarithms and arctangents."""
    return algebraic(problem, cost, quadratic.formula, quadratic.terms)


RATIONAL = Family(
    name="rational function of a kernel",
    source="Hermite 1872; Bronstein, Symbolic Integration I, chapter 2 (from memory)",
    kind="elementary",
    examples=(
        Example("a*x**2 + b/x + c/(x**2 + d**2)", "x", Domain(), ("a", "d")),
        Example("k/cosh(w*t)**2", "t", Domain(), ("k", "w")),
        Example("1/(1 + exp(a*x))", "x", Domain(), ("a",)),
    ),
    integrate=integrate,
)

"""The last family: the integral is left as it stands, and says why."""

from __future__ import annotations

from hjsolve.quadrature.family import Example, Family, Outcome
from hjsolve.quadrature.problem import Problem
from hjsolve.records import Domain


def integrate(problem: Problem) -> Outcome:
    """No formula."""
    return Outcome((), problem.variable)


UNEVALUATED = Family(
    name="unevaluated",
    source="none",
    kind="unevaluated",
    examples=(Example("sqrt(a - cosh(x)**3 - x**5)", "x", Domain(), ("a",)),),
    integrate=integrate,
)

"""The family of plain functions without a root of the variable: drives, drifts.

Sums of oscillations are done in ``oscillation``.  Beyond them, outside of this
program's heart, SymPy's rule-based integrator is used as it is
(``manualintegrate``; the rules and their source are in its documentation), under
a limit of time, and its answer is differentiated back like any other.
"""

from __future__ import annotations

from sympy import I, Integral, Piecewise, S
from sympy.integrals.manualintegrate import manualintegrate

from hjsolve.algebra.balls import NotSupported
from hjsolve.algebra.budget import limit
from hjsolve.algebra.graph import TooLarge
from hjsolve.errors import OutOfTime
from hjsolve.quadrature import check
from hjsolve.quadrature.family import Example, Family, Outcome
from hjsolve.quadrature.oscillation import oscillating
from hjsolve.quadrature.points import sample
from hjsolve.quadrature.problem import Problem, rooted, size
from hjsolve.quadrature.ratios import GivenUp
from hjsolve.records import Domain, Formula

SECONDS = 1.0
"""What the integrator gets; what it finds at all it finds in less."""

SIZE = 80
"""An integrand with more subexpressions is not given to it."""


def integrate(problem: Problem) -> Outcome | None:
    """The integrator's answer when it is free of unevaluated parts and checks."""
    f, q = problem.integrand, problem.variable
    if rooted(f, q):
        return None
    if size(f) > SIZE:
        raise GivenUp("too long for the integrator of plain functions")
    try:
        with limit(min(SECONDS, problem.left())):
            found = oscillating(f, q)
            if found is None:
                found = manualintegrate(f, q)
    except OutOfTime as late:
        raise GivenUp("the integrator of plain functions ran out of its time") from late
    except Exception as failure:  # a library's fault is a missing answer
        raise GivenUp("the integrator of plain functions failed") from failure
    if found.has(Integral, Piecewise, I, S.NaN, S.ComplexInfinity):
        raise GivenUp("the integrator of plain functions finds no closed form")
    try:
        points = sample(f, q, problem.domain, ())
        if points is None or not check.holds(found, f, q, problem.domain, points, problem.deadline):
            raise GivenUp("the answer of the integrator of plain functions did not check")
    except (NotSupported, TooLarge, TypeError) as failure:
        raise GivenUp("the integrand cannot be evaluated for the check") from failure
    return Outcome((Formula(found),), q)


PLAIN = Family(
    name="plain function",
    source="SymPy, sympy.integrals.manualintegrate",
    kind="elementary",
    examples=(
        Example("F*exp(-gamma*t)*cos(w*t)", "t", Domain(), ("F", "gamma", "w")),
        Example("t*exp(-t)", "t", Domain()),
    ),
    integrate=integrate,
)

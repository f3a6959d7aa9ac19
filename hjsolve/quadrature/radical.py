"""The family of square roots of polynomials of degree at most two in a kernel.

Together with ``rational`` it covers every separable problem of the textbooks
that is elementary: Kepler, oscillators, Morse, Pöschl–Teller, the polar angle.
"""

from __future__ import annotations

from sympy import pi

from hjsolve.quadrature import quadratic
from hjsolve.quadrature.family import Example, Family, Outcome, algebraic
from hjsolve.quadrature.problem import Problem
from hjsolve.records import Domain

HALF_LINE = Domain("half-line", lower=pi * 0)
POLAR = Domain("polar-angle", pi * 0, pi)


def integrate(problem: Problem) -> Outcome | None:
    """Formulas by regimes of the radicand; see ``quadratic``."""
    return algebraic(problem, quadratic.cost, quadratic.formula, quadratic.terms)


RADICAL = Family(
    name="square root of a quadratic in a kernel",
    source=(
        "Hermite's reduction; Gradshteyn & Ryzhik, Table of Integrals, 2.26 (from memory)"
    ),
    kind="elementary",
    examples=(
        Example("sqrt(2*m*alpha_1 - k*m*q**2)", "q", Domain(), ("m", "k")),
        Example(
            "sqrt(2*m*alpha_1 + 2*m*k/r - alpha_2**2/r**2)", "r", HALF_LINE, ("m", "k", "r")
        ),
        Example("sqrt(alpha_3 - alpha_2**2/sin(theta)**2)", "theta", POLAR, ("alpha_3",)),
        Example(
            "m/sqrt(2*m*alpha_1 - 2*m*D*(1 - exp(-a*x))**2)", "x", Domain(), ("m", "D", "a")
        ),
    ),
    integrate=integrate,
)

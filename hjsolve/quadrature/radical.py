"""The family of square roots of polynomials of degree at most two in a kernel.

Together with ``rational`` it covers every separable problem of the textbooks
that is elementary: Kepler, oscillators, Morse, Pöschl–Teller, the polar angle.
"""

from __future__ import annotations

from sympy import pi

from hjsolve.quadrature import quadratic
from hjsolve.quadrature.family import Example, Family, Outcome, algebraic
from hjsolve.quadrature.problem import Problem, rooted
from hjsolve.quadrature.ratios import GivenUp
from hjsolve.records import Domain

HALF_LINE = Domain("half-line", lower=pi * 0)
POLAR = Domain("polar-angle", pi * 0, pi)


def integrate(problem: Problem) -> Outcome | None:
    """Formulas by regimes of the radicand; see ``quadratic``."""
    if not rooted(problem.integrand, problem.variable):
        return None
    outcome = algebraic(problem, quadratic.cost, quadratic.formula, quadratic.terms)
    if outcome is None:
        raise GivenUp(_beyond(problem))
    return outcome


def _beyond(problem: Problem) -> str:
    """Why no kernel does, by the kernel of least degree."""
    degree, kernel = min(
        (
            (max(p.reduction.degree for p in reading.pieces), i)
            for i, reading in enumerate(problem.readings())
            if reading.pieces
        ),
        default=(0, 0),
    )
    u = problem.readings()[kernel].kernel.expression
    if degree <= 2:
        return f"the integrand has poles in u = {u} that are not treated"
    kind = "elliptic" if degree <= 4 else "hyperelliptic"
    return f"the radicand is of degree {degree} in u = {u}: {kind} integral"


RADICAL = Family(
    name="square root of a quadratic in a kernel",
    source=("Hermite's reduction; Gradshteyn & Ryzhik, Table of Integrals, 2.26 (from memory)"),
    kind="elementary",
    examples=(
        Example("sqrt(2*m*alpha_1 - k*m*q**2)", "q", Domain(), ("m", "k")),
        Example("sqrt(2*m*alpha_1 + 2*m*k/r - alpha_2**2/r**2)", "r", HALF_LINE, ("m", "k", "r")),
        Example("sqrt(alpha_3 - alpha_2**2/sin(theta)**2)", "theta", POLAR, ("alpha_3",)),
        Example("m/sqrt(2*m*alpha_1 - 2*m*D*(1 - exp(-a*x))**2)", "x", Domain(), ("m", "D", "a")),
    ),
    integrate=integrate,
)

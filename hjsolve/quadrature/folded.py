"""The family of integrands in |q|: both halves of the line, joined at q = 0.

On each half |q| is ±q and the integrand is one of the algebraic families; the
constants are chosen so that the formulas of the two halves agree at q = 0.
"""

from __future__ import annotations

from sympy import Abs, Expr, Gt, Lt, S, Symbol, oo, zoo
from sympy.core.relational import Relational

from hjsolve.quadrature import radical, rational
from hjsolve.quadrature.family import Example, Family, Outcome
from hjsolve.quadrature.problem import Problem
from hjsolve.quadrature.ratios import GivenUp
from hjsolve.records import Domain, Formula


def integrate(problem: Problem) -> Outcome | None:
    """The formulas of the right half, then those of the left."""
    q, domain = problem.variable, problem.domain
    if not problem.integrand.has(Abs(q)) or domain.lower.is_nonnegative:
        return None
    halves: list[tuple[int, Domain, Relational]] = [
        (1, Domain("interval", S.Zero, domain.upper), Lt(0, q)),
        (-1, Domain("interval", domain.lower, S.Zero), Lt(q, 0)),
    ]
    found: list[Formula] = []
    for sign, half, side in halves:
        integrand = problem.integrand.subs(Abs(q), sign * q)
        part = Problem(integrand, q, half, problem.deadline)
        outcome = rational.integrate(part) or radical.integrate(part)
        if outcome is None:
            raise GivenUp(f"the integrand in |{q}| has no closed form")
        for f in outcome.formulas:
            kept = tuple(v for v in f.valid if v not in (side, Gt(q, 0), Lt(0, q)))
            found.append(Formula(_joined(f.expression, q), f.where, (*kept, side)))
    return Outcome(tuple(found), q)


def _joined(formula: Expr, q: Symbol) -> Expr:
    """The formula less its value at q = 0."""
    at = formula.subs(q, 0)
    if at.has(oo, -oo, zoo, S.NaN):
        raise GivenUp(f"the formulas of the two halves cannot be joined at {q} = 0")
    return formula - at


FOLDED = Family(
    name="function of |q|",
    source="the algebraic families on either half",
    kind="elementary",
    examples=(
        Example("sqrt(2*m*(alpha_1 - F*Abs(x)))", "x", Domain(), ("m", "F")),
        Example("m/sqrt(2*m*(alpha_1 - F*Abs(x)))", "x", Domain(), ("m", "F")),
        Example("sqrt(2*m*(alpha_1 - D*(1 - exp(-a*Abs(x)))))", "x", Domain(), ("m", "D", "a")),
    ),
    integrate=integrate,
)

"""Quadrature: p dq and its derivatives in closed form.

``FAMILIES`` are tried in order.  To add one: one new file with a ``Family``,
one line below.
"""

from __future__ import annotations

import time

from sympy import Add, Expr, Mul, Symbol

from hjsolve.algebra.budget import limit
from hjsolve.errors import OutOfTime
from hjsolve.quadrature.family import Family
from hjsolve.quadrature.plain import PLAIN
from hjsolve.quadrature.problem import Problem
from hjsolve.quadrature.radical import RADICAL
from hjsolve.quadrature.ratios import GivenUp
from hjsolve.quadrature.rational import RATIONAL
from hjsolve.quadrature.unevaluated import UNEVALUATED
from hjsolve.records import Antiderivative, Domain, Formula

FAMILIES: tuple[Family, ...] = (
    RATIONAL,
    RADICAL,
    PLAIN,
    UNEVALUATED,
)

__all__ = ["FAMILIES", "integrate"]


def integrate(
    integrand: Expr, variable: Symbol, domain: Domain, *, seconds: float = 5.0
) -> Antiderivative:
    """The antiderivative of ``integrand`` over ``domain``, one formula a regime.

    Every formula has been differentiated back inside its regime.  An integrand
    that is not done within ``seconds``, or at all, comes back with the family
    "unevaluated" and the reason; nothing is raised for a hard integrand.

    ``valid`` of a formula holds what it needs besides a real integrand: signs
    that tell the regimes apart.  Two inequalities a <= b, b <= a state that the
    formula is for the boundary between two regimes (zero energy), where its
    symbol has been replaced.
    """
    if integrand.is_zero or not integrand.has(variable):
        form = Formula(integrand * variable)
        return Antiderivative(integrand, variable, (form,), "elementary", variable)
    constant, kernel = integrand.as_independent(variable, as_Add=False)
    problem = Problem(kernel, variable, domain, time.monotonic() + seconds)
    reason = ""
    try:
        with limit(seconds):
            for family in FAMILIES:
                try:
                    outcome = family.integrate(problem)
                except GivenUp as failure:
                    reason = reason or str(failure)
                    continue
                if outcome is not None and outcome.formulas:
                    forms = tuple(
                        Formula(_scaled(constant, f.expression), f.where, f.valid)
                        for f in outcome.formulas
                    )
                    return Antiderivative(
                        integrand, variable, forms, family.kind, outcome.substitution
                    )
    except OutOfTime:
        reason = f"no closed form within {seconds:g} s"
    except RecursionError:
        reason = "the integrand is nested too deeply"
    reason = reason or "no family of integrals takes this integrand"
    return Antiderivative(integrand, variable, (), "unevaluated", None, reason)


def _scaled(constant: Expr, formula: Expr) -> Expr:
    """constant·formula, term by term so that roots of constants cancel."""
    return Add(*(Mul(constant, term) for term in Add.make_args(formula)))

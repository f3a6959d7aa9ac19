"""Quadrature: p dq and its derivatives in closed form.

``FAMILIES`` are tried in order.  To add one: one new file with a ``Family``,
one line below.
"""

from __future__ import annotations

import time

from sympy import Add, Derivative, Dummy, Expr, Mul, Symbol, default_sort_key
from sympy.core.function import AppliedUndef

from hjsolve.algebra.budget import limit
from hjsolve.errors import OutOfTime
from hjsolve.quadrature.elliptic import ELLIPTIC
from hjsolve.quadrature.family import Family
from hjsolve.quadrature.folded import FOLDED
from hjsolve.quadrature.plain import PLAIN
from hjsolve.quadrature.problem import SIZE_LIMIT, Problem, size
from hjsolve.quadrature.radical import RADICAL
from hjsolve.quadrature.rational import RATIONAL
from hjsolve.quadrature.ratios import GivenUp
from hjsolve.quadrature.unevaluated import UNEVALUATED
from hjsolve.records import Antiderivative, Domain, Formula

FAMILIES: tuple[Family, ...] = (
    RATIONAL,
    RADICAL,
    FOLDED,
    PLAIN,
    ELLIPTIC,
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
    if size(integrand) > SIZE_LIMIT:
        reason = f"the integrand has more than {SIZE_LIMIT} subexpressions"
        return Antiderivative(integrand, variable, (), "unevaluated", None, reason)
    if integrand.is_zero or not integrand.has(variable):
        form = Formula(integrand * variable)
        return Antiderivative(integrand, variable, (form,), "elementary", variable)
    letters = _letters(integrand, variable)
    constant, rest = integrand.xreplace(letters).as_independent(variable, as_Add=False)
    problem = Problem(rest, variable, domain, time.monotonic() + seconds)
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
                    back = {letter: f for f, letter in letters.items()}
                    forms = tuple(_restored(f, constant, back) for f in outcome.formulas)
                    u = outcome.substitution.xreplace(back)
                    return Antiderivative(integrand, variable, forms, family.kind, u)
    except OutOfTime:
        reason = f"no closed form within {seconds:g} s"
    except RecursionError:
        reason = "the integrand is nested too deeply"
    reason = reason or "no family of integrals takes this integrand"
    return Antiderivative(integrand, variable, (), "unevaluated", None, reason)


def _letters(integrand: Expr, variable: Symbol) -> dict[Expr, Symbol]:
    """Letters for the arbitrary functions of other variables: constants here."""
    found = sorted(
        (f for f in integrand.atoms(AppliedUndef, Derivative) if not f.has(variable)),
        key=default_sort_key,
    )
    return {f: Dummy(f"f_{i}", real=True) for i, f in enumerate(found)}


def _restored(formula: Formula, constant: Expr, back: dict[Expr, Expr]) -> Formula:
    """constant·formula, term by term so that roots of constants cancel."""
    terms = Add.make_args(formula.expression)
    whole = Add(*(Mul(constant, term) for term in terms)).xreplace(back)
    return Formula(whole, formula.where, tuple(v.xreplace(back) for v in formula.valid))

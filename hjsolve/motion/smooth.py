"""Antiderivatives along a motion: functions of its parameter that run on through turning points.

Along a motion in sn(u, m), 0 < m < 1, the integrals are those of Legendre's
kinds at the amplitude am(u, m), which grows for ever: Byrd & Friedman 310.02,
336.01, 336.02 (from memory; each is differentiated back in the tests).
"""

from __future__ import annotations

from dataclasses import dataclass

import sympy as sp
from sympy import Add, Dummy, Expr, Mul, Symbol, elliptic_e, elliptic_pi

from hjsolve.algebra.functions import jacobi_am, jacobi_cn, jacobi_dn, jacobi_sn
from hjsolve.algebra.identity import vanish
from hjsolve.records import Truth


@dataclass(frozen=True, slots=True)
class Smooth:
    """An antiderivative that runs on where all of ``positive`` are positive."""

    expression: Expr
    positive: tuple[Expr, ...] = ()


def smooth_antiderivative(rate: Expr, tau: Symbol) -> Smooth | None:
    """∫ rate dτ where a form is known that runs on; None where not."""
    jacobi = rate.atoms(jacobi_sn, jacobi_cn, jacobi_dn)
    if not jacobi:
        found = _elementary(sp.expand(rate), tau)
        return found and Smooth(found)
    parts = [_elliptic(group, tau) for group in _by_argument(rate)]
    if not all(parts):
        return None
    whole = [p for p in parts if p is not None]
    positive = dict.fromkeys(e for p in whole for e in p.positive)
    return Smooth(Add(*(p.expression for p in whole)), tuple(positive))


def _by_argument(rate: Expr) -> list[Expr]:
    """The sum split by the arguments (u, m) of the elliptic functions in its terms."""
    groups: dict[frozenset[tuple[Expr, ...]], list[Expr]] = {}
    for term in Add.make_args(rate):
        found = frozenset(f.args for f in term.atoms(jacobi_sn, jacobi_cn, jacobi_dn))
        groups.setdefault(found, []).append(term)
    return [Add(*terms) for terms in groups.values()]


def _elliptic(rate: Expr, tau: Symbol) -> Smooth | None:
    """∫ of a rational function of sn²(u, m) with poles up to the second order, du/dτ constant."""
    arguments = {f.args for f in rate.atoms(jacobi_sn, jacobi_cn, jacobi_dn)}
    if not arguments:
        return Smooth(rate * tau) if not rate.has(tau) else None
    if len(arguments) != 1:
        return None
    ((u, m),) = arguments
    speed = sp.diff(u, tau)
    z = Dummy("z")
    s, c, d = jacobi_sn(u, m), jacobi_cn(u, m), jacobi_dn(u, m)
    even = {s**2: z, c**2: 1 - z, d**2: 1 - m * z, s**4: z**2, 1 / s**2: 1 / z}
    inner = rate.xreplace(even)
    if speed.has(tau) or inner.has(tau) or not inner.is_rational_function(z):
        return None
    above, below = (sp.Poly(e, z) for e in sp.fraction(sp.cancel(sp.together(inner))))
    quotient, rest = sp.div(above, below)
    factors = sp.factor_list(below)[1]
    if quotient.degree() > 1 or any(f.degree() > 1 or power > 2 for f, power in factors):
        return None
    # coefficients of u, E, each Π, and the algebraic part
    slope = quotient.coeff_monomial(z) / m
    first, second = quotient.coeff_monomial(1) + slope, -slope
    third: Expr = sp.S.Zero
    positive = [m, 1 - m]
    for f, power in factors:
        pole = -f.coeff_monomial(1) / f.coeff_monomial(z)
        if pole == 0:
            return None
        others = sp.quo(below, sp.Poly((z - pole) ** power, z)).as_expr()
        near = rest.as_expr() / others
        # a/(z − e)² + b/(z − e), with 1/(z − e) = −n/(1 − n z), n = 1/e
        n = sp.factor(1 / pole)
        positive.append(1 - n)
        simple = -n * (near if power == 1 else sp.diff(near, z)).subs(z, pole)
        if power == 2:
            # Byrd & Friedman 336.02
            double = n**2 * near.subs(z, pole) / (2 * (n - 1) * (m - n))
            first += double * (m - n)
            second += double * n
            simple += double * (2 * n * m + 2 * n - n**2 - 3 * m)
            third -= sp.factor(double * n**2) * s * c * d / (1 - n * s**2)
        third += sp.factor(simple) * elliptic_pi(n, jacobi_am(u, m), m)
    whole = sp.factor(second) * elliptic_e(jacobi_am(u, m), m) + third
    return Smooth(sp.factor(first) * tau + whole / speed, tuple(positive))


def _elementary(rate: Expr, tau: Symbol) -> Expr | None:
    """∫ rate dτ for sums of products of polynomials, sin, cos, exp of linear arguments."""
    allowed = (sp.sin, sp.cos, sp.exp, sp.sinh, sp.cosh)
    for term in Add.make_args(rate):
        for factor in Mul.make_args(term):
            base, exponent = factor.as_base_exp() if not isinstance(factor, sp.exp) else (factor, 1)
            if not factor.has(tau):
                continue
            if not (sp.Integer(exponent) == exponent and exponent > 0):
                return None
            if base != tau and not isinstance(base, allowed):
                return None
            if base != tau and sp.diff(base.args[0], tau, 2) != 0:
                return None
    # a frequency that might be zero would make SymPy answer by cases
    inner = {sp.diff(f.args[0], tau) for f in rate.atoms(*allowed)} - {sp.S.Zero}
    letters = {w: Dummy("w", positive=True) for w in inner if not w.is_nonzero}
    put = {
        f: f.func(letters[w] * tau + f.args[0].subs(tau, 0))
        for f in rate.atoms(*allowed)
        for w in [sp.diff(f.args[0], tau)]
        if w in letters
    }
    result: Expr = sp.S.Zero
    for term in Add.make_args(rate.xreplace(put)):
        constant, moving = term.as_independent(tau, as_Add=False)
        result += constant * sp.integrate(moving, tau, manual=True)
    result = result.xreplace({letter: w for w, letter in letters.items()})
    if result.has(sp.Integral):
        return None
    return result if vanish([sp.diff(result, tau) - rate])[0].truth is Truth.PROVED else None

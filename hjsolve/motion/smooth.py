"""Antiderivatives along a motion: functions of its parameter that run on through turning points.

The rate is a polynomial in a function y of the parameter plus fractions with poles of
first and second order, where y is λ², sin, cos or cosh of a linear function u of λ, or
sn²(u, m).  Each needs ∫ du/(y − e), from which

    (1 − e²) ∫ du/(y − e)² = ∓y′/(y − e) + e ∫ du/(y − e),   y = cos u, sin u (−), cosh u (+),

follows by differentiation.  ∫ du/(a + b cos u) is written with the one term of Fourier's
series that grows, so that it has no jumps (Gradshteyn & Ryzhik 2.553); the elliptic ones are
Legendre's at the amplitude am(u, m), which grows for ever: Byrd & Friedman 310.02, 336.01,
336.02 (all from memory; each is compared with a quadrature in the tests).
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass
from itertools import product

import sympy as sp
from sympy import Add, Dummy, Expr, Mul, Poly, Symbol, atan, elliptic_e, elliptic_pi, sqrt

from hjsolve.algebra.functions import jacobi_am, jacobi_cn, jacobi_dn, jacobi_sn
from hjsolve.algebra.identity import vanish
from hjsolve.algebra.roots import unify_roots
from hjsolve.records import Truth

MOST_POLES = 3

ELEMENTARY = (sp.sin, sp.cos, sp.exp, sp.sinh, sp.cosh)


@dataclass(frozen=True, slots=True)
class Smooth:
    """An antiderivative that runs on where all of ``positive`` are positive."""

    expression: Expr
    positive: tuple[Expr, ...] = ()


@dataclass(frozen=True, slots=True)
class _Kind:
    """A function y(u): its polynomials and ∫ du/(y − e) for each side on which e may lie."""

    y: Expr
    polynomial: Callable[[Poly], Smooth | None]
    simple: Callable[[Expr], tuple[Smooth, ...]]
    double: Callable[[Expr, Expr], Expr]


def smooth_antiderivatives(rate: Expr, tau: Symbol) -> Iterator[Smooth]:
    """∫ rate dτ in forms that run on, each under its own conditions; none where none is known."""
    groups = [list(_of_group(group, tau)) for group in _by_argument(rate, tau)]
    for parts in product(*groups):
        positive = dict.fromkeys(e for p in parts for e in p.positive)
        yield Smooth(Add(*(p.expression for p in parts)), tuple(positive))


def _by_argument(rate: Expr, tau: Symbol) -> list[Expr]:
    """The sum split by the arguments of the functions in its terms."""
    groups: dict[frozenset[tuple[Expr, ...]], list[Expr]] = {}
    for term in Add.make_args(rate):
        functions = (f for f in term.atoms(sp.Function) if f.has(tau))
        groups.setdefault(frozenset(f.args for f in functions), []).append(term)
    return [Add(*terms) for terms in groups.values()]


def _of_group(rate: Expr, tau: Symbol) -> Iterator[Smooth]:
    """One group: first as a sum of products, then by partial fractions."""
    functions = [f for f in rate.atoms(sp.Function) if f.has(tau)]
    plain = all(isinstance(f, ELEMENTARY) for f in functions)
    found = _elementary(sp.expand(rate), tau) if plain else None
    if found is not None:
        yield Smooth(found)
        return
    arguments = {f.args for f in functions}
    if not functions:
        yield from _fractions(rate, _powers(tau), {}, sp.S.One, tau)
    if len(arguments) != 1:
        return
    u = next(iter(arguments))[0]
    speed = sp.diff(u, tau)
    if speed.has(tau) or speed == 0:
        return
    if all(isinstance(f, (jacobi_sn, jacobi_cn, jacobi_dn)) for f in functions):
        m = next(iter(arguments))[1]
        s, c, d = (f(u, m) for f in (jacobi_sn, jacobi_cn, jacobi_dn))
        kind = _elliptic(u, m)
        y = Dummy("y")
        even = {s**2: y, c**2: 1 - y, d**2: 1 - m * y, s**4: y**2, 1 / s**2: 1 / y, 1 / s**4: y**-2}
        yield from _fractions(rate, kind, even, speed, tau, y)
    elif len(functions) == 1 and isinstance(functions[0], (sp.sin, sp.cos, sp.cosh)):
        yield from _fractions(rate, _periodic(functions[0], u), {}, speed, tau)


def _fractions(
    rate: Expr,
    kind: _Kind,
    even: dict[Expr, Expr],
    speed: Expr,
    tau: Symbol,
    y: Symbol | None = None,
) -> Iterator[Smooth]:
    """By partial fractions in y, the poles on either side of the values of y."""
    y = y or Dummy("y")
    inner = rate.xreplace(even or {kind.y: y})
    if inner.has(tau) or not inner.is_rational_function(y):
        return
    above, below = (Poly(e, y) for e in sp.fraction(sp.cancel(sp.together(inner))))
    quotient, rest = sp.div(above, below)
    factors = sp.factor_list(below)[1]
    if len(factors) > MOST_POLES or any(f.degree() > 1 or n > 2 for f, n in factors):
        return
    whole = kind.polynomial(quotient)
    if whole is None:
        return
    poles = [(-f.coeff_monomial(1) / f.coeff_monomial(y), n) for f, n in factors]
    for sides in product(*(kind.simple(e) for e, _ in poles)):
        total, positive = whole.expression, list(whole.positive)
        for (e, n), simple in zip(poles, sides, strict=True):
            others = sp.quo(below, Poly((y - e) ** n, y)).as_expr()
            near = rest.as_expr() / others
            once = (near if n == 1 else sp.diff(near, y)).subs(y, e)
            total += sp.factor(once) * simple.expression
            if n == 2:
                total += sp.factor(near.subs(y, e)) * kind.double(e, simple.expression)
            positive += simple.positive
        yield Smooth(_collected(total / speed, tau), tuple(dict.fromkeys(positive)))


def _collected(total: Expr, tau: Symbol) -> Expr:
    """The sum, the constant factors of each of its functions brought together and shortened."""
    factors: dict[Expr, Expr] = {}
    for term in Add.make_args(sp.expand_mul(total, deep=False)):
        constant, moving = term.as_independent(tau, as_Add=False)
        factors[moving] = factors.get(moving, sp.S.Zero) + constant
    return Add(*(_shorter(c) * f for f, c in factors.items()))


def _shorter(constant: Expr) -> Expr:
    """A constant with its dependent roots as one, where that is shorter."""
    other = sp.factor(unify_roots(constant))
    return other if other.count_ops() < constant.count_ops() else constant


# ----------------------------------------------------------------- the kinds


def _powers(tau: Symbol) -> _Kind:
    """Functions of y = τ², e < 0."""

    def simple(e: Expr) -> tuple[Smooth, ...]:
        return (Smooth(atan(tau / sqrt(-e)) / sqrt(-e), (-e,)),)

    def double(e: Expr, once: Expr) -> Expr:
        return -(tau / (tau**2 - e) + once) / (2 * e)

    def polynomial(p: Poly) -> Smooth:
        powers = ((c, tau ** (2 * n + 1) / (2 * n + 1)) for (n,), c in p.terms())
        return Smooth(Add(*(c * x for c, x in powers)))

    return _Kind(tau**2, polynomial, simple, double)


def _periodic(y: Expr, u: Expr) -> _Kind:
    """Functions of y = sin u, cos u or cosh u."""
    slope = {sp.sin: -sp.cos(u), sp.cos: sp.sin(u), sp.cosh: sp.sinh(u)}[type(y)]

    def simple(e: Expr) -> tuple[Smooth, ...]:
        if isinstance(y, sp.cosh):
            tanh = sp.tanh(u / 2)
            inside = 2 * atan(sqrt((1 + e) / (1 - e)) * tanh) / sqrt(1 - e**2)
            return (Smooth(inside, (1 - e, 1 + e)),)
        found = []
        for sign in (1, -1):
            a, s = -sign * e, _shorter(sqrt(sp.factor(sp.cancel(e**2 - 1))))
            grows = u - 2 * atan(sign * slope / (a + s + sign * y))
            found.append(Smooth(sign * grows / s, (a - 1,)))
        return tuple(found)

    def double(e: Expr, once: Expr) -> Expr:
        return (slope / (y - e) + e * once) / (1 - e**2)

    def polynomial(p: Poly) -> Smooth | None:
        letter = Dummy("u", real=True)
        whole = _elementary(sp.expand(p.as_expr().subs(p.gen, y.func(letter))), letter)
        return None if whole is None else Smooth(whole.xreplace({letter: u}))

    return _Kind(y, polynomial, simple, double)


def _elliptic(u: Expr, m: Expr) -> _Kind:
    """Functions of y = sn²(u, m), 0 < m < 1."""
    s, c, d = jacobi_sn(u, m), jacobi_cn(u, m), jacobi_dn(u, m)
    second = elliptic_e(jacobi_am(u, m), m)

    def simple(e: Expr) -> tuple[Smooth, ...]:
        # 1/(y − e) = −n/(1 − n y) with n = 1/e
        if e == 0:
            return ()
        n = sp.factor(1 / e)
        return (Smooth(-n * elliptic_pi(n, jacobi_am(u, m), m), (1 - n,)),)

    def double(e: Expr, once: Expr) -> Expr:
        n = sp.factor(1 / e)
        third = -(2 * n * m + 2 * n - n**2 - 3 * m) * once / n
        algebraic = n**2 * s * c * d / (1 - n * s**2)
        whole = n * second + (m - n) * u + third - algebraic
        return n**2 * whole / (2 * (n - 1) * (m - n))

    def polynomial(p: Poly) -> Smooth | None:
        if p.degree() > 1:
            return None
        slope = p.coeff_monomial(p.gen) / m
        whole = (p.coeff_monomial(1) + slope) * u - slope * second
        return Smooth(whole, (m, 1 - m))

    return _Kind(s**2, polynomial, simple, double)


def _elementary(rate: Expr, tau: Symbol) -> Expr | None:
    """∫ rate dτ for sums of products of polynomials, sin, cos, exp of linear arguments."""
    for term in Add.make_args(rate):
        for factor in Mul.make_args(term):
            base, exponent = factor.as_base_exp() if not isinstance(factor, sp.exp) else (factor, 1)
            if not factor.has(tau):
                continue
            if not (sp.Integer(exponent) == exponent and exponent > 0):
                return None
            if base != tau and not isinstance(base, ELEMENTARY):
                return None
            if base != tau and sp.diff(base.args[0], tau, 2) != 0:
                return None
    # a frequency that might be zero would make SymPy answer by cases
    inner = {sp.diff(f.args[0], tau) for f in rate.atoms(*ELEMENTARY)} - {sp.S.Zero}
    letters = {w: Dummy("w", positive=True) for w in inner if not w.is_nonzero}
    put = {
        f: f.func(letters[w] * tau + f.args[0].subs(tau, 0))
        for f in rate.atoms(*ELEMENTARY)
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

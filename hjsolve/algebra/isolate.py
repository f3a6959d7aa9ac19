"""Undo, from outside in, the functions around the only occurrence of a symbol."""

from __future__ import annotations

from dataclasses import dataclass

import sympy as sp
from sympy import Add, Expr, Mul, Pow, Rational, Symbol


@dataclass(frozen=True, slots=True)
class Isolated:
    """x = centre ± half (half 0 for one solution), if all of ``valid`` are ≥ 0."""

    centre: Expr
    half: Expr
    valid: tuple[Expr, ...]


def isolate(k: Expr, value: Expr, x: Symbol, *, fractions: bool = False) -> Isolated | None:
    """X from k = value; None where a step has no inverse.

    Every inverse taken is the analytic one: asin(u) = v gives u = sin(v) for
    all v, so that a motion found within one branch continues past its end.
    With ``fractions`` x may occur several times in a fraction that is linear in
    one function of x above and below.
    """
    if not fractions and k.count(x) != 1:
        return None
    half: Expr = sp.S.Zero
    valid: list[Expr] = []
    while k != x:
        valid.extend(forgotten(k, value))
        step = _undo(k, value, x)
        if step is not None and step[0] == k:
            step = linear_fraction(k, value, x) if half == 0 else None
        if step is None:
            return None
        inner, undone, both = step
        if half != 0:
            if not isinstance(k, (Add, Mul)):
                return None
            if isinstance(k, Mul):
                half = spread(half, k.as_independent(x, as_Add=False)[0])
        elif both:
            # sin u = sin(π − u): its two values lie about π/2, those of the others about 0
            middle = sp.pi / 2 if isinstance(k, sp.sin) else sp.S.Zero
            undone, half = middle, undone
        k, value = inner, undone
    return Isolated(value, half, tuple(valid))


def forgotten(k: Expr, value: Expr) -> tuple[Expr, ...]:
    """What is ≥ 0 when k = value and lost when k is undone: for an even root, |u|, asin u."""
    if isinstance(k, Pow) and isinstance(k.exp, Rational):
        return (value,) if k.exp.q % 2 == 0 else ()
    if isinstance(k, (sp.Abs, sp.acosh)):
        return (value,)
    if isinstance(k, (sp.asin, sp.atan)):
        return (sp.pi / 2 - value, sp.pi / 2 + value)
    if isinstance(k, (sp.acos, sp.acot)):
        return (value, sp.pi - value)
    return ()


def spread(above: Expr, below: Expr) -> Expr:
    """above/below, term by term, so that 2m(E − V) reads as the literature has it."""
    inverse = 1 / below
    if isinstance(above, Add) and not isinstance(inverse, Add):
        return Add(*(inverse * term for term in above.args))
    return above * inverse


def inverse_power(value: Expr, exponent: Rational) -> Expr:
    """The real x with x**exponent = value; the one that is not negative when there are two."""
    odd = exponent.p % 2 and exponent.q % 2
    if odd and abs(exponent.p) != 1 and not value.is_nonnegative:
        return sp.sign(value) * sp.Abs(value) ** (1 / exponent)
    return value ** (1 / exponent)


def linear_fraction(k: Expr, value: Expr, x: Symbol) -> tuple[Expr, Expr, bool] | None:
    """The u and its value for (a + b u)/(c + d u) = value, u(x) being all that holds x."""
    above, below = sp.fraction(sp.together(k))
    functions = {f for e in (above, below) for f in _generators(e, x)}
    if len(functions) != 1:
        return None
    (u,) = functions
    letter = sp.Dummy("u", real=True)
    sides = []
    for e in (above, below):
        inner = e.xreplace({u: letter})
        if inner.has(x) or sp.degree(inner, letter) > 1:
            return None
        sides += [sp.Poly(inner, letter).coeff_monomial(letter**n) for n in (0, 1)]
    a, b, c, d = sides
    return u, (a - value * c) / (value * d - b), False


def _generators(e: Expr, x: Symbol) -> set[Expr]:
    """The factors with x of the terms of a polynomial."""
    return {f for term in Add.make_args(sp.expand(e)) for f in Mul.make_args(term) if f.has(x)}


def _undo(k: Expr, value: Expr, x: Symbol) -> tuple[Expr, Expr, bool] | None:
    """(inner, its value, whether the inner value has both signs) for k = value."""
    if isinstance(k, Add):
        rest, inner = k.as_independent(x, as_Add=True)
        return inner, value - rest, False
    if isinstance(k, Mul):
        factor, inner = k.as_independent(x, as_Add=False)
        return inner, spread(value, factor), False
    if isinstance(k, Pow) and k.exp == 2 and isinstance(k.base, (sp.sin, sp.cos)):
        double = 2 * value - 1 if isinstance(k.base, sp.cos) else 1 - 2 * value
        return sp.cos(2 * k.base.args[0]), double, False
    if isinstance(k, Pow) and isinstance(k.exp, Rational):
        both = k.exp.p % 2 == 0 and not k.base.is_nonnegative
        return k.base, inverse_power(value, k.exp), both
    inverse = INVERSES.get(type(k)) or TWO_VALUED.get(type(k))
    if inverse is None:
        return None
    even = type(k) in TWO_VALUED
    one = isinstance(k, (sp.Abs, sp.cosh)) and k.args[0].is_nonnegative
    return k.args[0], inverse(value), even and not one


INVERSES = {
    sp.exp: sp.log,
    sp.log: sp.exp,
    sp.sinh: sp.asinh,
    sp.asinh: sp.sinh,
    sp.tanh: sp.atanh,
    sp.atanh: sp.tanh,
    sp.atan: sp.tan,
    sp.tan: sp.atan,
    sp.asin: sp.sin,
    sp.acos: sp.cos,
    sp.acosh: sp.cosh,
    sp.acot: sp.cot,
    sp.cot: lambda v: sp.pi / 2 - sp.atan(v),
}
"""Functions with one inverse value (on their principal branch)."""

TWO_VALUED = {
    sp.cosh: sp.acosh,
    sp.cos: sp.acos,
    sp.sin: sp.acos,
    sp.Abs: lambda v: v,
}
"""Functions that take a value at two arguments, centre ± this."""

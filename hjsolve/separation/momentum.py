"""One equation K(q, p) = ε in one coordinate, solved for its momentum.

The forms, in the order tried: p enters to the first or second degree; p stands
in one place and every function around it has an inverse; K is a polynomial in
p of higher degree after its radicals are cleared.  What is left has no formula
here and is said to have none.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace
from typing import Any

import sympy as sp
from sympy import Add, Expr, Pow, Rational, Symbol

from hjsolve.algebra.generators import Generators, NotRational, Ratio, coefficients
from hjsolve.algebra.isolate import inverse_power, isolate, spread
from hjsolve.records import Definition, SeparatedEquation


@dataclass(frozen=True, slots=True)
class Solved:
    """p = drift + sign·root; ``squared`` is p² when drift is 0.

    It solves the equation where all of ``valid`` are ≥ 0.
    """

    drift: Expr
    root: Expr
    squared: Expr | None
    where: tuple[Definition, ...] = ()
    valid: tuple[Expr, ...] = ()


def equation(
    coordinate: Symbol, momentum: Symbol, sign: Symbol, solved: Solved
) -> SeparatedEquation:
    """The record of a solved equation."""
    conditions = (sp.Le(0, v, evaluate=False) for v in solved.valid if not v.is_nonnegative)
    return SeparatedEquation(
        coordinate,
        momentum,
        sign,
        solved.drift,
        solved.root,
        solved.squared,
        solved.where,
        tuple(dict.fromkeys(conditions)),
    )


def solve_for(k: Expr, value: Expr, p: Symbol) -> Solved | None:
    """P from k = value, or None."""
    return _by_degree(k, value, p) or _isolated(k, value, p) or _cleared(k, value, p)


def linear(value: Expr) -> Solved:
    """A momentum with one branch."""
    return Solved(value, sp.S.Zero, value**2 if value.is_zero else None)


def quadratic(a: Expr, b: Expr, c: Expr) -> Solved:
    """The two roots of a p² + b p + c = 0."""
    if b.is_zero:
        squared = spread(-c, a)
        return Solved(sp.S.Zero, sp.sqrt(squared), squared)
    half = spread(-b, 2 * a)
    return Solved(half, sp.sqrt(half**2 + spread(-c, a)), None)


def _by_degree(k: Expr, value: Expr, p: Symbol) -> Solved | None:
    if not k.is_polynomial(p):
        return None
    second = sp.diff(k, p, 2)
    if second.has(p):
        second = sp.expand(second)
        if second.has(p):
            return None
    first = sp.diff(k, p).subs(p, 0)
    rest = k.subs(p, 0) - value
    if second == 0:
        return None if first == 0 else linear(spread(-rest, first))
    return quadratic(sp.together(second / 2), first, rest)


def _isolated(k: Expr, value: Expr, p: Symbol) -> Solved | None:
    found = isolate(k, value, p)
    if found is None:
        return None
    centre, half = found.centre, found.half
    if half == 0:
        return Solved(centre, sp.S.Zero, None, (), found.valid)
    whole = isinstance(half, Pow) and half.exp == Rational(1, 2) and centre == 0
    return Solved(centre, half, half.base if whole else None, (), found.valid)


# ------------------------------------------------ polynomials in p, or e^p


def _cleared(k: Expr, value: Expr, p: Symbol) -> Solved | None:
    """Through a polynomial in p with its radicals cleared, or in exp(p)."""
    try:
        ring = Generators([k, value], extra=(p,))
        difference = ring.ratio(k) - ring.ratio(value)
        polynomial, shown = clear_radicals(ring, difference.numerator, lambda g: g.has(p))
    except (NotRational, ArithmeticError):
        return None
    carriers = [g for g in ring.items if g.has(p)]
    used = [g for g in carriers if polynomial.degrees()[ring.index[g]] > 0]
    if len(used) != 1:
        return None
    parts = {
        e: ring.polynomial(c)
        for e, c in coefficients(polynomial, ring.index[used[0]], ring.context).items()
    }
    solved = from_carrier(parts, used[0], p)
    if solved is None or any(v.has(p) for v in shown):
        return None
    return replace(solved, valid=shown)


def from_carrier(parts: dict[int, Expr], carrier: Expr, p: Symbol) -> Solved | None:
    """P from Σ parts[k]·carrier^k = 0, where the carrier is p or exp(rate·p)."""
    if carrier == p:
        return from_coefficients(parts, p)
    if isinstance(carrier, sp.exp):
        return _from_exponential(parts, carrier.args[0] / p)
    return None


def clear_radicals(
    ring: Generators, polynomial: Any, unwanted: Callable[[Expr], bool]
) -> tuple[Any, tuple[Expr, ...]]:
    """Multiply by conjugates until no unwanted square root is left.

    Returns the polynomial and what must not be negative for its zeros to be
    zeros of the polynomial given: from a + b·R = 0 with R ≥ 0, that −a/b ≥ 0.

    Raises NotRational for roots of higher degree.
    """
    shown: list[Expr] = []
    for k, degree, power in reversed(ring.relations):
        g = ring.items[k]
        if not isinstance(g, Pow) or not unwanted(g):
            continue
        reduced = ring.reduce(Ratio(polynomial, ring.context.constant(1))).numerator
        if reduced.degrees()[k] == 0:
            polynomial = reduced
            continue
        if degree != 2:
            raise NotRational("a root of higher degree holds a momentum")
        parts = coefficients(reduced, k, ring.context)
        zero = ring.context.constant(0)
        a, b = parts.get(0, zero), parts.get(1, zero)
        one = ring.context.constant(1)
        product = Ratio(a * a, one) - Ratio(b * b, one) * power
        polynomial = product.numerator
        shown.append(ring.expression(-(Ratio(a, one) / Ratio(b, one))))
    return polynomial, tuple(shown)


def from_coefficients(parts: dict[int, Expr], p: Symbol) -> Solved | None:
    """P from Σ parts[k] p^k = 0."""
    degree = max(parts)

    def get(k: int) -> Expr:
        return parts.get(k, sp.S.Zero)

    if degree == 1:
        return linear(spread(-get(0), get(1)))
    if degree == 2:
        return quadratic(get(2), get(1), get(0))
    if set(parts) <= {0, degree}:
        value = spread(-get(0), get(degree))
        if degree % 2 == 0:
            return Solved(sp.S.Zero, value ** Rational(1, degree), None)
        return linear(inverse_power(value, sp.Integer(degree)))
    if set(parts) <= {0, 2, 4}:
        if not (get(2) / get(4)).is_nonnegative:
            return _named_root(parts, p)  # both values of p² may be positive: four branches
        middle = spread(-get(2), 2 * get(4))
        inner = sp.sqrt(middle**2 + spread(-get(0), get(4)))
        squared = middle + inner
        return Solved(sp.S.Zero, sp.sqrt(squared), squared)
    return _named_root(parts, p)


def _named_root(parts: dict[int, Expr], p: Symbol) -> Solved:
    """The momentum as the lowest real root of its polynomial, by name.

    There is one wherever the motion is; how many more there are depends on the
    coefficients.
    """
    taken = {s.name for c in parts.values() for s in c.free_symbols}
    unknown = Symbol(_fresh("u", taken), real=True)
    name = Symbol(_fresh(f"{p.name}_1", taken), real=True)
    polynomial = Add(*(c * unknown**k for k, c in parts.items()))
    where = Definition(name, root_of=polynomial, unknown=unknown, index=1)
    return Solved(name, sp.S.Zero, None, (where,))


def _fresh(name: str, taken: set[str]) -> str:
    while name in taken:
        name += "_"
    return name


def _from_exponential(parts: dict[int, Expr], rate: Expr) -> Solved | None:
    """P from a polynomial in exp(rate·p): first degree, or reciprocal of the second."""
    low, high = min(parts), max(parts)
    if rate.free_symbols:
        return None
    if set(parts) == {low, high}:
        value = spread(-parts[low], parts[high])
        return linear(sp.log(value) / (rate * (high - low)))
    middle = (low + high) // 2
    if set(parts) == {low, middle, high} and low + high == 2 * middle:
        a, b, c = parts[high], parts[middle], parts[low]
        if sp.expand(a - c) == 0:  # 2a cosh(rate·p·(high − middle)) + b = 0
            root = sp.acosh(spread(-b, 2 * a)) / (rate * (high - middle))
            return Solved(sp.S.Zero, root, None)
    return None

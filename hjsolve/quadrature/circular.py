"""Kernels for circular functions: cos, sin, tan, cot of one argument."""

from __future__ import annotations

from collections.abc import Callable, Iterator

import sympy as sp
from sympy import Expr, Lt, S, Symbol, oo, pi

from hjsolve.quadrature.kernel import CIRCULAR, Kernel, Partner, image, multiple, of_pair, rational
from hjsolve.quadrature.radicals import Radicals, square_root
from hjsolve.quadrature.signs import Signs
from hjsolve.records import Domain


def circular(base: Expr, multiples: dict[Expr, int], q: Symbol, domain: Domain) -> Iterator[Kernel]:
    """cos, sin, tan, cot of ``base``, those injective on the domain first."""
    rate = sp.diff(base, q)
    low, high = image(base, q, domain)
    half_turn, right = (S.Zero, pi), (-pi / 2, pi / 2)
    kernels = [
        _circle_kernel(name, base, rate, multiples, (low, high), allowed)
        for name, allowed in (
            ("cos", half_turn),
            ("cot", half_turn),
            ("sin", right),
            ("tan", right),
        )
    ]
    if domain.kind != "polar-angle":
        kernels = kernels[2:] + kernels[:2]
    yield from sorted(kernels, key=lambda k: len(k.restriction))


def _circle_kernel(
    name: str,
    base: Expr,
    rate: Expr,
    multiples: dict[Expr, int],
    through: tuple[Expr, Expr],
    allowed: tuple[Expr, Expr],
) -> Kernel:
    function = {"cos": sp.cos, "sin": sp.sin, "tan": sp.tan, "cot": sp.cot}[name]
    inside = all(x.is_number and x.is_finite for x in through) and (
        through[0] >= allowed[0] and through[1] <= allowed[1]
    )
    lower, upper = through if inside else allowed
    limits = () if inside else (Lt(lower, base), Lt(base, upper))
    ends = [_end(function, lower, +1), _end(function, upper, -1)]
    span = (ends[0], ends[1]) if name in ("sin", "tan") else (ends[1], ends[0])

    def pair(signs: Signs) -> tuple[Radicals, Radicals]:
        """(cos, sin) of the base."""
        ring = signs.ring
        u = rational(signs, ring.u)
        if name in ("cos", "sin"):
            other = square_root(signs, ring.one - ring.u**2)
            return (u, other) if name == "cos" else (other, u)
        other = square_root(signs, ring.one / (ring.one + ring.u**2))
        return (other, u * other) if name == "tan" else (u * other, other)

    def leaf(e: Expr, signs: Signs) -> Radicals | None:
        if not isinstance(e, CIRCULAR) or e.args[0] not in multiples:
            return None
        c, s = multiple(*pair(signs), multiples[e.args[0]], -1)
        return of_pair(type(e), c, s)

    def slope(signs: Signs) -> Radicals:
        ring = signs.ring
        c, s = pair(signs)
        sign = ring.number(-1 if name in ("cos", "cot") else 1)
        inverse = rational(signs, sign / ring.constant(rate))
        match name:
            case "cos":
                return inverse * s.inverse()
            case "sin":
                return inverse * c.inverse()
            case "tan":
                return inverse * c * c
            case _:
                return inverse * s * s

    partner = {
        "cos": Partner(sp.sin(base), S.One, -S.One),
        "sin": Partner(sp.cos(base), S.One, -S.One),
    }.get(name)
    return Kernel(function(base), span, leaf, slope, limits, (rate,), partner)


def _end(function: Callable[[Expr], Expr], at: Expr, side: int) -> Expr:
    value = function(at)
    if value is sp.zoo or not value.is_finite:
        return side * (oo if function is sp.cot else -oo)
    return value

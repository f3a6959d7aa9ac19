"""Kernels for exponentials and hyperbolic functions of one argument."""

from __future__ import annotations

from collections.abc import Iterator

import sympy as sp
from sympy import Expr, Lt, S, Symbol, oo

from hjsolve.quadrature.kernel import (
    HYPERBOLIC,
    Kernel,
    Partner,
    image,
    multiple,
    of_pair,
    rational,
)
from hjsolve.quadrature.radicals import Radicals, square_root
from hjsolve.quadrature.signs import Signs
from hjsolve.records import Domain


def exponential(base: Expr, multiples: dict[Expr, int], q: Symbol, domain: Domain) -> Kernel:
    """The kernel u = e^base."""
    rate = sp.diff(base, q)

    def leaf(e: Expr, signs: Signs) -> Radicals | None:
        if not isinstance(e, (sp.exp, *HYPERBOLIC)) or e.args[0] not in multiples:
            return None
        ring, n = signs.ring, multiples[e.args[0]]
        if isinstance(e, sp.exp):
            return rational(signs, ring.u**n)
        up, down, half = ring.u**n, ring.u ** (-n), ring.number(2).inverse()
        return of_pair(
            type(e), rational(signs, (up + down) * half), rational(signs, (up - down) * half)
        )

    def slope(signs: Signs) -> Radicals:
        return rational(signs, (signs.ring.u * signs.ring.constant(rate)).inverse())

    span: tuple[Expr, Expr] = (S.Zero, oo)
    if domain.lower == 0 and base.subs(q, 0) == 0:
        if rate.is_positive:
            span = (S.One, oo)
        elif rate.is_negative:
            span = (S.Zero, S.One)
    return Kernel(sp.exp(base), span, leaf, slope, (), (rate,))


def hyperbolic(
    base: Expr, multiples: dict[Expr, int], q: Symbol, domain: Domain
) -> Iterator[Kernel]:
    """sinh, tanh on the whole line, cosh where the argument is positive."""
    rate = sp.diff(base, q)
    low, _high = image(base, q, domain)
    positive = low == 0
    for name in ("sinh", "tanh", "cosh"):
        yield _hyperbola_kernel(name, base, rate, multiples, positive)


def _hyperbola_kernel(
    name: str, base: Expr, rate: Expr, multiples: dict[Expr, int], positive: bool
) -> Kernel:
    function = {"sinh": sp.sinh, "tanh": sp.tanh, "cosh": sp.cosh}[name]

    def pair(signs: Signs) -> tuple[Radicals, Radicals]:
        """(cosh, sinh) of the base."""
        ring = signs.ring
        u = rational(signs, ring.u)
        if name == "sinh":
            return square_root(signs, ring.one + ring.u**2), u
        if name == "cosh":
            return u, square_root(signs, ring.u**2 - ring.one)
        c = square_root(signs, ring.one / (ring.one - ring.u**2))
        return c, u * c

    def leaf(e: Expr, signs: Signs) -> Radicals | None:
        if not isinstance(e, (sp.exp, *HYPERBOLIC)) or e.args[0] not in multiples:
            return None
        c, s = multiple(*pair(signs), multiples[e.args[0]], +1)
        return c + s if isinstance(e, sp.exp) else of_pair(type(e), c, s)

    def slope(signs: Signs) -> Radicals:
        ring = signs.ring
        c, s = pair(signs)
        inverse = rational(signs, ring.one / ring.constant(rate))
        if name == "sinh":
            return inverse * c.inverse()
        return inverse * (c * c if name == "tanh" else s.inverse())

    spans: dict[str, tuple[Expr, Expr]] = {
        "sinh": (S.Zero if positive else -oo, oo),
        "tanh": (S.Zero if positive else -S.One, S.One),
        "cosh": (S.One, oo),
    }
    limits = (Lt(0, base),) if name == "cosh" and not positive else ()
    partner = {
        "sinh": Partner(sp.cosh(base), -S.One, S.One),
        "cosh": Partner(sp.sinh(base), S.One, S.One),
        "tanh": Partner(1 / sp.cosh(base), S.One, -S.One),
    }[name]
    # tanh z ∓ 1 loses all digits for large |z|, its exponential form none
    shifts = ((1, -2 / (1 + sp.exp(2 * base))), (-1, 2 / (1 + sp.exp(-2 * base))))
    return Kernel(
        function(base),
        spans[name],
        leaf,
        slope,
        limits,
        (rate,),
        partner,
        shifts if name == "tanh" else (),
    )

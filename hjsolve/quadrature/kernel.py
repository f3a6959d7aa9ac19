"""A kernel u(q), and what all kinds of kernels use.

Only kernels that are injective where they are used, because the signs of the
auxiliary roots (sin θ for u = cos θ) must not change: a kernel that is injective
on a part of the domain only carries the inequalities of that part, and they go
into ``valid``.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import sympy as sp
from sympy import Expr, Symbol
from sympy.core.relational import Relational

from hjsolve.quadrature.radicals import Radicals
from hjsolve.quadrature.ratios import GivenUp, Ratio
from hjsolve.quadrature.signs import Signs
from hjsolve.records import Domain

Leaf = Callable[[Expr, Signs], Radicals | None]

CIRCULAR = (sp.sin, sp.cos, sp.tan, sp.cot, sp.sec, sp.csc)
HYPERBOLIC = (sp.sinh, sp.cosh, sp.tanh, sp.coth, sp.sech, sp.csch)


@dataclass(frozen=True)
class Partner:
    """u^power = constant + factor·w² for another function w of q, named ``function``."""

    function: Expr
    constant: Expr
    factor: Expr
    power: int = 2


@dataclass(frozen=True)
class Kernel:
    """u = ``expression`` with values in ``span``.

    ``leaf`` rewrites what depends on q, ``slope`` gives dq/du.  ``constants``
    must be generators of the ring.  ``partner`` is a function of q in which
    polynomials in u may be shorter; ``shifts`` writes u − c for the integers c at
    which the difference would cancel.
    """

    expression: Expr
    span: tuple[Expr, Expr]
    leaf: Leaf
    slope: Callable[[Signs], Radicals]
    restriction: tuple[Relational, ...] = ()
    constants: tuple[Expr, ...] = ()
    partner: Partner | None = None
    shifts: tuple[tuple[int, Expr], ...] = ()


def rational(signs: Signs, ratio: Ratio) -> Radicals:
    """A fraction as an element of the algebra."""
    return Radicals.rational(signs, ratio)


def image(base: Expr, q: Symbol, domain: Domain) -> tuple[Expr, Expr]:
    """The interval through which a linear function of q runs."""
    ends = []
    rate = sp.diff(base, q)
    for end in (domain.lower, domain.upper):
        ends.append(sp.simplify(base.subs(q, end)) if end.is_finite else end * sp.sign(rate))
    low, high = ends
    if rate.is_negative:
        low, high = high, low
    return low, high


def of_pair(kind: type, c: Radicals, s: Radicals) -> Radicals:
    """A circular or hyperbolic function from the pair (cos, sin) or (cosh, sinh)."""
    match kind.__name__:
        case "cos" | "cosh":
            return c
        case "sin" | "sinh":
            return s
        case "tan" | "tanh":
            return s * c.inverse()
        case "cot" | "coth":
            return c * s.inverse()
        case "sec" | "sech":
            return c.inverse()
        case _:
            return s.inverse()


def multiple(c: Radicals, s: Radicals, n: int, square: int) -> tuple[Radicals, Radicals]:
    """(c, s) of the n-fold argument; ``square`` is -1 for circular, +1 for hyperbolic."""
    if abs(n) > 12:
        raise GivenUp("a high multiple of the angle")
    signs = c.signs
    sign = rational(signs, signs.ring.number(square))
    cn, sn = c, s
    for _ in range(abs(n) - 1):
        cn, sn = cn * c + sign * sn * s, sn * c + cn * s
    return cn, sn if n > 0 else sn * rational(signs, signs.ring.number(-1))

"""Conical, paraboloidal and ellipsoidal coordinates, in the algebraic form of Jacobi.

The map is given for x, y, z > 0 (x, y > 0 for paraboloidal ones); the other
octants are its mirror images.  In a potential that is not even in them the
signs would enter, and such a potential does not separate here.
"""

from __future__ import annotations

from sympy import Expr, Mul, S, Symbol, oo, sqrt, symbols

from hjsolve.charts.plane import r
from hjsolve.charts.system import HALF_LINE, CoordinateSystem, f, g, h, x, y, z
from hjsolve.records import Definition, Domain

SOURCE = (
    "Jacobi's elliptic coordinates; Morse & Feshbach, Methods of Theoretical Physics I (1953), "
    "ch. 5; Kalnins, Separation of Variables for Riemannian Spaces of Constant Curvature (1986) "
    "(from memory; formulas machine-checked)"
)

u1, u2, u3, v1, v2 = symbols("u1 u2 u3 v1 v2", real=True)
a1, a2, a3 = symbols("a1 a2 a3", real=True)
u = Symbol("u", real=True)


def interval(lower: Expr, upper: Expr) -> Domain:
    """The open interval (lower, upper)."""
    return Domain("interval", lower, upper)


def others(values: tuple[Symbol, ...], one: Symbol) -> list[Symbol]:
    """The values without ``one``."""
    return [v for v in values if v is not one]


def through(roots: tuple[Symbol, ...], shape: tuple[Symbol, ...], a: Symbol) -> Expr:
    """Π_j (u_j − a)/Π_{b ≠ a} (b − a): the square of the Cartesian coordinate of a."""
    return Mul(*(v - a for v in roots)) / Mul(*(b - a for b in others(shape, a)))


def square(roots: tuple[Symbol, ...], shape: tuple[Symbol, ...], v: Symbol, times: int) -> Expr:
    """Π_{w ≠ v} (v − w)/(times · Π_a (v − a))."""
    return Mul(*(v - w for w in others(roots, v))) / (times * Mul(*(v - a for a in shape)))


def rows(
    roots: tuple[Symbol, ...], shape: tuple[Symbol, ...], times: int
) -> tuple[tuple[Expr, ...], ...]:
    """The Stäckel matrix u_i^(n−1−j)/(times · Π_a (u_i − a))."""
    n = len(roots)
    return tuple(
        tuple(v ** (n - 1 - j) / (times * Mul(*(v - a for a in shape))) for j in range(n))
        for v in roots
    )


def root(symbol: Symbol, polynomial: Expr, index: int) -> Definition:
    """The index-th real root, from 1, in ascending order."""
    return Definition(symbol, root_of=polynomial, unknown=u, index=index)


_SHAPE = (a1, a2, a3)
_ROOTS = (u1, u2, u3)
_pencil = Mul(*(a - u for a in _SHAPE)) - sum(
    s**2 * Mul(*(b - u for b in others(_SHAPE, a))) for s, a in zip((x, y, z), _SHAPE, strict=True)
)

ELLIPSOIDAL = CoordinateSystem(
    family="ellipsoidal",
    source=SOURCE,
    examples=("b*(x**2 + y**2 + z**2) + d/x**2 + k/y**2 + l/z**2",),
    coordinates=_ROOTS,
    domains=(interval(-oo, a1), interval(a1, a2), interval(a2, a3)),
    place=tuple(sqrt(-through(_ROOTS, _SHAPE, a)) for a in _SHAPE),
    inverse=tuple(root(v, _pencil, k) for k, v in enumerate(_ROOTS, 1)),
    squares=tuple(square(_ROOTS, _SHAPE, v, -4) for v in _ROOTS),
    staeckel=rows(_ROOTS, _SHAPE, -4),
    potential=sum(
        (
            fn(v) / Mul(*(v - w for w in others(_ROOTS, v)))
            for fn, v in zip((f, g, h), _ROOTS, strict=True)
        ),
        S.Zero,
    ),
    geometry=("center", "axes", "a"),
    shape=_SHAPE,
    positive=(
        u2 - u1,
        u3 - u1,
        u3 - u2,
        a1 - u1,
        a2 - u1,
        a3 - u1,
        u2 - a1,
        a2 - u2,
        a3 - u2,
        u3 - a1,
        u3 - a2,
        a3 - u3,
        a2 - a1,
        a3 - a1,
        a3 - a2,
    ),
)

_CONE = (v1, v2)
_cone_rows = tuple(
    (S.Zero, *(sign * e for sign, e in zip((-1, 1), row, strict=True)))
    for row in rows(_CONE, _SHAPE, 4)
)
CONICAL = CoordinateSystem(
    family="conical",
    source=SOURCE,
    examples=("b/sqrt(x**2 + y**2 + z**2) + d/x**2 + k/y**2 + l/z**2",),
    coordinates=(r, v1, v2),
    domains=(HALF_LINE, interval(a1, a2), interval(a2, a3)),
    place=tuple(r * sqrt(through(_CONE, _SHAPE, a)) for a in _SHAPE),
    inverse=(
        sqrt(x**2 + y**2 + z**2),
        *(
            root(
                v,
                sum(
                    s**2 * Mul(*(u - b for b in others(_SHAPE, a)))
                    for s, a in zip((x, y, z), _SHAPE, strict=True)
                ),
                k,
            )
            for k, v in enumerate(_CONE, 1)
        ),
    ),
    squares=(S.One, *(-(r**2) * square(_CONE, _SHAPE, v, 4) for v in _CONE)),
    staeckel=((S.One, -1 / r**2, S.Zero), *_cone_rows),
    potential=f(r) + (g(v1) + h(v2)) / (r**2 * (v1 - v2)),
    geometry=("center", "axes", "a"),
    shape=_SHAPE,
    positive=(
        r,
        v2 - v1,
        v1 - a1,
        a2 - v1,
        v2 - a2,
        a3 - v2,
        v2 - a1,
        a3 - v1,
        a2 - a1,
        a3 - a1,
        a3 - a2,
    ),
)

_FLAT = (a1, a2)
_sheets = (u - a1) * (u - a2) * (u - 2 * z) - x**2 * (u - a2) - y**2 * (u - a1)
PARABOLOIDAL = CoordinateSystem(
    family="paraboloidal",
    source=SOURCE,
    examples=("b*(x**2 + y**2 + 4*z**2) + d*z + k/x**2 + l/y**2",),
    coordinates=_ROOTS,
    domains=(interval(-oo, a1), interval(a1, a2), interval(a2, oo)),
    place=(
        sqrt(Mul(*(a1 - v for v in _ROOTS)) / (a2 - a1)),
        sqrt(Mul(*(v - a2 for v in _ROOTS)) / (a2 - a1)),
        (u1 + u2 + u3 - a1 - a2) / 2,
    ),
    inverse=tuple(root(v, _sheets, k) for k, v in enumerate(_ROOTS, 1)),
    squares=tuple(square(_ROOTS, _FLAT, v, 4) for v in _ROOTS),
    staeckel=rows(_ROOTS, _FLAT, 4),
    potential=ELLIPSOIDAL.potential,
    geometry=("center", "axes", "bc"),
    shape=_FLAT,
    positive=(
        u2 - u1,
        u3 - u1,
        u3 - u2,
        a1 - u1,
        u2 - a1,
        a2 - u2,
        u3 - a2,
        a2 - u1,
        u3 - a1,
        a2 - a1,
    ),
)

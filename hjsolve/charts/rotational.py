"""The four systems of space with an axis of revolution."""

from __future__ import annotations

from sympy import Abs, Expr, S, acos, acosh, asinh, atan2, cos, cosh, sign, sin, sinh, sqrt

from hjsolve.charts.plane import c, mu, phi, r, xi
from hjsolve.charts.system import (
    ANGLE,
    HALF_LINE,
    POLAR_ANGLE,
    CoordinateSystem,
    coordinate,
    f,
    g,
    h,
    x,
    y,
    z,
)

SOURCE = (
    "Landau & Lifshitz, Mechanics, par. 48; Eisenhart, Ann. Math. 35 (1934) 284 "
    "(from memory; formulas machine-checked)"
)

theta = coordinate("theta", POLAR_ANGLE)
eta = coordinate("eta", HALF_LINE)
nu = coordinate("nu", POLAR_ANGLE)

radius = sqrt(x**2 + y**2 + z**2)
near, far = (sqrt(x**2 + y**2 + (z - s * c) ** 2) for s in (1, -1))
azimuth = atan2(y, x)


def around(distance: Expr, height: Expr) -> tuple[Expr, Expr, Expr]:
    """(x, y, z) from the distance to the z axis and the height."""
    return distance * cos(phi), distance * sin(phi), height


SPHERICAL = CoordinateSystem(
    family="spherical",
    source=SOURCE,
    examples=("-a/sqrt(x**2 + y**2 + z**2) + b/(x**2 + y**2)", "a*(x**2 + y**2 + z**2)**2"),
    coordinates=(r, theta, phi),
    domains=(HALF_LINE, POLAR_ANGLE, ANGLE),
    place=around(r * sin(theta), r * cos(theta)),
    inverse=(radius, acos(z / radius), azimuth),
    squares=(S.One, r**2, r**2 * sin(theta) ** 2),
    staeckel=(
        (S.One, -1 / r**2, S.Zero),
        (S.Zero, S.One, -1 / sin(theta) ** 2),
        (S.Zero, S.Zero, S.One),
    ),
    potential=f(r) + g(theta) / r**2 + h(phi) / (r * sin(theta)) ** 2,
    geometry=("center", "axis"),
    positive=(r, sin(theta)),
)

_sum = xi**2 + eta**2
PARABOLIC = CoordinateSystem(
    family="parabolic",
    source=SOURCE,
    examples=("-a/sqrt(x**2 + y**2 + z**2) + b*z + d/(x**2 + y**2)",),
    coordinates=(xi, eta, phi),
    domains=(HALF_LINE, HALF_LINE, ANGLE),
    place=around(xi * eta, (xi**2 - eta**2) / 2),
    inverse=(sqrt(radius + z), sqrt(radius - z), azimuth),
    squares=(_sum, _sum, xi**2 * eta**2),
    staeckel=(
        (xi**2, -S.One, -1 / xi**2),
        (eta**2, S.One, -1 / eta**2),
        (S.Zero, S.Zero, S.One),
    ),
    potential=(f(xi) + g(eta)) / _sum + h(phi) / (xi * eta) ** 2,
    geometry=("focus", "axis"),
    positive=(_sum, xi, eta),
)

_prolate = sinh(mu) ** 2 + sin(nu) ** 2
PROLATE = CoordinateSystem(
    family="prolate",
    source=SOURCE,
    examples=(
        "-a/sqrt(x**2 + y**2 + (z - c)**2) - b/sqrt(x**2 + y**2 + (z + c)**2) + d/(x**2 + y**2)",
    ),
    coordinates=(mu, nu, phi),
    domains=(HALF_LINE, POLAR_ANGLE, ANGLE),
    place=around(c * sinh(mu) * sin(nu), c * cosh(mu) * cos(nu)),
    inverse=(acosh((near + far) / (2 * c)), acos((far - near) / (2 * c)), azimuth),
    squares=(c**2 * _prolate, c**2 * _prolate, c**2 * sinh(mu) ** 2 * sin(nu) ** 2),
    staeckel=(
        (c**2 * sinh(mu) ** 2, S.One, -1 / sinh(mu) ** 2),
        (c**2 * sin(nu) ** 2, -S.One, -1 / sin(nu) ** 2),
        (S.Zero, S.Zero, S.One),
    ),
    potential=(f(mu) + g(nu)) / _prolate + h(phi) / (sinh(mu) * sin(nu)) ** 2,
    geometry=("foci",),
    shape=(c,),
    positive=(cosh(mu) - cos(nu), cosh(mu) + cos(nu), sinh(mu), sin(nu), c),
)

_oblate = sinh(mu) ** 2 + cos(nu) ** 2
_square = x**2 + y**2 + z**2
_difference = sqrt((_square - c**2) ** 2 + 4 * c**2 * z**2)
OBLATE = CoordinateSystem(
    family="oblate",
    source=SOURCE,
    examples=("a/(x**2 + y**2) + b*(x**2 + y**2 + z**2)",),
    coordinates=(mu, nu, phi),
    domains=(HALF_LINE, POLAR_ANGLE, ANGLE),
    place=around(c * cosh(mu) * sin(nu), c * sinh(mu) * cos(nu)),
    inverse=(
        asinh(sqrt((_square - c**2 + _difference) / 2) / c),
        acos(sign(z) * sqrt(Abs(_difference - _square + c**2) / 2) / c),
        azimuth,
    ),
    squares=(c**2 * _oblate, c**2 * _oblate, c**2 * cosh(mu) ** 2 * sin(nu) ** 2),
    staeckel=(
        (c**2 * cosh(mu) ** 2, S.One, 1 / cosh(mu) ** 2),
        (-(c**2) * sin(nu) ** 2, -S.One, -1 / sin(nu) ** 2),
        (S.Zero, S.Zero, S.One),
    ),
    potential=(f(mu) + g(nu)) / _oblate + h(phi) / (cosh(mu) * sin(nu)) ** 2,
    geometry=("center", "axis", "a"),
    shape=(c,),
    positive=(_oblate, cosh(mu), sinh(mu), sin(nu), c),
)

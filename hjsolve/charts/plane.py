"""The four coordinate systems of the Euclidean plane."""

from __future__ import annotations

from sympy import S, Symbol, acosh, atan2, cos, cosh, pi, sign, sin, sinh, sqrt
from sympy import acos as arccos

from hjsolve.charts.system import (
    ANGLE,
    HALF_LINE,
    LINE,
    CoordinateSystem,
    coordinate,
    f,
    g,
    x,
    y,
)

SOURCE = (
    "Landau & Lifshitz, Mechanics, par. 48; Morse & Feshbach, Methods of Theoretical Physics I "
    "(1953), ch. 5 (from memory; formulas machine-checked)"
)

r = coordinate("r", HALF_LINE)
phi = coordinate("phi", ANGLE)
xi = coordinate("xi", HALF_LINE)
eta = coordinate("eta", LINE)
mu = coordinate("mu", HALF_LINE)
nu = coordinate("nu", ANGLE)
c = Symbol("c", positive=True)

radius = sqrt(x**2 + y**2)
parabolic = xi**2 + eta**2
elliptic = cosh(mu) ** 2 - cos(nu) ** 2
near, far = sqrt((x - c) ** 2 + y**2), sqrt((x + c) ** 2 + y**2)

CARTESIAN = CoordinateSystem(
    family="cartesian",
    source=SOURCE,
    examples=("a*x**2 + b*y**4", "exp(x) + cos(y)"),
    coordinates=(x, y),
    domains=(LINE, LINE),
    place=(x, y),
    inverse=(x, y),
    squares=(S.One, S.One),
    staeckel=((S.One, -S.One), (S.Zero, S.One)),
    potential=f(x) + g(y),
    geometry=("angle",),
)

POLAR = CoordinateSystem(
    family="polar",
    source=SOURCE,
    examples=("a*(x**2 + y**2)**2", "-a/sqrt(x**2 + y**2) + b*x/(x**2 + y**2)**(3/2)"),
    coordinates=(r, phi),
    domains=(HALF_LINE, ANGLE),
    place=(r * cos(phi), r * sin(phi)),
    inverse=(radius, atan2(y, x)),
    squares=(S.One, r**2),
    staeckel=((S.One, -1 / r**2), (S.Zero, S.One)),
    potential=f(r) + g(phi) / r**2,
    geometry=("center",),
    positive=(r,),
)

PARABOLIC = CoordinateSystem(
    family="parabolic",
    source=SOURCE,
    examples=("-a/sqrt(x**2 + y**2) + b*x", "a*(4*x**2 + y**2) + b/y**2"),
    coordinates=(xi, eta),
    domains=(HALF_LINE, LINE),
    place=((xi**2 - eta**2) / 2, xi * eta),
    inverse=(sqrt(radius + x), sign(y) * sqrt(radius - x)),
    squares=(parabolic, parabolic),
    staeckel=((xi**2, -S.One), (eta**2, S.One)),
    potential=(f(xi) + g(eta)) / parabolic,
    geometry=("focus", "axis_angle"),
    positive=(parabolic, xi),
)

ELLIPTIC = CoordinateSystem(
    family="elliptic",
    source=SOURCE,
    examples=(
        "-a/sqrt((x - c)**2 + y**2) - b/sqrt((x + c)**2 + y**2)",
        "a*(x**2 + y**2) + b/x**2 + d/y**2",
    ),
    coordinates=(mu, nu),
    domains=(HALF_LINE, ANGLE),
    place=(c * cosh(mu) * cos(nu), c * sinh(mu) * sin(nu)),
    inverse=(
        acosh((near + far) / (2 * c)),
        pi - sign(y) * (pi - arccos((far - near) / (2 * c))),
    ),
    squares=(c**2 * elliptic, c**2 * elliptic),
    staeckel=((c**2 * cosh(mu) ** 2, S.One), (-(c**2) * cos(nu) ** 2, -S.One)),
    potential=(f(mu) + g(nu)) / elliptic,
    geometry=("foci",),
    shape=(c,),
    positive=(cosh(mu) - cos(nu), cosh(mu) + cos(nu), elliptic, sinh(mu), c),
)

"""Cartesian coordinates of space and the three systems of cylinders."""

from __future__ import annotations

from sympy import S

from hjsolve.charts import plane
from hjsolve.charts.plane import eta, mu, nu, phi, xi
from hjsolve.charts.system import HALF_LINE, LINE, CoordinateSystem, coordinate, f, g, h, x, y, z

SOURCE = (
    "Eisenhart, Ann. Math. 35 (1934) 284; Morse & Feshbach, Methods of Theoretical Physics I "
    "(1953), ch. 5 (from memory; formulas machine-checked)"
)

rho = coordinate("rho", HALF_LINE)

CARTESIAN = CoordinateSystem(
    family="cartesian",
    source=SOURCE,
    examples=("a*x**2 + b*y**4 + cos(z)",),
    coordinates=(x, y, z),
    domains=(LINE, LINE, LINE),
    place=(x, y, z),
    inverse=(x, y, z),
    squares=(S.One, S.One, S.One),
    staeckel=((S.One, -S.One, -S.One), (S.Zero, S.One, S.Zero), (S.Zero, S.Zero, S.One)),
    potential=f(x) + g(y) + h(z),
    geometry=("axes",),
)

_POLAR = {plane.r: rho}

CIRCULAR = CoordinateSystem(
    family="circular_cylindrical",
    source=SOURCE,
    examples=("a*(x**2 + y**2)**2 + b*z", "-a/sqrt(x**2 + y**2) + z**4"),
    coordinates=(rho, phi, z),
    domains=(*plane.POLAR.domains, LINE),
    place=(*(e.xreplace(_POLAR) for e in plane.POLAR.place), z),
    inverse=(*plane.POLAR.inverse, z),
    squares=(S.One, rho**2, S.One),
    staeckel=((S.One, -1 / rho**2, -S.One), (S.Zero, S.One, S.Zero), (S.Zero, S.Zero, S.One)),
    potential=f(rho) + g(phi) / rho**2 + h(z),
    geometry=("axis", "center"),
    positive=(rho,),
)

PARABOLIC = CoordinateSystem(
    family="parabolic_cylindrical",
    source=SOURCE,
    examples=("-a/sqrt(x**2 + y**2) + b*x + z**4",),
    coordinates=(xi, eta, z),
    domains=(*plane.PARABOLIC.domains, LINE),
    place=(*plane.PARABOLIC.place, z),
    inverse=(*plane.PARABOLIC.inverse, z),
    squares=(*plane.PARABOLIC.squares, S.One),
    staeckel=((S.Zero, -(xi**2), S.One), (S.Zero, -(eta**2), -S.One), (S.One, S.One, S.Zero)),
    potential=plane.PARABOLIC.potential + h(z),
    geometry=("axis", "focus", "direction"),
    positive=plane.PARABOLIC.positive,
)

ELLIPTIC = CoordinateSystem(
    family="elliptic_cylindrical",
    source=SOURCE,
    examples=("-a/sqrt((x - c)**2 + y**2) - b/sqrt((x + c)**2 + y**2) + z**4",),
    coordinates=(mu, nu, z),
    domains=(*plane.ELLIPTIC.domains, LINE),
    place=(*plane.ELLIPTIC.place, z),
    inverse=(*plane.ELLIPTIC.inverse, z),
    squares=(*plane.ELLIPTIC.squares, S.One),
    staeckel=(
        (S.Zero, -plane.ELLIPTIC.staeckel[0][0], S.One),
        (S.Zero, -plane.ELLIPTIC.staeckel[1][0], -S.One),
        (S.One, S.One, S.Zero),
    ),
    potential=plane.ELLIPTIC.potential + h(z),
    geometry=("axis", "foci"),
    shape=plane.ELLIPTIC.shape,
    positive=plane.ELLIPTIC.positive,
)

"""A chart asked for by name."""

from __future__ import annotations

from collections.abc import Callable

from sympy import S, Symbol, eye

from hjsolve.charts.placement import taken
from hjsolve.charts.registry import CHARTS
from hjsolve.charts.search.decide import search
from hjsolve.charts.search.letters import Letters
from hjsolve.charts.search.planar import place_plane
from hjsolve.charts.search.plane import PlaneSystem
from hjsolve.charts.search.systems import ORIGIN, Builder
from hjsolve.charts.space import NotNatural, Space, space
from hjsolve.errors import InputError
from hjsolve.records import Chart, Hamiltonian

E1, E2, E3 = (tuple(row) for row in eye(3).tolist())
AXES = (E1, E2, E3)


def named(hamiltonian: Hamiltonian, name: str) -> Chart:
    """The chart of a family: where H separates in one, that one, else in standard position.

    In standard position the shape (half-distance of foci, ring radius, the a of
    quadrics) stays a free letter.

    Raises:
        InputError: no such family in this dimension, or H is not Cartesian.
    """
    try:
        where = space(hamiltonian)
    except NotNatural as error:
        raise InputError(
            f"{error}; a chart can be taken only from Cartesian coordinates",
            pointer="/charts",
            code="not-cartesian",
        ) from error
    families = [e.family for e in CHARTS if e.dimension == where.dimension]
    family = name.rsplit("/", 1)[-1]
    if family not in families:
        raise InputError(
            f"{name!r} is no coordinate system in {where.dimension} dimensions",
            pointer="/charts",
            expected=", ".join(families) or "a problem of two or three coordinates",
            code="unknown-chart",
        )
    for chart in search(hamiltonian).found:
        if chart.family == family:
            return chart
    return standard(where, family)


def standard(where: Space, family: str) -> Chart:
    """A family in standard position: centre or focus at the origin, axes along the axes."""
    letters = Letters(taken(where))
    size = letters("c_0", positive=True)
    if where.dimension == 2:
        return place_plane(where, _in_plane(family, size))
    build = Builder(where, letters)
    if family.endswith("cylindrical"):
        kind = {"circular": "polar"}.get(
            family.removesuffix("_cylindrical"), family.removesuffix("_cylindrical")
        )
        chart = build.cylinder(AXES, _in_plane(kind, size), ())
        assert chart is not None  # only Cartesian has no cylinder
        return chart
    a = tuple(letters(f"a_{k}") for k in (1, 2, 3))
    half = (S.Zero, S.Zero, size)
    make: dict[str, Callable[[], Chart]] = {
        "cartesian": lambda: build.cartesian(AXES),
        "spherical": lambda: build.spherical(ORIGIN, AXES),
        "parabolic": lambda: build.parabolic(ORIGIN, AXES),
        "prolate": lambda: build.prolate(half, (S.Zero, S.Zero, -size), (size,)),
        "oblate": lambda: build.oblate(ORIGIN, AXES, size, (size,)),
        "conical": lambda: build.quadric("conical", ORIGIN, AXES, a, a),
        "paraboloidal": lambda: build.quadric("paraboloidal", ORIGIN, AXES, (-size, size), (size,)),
        "ellipsoidal": lambda: build.quadric("ellipsoidal", ORIGIN, AXES, a, a),
    }
    return make[family]()


def _in_plane(family: str, size: Symbol) -> PlaneSystem:
    middle = (S.Zero, S.Zero)
    match family:
        case "cartesian":
            return PlaneSystem("cartesian", (), (S.One, S.Zero))
        case "polar":
            return PlaneSystem("polar", (middle,))
        case "parabolic":
            return PlaneSystem("parabolic", (middle,), (S.One, S.Zero))
    return PlaneSystem("elliptic", ((size, S.Zero), (-size, S.Zero)), None, (size,))

"""Charts of the plane from their exact geometry."""

from __future__ import annotations

from sympy import S

from hjsolve.charts import plane
from hjsolve.charts.exact import Point, tidy
from hjsolve.charts.placement import placed
from hjsolve.charts.search.plane import PlaneSystem, plane_angle
from hjsolve.charts.space import Space
from hjsolve.records import Chart


def place_plane(where: Space, found: PlaneSystem) -> Chart:
    """The chart of a system of the plane."""
    e = found.direction or (S.One, S.Zero)
    axes: tuple[Point, Point] = (e, (-e[1], e[0]))
    center: Point = (S.Zero, S.Zero)
    if found.family == "cartesian":
        turned = (("angle", plane_angle(e)),)
        return placed(where, "cartesian", turned, center=center, axes=axes, free=found.free)
    if found.family == "elliptic":
        return _elliptic(where, found)
    center = found.points[0]
    if found.family == "polar":
        return placed(
            where, "polar", (("center", center),), center=center, axes=axes, free=found.free
        )
    geometry = (("focus", center), ("axis_angle", plane_angle(e)))
    return placed(where, "parabolic", geometry, center=center, axes=axes, free=found.free)


def _elliptic(where: Space, found: PlaneSystem) -> Chart:
    """Half the way between the foci carries both the half-distance and the axis."""
    one, two = found.points
    center = tuple(tidy((a + b) / 2) for a, b in zip(one, two, strict=True))
    half = tuple(tidy((a - b) / 2) for a, b in zip(one, two, strict=True))
    return placed(
        where,
        "elliptic",
        (("foci", (one, two)),),
        center=center,
        axes=(half, (-half[1], half[0])),
        scale=half[0] ** 2 + half[1] ** 2,
        shape={plane.c: S.One},
        free=found.free,
    )

"""Charts of space from their exact geometry."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from itertools import pairwise

from sympy import Expr, Matrix, S, Symbol, cos, sin, sqrt

from hjsolve.charts import plane, quadrics
from hjsolve.charts.exact import Vector, root, tidy
from hjsolve.charts.placement import placed
from hjsolve.charts.search.axes import frame
from hjsolve.charts.search.letters import Letters
from hjsolve.charts.search.plane import PlaneSystem
from hjsolve.charts.space import Space
from hjsolve.records import Chart, Domain, Geometry

Triad = tuple[Vector, ...]
ORIGIN: Vector = (S.Zero, S.Zero, S.Zero)


def added(a: Sequence[Expr], b: Sequence[Expr], factor: Expr = S.One) -> Vector:
    """A + factor·b."""
    return tuple(tidy(p + factor * q) for p, q in zip(a, b, strict=True))


def scaled(a: Sequence[Expr], factor: Expr) -> Vector:
    """factor·a."""
    return tuple(tidy(factor * p) for p in a)


def cross(a: Sequence[Expr], b: Sequence[Expr]) -> Vector:
    """A × b."""
    return tuple(tidy(e) for e in Matrix(a).cross(Matrix(b)))


def cyclic(rows: Triad, k: int) -> Triad:
    """The triad turned cyclically so that row k is last."""
    return (rows[(k + 1) % 3], rows[(k + 2) % 3], rows[k])


def apart(first: Vector, second: Vector) -> bool:
    """Whether the letters of two lines are named after different coordinates."""
    one, two = ([k for k in range(3) if v[k] != 0] for v in (first, second))
    return len(one) == len(two) == 1 and one != two


@dataclass
class Builder:
    """Makes charts of one space, with free letters that clash with nothing."""

    where: Space
    letters: Letters

    # ---------------------------------------------------- free directions

    def free_axes(self) -> tuple[Triad, tuple[Symbol, ...]]:
        """A triad whose last vector is any direction, with its two angles."""
        t, p = self.letters("theta_0"), self.letters("phi_0")
        n = (sin(t) * cos(p), sin(t) * sin(p), cos(t))
        first = (cos(t) * cos(p), cos(t) * sin(p), -sin(t))
        return (first, (-sin(p), cos(p), S.Zero), n), (t, p)

    def turned(self, rows: Triad, name: str = "psi_0") -> tuple[Triad, tuple[Symbol, ...]]:
        """The triad turned about its last vector by any angle."""
        a = self.letters(name)
        first, second, n = rows
        one = tuple(cos(a) * p + sin(a) * q for p, q in zip(first, second, strict=True))
        two = tuple(cos(a) * q - sin(a) * p for p, q in zip(first, second, strict=True))
        return (one, two, n), (a,)

    def along(self, base: Vector, e: Vector, name: str = "_0") -> tuple[Vector, Symbol]:
        """(any point of a line, its letter): a coordinate where the line is along an axis."""
        places = [k for k in range(3) if e[k] != 0]
        if len(places) == 1:
            s = self.letters("xyz"[places[0]] + name)
            return tuple(s if k == places[0] else b for k, b in enumerate(base)), s
        s = self.letters("s" + name)
        return tuple(b + s * d for b, d in zip(base, e, strict=True)), s

    # ------------------------------------------------------------- charts

    def cartesian(self, rows: Triad, free: Sequence[Symbol] = ()) -> Chart:
        """Cartesian coordinates along three axes."""
        return placed(
            self.where, "cartesian", (("axes", rows),), center=ORIGIN, axes=rows, free=free
        )

    def cylinder(self, rows: Triad, found: PlaneSystem, free: Sequence[Symbol]) -> Chart | None:
        """A system of the plane across the last row, drawn out along it; None for Cartesian."""
        first, second, n = rows

        def lifted(point: Sequence[Expr]) -> Vector:
            return added(scaled(first, point[0]), scaled(second, point[1]))

        geometry: tuple[tuple[str, Geometry], ...]
        points = [lifted(p) for p in found.points]
        letters = (*free, *found.free)
        match found.family:
            case "cartesian":
                return None
            case "polar":
                geometry = (("axis", n), ("center", points[0]))
                return placed(
                    self.where,
                    "circular_cylindrical",
                    geometry,
                    center=points[0],
                    axes=rows,
                    free=letters,
                )
            case "parabolic":
                d = found.direction or (S.One, S.Zero)
                one = lifted(d)
                geometry = (("axis", n), ("focus", points[0]), ("direction", one))
                return placed(
                    self.where,
                    "parabolic_cylindrical",
                    geometry,
                    center=points[0],
                    axes=(one, lifted((-d[1], d[0])), n),
                    free=letters,
                )
        return self._elliptic_cylinder(rows, points, letters)

    def _elliptic_cylinder(
        self, rows: Triad, foci: Sequence[Vector], free: tuple[Symbol, ...]
    ) -> Chart:
        half = added(scaled(foci[0], S.Half), foci[1], -S.Half)
        size = root(sum((e**2 for e in half), S.Zero))
        e = scaled(half, 1 / size)
        return placed(
            self.where,
            "elliptic_cylindrical",
            (("axis", rows[2]), ("foci", tuple(foci))),
            center=added(scaled(foci[0], S.Half), foci[1], S.Half),
            axes=(e, cross(rows[2], e), rows[2]),
            shape={plane.c: size},
            free=free,
        )

    def spherical(self, center: Vector, rows: Triad, free: Sequence[Symbol] = ()) -> Chart:
        """Spherical coordinates with the last row as axis."""
        geometry = (("center", center), ("axis", rows[2]))
        return placed(self.where, "spherical", geometry, center=center, axes=rows, free=free)

    def parabolic(self, focus: Vector, rows: Triad, free: Sequence[Symbol] = ()) -> Chart:
        """Rotational parabolic coordinates with the last row as axis."""
        geometry = (("focus", focus), ("axis", rows[2]))
        return placed(self.where, "parabolic", geometry, center=focus, axes=rows, free=free)

    def prolate(self, one: Vector, two: Vector, free: Sequence[Symbol] = ()) -> Chart:
        """Prolate spheroidal coordinates with these foci."""
        half = added(scaled(one, S.Half), two, -S.Half)
        square = tidy(sum((e**2 for e in half), S.Zero))
        if all(e.is_number for e in half) or half[:2] == (0, 0):
            size = half[2] if half[:2] == (0, 0) else root(square)
            n = scaled(half, 1 / size)
            rows = [scaled(e, size) for e in frame(n)]
        else:
            size, flat = sqrt(square), half[0] ** 2 + half[1] ** 2
            rows = list(_beside(half, size, flat))
        return placed(
            self.where,
            "prolate",
            (("foci", (one, two)),),
            center=added(scaled(one, S.Half), two, S.Half),
            axes=rows,
            scale=square,
            shape={plane.c: S.One},
            free=free,
        )

    def oblate(
        self, center: Vector, rows: Triad, radius: Expr, free: Sequence[Symbol] = ()
    ) -> Chart:
        """Oblate spheroidal coordinates with a focal ring of this radius."""
        geometry = (("center", center), ("axis", rows[2]), ("a", radius))
        return placed(
            self.where,
            "oblate",
            geometry,
            center=center,
            axes=rows,
            shape={plane.c: radius},
            free=free,
        )

    def quadric(
        self, family: str, center: Vector, rows: Triad, a: Vector, free: Sequence[Symbol] = ()
    ) -> Chart:
        """Ellipsoidal, conical (three values a) or paraboloidal coordinates (two: b, c).

        The domains are those for ascending values; lines where their order is unknown.
        """
        name = "bc" if family == "paraboloidal" else "a"
        geometry = (("center", center), ("axes", rows), (name, a))
        letters = (quadrics.a1, quadrics.a2, quadrics.a3)
        chart = placed(
            self.where,
            family,
            geometry,
            center=center,
            axes=rows,
            shape=dict(zip(letters, a, strict=False)),
            free=free,
        )
        known = all((q - p).is_positive or {p, q} <= {*free} for p, q in pairwise(a))
        if known:
            return chart
        lines = tuple(Domain() if d.kind == "interval" else d for d in chart.domains)
        return replace(chart, domains=lines, positive=())


def _beside(half: Vector, size: Expr, flat: Expr) -> Triad:
    """Rows of length |half| across a vector that is not along the third axis, and the vector."""
    d1, d2, d3 = half
    width = sqrt(flat)
    first = (-d2 * size / width, d1 * size / width, S.Zero)
    second = (-d1 * d3 / width, -d2 * d3 / width, width)
    return first, second, half

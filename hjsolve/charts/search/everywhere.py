"""The systems of potentials so symmetric that a centre may lie anywhere."""

from __future__ import annotations

from collections.abc import Sequence

from sympy import Matrix, Symbol

from hjsolve.charts.exact import Unsure, Vector, null, tidy
from hjsolve.charts.search.axes import Axes
from hjsolve.charts.search.leaves import flat_along
from hjsolve.charts.search.plane import PlaneSystem
from hjsolve.charts.search.systems import Builder, apart
from hjsolve.charts.search.tensor import Tensor
from hjsolve.records import Chart


def everything(build: Builder) -> list[Chart]:
    """The eleven systems, anywhere: those of a constant potential."""
    letters = build.letters
    rows, angles = build.free_axes()
    turned, more = build.turned(rows)
    all_angles = (*angles, *more)
    x0, y0, z0, x1, y1, z1 = (letters(name) for name in ("x_0", "y_0", "z_0", "x_1", "y_1", "z_1"))
    place, other = (x0, y0, z0), (x1, y1, z1)
    a = tuple(letters(f"a_{k}") for k in (1, 2, 3))
    size, half = letters("a_0", positive=True), letters("c_0", positive=True)
    drawn = (
        PlaneSystem("polar", ((x0, y0),), None, (x0, y0)),
        PlaneSystem("elliptic", ((x0, y0), (x1, y1)), None, (x0, y0, x1, y1)),
    )
    cylinders = [build.cylinder(rows, system, angles) for system in drawn]
    along = PlaneSystem("parabolic", ((x0, y0),), None, (x0, y0))
    cylinders.append(build.cylinder(turned, along, all_angles))
    return [
        build.cartesian(turned, all_angles),
        *(chart for chart in cylinders if chart is not None),
        build.spherical(place, rows, (*place, *angles)),
        build.parabolic(place, rows, (*place, *angles)),
        build.prolate(place, other, (*place, *other)),
        build.oblate(place, rows, size, (*place, *angles, size)),
        build.quadric("conical", place, turned, a, (*place, *all_angles, *a)),
        build.quadric("paraboloidal", place, turned, (-half, half), (*place, *all_angles, half)),
        build.quadric("ellipsoidal", place, turned, a, (*place, *all_angles, *a)),
    ]


def slab_center(
    build: Builder, linear: Sequence[Tensor], axes: Axes
) -> tuple[Vector, tuple[Symbol, ...]]:
    """(any point of the plane across the axis on which centres lie, its letters).

    For a potential of the height over that plane alone, such as 1/z².

    Raises:
        Unsure: the tensors or the potential are not of that kind.
    """
    first, second, n = axes.rows
    if not all(flat_along(build.where, e) for e in (first, second)):
        raise Unsure("two directions of parabolic systems with a common axis")
    height = None
    for t in linear:
        w, v = t.w, Matrix(n)
        if not null([(w.T * v)[0]]):
            raise Unsure("parabolic systems askew to the axis of the potential")
        # A = −(w⊗c + c⊗w) + block gives n·A = −(c·n) w
        found = tidy(-(v.T * t.A * w)[0] / (w.T * w)[0])
        if not null(t.A * v - v * (v.T * t.A * v)[0] + found * w):
            raise Unsure("parabolic systems askew to the axis of the potential")
        if height is not None and not null([height - found]):
            raise Unsure("parabolic systems about two planes")
        height = found
    level: Vector = tuple(tidy(height * p) for p in n)
    base, s = build.along(level, first)
    second_base, t0 = build.along(base, second, "_0" if apart(first, second) else "_1")
    return second_base, (s, t0)

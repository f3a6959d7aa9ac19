"""The systems of space with a centre: α ≠ 0.

With c = −w and A′ = A − w⊗w the tensor is (y − c)⊗(y − c) + A′: spherical or
conical when A′ is a multiple of the unit matrix (the sphere then decides which),
spheroidal when two eigenvalues of A′ agree, else ellipsoidal.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from sympy import Expr, Matrix, S, Symbol, eye

from hjsolve.charts.exact import Unsure, Vector, null, root, tidy, unit
from hjsolve.charts.search.axes import (
    Axes,
    axes_of,
    double,
    eigenvalues,
    eigenvector,
    excess,
    frame,
)
from hjsolve.charts.search.everywhere import slab_center
from hjsolve.charts.search.forms import common_focus, focus_of, orthonormal
from hjsolve.charts.search.leaves import flat_along, sphere_leaf
from hjsolve.charts.search.systems import Builder, Triad, added, apart, cross, cyclic, scaled
from hjsolve.charts.search.tensor import Tensor
from hjsolve.records import Chart

Free = tuple[Symbol, ...]


@dataclass
class CentralReader:
    """Adds what it reads to ``found``; raises Unsure for what it does not read."""

    build: Builder
    found: list[Chart]

    def read(self, base: Tensor, linear: Sequence[Tensor], axes: Axes) -> None:
        """Read all tensors base + span(linear, constant ones of this shape)."""
        center = tuple(tidy(-p) for p in base.w)
        A = (base.A - base.w * base.w.T).applyfunc(tidy)
        if not linear:
            self._concentric(center, A, axes)
        elif axes.kind == "none":
            self._one_focus(base, linear)
        elif axes.kind == "axis" and len(linear) == 1:
            self._on_a_line(center, A, linear[0], axes.rows[0])
        elif axes.kind == "triad" and len(linear) == 1:
            self._sliding(center, A, linear[0], axes)
        elif axes.kind == "axial" and len(linear) == 2:
            self._slab(center, A, linear, axes)
        else:
            raise Unsure(f"a family of {len(linear)} directions and shape {axes.kind}")

    # -------------------------------------------------------- one centre

    def _concentric(self, center: Vector, A: Matrix, axes: Axes) -> None:
        if axes.kind == "none":
            self._single(center, A)
            return
        if axes.kind == "single":
            raise Unsure("one constant tensor with distinct eigenvalues")
        if not _within(A, axes):
            raise Unsure("ellipsoidal systems with one free focal distance")
        self.spherical(center)
        size = self.build.letters("a_0", positive=True)
        match axes.kind:
            case "axis":
                self._spheroids(center, frame(axes.rows[0]), size, ())
            case "triad":
                for k in range(3):
                    self._spheroids(center, cyclic(axes.rows, k), size, ())
                self._ellipsoids(center, axes.rows, ())
            case "axial":
                self._spheroids(center, axes.rows, size, ())
                rows, free = self.build.turned(axes.rows, "theta_0")
                self._spheroids(center, cyclic(rows, 0), size, free)
                self._ellipsoids(center, rows, free)
            case "all":
                rows, free = self.build.free_axes()
                self._spheroids(center, rows, size, free)
                turned, more = self.build.turned(rows)
                self._ellipsoids(center, turned, (*free, *more))

    def _single(self, center: Vector, A: Matrix) -> None:
        plain = (A - A.trace() / 3 * eye(3)).applyfunc(tidy)
        if null(plain):
            self.spherical(center)
            return
        n = double(A)
        if n is None:
            values = eigenvalues(-A)
            rows = [eigenvector(-A, v) for v in values]
            rows[2] = cross(rows[0], rows[1])
            self.found.append(self.build.quadric("ellipsoidal", center, tuple(rows), tuple(values)))
            return
        nu = excess(A, n)
        if nu.is_negative:
            half = scaled(n, root(-nu))
            self.found.append(self.build.prolate(added(center, half), added(center, half, -S.One)))
        elif nu.is_positive:
            self.found.append(self.build.oblate(center, frame(n), root(nu)))
        else:
            raise Unsure(f"the sign of {nu}, prolate or oblate, depends on the parameters")

    def _spheroids(self, center: Vector, rows: Triad, size: Symbol, free: Free) -> None:
        """Prolate and oblate systems about the last row, any focal distance."""
        letters = (*free, size)
        half = tuple(size * p for p in rows[2])
        self.found.append(
            self.build.prolate(added(center, half), added(center, half, -S.One), letters)
        )
        self.found.append(self.build.oblate(center, rows, size, letters))

    def _ellipsoids(self, center: Vector, rows: Triad, free: Free) -> None:
        a = self._three()
        self.found.append(self.build.quadric("ellipsoidal", center, rows, a, (*free, *a)))

    def _three(self) -> tuple[Symbol, ...]:
        return tuple(self.build.letters(f"a_{k}") for k in (1, 2, 3))

    # --------------------------------------------------------- one focus

    def _one_focus(self, base: Tensor, linear: Sequence[Tensor]) -> None:
        """All tensors are symmetric products (y − f)⊗(y − f′) with one f."""
        f = Matrix(common_focus(linear))
        w = (base.w + f).applyfunc(tidy)
        A = base.A + base.w * f.T + f * base.w.T + f * f.T
        if not null(A - A.trace() / 3 * eye(3)):
            raise Unsure("tensors without a common focus")
        focus = tuple(f)
        basis = orthonormal([t.w for t in linear])
        across = w
        for e in basis:
            across = across - Matrix(e) * (across.T * Matrix(e))[0]
        if null(across):
            self.spherical(focus)
        if len(basis) == 3:
            free = tuple(self.build.letters(f"{q}_0") for q in "xyz")
            self.found.append(self.build.prolate(focus, free, free))
            return
        other: Vector = added(focus, tuple(across), 2 * S.One)
        letters: Free = ()
        for k, e in enumerate(basis):
            other, s = self.build.along(other, e, "_0" if apart(basis[0], e) else f"_{k}")
            letters = (*letters, s)
        self.found.append(self.build.prolate(focus, other, letters))

    def _on_a_line(self, center: Vector, A: Matrix, linear: Tensor, n: Vector) -> None:
        """Everything is symmetric about one line and may slide along it."""
        e = unit(tuple(linear.w))
        on = focus_of(linear)
        between = added(on, center, -S.One)
        if not null(cross(e, n)) or not null(cross(e, between)) or not _within(A, _axis(n)):
            raise Unsure("systems that are not symmetric about a line")
        if not flat_along(self.build.where, e):
            raise Unsure("centres on a line along which the potential changes")
        point, s = self.build.along(center, e)
        self.spherical(point, (s,), center)
        other, t = self.build.along(center, e, "_1")
        self.found.append(self.build.prolate(point, other, (s, t)))
        size = self.build.letters("a_0", positive=True)
        self.found.append(self.build.oblate(point, frame(e), size, (s, size)))

    def _sliding(self, center: Vector, A: Matrix, linear: Tensor, axes: Axes) -> None:
        """Everything concentric along three axes, the centre anywhere on one of them."""
        e = unit(tuple(linear.w))
        between = added(focus_of(linear, axes.rows), center, -S.One)
        if not any(null(cross(e, n)) for n in axes.rows) or not null(cross(e, between)):
            raise Unsure("centres on a line askew to the axes of the potential")
        if not flat_along(self.build.where, e) or not _within(A, axes):
            raise Unsure("centres on a line along which the potential changes")
        point, s = self.build.along(center, e)
        self.spherical(point, (s,), center)
        size = self.build.letters("a_0", positive=True)
        for k in range(3):
            self._spheroids(point, cyclic(axes.rows, k), size, (s,))
        self._ellipsoids(point, axes.rows, (s,))

    def _slab(self, center: Vector, A: Matrix, linear: Sequence[Tensor], axes: Axes) -> None:
        """A potential of the height alone: everything concentric, anywhere in one plane."""
        place, free = slab_center(self.build, linear, axes)
        offset = (Matrix(place) - Matrix(center)).T * Matrix(axes.rows[2])
        if not null(offset) or not _within(A, axes):
            raise Unsure("centres off the plane of the parabolic systems")
        self.spherical(place, free, center)
        size = self.build.letters("a_0", positive=True)
        self._spheroids(place, axes.rows, size, free)
        rows, angle = self.build.turned(axes.rows, "theta_0")
        self._spheroids(place, cyclic(rows, 0), size, (*free, *angle))
        self._ellipsoids(place, rows, (*free, *angle))

    # --------------------------------------------------------- the sphere

    def spherical(self, center: Vector, free: Free = (), like: Vector | None = None) -> None:
        """Spherical and conical systems about a point, as the sphere's own tensors say.

        ``like`` is a point without letters about which the potential looks the same.
        """
        basis = sphere_leaf(self.build.where, like or center)
        M = self.build.where.map
        axes = axes_of([(M * _symmetric(v) * M.T).applyfunc(tidy) for v in basis])
        match axes.kind:
            case "axis":
                self.found.append(self.build.spherical(center, frame(axes.rows[0]), free))
            case "single":
                rows = list(axes.rows)
                rows[2] = cross(rows[0], rows[1])
                self.found.append(
                    self.build.quadric("conical", center, tuple(rows), axes.values, free)
                )
            case "triad":
                for k in range(3):
                    self.found.append(self.build.spherical(center, cyclic(axes.rows, k), free))
                self._cones(center, axes.rows, free)
            case "axial":
                self.found.append(self.build.spherical(center, axes.rows, free))
                rows_, more = self.build.turned(axes.rows, "theta_0")
                self.found.append(self.build.spherical(center, cyclic(rows_, 0), (*free, *more)))
                self._cones(center, rows_, (*free, *more))
            case "all":
                triad, more = self.build.free_axes()
                self.found.append(self.build.spherical(center, triad, (*free, *more)))
                turned, angle = self.build.turned(triad)
                self._cones(center, turned, (*free, *more, *angle))

    def _cones(self, center: Vector, rows: Triad, free: Free) -> None:
        a = self._three()
        self.found.append(self.build.quadric("conical", center, rows, a, (*free, *a)))


def _symmetric(v: Sequence[Expr]) -> Matrix:
    """The matrix of (B_11, B_12, B_13, B_22, B_23), with B_33 = 0."""
    return Matrix([[v[0], v[1], v[2]], [v[1], v[3], v[4]], [v[2], v[4], S.Zero]])


def _axis(n: Vector) -> Axes:
    return Axes("axis", (n,))


def _within(A: Matrix, axes: Axes) -> bool:
    """Whether A is one of the matrices of a shape, up to the unit matrix."""
    match axes.kind:
        case "all":
            return True
        case "axis":
            basis = Matrix(frame(axes.rows[0]))
            inside = basis * A * basis.T
            return null((inside[0, 1], inside[0, 2], inside[1, 2], inside[0, 0] - inside[1, 1]))
    basis = Matrix(axes.rows)
    inside = basis * A * basis.T
    across = (inside[0, 2], inside[1, 2])
    return null(across if axes.kind == "axial" else (*across, inside[0, 1]))

"""Every system of space that a space of concircular tensors stands for.

L = A + w⊗y + y⊗w + α y⊗y falls into normal forms by what of α, w, A is zero:
α = w = 0 Cartesian and cylinders, α = 0 parabolic and paraboloidal, α = 1 the
ones with a centre.  The shapes of solution spaces met with are read in closed
form; any other is reported in ``left``, and the list is then not complete.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field

from sympy import Matrix, S, Symbol

from hjsolve.charts.exact import Unsure, Vector, echelon, null, tidy, unit
from hjsolve.charts.search.axes import Axes, axes_of, frame
from hjsolve.charts.search.central import CentralReader
from hjsolve.charts.search.everywhere import everything, slab_center
from hjsolve.charts.search.forms import block_of, common_focus, orthonormal, parabolic_form
from hjsolve.charts.search.leaves import flat_along, plane_leaf, uniform_force
from hjsolve.charts.search.plane import PlaneReader, bisector
from hjsolve.charts.search.systems import Builder, Triad, added, apart, cross, cyclic, scaled
from hjsolve.charts.search.tensor import Tensor, rest, tensor_of
from hjsolve.records import Chart

Free = tuple[Symbol, ...]

ORDER = (8, 5, 6, 7, 0, 1, 2, 3, 4)
"""α first, then w, then A: what is left of a row tells which normal form it is."""


@dataclass
class SolidReader:
    """Reads a solution space of three dimensions; ``left`` says what was not read."""

    build: Builder
    found: list[Chart] = field(default_factory=list)
    left: list[str] = field(default_factory=list)

    def read(self, tensors: Sequence[Tensor]) -> None:
        """Read the space spanned by the tensors."""
        try:
            rows = echelon([rest(t) for t in tensors], ORDER)
            base = [tensor_of(v) for k, v in rows if k == 8]
            linear = [tensor_of(v) for k, v in rows if k in (5, 6, 7)]
            constant = axes_of([tensor_of(v).A for k, v in rows if k < 5])
        except Unsure as error:
            self.left.append(str(error))
            return
        if len(linear) == 3 and constant.kind == "all" and base:
            self.found.extend(everything(self.build))
            return
        central = CentralReader(self.build, self.found)
        self._try("cylinders", lambda: self._straight(constant))
        if linear:
            self._try("parabolic systems", lambda: self._parabolic(linear, constant))
        if base:
            self._try("systems with a centre", lambda: central.read(base[0], linear, constant))

    def _try(self, what: str, step: Callable[[], None]) -> None:
        try:
            step()
        except Unsure as error:
            self.left.append(f"{what}: {error}")

    # ------------------------------------------- Cartesian and cylinders

    def _straight(self, axes: Axes) -> None:
        match axes.kind:
            case "axis":
                self._cylinders(frame(axes.rows[0]), ())
            case "single":
                raise Unsure("one constant tensor with distinct eigenvalues")
            case "triad":
                self.found.append(self.build.cartesian(axes.rows))
                for k in range(3):
                    self._cylinders(cyclic(axes.rows, k), ())
            case "axial":
                rows, free = self.build.turned(axes.rows, "theta_0")
                self.found.append(self.build.cartesian(rows, free))
                self._cylinders(axes.rows, ())
                self._cylinders(cyclic(rows, 0), free)
                self._along_the_force(axes.rows[:2])
            case "all":
                rows, free = self.build.free_axes()
                turned, more = self.build.turned(rows)
                self.found.append(self.build.cartesian(turned, (*free, *more)))
                self._cylinders(rows, free)
                self._along_the_force(axes.rows)

    def _along_the_force(self, rows: Sequence[Vector]) -> None:
        """The one direction that differs from the others where the potential is linear.

        Along ``rows`` it is k/2·s² + l·s: with k ≠ 0 or l = 0 all directions are
        alike, else the potential does not change across l.
        """
        force = uniform_force(self.build.where, rows)
        if force is not None:
            self._cylinders(frame(unit(force)), ())

    def _cylinders(self, rows: Triad, free: Free) -> None:
        """The systems of the plane across the last row, drawn out along it."""
        basis = plane_leaf(self.build.where, rows)
        reader = PlaneReader(self.build.letters.with_names(free))
        reader.read(basis)
        for system in reader.found:
            chart = self.build.cylinder(rows, system, free)
            if chart is not None:
                self.found.append(chart)
        self.left.extend(reader.left)

    # --------------------------------------------------------- parabolic

    def _parabolic(self, linear: Sequence[Tensor], axes: Axes) -> None:
        if len(linear) == 2 and axes.kind == "axial":
            self._slab(linear, axes)
            return
        if len(linear) > 1:
            self._common_focus(linear, axes)
            return
        e, center, across = parabolic_form(linear[0])
        match axes.kind:
            case "none":
                self._sheets(e, center, across)
            case "axis":
                self._beside_axis(e, center, across, axes.rows[0])
            case "triad":
                k = next((k for k, n in enumerate(axes.rows) if null(cross(e, n))), None)
                if k is None:
                    raise Unsure("an axis of paraboloids that is not one of the potential's")
                first, second, _ = cyclic(axes.rows, k)
                self._sliding_sheets(e, center, across, (first, second, e), ())
            case "axial":
                if not null(cross(e, axes.rows[2])):
                    self._over_a_wall(e, center, across, axes.rows[2])
                    return
                (first, second, _), free = self.build.turned(axes.rows, "theta_0")
                self._sliding_sheets(e, center, across, (first, second, e), free)
            case _:
                self._anywhere(e)

    def _anywhere(self, e: Vector) -> None:
        """A linear potential: paraboloids of any centre about the force."""
        center = tuple(self.build.letters(f"{q}_0") for q in "xyz")
        self.found.append(self.build.parabolic(center, frame(e), center))
        rows, free = self.build.turned(frame(e), "theta_0")
        h = self.build.letters("c_0", positive=True)
        self.found.append(
            self.build.quadric("paraboloidal", center, rows, (-h, h), (*center, *free, h))
        )

    def _slab(self, linear: Sequence[Tensor], axes: Axes) -> None:
        """A potential of the height alone, homogeneous: any centre in one plane."""
        center, free = slab_center(self.build, linear, axes)
        (first, second, n), angle = self.build.turned(axes.rows, "theta_0")
        letters = (*free, *angle)
        self.found.append(self.build.parabolic(center, (second, n, first), letters))
        h = self.build.letters("c_0", positive=True)
        for one, two in ((second, n), (n, scaled(second, -S.One))):
            self.found.append(
                self.build.quadric(
                    "paraboloidal", center, (one, two, first), (-h, h), (*letters, h)
                )
            )

    def _sheets(self, e: Vector, center: Vector, across: Matrix, free: Free = ()) -> None:
        """One normal form: rotational, or paraboloidal with its axes."""
        first, second, _ = rows = frame(e)
        block = block_of(across, first, second)
        middle = (block[0, 0] + block[1, 1]) / 2
        center = added(center, e, middle / 2)
        parts = (tidy(block[0, 0] - block[1, 1]), tidy(2 * block[0, 1]))
        if null(parts):
            self.found.append(self.build.parabolic(center, rows, free))
            return
        d = bisector(parts)
        one = added(scaled(first, d[0]), scaled(second, d[1]))
        two = cross(e, one)
        v = Matrix([d])
        value = tidy((v * block * v.T)[0] - middle)
        if value.is_positive:
            one, two, value = two, scaled(one, -S.One), -value
        self.found.append(
            self.build.quadric("paraboloidal", center, (one, two, e), (value, -value), free)
        )

    def _beside_axis(self, e: Vector, center: Vector, across: Matrix, n: Vector) -> None:
        """One more constant tensor n⊗n: the centre slides along n = e, or (b, c) is free."""
        if null(cross(e, n)):
            center, s = self.build.along(center, e)
            self._sheets(e, center, across, (s,))
            return
        if not null([(Matrix(n).T * Matrix(e))[0]]):
            raise Unsure("paraboloids askew to an axis of the potential")
        block = block_of(across, n, cross(e, n))
        if not null([block[0, 1]]):
            raise Unsure("paraboloids askew to an axis of the potential")
        # A″ = diag(t, b) with t free: in the gauge b = 0 the centre is the focus of t = 0
        k = cross(e, n)
        center = added(center, e, block[1, 1] / 2)
        self.found.append(self.build.parabolic(center, (n, k, e)))
        h = self.build.letters("c_0", positive=True)
        for rows, a in (((n, k, e), (-h, S.Zero)), ((k, scaled(n, -S.One), e), (S.Zero, h))):
            self.found.append(self.build.quadric("paraboloidal", center, rows, a, (h,)))

    def _sliding_sheets(
        self, e: Vector, center: Vector, across: Matrix, rows: Triad, free: Free
    ) -> None:
        """Any eigenvalues b, c along fixed axes (or any axes), the centre anywhere on a line."""
        block = block_of(across, rows[0], rows[1])
        turning = bool(free)
        if not null([block[0, 1], *([block[0, 0] - block[1, 1]] if turning else [])]):
            raise Unsure("paraboloids askew to the axes of the potential")
        center, s = self.build.along(center, e)
        letters = (*free, s)
        self.found.append(self.build.parabolic(center, frame(e) if turning else rows, (s,)))
        h = self.build.letters("c_0", positive=True)
        swapped = (rows[1], scaled(rows[0], -S.One), e)
        for chosen in (rows,) if turning else (rows, swapped):
            self.found.append(
                self.build.quadric("paraboloidal", center, chosen, (-h, h), (*letters, h))
            )

    def _over_a_wall(self, e: Vector, center: Vector, across: Matrix, n: Vector) -> None:
        """A uniform force along e and a function of the height n·y: centres anywhere in a plane."""
        k = cross(n, e)
        block = block_of(across, n, k)
        if not null([(Matrix(n).T * Matrix(e))[0], block[0, 1]]):
            raise Unsure("paraboloids askew to the axis of the potential")
        if not flat_along(self.build.where, k) or uniform_force(self.build.where, (e,)) is None:
            raise Unsure("paraboloids across the axis of the potential")
        point, s = self.build.along(center, e)
        point, t = self.build.along(point, k, "_0" if apart(e, k) else "_1")
        self.found.append(self.build.parabolic(point, (n, k, e), (s, t)))
        h = self.build.letters("c_0", positive=True)
        for rows in ((n, k, e), (k, scaled(n, -S.One), e)):
            self.found.append(self.build.quadric("paraboloidal", point, rows, (-h, h), (s, t, h)))

    def _common_focus(self, linear: Sequence[Tensor], axes: Axes) -> None:
        """Rotational parabolic systems about one focus, the axis turning freely."""
        if axes.kind != "none":
            raise Unsure("parabolic systems of several axes with constant tensors")
        focus = common_focus(linear)
        if len(linear) == 3:
            rows, free = self.build.free_axes()
        else:
            one, two = orthonormal([t.w for t in linear])
            base, free = self.build.turned((one, two, cross(one, two)), "theta_0")
            rows = (base[1], base[2], base[0])
        self.found.append(self.build.parabolic(focus, rows, free))

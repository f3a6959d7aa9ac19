"""Every system of the plane that a space of concircular tensors stands for.

With A_c = A_11 − A_22 + 2i A_12 and w_c = w_1 + i w_2 the foci are the roots of
α z² + 2 w_c z + A_c: two roots elliptic, a double root polar, α = 0 parabolic
with its axis along w and its focus at −A_c/(2 w_c), α = w = 0 Cartesian at the
angle ½ arg A_c.  A space of several dimensions holds a family of systems; the
families met with are read in closed form, any other is reported, not guessed.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field
from typing import NamedTuple

from sympy import Expr, S, Symbol, cos, sin

from hjsolve.charts.exact import (
    Point,
    Unsure,
    Vector,
    angle,
    complex_root,
    echelon,
    null,
    over,
    parallel,
    plus,
    tidy,
    times,
    unit,
)
from hjsolve.charts.search.letters import Letters

ORIGIN: Point = (S.Zero, S.Zero)
ALPHA, W1, W2, A, B = 4, 2, 3, 0, 1


class Quadratic(NamedTuple):
    """α z² + 2 w z + a, with α real and w, a complex."""

    alpha: Expr
    w: Point
    a: Point


@dataclass(frozen=True, slots=True)
class PlaneSystem:
    """A system of the plane by its exact geometry.

    ``points`` is () for Cartesian, (centre), (focus) or (focus, focus);
    ``direction`` the unit vector of the first axis where it has one.  ``free``
    are the letters that may take any value.
    """

    family: str
    points: tuple[Point, ...] = ()
    direction: Point | None = None
    free: tuple[Symbol, ...] = ()


@dataclass
class PlaneReader:
    """Reads a solution space; ``left`` says which families were not read."""

    letters: Letters
    found: list[PlaneSystem] = field(default_factory=list)
    left: list[str] = field(default_factory=list)

    def read(self, basis: Sequence[Vector]) -> None:
        """Read a space spanned by rows (A_11 − A_22, 2A_12, w_1, w_2, α)."""
        rows = echelon(basis, (ALPHA, W1, W2, A, B))
        base = [_quadratic(v) for k, v in rows if k == ALPHA]
        linear = [_quadratic(v) for k, v in rows if k in (W1, W2)]
        constant = [_quadratic(v).a for k, v in rows if k in (A, B)]
        self._try("Cartesian systems", lambda: self._cartesian(constant))
        self._try("parabolic systems", lambda: self._parabolic(linear, constant))
        if base:
            self._try(
                "polar and elliptic systems", lambda: self._central(base[0], linear, constant)
            )

    def _try(self, what: str, step: Callable[[], None]) -> None:
        try:
            step()
        except Unsure as error:
            self.left.append(f"{what}: {error}")

    # ----------------------------------------------------------- Cartesian

    def _cartesian(self, constant: list[Point]) -> None:
        if len(constant) == 2:
            turn = self.letters("theta_0")
            self.found.append(PlaneSystem("cartesian", (), (cos(turn), sin(turn)), (turn,)))
        elif constant:
            self.found.append(PlaneSystem("cartesian", (), bisector(constant[0])))

    # ----------------------------------------------------------- parabolic

    def _parabolic(self, linear: list[Quadratic], constant: list[Point]) -> None:
        if not linear:
            return
        free: tuple[Symbol, ...] = ()
        if len(linear) == 1:
            w, a = linear[0].w, linear[0].a
        else:
            turn = self.letters("theta_0")
            one, two = linear
            w = (cos(turn), sin(turn))
            a = (
                tidy(w[0] * one.a[0] + w[1] * two.a[0]),
                tidy(w[0] * one.a[1] + w[1] * two.a[1]),
            )
            free = (turn,)
        focus = over(a, (-2 * w[0], -2 * w[1]))
        along = w if free else _vector(unit(w))
        if len(constant) == 1:
            step = _vector(unit(over(constant[0], w)))
            s, focus = self._line(focus, step)
            free = (*free, s)
        elif len(constant) == 2:
            s, t = self.letters("x_0"), self.letters("y_0")
            focus, free = (s, t), (*free, s, t)
        self.found.append(PlaneSystem("parabolic", (focus,), along, free))

    def _line(self, base: Point, step: Point) -> tuple[Symbol, Point]:
        """(letter, point of the line): the coordinate itself where the line is along an axis."""
        if step[1] == 0:
            s = self.letters("x_0")
            return s, (s, base[1])
        if step[0] == 0:
            s = self.letters("y_0")
            return s, (base[0], s)
        s = self.letters("s_0")
        return s, (base[0] + s * step[0], base[1] + s * step[1])

    # ---------------------------------------------------- polar, elliptic

    def _central(self, base: Quadratic, linear: list[Quadratic], constant: list[Point]) -> None:
        match len(linear), len(constant):
            case 0, 0:
                self._single(base)
            case 0, _:
                self._concentric(base, constant)
            case ((1 | 2), 0):
                self._one_focus(base, linear)
            case 1, 1:
                self._on_a_line(base, linear[0], constant[0])
            case 2, 2:
                x0, y0, x1, y1 = (self.letters(name) for name in ("x_0", "y_0", "x_1", "y_1"))
                self.found.append(PlaneSystem("polar", ((x0, y0),), None, (x0, y0)))
                self.found.append(
                    PlaneSystem("elliptic", ((x0, y0), (x1, y1)), None, (x0, y0, x1, y1))
                )
            case shape:
                self.left.append(f"polar and elliptic systems of the family {shape}")

    def _single(self, q: Quadratic) -> None:
        center = plus(ORIGIN, q.w, -S.One)
        square = plus(times(q.w, q.w), q.a, -S.One)
        if null(square):
            self.found.append(PlaneSystem("polar", (center,)))
        else:
            half = complex_root(square)
            self.found.append(
                PlaneSystem("elliptic", (plus(center, half), plus(center, half, -S.One)))
            )

    def _concentric(self, q: Quadratic, constant: list[Point]) -> None:
        """One centre; the square of the half-distance of the foci runs along a line or anywhere."""
        center = plus(ORIGIN, q.w, -S.One)
        square = plus(times(q.w, q.w), q.a, -S.One)
        if len(constant) == 2:
            s, t = self.letters("x_0"), self.letters("y_0")
            self.found.append(PlaneSystem("polar", (center,)))
            foci = (plus(center, (s, t)), plus(center, (s, t), -S.One))
            self.found.append(PlaneSystem("elliptic", foci, None, (s, t)))
            return
        if not parallel(square, constant[0]):
            self.left.append("elliptic systems whose foci run on a hyperbola")
            return
        self.found.append(PlaneSystem("polar", (center,)))
        s = self.letters("c_0", positive=True)
        first = bisector(constant[0])
        for e in (first, (-first[1], first[0])):
            foci = (plus(center, e, s), plus(center, e, -s))
            self.found.append(PlaneSystem("elliptic", foci, None, (s,)))

    def _one_focus(self, base: Quadratic, linear: list[Quadratic]) -> None:
        """All quadratics share one root: one focus fixed, the other on a line or anywhere."""
        roots = [over(q.a, (-2 * q.w[0], -2 * q.w[1])) for q in linear]
        fixed = roots[0]
        value = plus(plus(times(fixed, fixed), times(base.w, fixed), 2 * S.One), base.a)
        if not null(value) or not all(null(plus(r, fixed, -S.One)) for r in roots):
            self.left.append("elliptic systems without a common focus")
            return
        if len(linear) == 2:
            x0, y0 = self.letters("x_0"), self.letters("y_0")
            self.found.append(PlaneSystem("polar", (fixed,)))
            self.found.append(PlaneSystem("elliptic", (fixed, (x0, y0)), None, (x0, y0)))
            return
        other = plus(plus(ORIGIN, base.w, -2 * S.One), fixed, -S.One)
        step = _vector(unit(linear[0].w))
        if parallel(plus(other, fixed, -S.One), step):
            self.found.append(PlaneSystem("polar", (fixed,)))
            other = fixed
        s, second = self._line(other, step)
        self.found.append(PlaneSystem("elliptic", (fixed, second), None, (s,)))

    def _on_a_line(self, base: Quadratic, linear: Quadratic, constant: Point) -> None:
        """Real quadratics along a line: both foci on it, or symmetric to it."""
        e = _vector(unit(linear.w))
        turn = times(e, e)
        start = plus(ORIGIN, base.w, -S.One)
        shifted = plus(linear.a, times(linear.w, start), 2 * S.One)
        square = plus(base.a, times(base.w, base.w), -S.One)
        if not all(parallel(p, turn) for p in (constant, shifted, square)):
            self.left.append("elliptic systems that are not symmetric to a line")
            return
        s, on = self._line(start, e)
        self.found.append(PlaneSystem("polar", (on,), None, (s,)))
        other = self.letters(s.name.replace("_0", "_1"))
        self.found.append(PlaneSystem("elliptic", (on, _put(on, s, other)), None, (s, other)))
        half = self.letters("c_0", positive=True)
        across = (-e[1], e[0])
        self.found.append(
            PlaneSystem(
                "elliptic", (plus(on, across, half), plus(on, across, -half)), None, (s, half)
            )
        )


def bisector(a: Point) -> Point:
    """The unit vector along √a: the axis of a symmetric matrix with this A_c."""
    if a[1] == 0:
        return (S.One, S.Zero)
    # either sign of a will do: it turns the axes by a right angle
    return _vector(unit(complex_root(_vector(unit(a)))))


def plane_angle(direction: Point) -> Expr:
    """The angle of a unit vector to the first axis."""
    if isinstance(direction[0], cos):
        return direction[0].args[0]
    return angle(direction)


def _quadratic(v: Vector) -> Quadratic:
    return Quadratic(v[ALPHA], (v[W1], v[W2]), (v[A], v[B]))


def _vector(v: Vector) -> Point:
    return (v[0], v[1])


def _put(point: Point, old: Symbol, new: Symbol) -> Point:
    return (point[0].xreplace({old: new}), point[1].xreplace({old: new}))

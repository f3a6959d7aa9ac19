"""Integrals over a whole cycle of one variable, in numbers alone.

Where w(q) has a simple zero at both ends of an interval on which w > 0, the
variable runs to and fro between them (at a simple pole it turns too, with
infinite speed); where w > 0 all the way round a circle it goes round.  The ends
are enclosed in balls, the integrals are double-exponential sums (Takahasi &
Mori, Publ. RIMS 9 (1974) 721; from memory) or, round the circle, sums over equal
steps.  No antiderivative is used.  The error is an estimate from two step sizes.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any, Literal

from flint import arb
from sympy import Expr, Symbol
from sympy.core.relational import Relational

from hjsolve.algebra.balls import BallWalk, Imprecise, OutsideDomain, exact
from hjsolve.algebra.graph import Graph
from hjsolve.records import Domain

BITS = 448
"""Working precision: next to an end w is the difference of numbers of size 1."""

MARCH, HALVINGS = 48, 60
"""Steps after which no end is found (four times as many round a circle), and halvings of a
bracket."""

AT = 2.0**-40
"""A share of the way to the end of the domain at which that end has been reached."""

NEWTON = 14
"""Steps of Newton's method; each doubles the digits."""

STRAIGHT = 1 / 16
"""How far w w″/w′² may be from 0 (next to a simple zero) or 2 (next to a simple pole)."""

TINY = arb(2) ** -64
"""What is small beside coordinates of size 1."""

LONG = 1.2
"""A step in units of the distance at which w would vanish."""

TURN_STEPS = 24
"""Least number of steps in which a circle is searched."""

LAST = 4.75
"""Where the double-exponential sum ends: exp(−π sinh) is 1e-79 there."""

LEVELS = 6
"""Step sizes; the last one takes some twelve hundred values."""

DIGITS = 26
"""Digits that two step sizes must promise."""


Point = Mapping[Symbol, Any]
"""Rational numbers, or functions without arguments that give a ball."""


def constant(ball: Any) -> Callable[[], Any]:
    """The ball as a coordinate of a point."""
    return lambda: ball


class Conditions:
    """Inequalities at points."""

    def __init__(self, valid: Sequence[Relational]) -> None:
        self._graph = Graph([r.gts - r.lts for r in valid])
        self._strict = [not r.rel_op.endswith("=") for r in valid]

    def hold(self, point: Point) -> list[bool]:
        """Whether balls confirm each at the point."""
        try:
            sides = [jet.value for jet in BallWalk(self._graph, point, {}).run()]
        except (Imprecise, OutsideDomain):
            return [False] * len(self._strict)
        return [
            bool(side > 0) if strict else bool(side >= 0)
            for side, strict in zip(sides, self._strict, strict=True)
        ]


class NoCycle(Exception):
    """The variable has no cycle here, or its ends are not found."""


@dataclass(frozen=True)
class Path:
    """Where a cycle runs: between two zeros, or once round from ``lower``."""

    kind: Literal["libration", "rotation"]
    lower: Any
    upper: Any


@dataclass(frozen=True)
class Mean:
    """(1/π)∫ between the ends, or (1/2π)∫ round the circle; ``size`` is that of |f|."""

    value: Any
    size: Any
    error: float


class Walker:
    """w(q) with two derivatives at one point of the other letters."""

    def __init__(self, graph: Graph, point: Point, q: Symbol) -> None:
        self._graph, self._point, self._q = graph, point, q

    def at(self, q: Any) -> tuple[Any, Any, Any] | None:
        """(w, w′, w″), None where w is not real."""
        here = {**self._point, self._q: constant(q)}
        walk = BallWalk(self._graph, here, {}, {self._q: 0}, [(0, 0)])
        try:
            (jet,) = walk.run()
        except (OutsideDomain, Imprecise):
            return None
        return jet.value, jet.first.get(0, arb(0)), jet.second.get((0, 0), arb(0))


def path(graph: Graph, q: Symbol, point: Point, domain: Domain) -> Path:
    """The cycle through a point at which w > 0; raises NoCycle.

    ``graph`` has w as its only root.
    """
    walker = Walker(graph, point, q)
    start = exact(point[q])
    here = walker.at(start)
    if here is None or not here[0] > 0:
        raise NoCycle
    ends = []
    for direction in (1, -1):
        end = _end(walker, start, direction, domain, point)
        if end is None:
            if domain.kind != "angle":
                raise NoCycle
            return Path("rotation", arb(0), 2 * arb.pi())
        ends.append(end)
    return Path("libration", ends[1], ends[0])


def _end(walker: Walker, start: Any, direction: int, domain: Domain, point: Point) -> Any | None:
    """The first zero on one side, None when there is none on a whole turn; raises NoCycle."""
    barrier = None
    limit = domain.upper if direction > 0 else domain.lower
    if domain.kind == "angle":
        barrier = start + direction * 2 * arb.pi()
    elif limit.is_finite:
        barrier = _number(limit, point)
    inside = start
    reach = (abs(start) + 1) / 8
    for step in range(MARCH * (1 if domain.kind != "angle" else 4)):
        seen = walker.at(inside)
        if seen is None:
            raise NoCycle
        stride = _stride(*seen)
        if domain.kind == "angle":
            stride = min(stride, float(2 * arb.pi() / TURN_STEPS))
        elif stride == float("inf"):
            stride = float(reach)
        stride = min(stride, 4 * float(abs(inside)) + float(reach) * 2.0**step)
        outside = inside + direction * arb(stride)
        if barrier is not None and not direction * (barrier - outside) > 0:
            if domain.kind == "angle":
                return None
            if abs(barrier - inside) < AT * abs(barrier - start):
                return _pole(walker, inside, barrier)
            outside = (inside + barrier) / 2
        beyond = walker.at(outside)
        if beyond is None or not beyond[0] > 0:
            return _turn(walker, inside, outside)
        inside = outside.mid()
    raise NoCycle


def _stride(w: Any, slope: Any, curvature: Any) -> float:
    """A little more than the distance to the zero of the parabola through here."""
    first, second = abs(float(slope.mid())), abs(float(curvature.mid()))
    value = float(w.mid())
    lengths = [value / first if first else float("inf")]
    lengths.append((2 * value / second) ** 0.5 if second else float("inf"))
    return LONG * min(lengths)


def _number(end: Expr, point: Point) -> Any:
    return BallWalk(Graph([end]), point, {}).run()[0].value


def _turn(walker: Walker, inside: Any, outside: Any) -> Any:
    """The simple zero or pole in a bracket, as a ball; raises NoCycle."""
    for _ in range(HALVINGS):
        middle = ((inside + outside) / 2).mid()
        seen = walker.at(middle)
        if seen is not None and seen[0] > 0:
            inside = middle
        else:
            outside = middle
        here = walker.at(inside)
        if here is None or here[1].contains(0):
            continue
        w, slope, curvature = here
        if not abs(w / slope) < 4 * abs(outside - inside):
            continue
        bend = w * curvature / slope**2
        if abs(bend) < STRAIGHT:
            return _newton(walker, inside, 1)
        if abs(bend - 2) < STRAIGHT:
            return _newton(walker, inside, -1)
    raise NoCycle


def _newton(walker: Walker, x: Any, power: int) -> Any:
    """The simple zero of w (``power`` 1) or of 1/w (−1) next to x; raises NoCycle."""
    for _ in range(NEWTON):
        seen = walker.at(x)
        if seen is None or seen[1].contains(0):
            raise NoCycle
        step = power * seen[0] / seen[1]
        x = (x - step).mid()
        if abs(step) < (abs(x) + TINY) * arb(2) ** (-BITS // 2 - 8):
            break
    radius = (abs(x) + TINY) * arb(2) ** (-BITS + 24)
    left, right = walker.at(x - radius), walker.at(x + radius)
    if left is None or right is None or not left[0] * right[0] < 0:
        raise NoCycle
    return x


def _pole(walker: Walker, inside: Any, barrier: Any) -> Any:
    """The end of the domain if w has a simple pole there, with no turn before; raises NoCycle."""
    here = walker.at(inside)
    if here is None or here[1].contains(0):
        raise NoCycle
    w, slope, curvature = here
    there = abs(w / slope + inside - barrier) < STRAIGHT * abs(barrier - inside)
    if there and abs(w * curvature / slope**2 - 2) < STRAIGHT:
        return barrier
    raise NoCycle


def means(graph: Graph, q: Symbol, point: Point, along: Path) -> list[Mean]:
    """The mean of each root of the graph; raises NoCycle where a sum does not settle."""

    def values(at: Any) -> list[Any]:
        try:
            jets = BallWalk(graph, {**point, q: constant(at)}, {}).run()
        except (OutsideDomain, Imprecise) as failure:
            raise NoCycle from failure
        return [jet.value for jet in jets]

    rule = _between if along.kind == "libration" else _round
    return rule(values, along)


Values = Callable[[Any], list[Any]]


class _Sum:
    """Sums over a step that is halved until two of them agree."""

    def __init__(self) -> None:
        self.sums: list[Any] = []
        self.sizes: list[Any] = []
        self.last: list[Any] = []

    def add(self, weight: Any, values: list[Any]) -> None:
        if not self.sums:
            self.sums, self.sizes = [arb(0)] * len(values), [arb(0)] * len(values)
        for k, v in enumerate(values):
            self.sums[k] = (self.sums[k] + weight * v).mid()
            self.sizes[k] = (self.sizes[k] + weight * abs(v)).mid()

    def settled(self, step: Any) -> list[Mean] | None:
        """The means times ``step`` once the error promised is small enough."""
        now = [s * step for s in self.sums]
        sizes = [s * step for s in self.sizes]
        before, self.last = self.last, now
        if not before:
            return None
        found = []
        for value, old, size in zip(now, before, sizes, strict=True):
            if not size > 0:
                found.append(Mean(value, size, 0.0))
                continue
            gap = float(abs((value - old) / size).mid())
            # halving the step squares the error; one power is kept as a margin
            found.append(Mean(value, size, max(gap**1.75, 10.0 ** -(DIGITS + 8))))
        return found if all(m.error < 10.0**-DIGITS for m in found) else None


def _between(values: Values, along: Path) -> list[Mean]:
    """(1/π)∫ by q = a + (b − a)/(1 + exp(π sinh t)), steps in t."""
    total, width = _Sum(), along.upper - along.lower
    pi = arb.pi()

    def node(t: Any) -> None:
        grown = (pi * abs(t).sinh()).exp()
        share = 1 / (1 + grown)
        weight = width * t.cosh() * grown * share * share
        at = along.upper - width * share if t > 0 else along.lower + width * share
        total.add(weight, values(at))

    for level in range(LEVELS):
        step = arb(1) / (4 * 2**level)
        count = int(LAST * 4 * 2**level)
        for k in range(-count, count + 1):
            if level == 0 or k % 2:
                node(k * step)
        found = total.settled(step)
        if found is not None:
            return found
    raise NoCycle


def _round(values: Values, along: Path) -> list[Mean]:
    """(1/2π)∫ over a turn in equal steps, off the symmetric places."""
    total, turn = _Sum(), along.upper - along.lower
    for level in range(LEVELS + 1):
        count = 16 * 2**level
        for k in range(count):
            if level == 0 or k % 2:
                total.add(arb(1), values(along.lower + turn * k / count))
        found = total.settled(arb(1) / count)
        if found is not None:
            return found
    raise NoCycle

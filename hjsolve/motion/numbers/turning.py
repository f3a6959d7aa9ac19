"""Turning points around a start state, isolated in balls.

Y(q) = N·D has the sign of the radicand.  From the start it is followed to both
sides over intervals on which a ball proves it positive, or its derivative of
one sign; where it changes sign there is exactly one turning point.  An interval
that shrinks below the resolution betrays a double root: a separatrix.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, Literal

from flint import arb, ctx

from hjsolve.motion.numbers.start import Coordinate
from hjsolve.motion.numbers.tape import cannot

STEPS = 4000
"""An isolation that takes more intervals is given up, and said to be."""

FAR, FAR_GROWING = 2.0**40, 2.0**9
"""A coordinate that is free up to this distance (times its scale) is called unbounded;
less far where exponentials keep the intervals short."""

STILL = 2.0**-84
"""An amplitude below this share of the coordinate is rest: a double shows 2⁻⁵³ of it."""

End = Literal["root", "pole", "infinity", "double", "boundary", "period"]


@dataclass(frozen=True, slots=True)
class Edge:
    """Where an interval of motion ends.

    ``root``: a simple zero of the radicand at ``at``; ``pole``: the momentum
    grows beyond bound and turns; ``double``: a double zero, never reached;
    ``boundary``: the end of the domain, reached in finite time; ``infinity``;
    ``period``: an angle that goes round.
    """

    kind: End
    at: Any = None


@dataclass(frozen=True, slots=True)
class Region:
    """The interval of motion of one coordinate, and what it does there."""

    kind: Literal["libration", "rotation", "unbounded", "fixed", "separatrix", "boundary"]
    lower: Edge
    upper: Edge


def region(coordinate: Coordinate) -> Region:
    """The interval of motion that contains the start.

    Raises:
        InputError: the interval cannot be isolated.
    """
    q = coordinate.q
    y, slope, *_ = coordinate.side(q)
    if not (y.is_finite() and slope.is_finite()):
        raise cannot(f"the equation of {coordinate.name} has no value at the start")
    here = None
    if _still(coordinate, y, slope):
        return _at_rest(coordinate)
    if y.contains(0):
        if coordinate.sign:
            raise cannot(f"the start is too close to a turning point of {coordinate.name} to tell")
        if slope.contains(0):
            return _at_rest(coordinate)
        here = Edge("root", q)
    elif y < 0:
        raise cannot(f"the momentum of {coordinate.name} at the start is on no real branch")
    edges = []
    for direction in (-1, 1):
        if here is not None and (slope > 0) == (direction < 0):
            edges.append(here)
        else:
            edges.append(_march(coordinate, direction, from_root=here is not None))
    lower, upper = edges
    kinds = {lower.kind, upper.kind}
    if "double" in kinds:
        return Region("separatrix", lower, upper)
    if "boundary" in kinds:
        return Region("boundary", lower, upper)
    if kinds == {"period"}:
        if not coordinate.compiled.periodic:
            raise cannot(
                f"{coordinate.name} goes round, but its equation is not seen to have the period "
                "2π: write it with sines and cosines of whole multiples, or declare a line"
            )
        return Region("rotation", lower, upper)
    if "infinity" in kinds:
        return Region("unbounded", lower, upper)
    return Region("libration", lower, upper)


def _still(coordinate: Coordinate, y: Any, slope: Any) -> bool:
    """Whether the motion about an equilibrium is too small to be told from rest."""
    curvature = coordinate.second.balls(coordinate.q)[1]
    if coordinate.side(coordinate.q)[2] < 0:
        curvature = -curvature
    if not curvature < 0:
        return False
    half = (slope * slope - 2 * y * curvature).abs_upper() / curvature.abs_lower() ** 2
    return bool(half < (STILL * (1 + abs(coordinate.q))) ** 2)


def _at_rest(coordinate: Coordinate) -> Region:
    """A double zero of the radicand at the start: an equilibrium of this coordinate."""
    curvature = coordinate.second.balls(coordinate.q)[0]
    if curvature.contains(0):
        raise cannot(f"{coordinate.name} rests at a zero of more than second order")
    edge = Edge("double", coordinate.q)
    return Region("fixed", edge, edge)


def _march(c: Coordinate, direction: int, *, from_root: bool) -> Edge:
    limit = c.upper if direction > 0 else c.lower
    turn = 2 * arb.pi() if c.angle else None
    x = c.q
    scale = arb(1) + abs(c.q.mid())
    smallest = scale * arb(2) ** (-(ctx.prec * 2 // 3))
    h = scale / 4
    if limit is not None:
        h = (abs(limit - x) / 2).mid()
        smallest = (abs(limit - x) * arb(2) ** (-(ctx.prec * 2 // 3))).mid()
    gone, far = arb(0), FAR_GROWING if c.compiled.growing else FAR
    first = from_root
    for _ in range(STEPS):
        to_end = limit is not None and not h < abs(limit - x) * 0.9
        end = limit if to_end else x + direction * h
        y, slope, *_ = c.side(x.union(end))
        definite = slope > 0 or slope < 0
        if (y > 0 and not first) or definite:
            at_end = c.side(end)[0]
            if y > 0 or at_end > 0:
                if to_end:
                    return Edge("boundary", limit)
                if not (first and (slope > 0) != (direction > 0)):
                    x, first = arb(end.mid(), end.rad()), False
                    gone = gone + h
                    if turn is not None and gone > turn:
                        return Edge("period")
                    if limit is None and turn is None and gone > scale * far:
                        return Edge("infinity")
                    h = h * 2
                    continue
            elif definite and not first and (at_end < 0 or to_end):
                return _edge(c, x, end, direction, on_limit=to_end and at_end.contains(0))
        h = (h / 2).mid() if not to_end else (abs(limit - x) / 2).mid()
        if h < smallest:
            return _stuck(c, x, direction, limit)
    raise cannot(f"the turning points of {c.name} were not isolated in {STEPS} intervals")


def _stuck(c: Coordinate, x: Any, direction: int, limit: Any) -> Edge:
    if limit is not None and abs(limit - x) < abs(limit - c.q) / 2**20:
        return Edge("boundary", limit)
    return Edge("double", x)


def _edge(c: Coordinate, x: Any, end: Any, direction: int, *, on_limit: bool) -> Edge:
    root = arb(end.mid(), end.rad()) if on_limit else _refined(c, x, end)
    _, _, below, below_slope = c.side(root)
    if not below.contains(0):
        return Edge("root", root)
    if below_slope.contains(0):
        return Edge("boundary", root)
    return Edge("pole", root)


def _refined(c: Coordinate, inside: Any, outside: Any) -> Any:
    """The zero between a point with Y > 0 and one with Y < 0, where Y is monotone."""
    a, b = arb(inside.mid()), arb(outside.mid())
    x = (a + b).mid() / 2
    size = abs(a) + abs(b)
    for _ in range(400):
        y, slope, *_ = c.side(x)
        if y > 0:
            a = x
        elif y < 0:
            b = x
        else:
            break  # as near as the precision tells
        step = (y / slope).mid()
        new = (x - step).mid()
        if not (min(a, b) <= new <= max(a, b)) or not step.is_finite():
            new = ((a + b) / 2).mid()
        if abs(new - x) <= size * arb(2) ** (-ctx.prec + 12):
            x = new
            break
        x = new
    side = 1 if outside > inside else -1
    radius = size * arb(2) ** (-ctx.prec + 8)
    for _ in range(ctx.prec):
        if c.side((x - side * radius).mid())[0] > 0 and (c.side((x + side * radius).mid())[0] < 0):
            return arb(x.mid(), radius.upper())
        radius = radius * 4
    raise cannot(f"a turning point of {c.name} was not certified")

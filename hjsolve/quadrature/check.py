"""Differentiate back, inside the regime: the check every formula passes.

At points of the regime (see ``points``) the formula's derivative, by automatic
differentiation in ball arithmetic, must enclose the integrand's value to 30
digits.  On the interval around such a point on which the integrand stays real
the formula must not jump either, which no derivative would show.
"""

from __future__ import annotations

import time
from collections.abc import Sequence
from fractions import Fraction

import numpy as np
from flint import arb
from sympy import Expr, Symbol
from sympy.core.relational import Relational

from hjsolve.algebra.balls import BallWalk, Imprecise, NotSupported, OutsideDomain, precision
from hjsolve.algebra.graph import Graph, TooLarge
from hjsolve.quadrature.points import Floats, Sample, floats
from hjsolve.records import Domain

POINTS = 6
"""Points at which a formula is compared; at least WANTED of them must be decided."""

WANTED = 3

DIGITS = 30

STEEP = 4.0
"""A step this many times larger than the integrand allows for is looked at closely."""

PATHS = 3
"""Points whose neighbourhood is searched for jumps; one for a graph of LONG or more nodes."""

LONG = 250


def holds(
    antiderivative: Expr,
    integrand: Expr,
    variable: Symbol,
    domain: Domain,
    points: Sample,
    deadline: float = float("inf"),
    within: Sequence[Relational] = (),
) -> bool:
    """Whether the formula differentiates back at the points and does not jump.

    Jumps are looked for on the interval around a point on which the integrand
    is real and the conditions ``within`` hold: beyond a pole is another formula.
    """
    try:
        graph = Graph([antiderivative, integrand, *(r.gts - r.lts for r in within)])
    except (TooLarge, TypeError):
        return False
    count = points.values.shape[1]
    try:
        decided = 0
        for i in range(min(2 * POINTS, count)):
            if time.monotonic() > deadline or decided == POINTS:
                break
            verdict = _derivative_agrees(graph, points.exact(i), variable)
            if verdict is False:
                return False
            decided += verdict is True
        if decided < min(WANTED, count):
            return False
        paths = PATHS if len(graph.nodes) < LONG else 1
        return all(
            _continuous(graph, points.exact(i), variable, domain) for i in range(min(paths, count))
        )
    except NotSupported:
        return False


def _derivative_agrees(
    graph: Graph, point: dict[Symbol, Fraction], variable: Symbol
) -> bool | None:
    """True, False, or None where the balls stay too wide."""
    walk = BallWalk(graph, point, {}, {variable: 0})
    for bits in (192, 512):
        with precision(bits):
            try:
                formula, integrand = walk.run()[:2]
            except Imprecise:
                continue
            except OutsideDomain:
                return False
            want = integrand.value
            difference = formula.first.get(0, arb(0)) - want
            if not difference.contains(0):
                return False
            if difference.rad() < abs(want).lower() * arb(10) ** -DIGITS:
                return True
    return None


def _continuous(
    graph: Graph, point: dict[Symbol, Fraction], variable: Symbol, domain: Domain
) -> bool:
    """No step of the formula survives when the interval around it shrinks.

    The grid is in floating point; a step that looks like a jump there, or a
    point without a finite value, is looked at again in balls.
    """
    grid = _neighbourhood(graph, point, variable, domain)
    values, slopes = _along(graph, point, variable, grid)[:2]
    finite = np.flatnonzero(np.isfinite(values))
    if len(finite) < 3:
        return True
    left, right = finite[:-1], finite[1:]
    steps = np.abs(np.diff(values[finite]))
    size = np.ptp(values[finite])
    slope = np.maximum(np.abs(slopes[left]), np.abs(slopes[right]))
    steep = steps > STEEP * slope * np.diff(grid[finite]) + 1e-9 * size
    steep[np.argmax(steps)] = True
    doubtful = [(left[k], right[k]) for k in np.flatnonzero(steep | (right > left + 1))]
    if len(doubtful) > len(grid) // 4:
        return False
    for a, b in doubtful:
        suspect = b > a + 1 or (
            _shrunk(graph, point, variable, grid[a], grid[b]) > 0.05 * abs(values[b] - values[a])
        )
        if suspect and _jumps(graph, point, variable, (grid[a], grid[b]), 1e-6 * size):
            return False
    return True


def _shrunk(
    graph: Graph, point: dict[Symbol, Fraction], variable: Symbol, low: float, high: float
) -> float:
    """The largest step left in a part of 2⁻²⁰ of the interval, in floating point."""
    step = 0.0
    for _ in range(5):
        inner = np.linspace(low, high, 17)
        values = _along(graph, point, variable, inner)[0]
        if not np.all(np.isfinite(values)):
            return float("inf")
        steps = np.abs(np.diff(values))
        k = int(np.argmax(steps))
        low, high, step = inner[k], inner[k + 1], float(steps[k])
    return step


def _jumps(
    graph: Graph,
    point: dict[Symbol, Fraction],
    variable: Symbol,
    ends: tuple[float, float],
    least: float,
) -> bool:
    """The same in balls: whether a step above ``least`` survives 40 halvings."""
    low, high = Fraction(float(ends[0])), Fraction(float(ends[1]))

    def value(at: Fraction) -> arb | None:
        try:
            return BallWalk(graph, {**point, variable: at}, {}).run()[0].value
        except (Imprecise, OutsideDomain):
            return None

    with precision(256):
        left, right = value(low), value(high)
        if left is None or right is None:
            return False
        for _ in range(40):
            at = (low + high) / 2
            middle = value(at)
            if middle is None:
                return True
            if abs(middle - left) > abs(right - middle):
                high, right = at, middle
            else:
                low, left = at, middle
        return not abs(right - left) < max(least, 1e-300)


def _along(
    graph: Graph, point: dict[Symbol, Fraction], variable: Symbol, grid: Floats
) -> list[Floats]:
    values = {s: np.full(len(grid), float(v)) for s, v in point.items()}
    values[variable] = grid
    return floats(graph, values)


def _neighbourhood(
    graph: Graph, point: dict[Symbol, Fraction], variable: Symbol, domain: Domain
) -> Floats:
    """A grid on the part around the point where the integrand is real."""
    centre = float(point[variable])
    reach = 4.0 * abs(centre)
    low, high = centre - reach, centre + reach
    ends = []
    for end in (domain.lower, domain.upper):
        ends.append(
            _along(Graph([end]), point, variable, np.ones(1))[0][0] if end.is_finite else None
        )
    low = low if ends[0] is None else max(low, float(ends[0]))
    high = high if ends[1] is None else min(high, float(ends[1]))
    grid = np.unique(np.concatenate([np.linspace(low, high, 402)[1:-1], [centre]]))
    _, integrand, *sides = _along(graph, point, variable, grid)
    real = np.isfinite(integrand)
    for side in sides:
        real &= ~(side < 0)
    start = stop = int(np.searchsorted(grid, centre))
    while start > 0 and real[start - 1]:
        start -= 1
    while stop < len(grid) - 1 and real[stop + 1]:
        stop += 1
    return grid[start : stop + 1]

"""Guaranteed ∂J/∂α and J: the midpoint rule in balls with a proved aliasing bound.

A 2π-periodic f that is analytic and bounded by M in |Im φ| ≤ ρ has
|mean of f − midpoint sum of N nodes| ≤ 2M/(e^{Nρ} − 1) (Davis & Rabinowitz;
Trefethen & Weideman, SIAM Rev. 56 (2014) 385; citations from memory).  M is
bounded on the line Im φ = ρ by a cover of complex balls.  That nothing but the
two turning points lies inside is proved by the argument principle: numerator
and denominator of the radicand turn on that line as often as those points make
them, and no more.
"""

from __future__ import annotations

import cmath
import math
from dataclasses import dataclass
from functools import lru_cache
from itertools import pairwise
from typing import Any

import numpy as np
from flint import acb, arb, ctx, fmpq
from numpy.typing import NDArray

from hjsolve.motion.numbers.angle import Angle
from hjsolve.motion.numbers.cells import node
from hjsolve.motion.numbers.start import Coordinate
from hjsolve.motion.numbers.tape import Fixed
from hjsolve.motion.numbers.turning import Region

Floats = NDArray[np.float64]

ENTIRE = frozenset(("add", "mul", "exp", "sin", "cos"))
"""Operations that are analytic everywhere."""

WIDTHS = (1.6, 1.0, 0.6, 0.36, 0.2, 0.12)
SHARES = (0.8, 0.55, 0.35, 0.2)
"""Of the width that the decay of the coefficients hints at."""

SAMPLE, WIDEST, NARROWEST = 48, 2.0, 0.05
ARCS = 12
NARROW = fmpq(1, 150)
TRIES = 120
NODES_LIMIT = 400
DIGITS = 34
"""Means to twice the digits of a double: then the series that they come with are good to one."""


@dataclass(frozen=True, slots=True)
class Enclosure:
    """Balls that contain ∂J/∂α_k and J; ``series`` are cosine coefficients of the integrands.

    ``series`` (n, nodes) serves to place the start within its cycle: None where
    the integrands are not even.
    """

    row: list[Any]
    action: Any
    series: Floats | None


def enclose(
    c: Coordinate, region: Region, angle: Angle, n: int, digits: int = DIGITS
) -> Enclosure | None:
    """Balls for the means over a cycle, good to ``digits``; None where nothing is proved.

    ``n`` is the number of constants.  Works at the current precision.
    """
    if angle.shape not in ("circle", "turn") or angle.order != 2:
        return None
    if not (_analytic(c.pieces) and _analytic(c.sides)):
        return None
    if c.compiled.growing and _divides(c.pieces):
        return None
    likely = _likely(c, angle, n)
    for width in WIDTHS if likely is None else [share * likely for share in SHARES]:
        bound = _bound(c, region, angle, n, width)
        if bound is not None:
            return _summed(c, angle, n, width, bound, digits)
    return None


def _likely(c: Coordinate, angle: Angle, n: int) -> float | None:
    """The width of the strip that the decay of coefficients in plain doubles hints at."""
    circle = angle.shape == "circle"
    phi = (np.arange(SAMPLE) + 0.5) * (np.pi if circle else 2 * np.pi) / SAMPLE
    size = float(angle.size.mid())
    q = float(angle.centre.mid()) - size * np.cos(phi) if circle else phi
    speed = size * np.sin(phi) if circle else np.ones(SAMPLE)
    with np.errstate(all="ignore"):
        radicand, _, *parts = c.pieces.floats(q)
        root = np.broadcast_to(np.sqrt(np.asarray(radicand, dtype=float)), phi.shape)
        rows = [np.broadcast_to(p, phi.shape) * speed / root for p in parts[:n]]
        found = np.array([*rows, root * speed])
    if not np.isfinite(found).all():
        return None
    orders = np.arange(1, SAMPLE // 2)
    turned = np.outer(phi, orders)
    waves = np.abs(found @ (np.cos(turned) if circle else np.exp(1j * turned)))
    largest = np.abs(found).sum(axis=1, keepdims=True) + 1e-300
    share = waves / largest
    rates = []
    for row in share:
        pairs = np.maximum(row[:-1], row[1:])  # a parity may empty every other order
        low = np.flatnonzero(pairs < 1e-9)
        at = int(low[0]) if len(low) else len(pairs) - 1
        rates.append(-np.log(max(pairs[at], 1e-16)) / orders[at])
    width = float(min(rates))
    return min(width, WIDEST) if width > NARROWEST else None


def _analytic(fixed: Fixed) -> bool:
    return all(
        op in ENTIRE or (op == "power" and payload[1] == 1) for _, op, payload, _ in fixed.program
    )


def _divides(fixed: Fixed) -> bool:
    return any(op == "power" and payload[0] < 0 for _, op, payload, _ in fixed.program)


def _bound(
    c: Coordinate, region: Region, angle: Angle, n: int, width: float
) -> tuple[list[Any], Any] | None:
    """Bounds of |∂p/∂α_k dq/dφ| and |p dq/dφ| in the strip, None where it is not analytic."""
    circle = angle.shape == "circle"
    span = 1 if circle else 2
    height = arb(width)
    bits = ctx.prec
    ctx.prec = 64
    try:
        slopes, area = [arb(0)] * n, arb(0)
        todo = [(fmpq(span * j, ARCS), fmpq(span * (j + 1), ARCS)) for j in range(ARCS)][::-1]
        ends = [_ends(c, angle, acb(arb(0), height))]
        tried = 0
        while todo:
            left, right = todo.pop()
            tried += 1
            found = _on_arc(c, angle, n, left, right, height)
            if found is None:
                middle = (left + right) / 2
                if right - left < NARROW or tried > TRIES:
                    return None
                todo += [(middle, right), (left, middle)]
                continue
            slopes = [arb.max(a, b) for a, b in zip(slopes, found[0], strict=True)]
            area = arb.max(area, found[1])
            ends.append(_ends(c, angle, acb(arb.pi() * right, height)))
    finally:
        ctx.prec = bits
    kinds = (region.lower.kind, region.upper.kind)
    for part, what in ((0, "root"), (1, "pole")):
        turned = sum(cmath.phase(b[part] / a[part]) for a, b in pairwise(ends))
        expected = math.pi * kinds.count(what) if circle else 0.0
        if abs(abs(turned) - expected) > 0.5:
            return None
    return slopes, area


def _on_arc(
    c: Coordinate, angle: Angle, n: int, left: Any, right: Any, height: Any
) -> tuple[list[Any], Any] | None:
    """Bounds on an arc of the line, from left·π to right·π; None where it is too wide."""
    phi = acb((arb.pi() * left).union(arb.pi() * right), height)
    q, speed = angle.at(phi)
    top, below = _fraction(c, q)
    if not (top.abs_lower() > 0 and below.abs_lower() > 0):
        return None
    _, drift, *parts = c.pieces.balls(q)
    size = speed.abs_upper()
    low = (top.abs_lower() / below.abs_upper()).sqrt()
    high = (top.abs_upper() / below.abs_lower()).sqrt()
    whole = angle.shape == "turn"
    slopes = [p.abs_upper() * size / (2 * low) for p in parts[:n]]
    area = high * size
    if whole:
        area = area + drift.abs_upper() * size
        if c.compiled.drifting:
            slopes = [v + p.abs_upper() * size for v, p in zip(slopes, parts[n:], strict=True)]
    if not all(x.is_finite() for x in (*slopes, area)):
        return None
    return slopes, area


def _fraction(c: Coordinate, q: Any) -> tuple[Any, Any]:
    """N and D on a complex ball, N to second order about its middle where that is better."""
    top, _, below, _ = c.sides.balls(q)
    if not top.abs_lower() > 0:
        middle = acb(q.real.mid(), q.imag.mid())
        value, steep, *_ = c.sides.balls(middle)
        away = q - middle
        curved = c.second.balls(q)[1]
        top = value + (steep + curved * away / 2) * away
    return top, below


def _ends(c: Coordinate, angle: Angle, phi: Any) -> tuple[complex, complex]:
    q, _ = angle.at(phi)
    top, _, below, _ = c.sides.balls(q)
    return _unit(top), _unit(below)


def _unit(x: Any) -> complex:
    """A complex ball's midpoint, scaled to size 1 (its size may be no double)."""
    size = abs(x).mid()
    return complex(float((x.real / size).mid()), float((x.imag / size).mid()))


@lru_cache(maxsize=64)
def _angles(shape: str, count: int, bits: int) -> list[Any]:
    assert bits == ctx.prec
    span = arb.pi() if shape == "circle" else 2 * arb.pi()
    return [span * (2 * j + 1) / (2 * count) for j in range(count)]


def _summed(
    c: Coordinate, angle: Angle, n: int, width: float, bound: tuple[list[Any], Any], digits: int
) -> Enclosure | None:
    slopes, area = bound
    largest = arb.max(arb(1), arb.max(area, *slopes[:1]))
    for each in slopes:
        largest = arb.max(largest, each)
    wanted = float((largest.log() + digits * arb(10).log()).abs_upper()) + 1.0
    whole = math.ceil(wanted / width)
    circle = angle.shape == "circle"
    count = max(4, (whole + 1) // 2 if circle else whole)
    if count > NODES_LIMIT:
        return None
    rows = [node(c, angle, n, phi) for phi in _angles(angle.shape, count, ctx.prec)]
    total = 2 * count if circle else count
    share = 2 / ((arb(total) * arb(width)).exp() - 1)

    def mean(values: list[Any], largest: Any) -> Any:
        middle = sum(values, arb(0)) / count
        return middle + arb(0, (share * largest).abs_upper())

    row = [mean([r.even[k] for r in rows], slopes[k]) for k in range(n)]
    if circle:
        action = mean([r.root * r.speed for r in rows], area)
    else:
        action = mean([(r.root + r.drift) * r.speed for r in rows], area)
    series = None
    if circle and not c.compiled.drifting:
        values = np.array([[float(v.mid()) for v in r.even] for r in rows])
        j = np.arange(count)
        cosines = np.cos(np.pi * np.outer(j, 2 * j + 1) / (2 * count))
        series = (2 / count) * (cosines @ values).T
    return Enclosure(row, action, series)


def grown(series: Floats, means: Floats, phi: float) -> Floats:
    """∫ from 0 to φ of the even integrands with these cosine coefficients, (n,)."""
    orders = np.arange(1, series.shape[1])
    return means * phi + (series[:, 1:] * (np.sin(orders * phi) / orders)).sum(axis=1)

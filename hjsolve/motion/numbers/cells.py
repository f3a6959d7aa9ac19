"""The smooth integrands of one coordinate over its cycle, on cells that crowd where needed.

On every cell the functions are known at the Gauss–Legendre nodes in balls, so
that their integrals come to twice the digits of the interpolants; a cell is
halved until its interpolant is good to the rounding of doubles.  Where another
root or a pole lies close (a separatrix, an axis, high eccentricity) the cells
crowd there by themselves, which no global series can do.  A place is given as
(cell, y in [−1, 1]): an angle in doubles would lose the digits that matter
next to a turning point.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache
from typing import Any

import numpy as np
from flint import arb, arb_mat, ctx, fmpq
from numpy.polynomial import chebyshev
from numpy.typing import NDArray

from hjsolve.algebra.balls import precision
from hjsolve.motion.numbers.angle import Angle
from hjsolve.motion.numbers.start import Coordinate
from hjsolve.motion.numbers.tape import cannot

Floats = NDArray[np.float64]
Indices = NDArray[np.intp]

NODES = 32
"""Points of a cell: about half reach double precision, all of them twice that."""

DEPTH = 90
"""A cell that has been halved so often is taken as it is, and its error counted."""

CELLS = 400
"""Cells of half a cycle; more are refused."""

TAIL = 8
ROUNDING = 1e-16


@lru_cache(maxsize=8)
def ball_nodes(bits: int) -> tuple[list[Any], list[Any]]:
    """Nodes and weights of Gauss–Legendre in balls of this precision."""
    assert bits == ctx.prec
    pairs = [arb.legendre_p_root(NODES, k, weight=True) for k in reversed(range(NODES))]
    return [x for x, _ in pairs], [w for _, w in pairs]


@lru_cache(maxsize=1)
def transform() -> Floats:
    """From values at the nodes to Chebyshev coefficients; rounded once, from 128 bits.

    Formed in doubles, its own rounding is three times the level cells are halved to.
    """
    with precision(128):
        nodes = [arb.legendre_p_root(NODES, k) for k in reversed(range(NODES))]
        rows = [[x.chebyshev_t(j) for j in range(NODES)] for x in nodes]
        inverse = arb_mat(rows).inv()
        return np.array([[float(inverse[j, k].mid()) for k in range(NODES)] for j in range(NODES)])


@dataclass(slots=True)
class Node:
    """Values at one node: the even and odd integrands, ∫p's, and what is tabulated."""

    even: list[Any]
    odd: list[Any]
    root: Any
    drift: Any
    q: Any
    speed: Any
    sine: Any


@dataclass(slots=True)
class Cells:
    """One coordinate over its cycle, from −π to π (or its stretch, when it has none).

    ``slopes``: Chebyshev coefficients (n, 32, c) of ∂p/∂α_k dq/dφ times half the cell;
    ``integrals``: their integrals, (n, 33, c), from φ = 0;
    ``state``: series (3, 32, c) of q, of p and of 1, or of q, R·sin φ and sin φ where
    the momentum has a pole; ``drift`` (32, c) of A or None.
    ``totals``: Σ∫∂p/∂α_k dq (balls) over the whole, ``area`` ∫p dq; with their
    estimated errors.  ``balls`` are the ends of the direct cells, ``mirror``
    the number of cells that mirror them.
    """

    slopes: Floats
    integrals: Floats
    state: Floats
    drift: Floats | None
    totals: list[Any]
    area: Any
    error: Floats
    area_error: float
    balls: list[Any]
    mirror: int
    first: bool

    @property
    def count(self) -> int:
        """Number of cells."""
        return int(self.slopes.shape[2])

    def ends(self, k: int) -> Floats:
        """∫∂p/∂α_k dq from φ = 0 to the ends of the cells, (c+1,)."""
        right = self.integrals[k].sum(axis=0)
        left = (self.integrals[k] * ((-1.0) ** np.arange(NODES + 1))[:, None]).sum(axis=0)
        return np.concatenate([left[:1], right])

    def at(self, series: Floats, cell: Indices, y: Floats) -> Floats:
        """A series (m, c) at places."""
        return np.asarray(chebyshev.chebval(y, series[:, cell], tensor=False))

    def many(self, stack: Floats, cell: Indices, y: Floats) -> Floats:
        """Several series (f, m, c) at places, (f, points): one product a cell."""
        out = np.empty((len(stack), len(y)))
        basis = chebyshev.chebvander(y, stack.shape[1] - 1)
        order = np.argsort(cell, kind="stable")
        bounds = np.searchsorted(cell[order], np.arange(self.count + 1))
        for c in range(self.count):
            mine = order[bounds[c] : bounds[c + 1]]
            if len(mine):
                out[:, mine] = stack[:, :, c] @ basis[mine].T
        return out

    def place(self, phi: Any) -> tuple[int, float]:
        """The place of an angle (ball)."""
        direct = len(self.balls) - 1
        size = abs(phi) if self.mirror else phi
        k = next((i for i in range(direct - 1) if self.balls[i + 1].mid() > size.mid()), direct - 1)
        left, right = self.balls[k], self.balls[k + 1]
        y = float(((2 * size - left - right) / (right - left)).mid())
        y = min(1.0, max(-1.0, y))
        if self.mirror and phi < 0:
            return (direct - 1 - k if self.first else 2 * direct - 1 - k), -y
        return (k + direct if self.mirror and self.first else k), y

    def slope(self, k: int, cell: int, y: float) -> float:
        """∂p/∂α_k dq/dy at a place."""
        return float(self.at(self.slopes[k], np.array([cell]), np.array([y]))[0])


def node(c: Coordinate, angle: Angle, n: int, phi: Any) -> Node:
    """The functions at a ball, on the branch +1 (of a rotation: its own)."""
    q, speed = angle.at(phi)
    radicand, drift, *slopes = c.pieces.balls(q)
    order = c.compiled.order
    sign = 1 if angle.mirrored else (c.sign or 1)
    root = sign * (radicand.sqrt() if order == 2 else radicand.sqrt().sqrt())
    factor = speed * root / (order * radicand)
    odd = [s * speed for s in slopes[n:]] if c.compiled.drifting else []
    if odd and not angle.mirrored:
        even = [s * factor + o for s, o in zip(slopes[:n], odd, strict=True)]
    else:
        even = [s * factor for s in slopes[:n]]
    sine = phi.sin() if angle.shape == "circle" else arb(1)
    return Node(even, odd, root, drift, q, speed, sine)


def build(
    c: Coordinate, angle: Angle, n: int, lower: Any, upper: Any, *, pole: bool = False
) -> Cells:
    """Cells from ``lower`` to ``upper`` (balls), and their mirror image.

    Raises:
        InputError: an integrand has no finite value, or more than ``CELLS`` cells are needed.
    """
    nodes, weights = ball_nodes(ctx.prec)
    todo = [(lower, upper, 0)]
    if angle.shape in ("line", "front", "ramp"):
        todo = [(arb(0), upper, 0), (lower, arb(0), 0)]
    done: list[tuple[Any, Any, list[Node]]] = []
    totals = [arb(0)] * n
    area, error, area_error = arb(0), np.zeros(n), 0.0
    while todo:
        left, right, depth = todo.pop()
        half, middle = (right - left) / 2, (right + left) / 2
        rows = [node(c, angle, n, middle + half * x) for x in nodes]
        values = np.array([_asked(r, pole) for r in rows])
        if not np.isfinite(values).all():
            raise cannot(f"an integrand of {c.name} has no finite value inside its interval")
        coefficients = transform() @ values
        size = np.abs(values).max(axis=0)
        tail = np.abs(coefficients[-TAIL:]).max(axis=0)
        # over a wider cell of e^u an interpolant is good to its largest value only
        wide = angle.shape in ("well", "line", "ramp") and right - left > 1.25
        if depth < DEPTH and (wide or not (tail <= ROUNDING * size + 1e-300).all()):
            share = arb(1) / 2 if depth else arb(fmpq(33, 64))
            cut = arb((left + (right - left) * share).mid())
            todo += [(cut, right, depth + 1), (left, cut, depth + 1)]
            if len(todo) + len(done) > CELLS:
                raise cannot(f"the integrals of {c.name} need more than {CELLS} cells")
            continue
        for k in range(n):
            total = sum((w * r.even[k] for w, r in zip(weights, rows, strict=True)), arb(0))
            totals[k] = totals[k] + half * total
        momentum = [(r.root if angle.mirrored else r.root + r.drift) * r.speed for r in rows]
        area = area + half * sum((w * m for w, m in zip(weights, momentum, strict=True)), arb(0))
        last = np.abs(coefficients[-2:]).max(axis=0)
        bound = 2 * float(half.mid()) * last * np.minimum(1.0, 1e3 * last / (size + 1e-300))
        error += bound[:n]
        area_error += float(bound[n])
        done.append((left, right, rows))
    return _assemble(c, angle, n, done, (totals, area, error, area_error), pole)


def _asked(r: Node, pole: bool) -> list[float]:
    """What must be smooth at a node."""
    values = [*r.even, r.root * r.speed, *r.odd, r.q, r.root * r.sine if pole else r.root]
    return [float(v.mid()) for v in values]


def _assemble(
    c: Coordinate,
    angle: Angle,
    n: int,
    done: list[tuple[Any, Any, list[Node]]],
    sums: tuple[list[Any], Any, Floats, float],
    pole: bool,
) -> Cells:
    drifting = c.compiled.drifting

    def number(x: Any) -> float:
        return float(x.mid())

    def direct(rows: list[Node], half: float, mirrored: bool) -> Floats:
        side = -1.0 if mirrored else 1.0
        f = np.array([[number(v) for v in r.even] for r in rows])
        if drifting and angle.mirrored:
            f = f + side * np.array([[number(v) for v in r.odd] for r in rows])
        q = np.array([number(r.q) for r in rows])
        p = side * np.array([number(r.root) for r in rows])
        s = np.ones(len(rows))
        if pole:
            p = side * side * np.array([number(r.root * r.sine) for r in rows])
            s = side * np.array([number(r.sine) for r in rows])
        a = np.array([number(r.drift) for r in rows])
        out = np.column_stack([f * half, q, p, s, a])
        return transform() @ (out[::-1] if mirrored else out)

    halves = [number((right - left) / 2) for left, right, _ in done]
    ahead = [direct(rows, h, False) for (_, _, rows), h in zip(done, halves, strict=True)]
    behind: list[Floats] = []
    first = angle.mirrored
    if angle.mirrored:
        behind = [direct(rows, h, True) for (_, _, rows), h in zip(done, halves, strict=True)]
        behind.reverse()
    every = behind + ahead if first else ahead + behind
    series = np.array(every).transpose(2, 1, 0)
    integrals = np.zeros((n, NODES + 1, series.shape[2]))
    origin = len(behind) if first else sum(1 for _, right, _ in done if not right > 0)
    for k in range(n):
        inner = chebyshev.chebint(series[k], lbnd=-1, axis=0)
        ends = inner.sum(axis=0)
        ahead_of = np.concatenate([[0.0], np.cumsum(ends[origin:])[:-1]])
        behind_it = -np.cumsum(ends[:origin][::-1])[::-1]
        inner[0] += np.concatenate([behind_it, ahead_of])
        integrals[k] = inner
    totals, area, error, area_error = sums
    twice = 2 if angle.mirrored else 1
    return Cells(
        series[:n],
        integrals,
        series[n : n + 3],
        series[n + 3] if drifting else None,
        [twice * t for t in totals],
        twice * area,
        twice * error,
        twice * area_error,
        [left for left, _, _ in done] + [done[-1][1]],
        len(behind),
        first,
    )

"""Functions of the uniform phase Λ as piecewise polynomials, for evaluation in bulk.

Λ is the phase in which one relation of the coordinate grows uniformly.  The
tables hold q, p and what the coordinate adds to the angle variables of all, so
that after the table is made a state costs a look-up and a Horner scheme, with
no Newton step for one degree of freedom.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.polynomial import chebyshev
from numpy.typing import NDArray

from hjsolve.motion.numbers.cells import Cells
from hjsolve.motion.numbers.tape import cannot

Floats = NDArray[np.float64]
Indices = NDArray[np.intp]

DEGREE = 7
"""Eight coefficients a column and cell: one cache line."""

BEGIN = 8
LEVELS = 60
LIMIT = 20_000
EPS = 2.0**-53
FIT = 6e-16
"""A cell is halved while its last coefficient is above this share of its column."""

COARSE = 33
"""Points of a cell from which the inverse is guessed."""

BINS = 1 << 14
"""Cells no narrower than this share of the range are found by one division."""

_POINTS = chebyshev.chebpts1(DEGREE + 1)
_FIT = np.linalg.inv(chebyshev.chebvander(_POINTS, DEGREE))
_POWERS = np.zeros((DEGREE + 1, DEGREE + 1))
for _k in range(DEGREE + 1):
    _row = chebyshev.cheb2poly([0.0] * _k + [1.0])
    _POWERS[: len(_row), _k] = _row


@dataclass(slots=True)
class Table:
    """Columns as piecewise polynomials on [edges[0], edges[-1]].

    ``powers`` is (columns, 8, cells) in the place from −1 to 1 within a cell.
    ``error`` is what the fit misses between its points, a column; ``steep``
    (columns, cells) bounds the derivative; ``size`` the value.
    """

    edges: Floats
    powers: Floats
    period: float
    error: Floats
    steep: Floats
    size: Floats
    bins: Indices | None
    scales: Floats

    def reduced(self, x: Floats) -> Floats:
        """A phase of any size brought to the range of the table; one near 0 as it is."""
        low = self.edges[0]
        return np.clip(
            x - self.period * np.floor((x - low) * (1 / self.period)), low, self.edges[-1]
        )

    def locate(self, x: Floats) -> tuple[Indices, Floats, Floats]:
        """(cell, place in it, twice over its width) of values in the range."""
        if self.bins is not None:
            whole = len(self.bins) - 1
            coarse = ((x - self.edges[0]) * (whole / (self.edges[-1] - self.edges[0]))).astype(
                np.intp
            )
            k = self.bins.take(coarse, mode="clip")
        else:
            k = np.searchsorted(self.edges, x, side="right") - 1
            k = np.clip(k, 0, len(self.edges) - 2)
        scale = self.scales.take(k)
        return k, (x - self.edges.take(k)) * scale - 1, scale

    def find(self, x: Floats) -> tuple[Indices, Floats, Floats]:
        """``locate`` of a phase of any size; one near 0 keeps its digits."""
        if self.bins is None:
            return self.locate(self.reduced(x))
        turns = (x - self.edges[0]) * (1 / self.period)
        floor = np.floor(turns)
        turns -= floor
        turns *= len(self.bins) - 1
        k = self.bins.take(turns.astype(np.intp))
        scale = self.scales.take(k)
        floor *= -self.period
        floor += x
        floor -= self.edges.take(k)
        floor *= scale
        floor -= 1
        return k, floor, scale

    def column(self, f: int, k: Indices, y: Floats) -> Floats:
        """Column ``f`` at places."""
        c = self.powers[f]
        out = c[DEGREE].take(k)
        for d in range(DEGREE - 1, -1, -1):
            out *= y
            out += c[d].take(k)
        return out

    def with_slope(self, f: int, k: Indices, y: Floats, scale: Floats) -> tuple[Floats, Floats]:
        """Column ``f`` and its derivative."""
        c = self.powers[f]
        out = c[DEGREE].take(k)
        slope = np.zeros_like(out)
        for d in range(DEGREE - 1, -1, -1):
            slope *= y
            slope += out
            out *= y
            out += c[d].take(k)
        slope *= scale
        return out, slope


class Inverse:
    """From the phase to a place in the cells, by Newton within a bracket."""

    def __init__(self, cells: Cells, weights: Floats, span: float, where: str) -> None:
        """``weights``: the combination of constants whose relation is the clock.

        The phase is 0 at φ = 0 and runs over ``span``; with span 0 it is the
        relation itself (times its sign).
        """
        self.cells = cells
        self.rate = np.tensordot(weights, cells.slopes, 1)
        self.integral = np.tensordot(weights, cells.integrals, 1)
        right = self.integral.sum(axis=0)
        left = (self.integral * ((-1.0) ** np.arange(len(self.integral)))[:, None]).sum(axis=0)
        ends = np.concatenate([left[:1], right])
        self.scale = span / (ends[-1] - ends[0]) if span else float(np.sign(ends[-1] - ends[0]))
        self.ends = ends * self.scale
        if span:
            self.ends[-1] = self.ends[0] + span
        if (np.diff(self.ends) <= 0).any():
            raise cannot(f"no relation of {where} grows steadily")
        self.stack = np.zeros((2, *self.integral.shape))
        self.stack[0] = self.integral * self.scale
        self.stack[1, :-1] = self.rate * self.scale
        grid = np.linspace(-1, 1, COARSE)
        known = chebyshev.chebvander(grid, len(self.integral) - 1) @ self.stack[0]
        places = grid[:, None] + 1 + 2 * np.arange(cells.count)
        self.coarse = np.maximum.accumulate(known.T.ravel()), places.T.ravel()

    def place(self, x: Floats) -> tuple[Indices, Floats]:
        """(cell, y) of phases within the range."""
        k = np.clip(np.searchsorted(self.ends, x, side="right") - 1, 0, self.cells.count - 1)
        y = np.clip(np.interp(x, *self.coarse) - 2 * k - 1, -1.0, 1.0)
        low, high = np.full_like(y, -1.0), np.full_like(y, 1.0)
        for _ in range(60):
            value, slope = self.cells.many(self.stack, k, y)
            gap = value - x
            low, high = np.where(gap <= 0, y, low), np.where(gap >= 0, y, high)
            with np.errstate(all="ignore"):
                new = y - gap / slope
            outside = ~((new >= low) & (new <= high))
            new = np.where(outside, (low + high) / 2, new)
            moved = np.abs(new - y)
            y = new
            if (moved <= np.where(outside, 4e-16, 1e-8)).all():
                break
        return k, y

    def phase(self, cell: int, y: float) -> float:
        """The phase of a place."""
        value = self.cells.at(self.integral, np.array([cell]), np.array([y]))[0]
        return float(value * self.scale)


def fit(
    columns: Callable[[Floats], Floats],
    lower: float,
    upper: float,
    what: str,
    period: float,
    noise: Floats,
) -> Table:
    """Tables of ``columns(x)`` → (columns, points) on [lower, upper].

    ``noise`` is the size of what a column was added up from: below its
    rounding nothing is fitted.

    Raises:
        InputError: a function stays rough on very narrow cells.
    """
    todo = np.linspace(lower, upper, BEGIN + 1)
    cells = np.column_stack([todo[:-1], todo[1:]])
    kept: list[tuple[Floats, Floats]] = []
    size: Floats | None = None
    count = 0
    for level in range(LEVELS):
        middle, half = cells.mean(axis=1), np.diff(cells, axis=1)[:, 0] / 2
        points = middle[:, None] + half[:, None] * _POINTS
        values = columns(points.ravel())
        values = values.reshape(len(values), len(cells), DEGREE + 1)
        size = np.maximum(np.abs(values).max(axis=(1, 2)), 0 if size is None else size)
        series = values @ _FIT.T
        level_size = size[:, None] if period else np.abs(values).max(axis=2) + 1e-300
        floor = FIT * np.maximum(level_size, noise[:, None])
        # the phase itself is rounded: no table is better than that times its slope
        floor = floor + EPS * np.abs(middle) / half * np.abs(series[..., 1:]).sum(axis=2)
        tail = np.maximum(np.abs(series[..., -1]), np.abs(series[..., -2]) / 8)
        rough = (tail > 4 * floor).any(axis=0) if level < LEVELS - 1 else np.zeros(len(cells), bool)
        rough &= half > 1e-15 * np.maximum(1e-300, np.abs(middle))
        kept.append((cells[~rough], series[:, ~rough]))
        count += int((~rough).sum())
        if not rough.any():
            break
        bad = cells[rough]
        cut = bad.mean(axis=1)
        cells = np.concatenate(
            [np.column_stack([bad[:, 0], cut]), np.column_stack([cut, bad[:, 1]])]
        )
        if count + len(cells) > LIMIT:
            raise cannot(f"the motion of {what} needs tables of more than {LIMIT} cells")
    return _ordered(kept, columns, period)


def _ordered(
    kept: list[tuple[Floats, Floats]], columns: Callable[[Floats], Floats], period: float
) -> Table:
    cells = np.concatenate([c for c, _ in kept])
    series = np.concatenate([s for _, s in kept], axis=1)
    order = np.argsort(cells[:, 0])
    cells, series = cells[order], series[:, order]
    powers = np.ascontiguousarray((series @ _POWERS.T).transpose(0, 2, 1))
    edges = np.append(cells[:, 0], cells[-1, 1])
    width = np.diff(edges)
    narrow = (edges[-1] - edges[0]) / width.min()
    bins = None
    if narrow < BINS:
        number = int(2 ** np.ceil(np.log2(narrow * 0.999)))
        centres = edges[0] + (np.arange(number) + 0.5) * (edges[-1] - edges[0]) / number
        bins = np.clip(np.searchsorted(edges, centres, side="right") - 1, 0, len(width) - 1)
        bins = np.append(bins, len(width) - 1)  # a phase that rounds up to the end
    degrees = np.arange(DEGREE + 1)
    steep = (np.abs(powers) * degrees[None, :, None]).sum(axis=1) * 2 / width
    table = Table(
        edges,
        powers,
        period,
        np.zeros(len(powers)),
        steep,
        np.abs(powers[:, 0]).max(axis=1),
        bins,
        2 / width,
    )
    tested = (edges[:-1] + edges[1:]) / 2 + 0.23 * width
    at, y, _ = table.locate(tested)
    true = columns(tested)
    for f in range(len(powers)):
        missed = np.abs(table.column(f, at, y) - true[f])
        table.error[f] = 2 * missed.max()
    return table

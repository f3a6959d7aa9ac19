"""The generalised Kepler equations θ_j = Λ_j + Σ_i τ_ij(Λ_i), solved for many states at once.

Coordinates are solved block by block.  Within a block the clock is shared, so
that Σ_j F_j T_j = 0: two coordinates leave one monotone equation, m leave m − 1.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from hjsolve.motion.numbers.movers import Periodic
from hjsolve.motion.numbers.numerics import monotone

Floats = NDArray[np.float64]

TRIES = 60


def coupled(
    motion: Periodic, rows: list[int], theta: list[Floats], failed: list[int]
) -> list[Floats]:
    """The phases Λ of a block from its angles."""
    guess = motion.guesses.get(rows[0])
    begin = [np.zeros_like(x) for x in theta[1:]] if guess is None else guess.at(theta)
    if len(rows) == 1:
        return _alone(motion, rows[0], theta[0])
    if len(rows) == 2:
        return _pair(motion, rows, theta, begin[0])
    return _several(motion, rows, theta, begin, failed)


def _alone(motion: Periodic, i: int, theta: Floats) -> list[Floats]:
    """Λ + τ(Λ) = θ for one coordinate; mostly τ vanishes."""
    mover = motion.movers[i]
    column = mover.adds.get(i)
    if column is None:
        return [theta]
    spread = mover.table.size[column] + 1e-15

    def gap(x: Floats) -> tuple[Floats, Floats]:
        k, y, scale = mover.table.find(x)
        value, slope = mover.table.with_slope(column, k, y, scale)
        return x + value - theta, 1 + slope

    return [monotone(gap, theta, theta - 2 * spread, theta + 2 * spread)]


def _pair(motion: Periodic, rows: list[int], theta: list[Floats], begin: Floats) -> list[Floats]:
    """Two coordinates that share a clock: Λ_1 = θ_1 − T, Λ_2 = θ_2 − ratio·T."""
    one, two = (motion.movers[i] for i in rows)
    ratio = -motion.share[rows[0]] / motion.share[rows[1]]
    columns = [(m, m.adds.get(rows[0])) for m in (one, two)]
    spread = sum(m.table.size[c] for m, c in columns if c is not None) + 1e-15

    def gap(x: Floats) -> tuple[Floats, Floats]:
        value, slope = x.copy(), np.ones_like(x)
        for (mover, column), side, base in zip(columns, (1.0, ratio), theta, strict=True):
            if column is None:
                continue
            k, y, scale = mover.table.find(base - side * x)
            f, g = mover.table.with_slope(column, k, y, scale)
            value -= f
            slope += side * g
        return value, slope

    low = np.full_like(begin, -2 * spread)
    t = monotone(gap, np.clip(begin, -spread, spread), low, -low)
    return [theta[0] - t, theta[1] - ratio * t]


def _several(
    motion: Periodic,
    rows: list[int],
    theta: list[Floats],
    begin: list[Floats],
    failed: list[int],
) -> list[Floats]:
    """Three and more coupled phases: Newton in T_1 … T_{m−1}, shortened where it does not gain."""
    m = len(rows)
    ratio = [motion.share[i] / motion.share[rows[-1]] for i in rows[:-1]]
    movers = [motion.movers[i] for i in rows]

    def phases(t: Floats) -> list[Floats]:
        last = theta[-1] + sum(r * x for r, x in zip(ratio, t, strict=True))
        return [*(theta[c] - t[c] for c in range(m - 1)), last]

    def gap(t: Floats) -> tuple[Floats, list[list[Any]]]:
        value = t.copy()
        matrix: list[list[Any]] = [[float(r == c) for c in range(m - 1)] for r in range(m - 1)]
        for c, (mover, x) in enumerate(zip(movers, phases(t), strict=True)):
            k, y, scale = mover.table.find(x)
            for r in range(m - 1):
                column = mover.adds.get(rows[r])
                if column is None:
                    continue
                f, g = mover.table.with_slope(column, k, y, scale)
                value[r] -= f
                if c < m - 1:
                    matrix[r][c] = matrix[r][c] + g
                else:
                    for other in range(m - 1):
                        matrix[r][other] = matrix[r][other] - g * ratio[other]
        return value, matrix

    t = np.array(begin)
    value, matrix = gap(t)
    size = np.abs(value).max(axis=0)
    for _ in range(TRIES):
        step = _solved(matrix, value)
        if np.abs(step).max() < 1e-8:
            t = t - step
            break
        new = t - step
        value, matrix = gap(new)
        now = np.abs(value).max(axis=0)
        worse = (now > 0.9 * size) & (size > 1e-14)
        share = 1.0
        while worse.any() and share > 1e-9:
            share /= 2
            new = np.where(worse, t - share * step, new)
            value, matrix = gap(new)
            now = np.abs(value).max(axis=0)
            worse = (now > size * (1 - 0.1 * share)) & (size > 1e-14)
        t, size = new, now
    else:
        failed += [int(c) for c in np.flatnonzero(size > 1e-12)]
    return phases(t)


def _solved(matrix: list[list[Any]], right: Floats) -> Floats:
    """Small linear systems, one a state."""
    if len(matrix) == 2:
        (a, b), (c, d) = matrix
        whole = a * d - b * c
        first, second = d * right[0] - b * right[1], a * right[1] - c * right[0]
        return np.array([first / whole, second / whole])
    full = np.broadcast_arrays(*[entry for row in matrix for entry in row], right[0])[:-1]
    count = len(matrix)
    square = np.array(full).reshape(count, count, -1).transpose(2, 0, 1)
    return np.asarray(np.linalg.solve(square, right.T[..., None])[..., 0].T)

"""How far the relations that contain time have grown: τ_k(t) − τ_k(t₀)."""

from __future__ import annotations

import numpy as np
from flint import arb
from numpy.polynomial import chebyshev
from numpy.typing import NDArray

from hjsolve.algebra.balls import exact
from hjsolve.motion.numbers.start import Setting
from hjsolve.motion.numbers.tape import Fixed, Tape, cannot

Floats = NDArray[np.float64]

DEGREE = 24
LEVELS = 40
LIMIT = 20_000


def ticks(setting: Setting, times: Floats) -> dict[int, Floats]:
    """τ_k(t) − τ_k(t₀) for every constant whose relation contains time.

    For an autonomous system that is t − t₀ for the energy alone.

    Raises:
        InputError: H has a singularity in time within the span.
    """
    begin = float(setting.time)
    out: dict[int, Floats] = {}
    time = setting.program.separation.hamiltonian.time
    for k, rate in enumerate(setting.program.clock):
        if rate == 0:
            continue
        if not rate.has(time):
            value = Tape([rate], [time]).fix(setting.values).balls(arb(0))[0]
            elapsed = times - begin
            factor = float(value.mid())
            out[k] = elapsed if factor == 1.0 else elapsed * factor
            continue
        fixed = Tape([rate], [time]).fix(setting.values)
        out[k] = _integrated(fixed, begin, times)
    if not out:
        raise cannot("no relation of this motion contains time")
    return out


def _integrated(fixed: Fixed, begin: float, times: Floats) -> Floats:
    points = chebyshev.chebpts1(DEGREE + 1)
    transform = np.linalg.inv(chebyshev.chebvander(points, DEGREE))
    low, high = min(begin, float(times.min())), max(begin, float(times.max()))
    if high == low:
        return np.zeros_like(times)
    cells = np.array([[low, begin], [begin, high]])
    cells = cells[cells[:, 1] > cells[:, 0]]
    kept: list[tuple[Floats, Floats]] = []
    for level in range(LEVELS):
        middle, half = cells.mean(axis=1), np.diff(cells, axis=1)[:, 0] / 2
        at = middle[:, None] + half[:, None] * points
        with np.errstate(all="ignore"):
            values = np.broadcast_to(fixed.floats(at.ravel())[0], at.size).reshape(at.shape)
        if not np.isfinite(values).all():
            raise cannot("H has a singularity in time within the span asked for")
        series = values @ transform.T
        size = np.abs(values).max(axis=1)
        rough = np.abs(series[:, -3:]).max(axis=1) > 4e-16 * size + 1e-300
        if level == LEVELS - 1:
            rough[:] = False
        kept.append((cells[~rough], (series * half[:, None])[~rough]))
        if not rough.any():
            break
        bad = cells[rough]
        cut = bad.mean(axis=1)
        cells = np.concatenate(
            [np.column_stack([bad[:, 0], cut]), np.column_stack([cut, bad[:, 1]])]
        )
        if len(cells) > LIMIT:
            raise cannot("H varies too fast in time over the span asked for")
    every = np.concatenate([c for c, _ in kept])
    series = np.concatenate([s for _, s in kept])
    order = np.argsort(every[:, 0])
    every, series = every[order], series[order]
    grown = chebyshev.chebint(series, lbnd=-1, axis=1)
    ends = grown.sum(axis=1)
    grown[:, 0] += np.concatenate([[0.0], np.cumsum(ends)[:-1]])
    edges = np.append(every[:, 0], every[-1, 1])

    def value(t: Floats) -> Floats:
        k = np.clip(np.searchsorted(edges, t, side="right") - 1, 0, len(every) - 1)
        y = (2 * t - edges[k] - edges[k + 1]) / (edges[k + 1] - edges[k])
        return np.asarray(chebyshev.chebval(y, grown[k].T, tensor=False))

    return value(times) - value(np.array([begin]))[0]


def elapsed_exactly(setting: Setting) -> bool:
    """Whether t − t₀ is without rounding: the start is at time 0."""
    return exact(setting.time) == 0

"""States of a motion whose every coordinate librates, rotates or rests, at any times."""

from __future__ import annotations

from typing import Any

import numpy as np
from flint import arb
from numpy.polynomial import chebyshev
from numpy.typing import NDArray

from hjsolve.motion.numbers.cells import NODES, Cells
from hjsolve.motion.numbers.kepler_equations import coupled
from hjsolve.motion.numbers.movers import Guess, Mover, Periodic, added
from hjsolve.motion.numbers.order import blocks
from hjsolve.motion.numbers.oscillations import Branch, Frequencies
from hjsolve.motion.numbers.phases import TURN, double_double, product
from hjsolve.motion.numbers.tables import Inverse, fit
from hjsolve.motion.numbers.tape import cannot

Floats = NDArray[np.float64]

CHUNK = 4096
"""States done at a time, so that what lies between stays in the cache."""

SAMPLES = chebyshev.chebvander(np.linspace(-1, 1, 9), NODES - 1)

GRIDS = {2: 64, 3: 18}
"""Points an axis of the grid from which the phases of a block are guessed."""


def prepare(
    names: list[str],
    found: dict[int, Branch],
    flows: Frequencies,
    present: list[list[bool]],
    ticking: list[int],
    start_positions: list[float],
) -> Periodic:
    """Tables for a motion.

    Args:
        names: of all coordinates.
        found: index → branch of those that are not ignorable.
        flows: ∂α/∂J for all.
        present: which constants a coordinate's momentum contains.
        ticking: the constants k whose relation contains the time.
        start_positions: of all coordinates (ignorable ones use theirs).

    Raises:
        InputError: no relation grows steadily, or a table would be too large.
    """
    n = len(names)
    active = sorted(found)
    held = [j for j in range(n) if j not in found]
    taken = {k for j in held for k in range(n) if present[j][k]}
    kept = [k for k in range(n) if k not in taken] if len(taken) == len(held) else list(range(n))
    plan = [
        ([active[i] for i in rows], [kept[k] for k in columns])
        for rows, columns in blocks([[present[i][k] for k in kept] for i in active])
    ]
    out = Periodic(names, {}, [rows for rows, _ in plan], {}, {}, {})
    for rows, constants in plan:
        clock = _clock(found, rows, constants, n)
        for i in rows:
            if found[i].cells is not None:
                out.movers[i] = _mover(i, found[i], flows, clock, names[i])
        for i in rows:
            row = found[i].row or ()
            out.share[i] = float(sum(float(w) * r.mid() for w, r in zip(clock, row, strict=True)))
    turn = 2 * arb.pi()
    for j in range(n):
        out.rates[j] = [(k, double_double(flows.inverse[k][j] / turn)) for k in ticking]
        out.rate_error[j] = float(sum(flows.error[k][j] for k in ticking))
    for mover in out.movers.values():
        cell, y = mover.branch.cells.place(mover.branch.angle.start)  # type: ignore[union-attr]
        mover.start = mover.inverse.phase(cell, y)
    begin = {i: np.array([m.start]) for i, m in out.movers.items()}
    for j in range(n):
        own = out.movers[j].start if j in out.movers else start_positions[j] if j in held else 0.0
        out.theta[j] = own + float(added(out, j, begin)[0])
    for rows in out.plan:
        moving = [i for i in rows if i in out.movers]
        if len(moving) in GRIDS:
            out.guesses[moving[0]] = _guess(out, moving)
    return out


def _guess(motion: Periodic, rows: list[int]) -> Guess:
    """T of a block on a grid of its angles, with nothing added from other blocks."""
    count = GRIDS[len(rows)]
    axis = np.arange(count) * (TURN / count)
    theta = [x.ravel() for x in np.meshgrid(*[axis] * len(rows), indexing="ij")]
    failed: list[int] = []
    solved = coupled(motion, rows, theta, failed)
    parts = [(theta[c] - solved[c]).reshape((count,) * len(rows)) for c in range(len(rows) - 1)]
    return Guess(count, [np.ascontiguousarray(part).ravel() for part in parts])


def _clock(found: dict[int, Branch], rows: list[int], constants: list[int], n: int) -> Floats:
    """A combination of the block's constants whose relation is steady in every coordinate."""
    moving: list[Cells] = [cells for i in rows if (cells := found[i].cells) is not None]
    if not moving:
        return np.zeros(n)
    trials = [np.eye(n)[k] for k in reversed(constants)]
    if len(constants) > 1:
        sizes = [[float(np.abs(c.slopes[k, 0]).max()) for c in moving] for k in range(n)]
        scale = np.array(sizes).max(axis=1)
        for a in constants:
            for b in constants:
                if a < b and scale[a] and scale[b]:
                    for share in (0.1, 0.3, 1.0, 3.0, 10.0):
                        for side in (1, -1):
                            trial = np.eye(n)[a] / scale[a] + side * share * np.eye(n)[b] / scale[b]
                            trials.append(trial)
    best, quality = None, 0.0
    for k, trial in enumerate(trials):
        worst = 1.0
        for c in moving:
            rates = SAMPLES @ np.tensordot(trial, c.slopes, 1)
            low = float((rates * np.sign(rates.sum())).min() / (np.abs(rates).max() or 1.0))
            worst = min(worst, low)
        if worst > 0 and (best is None or (k >= len(constants) and worst > 3 * quality)):
            best, quality = trial, worst
            if k < len(constants):
                break
    if best is None:
        raise cannot("no relation between the coordinates of a block grows steadily")
    return best


def _mover(i: int, branch: Branch, flows: Frequencies, clock: Floats, name: str) -> Mover:
    cells = branch.cells
    assert cells is not None
    assert branch.row is not None
    n = len(clock)
    inverse = Inverse(cells, clock, TURN, name)
    share = arb(0)
    for w, r in zip(clock, branch.row, strict=True):
        share = share + arb(float(w)) * r
    mixtures: dict[int, Floats] = {}
    noise: dict[int, float] = {}
    for j in range(n):
        # τ_ij = Σ_k G_ik (F⁻¹)_kj − δΛ: the combination whose mean vanishes, formed in balls
        weights = [flows.inverse[k][j] for k in range(n)]
        mean = sum((r * w for r, w in zip(branch.row, weights, strict=True)), arb(0)) / share
        parts = [w - arb(float(m)) * mean for w, m in zip(weights, clock, strict=True)]
        mixed = [0.0 if x.contains(0) else float(x.mid()) for x in parts]
        total = sum(abs(x) * float(np.abs(cells.ends(k)).max()) for k, x in enumerate(mixed))
        if total:
            mixtures[j] = np.array(mixed)
            noise[j] = total
    rotating = branch.region.kind == "rotation"
    series = {j: np.tensordot(m, cells.integrals, 1) for j, m in mixtures.items()}
    for j in list(series):
        sampled = SAMPLES @ series[j][:NODES]
        if np.ptp(sampled) < 1e-15 * noise[j]:
            del series[j]
    drifting = cells.drift is not None
    stack = np.zeros((4 + len(series), NODES + 1, cells.count))
    stack[:3, :-1] = cells.state
    if cells.drift is not None:
        stack[3, :-1] = cells.drift
    for r, combined in enumerate(series.values()):
        stack[4 + r] = combined

    def columns(x: Floats) -> Floats:
        k, y = inverse.place(x)
        values = cells.many(stack, k, y)
        if rotating:
            values[0] -= x
        if branch.pole:
            return np.delete(values, [] if drifting else [3], axis=0)
        if drifting:
            values[1] += values[3]
        return np.delete(values, [2, 3], axis=0)

    head = 2 + (1 + (cells.drift is not None) if branch.pole else 0)
    sizes = np.array([0.0] * head + [noise[j] for j in series])
    table = fit(columns, inverse.ends[0], inverse.ends[-1], name, TURN, sizes)
    return Mover(i, branch, inverse, table, {j: head + r for r, j in enumerate(series)})


def states(motion: Periodic, ticks: dict[int, Floats]) -> tuple[Floats, Floats, list[int]]:
    """(coordinates, momenta, the states that were not solved) at many times.

    Both are (names, times); the momenta of ignorable coordinates, and whatever
    rests, are left 0.

    Args:
        motion: from ``prepare``.
        ticks: τ_k(t) − τ_k(t₀) for the constants whose relation contains time.
    """
    count = len(next(iter(ticks.values())))
    q = np.zeros((len(motion.names), count))
    p = np.zeros_like(q)
    failed: list[int] = []
    for begin in range(0, count, CHUNK):
        part = slice(begin, min(begin + CHUNK, count))
        failed += _chunk(motion, {k: x[part] for k, x in ticks.items()}, q[:, part], p[:, part])
    return q, p, failed


def _angle(motion: Periodic, j: int, ticks: dict[int, Floats]) -> tuple[Floats, Floats]:
    """θ_j: (whole turns, the rest in radians)."""
    whole: Any = 0.0
    rest: Any = 0.0
    for k, (high, low) in motion.rates[j]:
        t = ticks[k]
        value, lost = product(t, high)
        turns = np.rint(value)
        whole = whole + turns
        rest = rest + ((value - turns) + (lost + t * low))
    return whole, rest * TURN + motion.theta[j]


def _chunk(motion: Periodic, ticks: dict[int, Floats], q: Floats, p: Floats) -> list[int]:
    phases: dict[int, Floats] = {}
    wholes: dict[int, Floats] = {}
    failed: list[int] = []
    for rows in motion.plan:
        rows = [i for i in rows if i in motion.movers]
        if not rows:
            continue
        given = []
        for i in rows:
            whole, rest = _angle(motion, i, ticks)
            wholes[i] = whole
            given.append(rest - added(motion, i, phases) if phases else rest)
        solved = coupled(motion, rows, given, failed)
        phases |= dict(zip(rows, solved, strict=True))
    places = {i: motion.movers[i].table.find(x) for i, x in phases.items()}
    for i, x in phases.items():
        mover = motion.movers[i]
        k, y, _ = places[i]
        table = mover.table
        if not mover.met.size:
            mover.met = np.zeros(len(table.powers))
        visited = np.bincount(k, minlength=table.steep.shape[1]) > 0
        np.maximum(mover.met, table.steep[:, visited].max(axis=1), out=mover.met)
        first = table.column(0, k, y)
        second = table.column(1, k, y)
        if mover.branch.region.kind == "rotation":
            first += x
            first += wholes[i] * TURN
        if mover.branch.pole:
            with np.errstate(divide="ignore"):
                second = second / table.column(2, k, y)
            if mover.branch.cells is not None and mover.branch.cells.drift is not None:
                second = second + table.column(3, k, y)
        q[i], p[i] = first, second
    for j in range(len(motion.names)):
        if j not in phases:
            whole, rest = _angle(motion, j, ticks)
            total = rest
            for i, (k, y, _) in places.items():
                column = motion.movers[i].adds.get(j)
                if column is not None:
                    total = total - motion.movers[i].table.column(column, k, y)
            q[j] = total + whole * TURN
    return failed

"""One coordinate along its own clock, whether its motion is a cycle or not."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from flint import arb
from numpy.typing import NDArray

from hjsolve.motion.numbers.angle import ASYMPTOTE, Angle, angle_of
from hjsolve.motion.numbers.cells import NODES, Cells, build
from hjsolve.motion.numbers.oscillations import Branch
from hjsolve.motion.numbers.tables import Inverse, Table, fit
from hjsolve.motion.numbers.tape import cannot

Floats = NDArray[np.float64]

FURTHEST = 600
"""A u beyond which e^u is no distance any more."""

LONG = 1e30
"""A coordinate that has come so far without its relation growing escapes in finite time."""


@dataclass(slots=True)
class Stretch:
    """A coordinate as a function of x = s − s₀, where s = ±Σ_k w_k ∫∂p/∂α_k dq is its clock.

    ``means`` is what each relation grows a unit of s (0 for a motion without
    cycle); ``columns`` maps a constant to its column.  Beyond ``low`` and
    ``high`` an asymptotic coordinate stays where it is and its relations grow
    by ``slopes``; any other is outside its table.
    """

    branch: Branch
    angle: Angle
    weights: Floats
    sense: float
    table: Table
    columns: dict[int, int]
    means: dict[int, float]
    start: float
    low: float
    high: float
    period: float
    slopes: dict[int, tuple[float, float]]
    begin: dict[int, float]

    def grown(self, k: int, x: Floats) -> tuple[Floats, Floats]:
        """∫∂p/∂α_k dq from the start, and its derivative in x."""
        s = self.start + x
        inside, over = self._inside(s)
        cell, y, scale = self.table.locate(inside)
        if k not in self.columns:
            return np.zeros_like(x), np.zeros_like(x)
        value, slope = self.table.with_slope(self.columns[k], cell, y, scale)
        mean = self.means[k]
        low, high = self.slopes[k]
        value = value + mean * s - self.begin[k] + np.where(over < 0, low * over, high * over)
        slope = np.where(over < 0, low, np.where(over > 0, high, slope + mean))
        return value, slope

    def state(self, x: Floats) -> tuple[Floats, Floats, NDArray[np.bool_], tuple[float, float]]:
        """(q, p, whether x is within the table, the largest |dq/dx| and |dp/dx| met)."""
        s = self.start + x
        inside, over = self._inside(s)
        cell, y, scale = self.table.locate(inside)
        q, q_slope = self.table.with_slope(0, cell, y, scale)
        p, p_slope = self.table.with_slope(1, cell, y, scale)
        steep = float(np.abs(q_slope).max()) + 1e-3, float(np.abs(p_slope).max()) + 1e-3
        if self.branch.region.kind == "rotation":
            q = q + s * (2 * np.pi / self.period)
            steep = steep[0] + 2 * np.pi / self.period, steep[1]
        if self.branch.pole:
            with np.errstate(divide="ignore"):
                p = p / self.table.column(2, cell, y)
        asymptotic = self.angle.shape in ("front", "bank", "ramp")
        fine = (over == 0) | asymptotic
        return q, p, fine, steep

    def _inside(self, s: Floats) -> tuple[Floats, Floats]:
        if self.period:
            return self.table.reduced(s), np.zeros_like(s)
        inside = np.clip(s, self.low, self.high)
        return inside, s - inside


def sense_of(cells: Cells, weights: Floats) -> float:
    """The sign of the relation that is to be the clock; 0 where it is not steady."""
    steps = np.diff(sum(w * cells.ends(j) for j, w in enumerate(weights) if w))
    if (steps > 0).all():
        return 1.0
    return -1.0 if (steps < 0).all() else 0.0


def stretch(branch: Branch, n: int, weights: Floats, reach: float, name: str) -> Stretch:
    """A coordinate along the clock Σ w_k (relation k), as far as ``reach`` both ways.

    Raises:
        InputError: the clock is not steady, or infinity is reached before.
    """
    if branch.cells is not None and branch.angle is not None:
        return _tabulate(branch, branch.angle, branch.cells, n, weights, name)
    angle = angle_of(branch.coordinate, branch.region)
    pole = "pole" in (branch.region.lower.kind, branch.region.upper.kind)
    if pole:
        raise cannot(f"{name} comes from infinity to a pole of its momentum")
    if angle.shape in ("front", "bank"):
        low = arb(-ASYMPTOTE) if angle.shape == "front" else arb(0)
        cells = build(branch.coordinate, angle, n, low, arb(ASYMPTOTE))
        return _tabulate(branch, angle, cells, n, weights, name)
    begin = abs(float(angle.start.mid()))
    far = 4.0 + begin
    before = 0.0
    while True:
        low = {"well": 0.0, "line": -far, "ramp": -float(ASYMPTOTE)}[angle.shape]
        cells = build(branch.coordinate, angle, n, arb(low), arb(far))
        ends = sum(w * cells.ends(j) for j, w in enumerate(weights) if w)
        cell, y = cells.place(angle.start)
        here = sum(
            w * float(cells.at(cells.integrals[j], np.array([cell]), np.array([y]))[0])
            for j, w in enumerate(weights)
            if w
        )
        sides = [abs(float(ends[-1]) - here)]
        if angle.shape != "ramp":
            sides.append(abs(float(ends[0]) - here))
        covered = min(sides)
        if covered >= reach:
            return _tabulate(branch, angle, cells, n, weights, name)
        if covered < before * 1.0001 and far > 60:
            raise cannot(
                f"{name} reaches infinity when its relation has grown by {covered:.6g}, "
                f"before the last of the times asked for",
                "escape",
            )
        before = covered
        far *= 1.5
        if far > FURTHEST:
            raise cannot(f"{name} goes further than numbers reach")


def _tabulate(
    branch: Branch, angle: Angle, cells: Cells, n: int, weights: Floats, name: str
) -> Stretch:
    cyclic = angle.shape in ("circle", "turn")
    sense = sense_of(cells, weights)
    if not sense:
        raise cannot(f"no relation of {name} grows steadily")
    total = float(np.diff(sum(w * cells.ends(j) for j, w in enumerate(weights) if w)).sum())
    period = abs(total) if cyclic else 0.0
    inverse = Inverse(cells, weights, period, name)
    known = [k for k in range(n) if np.abs(cells.slopes[k]).max() > 0]
    means = {k: (float(cells.totals[k].mid()) / period if cyclic else 0.0) for k in known}
    rotating = branch.region.kind == "rotation"

    stack = np.zeros((4 + len(known), NODES + 1, cells.count))
    stack[:3, :-1] = cells.state
    if cells.drift is not None:
        stack[3, :-1] = cells.drift
    stack[4:] = cells.integrals[known]

    def columns(x: Floats) -> Floats:
        values = cells.many(stack, *inverse.place(x))
        if rotating:
            values[0] -= x * (2 * np.pi / period)
        values[1] += values[3] * (values[2] if branch.pole else 1.0)
        for r, k in enumerate(known):
            values[4 + r] -= means[k] * x
        return np.delete(values, [3] if branch.pole else [2, 3], axis=0)

    head = 3 if branch.pole else 2
    noise = np.zeros(head + len(known))
    if cyclic:
        noise[head:] = [float(np.abs(cells.ends(k)).max()) for k in known]
    low, high = float(inverse.ends[0]), float(inverse.ends[-1])
    if not cyclic:
        # what is rounded near the start stays so, however small a column gets there
        middle = int(np.searchsorted(inverse.ends, 0.0))
        left = float(inverse.ends[max(0, middle - 1)])
        right = float(inverse.ends[min(cells.count, middle + 1)])
        noise = np.abs(columns(np.linspace(left, right, 33))).max(axis=1)
    table = fit(columns, low, high, name, period, noise)
    cell, y = cells.place(angle.start)
    start = inverse.phase(cell, y)
    made = Stretch(
        branch,
        angle,
        weights,
        sense,
        table,
        {k: head + r for r, k in enumerate(known)},
        means,
        start,
        low,
        high,
        period,
        _end_slopes(cells, weights, sense, known),
        dict.fromkeys(known, 0.0),
    )
    zero = np.zeros(1)
    made.begin = {k: float(made.grown(k, zero)[0][0]) for k in known}
    return made


def _end_slopes(
    cells: Cells, weights: Floats, sense: float, known: list[int]
) -> dict[int, tuple[float, float]]:
    """What each relation grows a unit of the clock at both ends of the cells."""
    out = {}
    for k in known:
        pair = []
        for cell, y in ((0, -1.0), (cells.count - 1, 1.0)):
            rate = sum(w * cells.slope(j, cell, y) for j, w in enumerate(weights) if w) * sense
            pair.append(cells.slope(k, cell, y) / rate if rate else 0.0)
        out[k] = (pair[0], pair[1])
    return out

"""States of a motion in which a coordinate goes to infinity or to a separatrix.

There are no angle variables for all; the relations Σ_i ∫∂p_i/∂α_k dq_i = τ_k
are solved as they stand, block by block, each coordinate along a clock of its
own.  Errors grow with the number of cycles of what librates meanwhile, and are
said to.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from hjsolve.motion.numbers.numerics import monotone
from hjsolve.motion.numbers.order import blocks
from hjsolve.motion.numbers.oscillations import Branch, constant_slopes
from hjsolve.motion.numbers.start import Setting
from hjsolve.motion.numbers.stretches import Stretch, sense_of, stretch
from hjsolve.motion.numbers.tape import cannot

Floats = NDArray[np.float64]

EPS = 2.0**-52


class OpenMotion:
    """The relations of a motion without a common set of angle variables."""

    def __init__(
        self, setting: Setting, found: dict[int, Branch], present: list[list[bool]]
    ) -> None:
        self.setting = setting
        self.found = found
        self.n = len(setting.coordinates)
        self.present = present
        self.stretches: dict[int, Stretch] = {}
        self.moved: dict[int, Floats] = {}
        self.steep: dict[int, tuple[float, float]] = {}

    def states(self, ticks: dict[int, Floats]) -> tuple[Floats, Floats, dict[int, float]]:
        """(coordinates, momenta, the error of each coordinate's clock).

        Raises:
            InputError: this coupling has no numbers here, or infinity is reached in time.
        """
        n, count = self.n, len(next(iter(ticks.values())))
        active = sorted(self.found)
        held = [j for j in range(n) if j not in self.found]
        taken = {j: [k for k in range(n) if self.present[j][k]] for j in held}
        if any(len(ks) != 1 for ks in taken.values()):
            raise cannot("the ignorable momenta are not constants of their own")
        used = {ks[0] for ks in taken.values()}
        kept = [k for k in range(n) if k not in used]
        plan = blocks([[self.present[i][k] for k in kept] for i in active])
        right = {k: ticks.get(k, np.zeros(count)).copy() for k in range(n)}
        for rows, columns in plan:
            indices, constants = [active[i] for i in rows], [kept[k] for k in columns]
            if len(indices) == 1:
                self._alone(indices[0], constants[0], right)
            elif len(indices) == 2:
                self._pair(indices, constants, right)
            else:
                raise cannot("three coupled coordinates of which one goes to infinity")
            for i in indices:
                for k in range(n):
                    if self.present[i][k]:
                        right[k] = right[k] - self._grown(i, k)
        return self._write(held, taken, right, count)

    def _grown(self, i: int, k: int) -> Floats:
        if i in self.stretches:
            return self.stretches[i].grown(k, self.moved[i])[0]
        return self._row(i)[k] * self.moved[i]

    def _row(self, i: int) -> Floats:
        """What each relation of a resting coordinate grows, up to a common factor."""
        return np.array([float(r.mid()) for r in self.found[i].row or ()])

    def _rests(self, i: int) -> bool:
        return self.found[i].region.kind == "fixed"

    def _alone(self, i: int, k: int, right: dict[int, Floats]) -> None:
        if self._rests(i):
            self.moved[i] = right[k] / self._row(i)[k]
            return
        name = self.setting.coordinates[i].name
        reach = float(np.abs(right[k]).max()) * 1.01 + 1e-6
        made = stretch(self.found[i], self.n, np.eye(self.n)[k], reach, name)
        self.stretches[i] = made
        self.moved[i] = right[k] * made.sense

    def _pair(self, rows: list[int], constants: list[int], right: dict[int, Floats]) -> None:
        """Two coupled coordinates: one follows from the other by the relation without time."""
        if any(map(self._rests, rows)):
            self._beside_rest(sorted(rows, key=self._rests), constants, right)
            return
        timed = [k for k in constants if np.abs(right[k]).max() > 0]
        one, two = sorted(rows, key=lambda i: self.found[i].cells is not None)
        if self.found[two].cells is None:
            raise cannot("two coupled coordinates that both have no cycle")
        for a in sorted(constants, key=lambda k: k not in timed):
            b = constants[1 - constants.index(a)]
            unit = np.eye(self.n)[b]
            cells = self.found[two].cells
            assert cells is not None
            if sense_of(cells, unit) and self._solve_pair(one, two, a, b, right):
                return
        raise cannot("no relation between two coupled coordinates grows steadily")

    def _beside_rest(self, rows: list[int], constants: list[int], right: dict[int, Floats]) -> None:
        """A coordinate coupled to one that rests: the combination without the latter."""
        moving, resting = rows
        a, b = constants
        row = self._row(resting)
        if self._rests(moving):
            matrix = np.array([[self._row(i)[k] for i in rows] for k in constants])
            solved = np.linalg.solve(matrix, np.array([right[a], right[b]]))
            self.moved |= {moving: solved[0], resting: solved[1]}
            return
        weights = row[b] * np.eye(self.n)[a] - row[a] * np.eye(self.n)[b]
        goal = row[b] * right[a] - row[a] * right[b]
        name = self.setting.coordinates[moving].name
        reach = float(np.abs(goal).max()) * 1.01 + 1e-6
        made = stretch(self.found[moving], self.n, weights, reach, name)
        self.stretches[moving] = made
        self.moved[moving] = goal * made.sense
        k = a if abs(row[a]) > abs(row[b]) else b
        self.moved[resting] = (right[k] - self._grown(moving, k)) / row[k]

    def _solve_pair(self, one: int, two: int, a: int, b: int, right: dict[int, Floats]) -> bool:
        names = [self.setting.coordinates[i].name for i in (one, two)]
        second = stretch(self.found[two], self.n, np.eye(self.n)[b], 0.0, names[1])
        span = float(np.abs(right[a]).max())
        for margin in (1.5, 6.0, 40.0):
            first = stretch(
                self.found[one], self.n, np.eye(self.n)[a], margin * span + 1e-3, names[0]
            )

            def gap(x: Floats, first: Stretch = first) -> tuple[Floats, Floats]:
                mine, slope = first.grown(a, x)
                link, link_slope = first.grown(b, x)
                other = (right[b] - link) * second.sense
                value, its = second.grown(a, other)
                return (
                    mine + value - right[a],
                    slope - its * second.sense * link_slope,
                )

            zero = np.zeros_like(right[a])
            if first.period:
                width = margin * span * first.period / abs(first.means[a] * first.period or 1.0)
                low, high = zero - width - first.period, zero + width + first.period
            else:
                low, high = zero + first.low - first.start, zero + first.high - first.start
            edges = gap(low)[0], gap(high)[0]
            if (edges[0] * edges[1] <= 0).all():
                x = monotone(gap, np.clip(right[a] * first.sense, low, high), low, high)
                self.stretches |= {one: first, two: second}
                self.moved[one] = x
                self.moved[two] = (right[b] - first.grown(b, x)[0]) * second.sense
                return True
        return False

    def _write(
        self, held: list[int], taken: dict[int, list[int]], right: dict[int, Floats], count: int
    ) -> tuple[Floats, Floats, dict[int, float]]:
        q, p = np.zeros((self.n, count)), np.zeros((self.n, count))
        errors: dict[int, float] = {}
        loss = 0.0
        for i, made in self.stretches.items():
            q[i], p[i], fine, self.steep[i] = made.state(self.moved[i])
            if not fine.all():
                raise cannot("a coordinate left its table")
            if made.branch.region.kind == "rotation":
                turns = np.floor(float(self.setting.coordinates[i].q.mid()) / (2 * np.pi))
                q[i] += 2 * np.pi * turns
            size = float(np.abs(self.moved[i]).max()) + abs(made.start)
            loss = 4 * loss + 8 * EPS * size + float(made.table.error[2:].max(initial=0.0))
            errors[i] = loss
        for i in self.found:
            if self._rests(i):
                q[i] = float(self.setting.coordinates[i].q.mid())
                p[i] = float(self.setting.coordinates[i].p.mid())
                errors[i] = 0.0
        for j in held:
            c = self.setting.coordinates[j]
            factor = float(constant_slopes(c, self.n)[taken[j][0]].mid())
            q[j] = float(c.q.mid()) + right[taken[j][0]] / factor
            p[j] = float(c.p.mid())
            errors[j] = 4 * loss + 4 * EPS * float(np.abs(q[j]).max())
        return q, p, errors


def errors_of(
    motion: OpenMotion, errors: dict[int, float], q: Floats, p: Floats
) -> dict[str, float]:
    """An estimate for every name, from that of the clocks and the steepness of the tables."""
    out: dict[str, float] = {}
    h = motion.setting.program.separation.hamiltonian
    for j in range(motion.n):
        made = motion.stretches.get(j)
        for f, (name, x) in enumerate(((h.coordinates[j].name, q[j]), (h.momenta[j].name, p[j]))):
            size = float(np.abs(x).max())
            if made is None:
                out[name] = errors[j] if f == 0 else EPS * size
                continue
            out[name] = motion.steep[j][f] * errors[j] + float(made.table.error[f]) + 8 * EPS * size
    return out


def needed(found: list[Branch]) -> Any:
    """Whether a motion is not made of cycles alone."""
    return any(b.row is None for b in found)

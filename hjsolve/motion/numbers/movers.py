"""What a motion made of cycles is described by: its movers, their order, their angles.

The angle variables grow as θ_j = ω_j t + θ_j(0).  With Λ_i the phase in which
one relation of coordinate i (its clock) grows uniformly, θ_j = Λ_j + T_j,
T_j = Σ_i τ_ij(Λ_i): generalised Kepler equations.
"""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from hjsolve.motion.numbers.oscillations import Branch
from hjsolve.motion.numbers.phases import TURN
from hjsolve.motion.numbers.tables import Inverse, Table

Floats = NDArray[np.float64]


@dataclass(slots=True)
class Mover:
    """One coordinate with a cycle: its tables, and which columns hold what.

    ``adds`` maps the index of a coordinate (of all) to the column of τ.
    """

    index: int
    branch: Branch
    inverse: Inverse
    table: Table
    adds: dict[int, int]
    start: float = 0.0
    met: Floats = field(default_factory=lambda: np.zeros(0))
    """The steepest each column was where states were made."""


@dataclass(slots=True)
class Guess:
    """Values on a periodic grid, ``count`` points an axis, interpolated linearly."""

    count: int
    parts: list[Floats]

    def at(self, theta: list[Floats]) -> list[Floats]:
        """The parts at angles."""
        corners = [(np.zeros(len(theta[0]), dtype=np.intp), np.ones(len(theta[0])))]
        for angle in theta:
            place = angle * (self.count / TURN)
            floor = np.floor(place)
            share = place - floor
            index = floor.astype(np.intp) % self.count
            following = index + 1
            following[following == self.count] = 0
            corners = [
                (at * self.count + side, weight * part)
                for at, weight in corners
                for side, part in ((index, 1 - share), (following, share))
            ]
        return [
            sum(part.take(at) * weight for at, weight in corners)  # type: ignore[misc]
            for part in self.parts
        ]


@dataclass(slots=True)
class Periodic:
    """Everything needed for states at any time.

    ``rates`` (per coordinate, per constant with a clock of its own): turns per
    unit of τ_k, double-double; ``theta`` the angles at the start.
    """

    names: list[str]
    movers: dict[int, Mover]
    plan: list[list[int]]
    share: dict[int, float]
    rates: dict[int, list[tuple[int, tuple[float, float]]]]
    rate_error: dict[int, float]
    theta: dict[int, float] = field(default_factory=dict)
    guesses: dict[int, Guess] = field(default_factory=dict)


def added(motion: Periodic, j: int, phases: dict[int, Floats]) -> Floats:
    """T_j of given phases."""
    total = np.zeros_like(next(iter(phases.values()))) if phases else np.zeros(1)
    for i, x in phases.items():
        mover = motion.movers[i]
        if j in mover.adds:
            k, y, _ = mover.table.find(x)
            total = total + mover.table.column(mover.adds[j], k, y)
    return total

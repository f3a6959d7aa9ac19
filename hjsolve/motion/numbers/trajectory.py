"""The state at any times, through the angle variables."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hjsolve.algebra.balls import precision
from hjsolve.errors import InputError
from hjsolve.motion.numbers import clock, direct, periodic
from hjsolve.motion.numbers.movers import Periodic
from hjsolve.motion.numbers.open_motion import OpenMotion, errors_of
from hjsolve.motion.numbers.order import pattern
from hjsolve.motion.numbers.oscillations import Branch, branches, frequencies
from hjsolve.motion.numbers.phases import TURN
from hjsolve.motion.numbers.start import BITS, Number, Setting, set_up
from hjsolve.motion.numbers.tape import cannot
from hjsolve.records import Separation, Trajectory

Floats = NDArray[np.float64]

EPS = 2.0**-52

TIMES = 1_000_000
"""More states are not made in one call."""


def find_trajectory(
    separation: Separation,
    values: Mapping[str, Number],
    start: Mapping[str, Number],
    times: Sequence[float] | Floats,
    *,
    check: bool = False,
) -> Trajectory:
    """States at ``times``, in the units of the problem.

    Args:
        separation: of the problem; must be complete.
        values: numbers of the parameters left as letters.
        start: coordinates and momenta, and ``time`` (0 unless given).
        times: at most ``TIMES`` finite numbers, in any order.
        check: compare with direct integration of Hamilton's equations.

    Raises:
        InputError: a number is missing or unfit, or this motion has no numbers here.
    """
    at = np.asarray(times, dtype=float)
    if at.ndim != 1 or not len(at) or len(at) > TIMES or not np.isfinite(at).all():
        raise InputError(
            f"times must be 1 to {TIMES} finite numbers", pointer="/times", code="bad-times"
        )
    with precision(BITS):
        setting = set_up(separation, values, start)
        found = branches(setting)
        made = _made(setting, found, at)
    return direct.with_check(made, setting) if check else made


def movers_of(setting: Setting, found: list[Branch]) -> Periodic | None:
    """The tables of a motion made of cycles, for any times; None where it is not one.

    Raises:
        InputError: a table would be too large, or no relation grows steadily.
    """
    flows = frequencies(setting, found)
    if flows is None:
        return None
    return periodic.prepare(
        [c.name for c in setting.coordinates],
        _by_index(setting, found),
        flows,
        pattern(setting.program.separation, list(setting.program.equations)),
        [k for k, rate in enumerate(setting.program.clock) if rate != 0],
        [float(c.q.mid()) for c in setting.coordinates],
    )


def _by_index(setting: Setting, found: list[Branch]) -> dict[int, Branch]:
    index = {c.name: i for i, c in enumerate(setting.coordinates)}
    return {index[b.coordinate.name]: b for b in found}


def _made(setting: Setting, found: list[Branch], at: Floats) -> Trajectory:
    by_index = _by_index(setting, found)
    passed = clock.ticks(setting, at)
    motion = movers_of(setting, found)
    if motion is None:
        present = pattern(setting.program.separation, list(setting.program.equations))
        return _open(setting, by_index, present, at, passed)
    q, p, failed = periodic.states(motion, passed)
    if failed:
        raise cannot("the coupled phases were not solved at some of the times")
    for i, c in enumerate(setting.coordinates):
        if i not in motion.movers:
            p[i] = float(c.p.mid())
            if i in by_index:
                q[i] = float(c.q.mid())
    whole = _turns_of_start(setting, motion)
    for i, shift in whole.items():
        q[i] += shift
    errors = _errors(setting, motion, passed, q, p)
    return write(setting, at, q, p, errors, "angle variables")


def _open(
    setting: Setting,
    found: dict[int, Branch],
    present: list[list[bool]],
    at: Floats,
    passed: dict[int, Floats],
) -> Trajectory:
    ended = [b for b in found.values() if b.region.kind == "boundary"]
    if ended:
        raise cannot(f"{ended[0].coordinate.name} reaches the end of its domain in finite time")
    motion = OpenMotion(setting, found, present)
    q, p, losses = motion.states(passed)
    return write(setting, at, q, p, errors_of(motion, losses, q, p), "relations along clocks")


def _turns_of_start(setting: Setting, motion: Periodic) -> dict[int, float]:
    """What a rotating angle's start is from its value in [0, 2π)."""
    out = {}
    for i, mover in motion.movers.items():
        if mover.branch.region.kind == "rotation":
            q = float(setting.coordinates[i].q.mid())
            turns = math.floor(q / TURN)
            if turns:
                out[i] = turns * TURN
    return out


def write(
    setting: Setting, at: Floats, q: Floats, p: Floats, errors: dict[str, float], method: str
) -> Trajectory:
    """The record of states."""
    h = setting.program.separation.hamiltonian
    return Trajectory(
        at,
        tuple((s.name, q[i]) for i, s in enumerate(h.coordinates)),
        tuple((s.name, p[i]) for i, s in enumerate(h.momenta)),
        max(errors.values()),
        tuple(errors.items()),
        method,
    )


def _errors(
    setting: Setting, motion: Periodic, passed: dict[int, Floats], q: Floats, p: Floats
) -> dict[str, float]:
    """An estimate for every name: rounding, what the tables miss, what ω misses times t."""
    phase: dict[int, float] = {}
    exact = clock.elapsed_exactly(setting)
    for j in range(len(motion.names)):
        total = 4 * EPS * TURN
        for k, (high, _) in motion.rates[j]:
            span = float(np.abs(passed[k]).max())
            total += span * motion.rate_error[j]
            total += span * abs(high) * TURN * (1e-31 if exact else EPS)
        phase[j] = total
    for rows in motion.plan:
        for i in rows:
            if i in motion.movers:
                phase[i] += _spread(motion, i)
    out: dict[str, float] = {}
    h = setting.program.separation.hamiltonian
    for j in range(len(motion.names)):
        names = h.coordinates[j].name, h.momenta[j].name
        sizes = [float(np.abs(x[np.isfinite(x)]).max(initial=0.0)) for x in (q[j], p[j])]
        if j not in motion.movers:
            moving = q[j].size and float(np.ptp(q[j])) > 0
            out[names[0]] = (phase[j] + _spread(motion, j) + EPS * sizes[0]) if moving else 0.0
            out[names[1]] = EPS * sizes[1]
            continue
        table = motion.movers[j].table
        turning = motion.movers[j].branch.region.kind == "rotation"
        for f, name in enumerate(names):
            slope = float(motion.movers[j].met[f]) + (1.0 if turning and f == 0 else 0.0)
            rounding = EPS * (sizes[f] + float(table.size[f]))
            out[name] = slope * phase[j] + float(table.error[f]) + 2 * rounding
        if motion.movers[j].branch.pole:
            out[names[1]] = _pole_error(out[names[1]], p[j], table)
    return out


def _pole_error(error: float, p: Floats, table: Any) -> float:
    """The error of p = w/sin φ: those of both grow with 1/sin φ."""
    size = float(np.abs(p[np.isfinite(p)]).max(initial=0.0))
    return error * max(1.0, size / max(float(table.size[1]), 1e-300)) ** 2


def _spread(motion: Periodic, j: int) -> float:
    """What the tables of τ may add to the phase of coordinate j."""
    total = 0.0
    for mover in motion.movers.values():
        if j in mover.adds:
            column = mover.adds[j]
            total += float(mover.table.error[column]) + 4 * EPS * float(mover.table.size[column])
            total += float(mover.met[column]) * 4 * EPS * TURN
    return total

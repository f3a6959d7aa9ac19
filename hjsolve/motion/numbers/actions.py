"""Turning points, kinds of motion, actions and frequencies of a start state."""

from __future__ import annotations

import math
from collections.abc import Mapping
from itertools import product
from typing import Any

import numpy as np
from flint import arb

from hjsolve.algebra.balls import precision
from hjsolve.motion.numbers.angle import Angle
from hjsolve.motion.numbers.cells import build
from hjsolve.motion.numbers.enclosures import grown as grown_series
from hjsolve.motion.numbers.oscillations import Branch, Frequencies, branches, frequencies
from hjsolve.motion.numbers.start import BITS, Number, Setting, set_up
from hjsolve.motion.numbers.turning import Edge
from hjsolve.records import Actions, Estimate, Separation

RESONANCE = 6
"""Integer relations between frequencies are sought with entries up to this size."""


def estimate(x: Any, missed: float = 0.0, *, guaranteed: bool = False) -> Estimate:
    """A ball as a double with the bound of its error; ``missed`` comes on top."""
    value = float(x.mid())
    rest = abs(x - arb(value))
    bound = float(rest.mid()) + float(rest.rad()) + missed
    return Estimate(value, math.nextafter(bound * (1 + 1e-15), math.inf), guaranteed)


def find_actions(
    separation: Separation, values: Mapping[str, Number], start: Mapping[str, Number]
) -> Actions:
    """What the motion from a start state does in each coordinate.

    Args:
        separation: of the problem; must be complete.
        values: numbers of the parameters left as letters.
        start: coordinates and momenta, and ``time`` where H depends on it.

    Raises:
        InputError: a number is missing or unfit, or the motion cannot be taken apart.
    """
    with precision(BITS):
        setting = set_up(separation, values, start)
        found = branches(setting, cells=False)
        flows = frequencies(setting, found)
        return _write(setting, found, flows)


def _write(setting: Setting, found: list[Branch], flows: Frequencies | None) -> Actions:
    separation = setting.program.separation
    h = separation.hamiltonian
    by_name = {b.coordinate.name: b for b in found}
    kinds: list[tuple[str, str]] = []
    points: list[tuple[str, tuple[Estimate | None, Estimate | None]]] = []
    actions, rates, lines, notes = [], [], [], []
    explicit = h.explicit_time
    for j, c in enumerate(setting.coordinates):
        b = by_name.get(c.name)
        rate = None
        if flows is not None and not explicit:
            missed = float(flows.error[0][j])
            rate = estimate(flows.inverse[0][j], missed, guaranteed=flows.guaranteed)
        if b is None:
            kinds.append((c.name, "rotation" if c.angle else "unbounded"))
            points.append((c.name, (None, None)))
            actions.append((c.name, estimate(c.p, guaranteed=True) if c.angle else None))
            rates.append((c.name, rate if c.angle else None))
            if not c.angle:
                lines.append((c.name, rate))
            continue
        kinds.append((c.name, "unbounded" if b.region.kind == "boundary" else b.region.kind))
        points.append((c.name, (_end(b.region.lower), _end(b.region.upper))))
        action = None
        if b.action is not None:
            action = estimate(b.action, b.action_error, guaranteed=b.enclosure is not None)
        if b.region.kind == "fixed":
            action = Estimate(0.0, 0.0, guaranteed=True)
        actions.append((c.name, action))
        rates.append((c.name, rate if b.stable else None))
        notes += _notes(b)
    if flows is None:
        notes.append("frequencies: none, because the motion in a coordinate has no cycle")
    if explicit:
        notes.append("frequencies: none, because H depends on time explicitly")
    return Actions(
        tuple(
            (constant.symbol.name, estimate(a, guaranteed=True))
            for constant, a in zip(separation.constants, setting.alphas, strict=True)
        ),
        tuple(points),
        tuple(kinds),
        tuple(actions),
        tuple(rates),
        tuple(lines),
        tuple((name, _period(rate)) for name, rate in rates),
        _angles(setting, by_name, flows),
        _resonances([rate for _, rate in rates]),
        tuple(notes),
    )


def _end(edge: Edge) -> Estimate | None:
    if edge.kind not in ("root", "pole", "double"):
        return None
    return estimate(edge.at, guaranteed=edge.kind != "double")


def _notes(b: Branch) -> list[str]:
    name = b.coordinate.name
    if b.region.kind == "separatrix":
        return [f"{name} moves on a separatrix: its turning point is never reached"]
    if b.region.kind == "boundary":
        edge = b.region.lower if b.region.lower.kind == "boundary" else b.region.upper
        return [f"{name} reaches {edge.at.str(8, radius=False)}, the end of its domain"]
    if not b.stable:
        return [f"{name} rests at an unstable equilibrium"]
    if b.pole:
        return [f"the momentum of {name} grows beyond bound at a turning point"]
    return []


def _period(rate: Estimate | None) -> Estimate | None:
    if rate is None or abs(rate.value) <= 2 * rate.error:
        return None
    value = 2 * math.pi / abs(rate.value)
    relative = rate.error / (abs(rate.value) - rate.error)
    return Estimate(value, value * (relative + 5e-16), rate.guaranteed)


def _angles(
    setting: Setting, by_name: dict[str, Branch], flows: Frequencies | None
) -> tuple[tuple[str, float | None], ...]:
    """θ_j = Σ_ik G_ik (∂α_k/∂J_j) at the start; those of ignorable coordinates with them."""
    n = len(setting.alphas)
    if flows is None:
        return tuple((c.name, None) for c in setting.coordinates)
    inverse = np.array([[float(v.mid()) for v in row] for row in flows.inverse])
    grown = np.zeros(n)
    for c in setting.coordinates:
        b = by_name.get(c.name)
        if b is None:
            row = flows.matrix[setting.coordinates.index(c)]
            grown += float(c.q.mid()) * np.array([float(r.mid()) for r in row])
        elif b.enclosure is not None and b.angle is not None:
            grown += _within(b, b.angle)
        elif b.cells is not None and b.angle is not None:
            cell, y = b.cells.place(b.angle.start)
            at = np.array([cell]), np.array([y])
            grown += [b.cells.at(b.cells.integrals[k], *at)[0] for k in range(n)]
    theta = (grown @ inverse) % (2 * np.pi)
    fixed = {b.coordinate.name for b in by_name.values() if b.region.kind == "fixed"}
    lines = {c.name for c in setting.coordinates if c.name not in by_name and not c.angle}
    return tuple(
        (c.name, None if c.name in fixed | lines else float(theta[j]))
        for j, c in enumerate(setting.coordinates)
    )


def _within(b: Branch, angle: Angle) -> Any:
    """∫∂p/∂α_k dq from φ = 0 to the start, by the series or by quadrature there."""
    assert b.enclosure is not None
    assert b.row is not None
    n = len(b.row)
    if b.enclosure.series is not None:
        means = np.array([float(r.mid()) for r in b.row])
        return grown_series(b.enclosure.series, means, float(angle.start.mid()))
    start = angle.start
    if start == 0:
        return np.zeros(n)
    one_way = build(b.coordinate, angle, n, arb(0), abs(start), pole=b.pole)
    side = 0 if start < 0 else -1
    return np.array([one_way.ends(k)[side] for k in range(n)])


def _resonances(rates: list[Estimate | None]) -> tuple[tuple[int, ...], ...]:
    """Integer vectors with k·ω = 0 to the errors, the shortest of each direction."""
    known = [(j, r) for j, r in enumerate(rates) if r is not None]
    if not 2 <= len(known) <= 4:
        return ()
    largest = max(abs(r.value) for _, r in known)
    found: list[tuple[int, ...]] = []
    vectors = product(range(-RESONANCE, RESONANCE + 1), repeat=len(known))
    for v in sorted(vectors, key=lambda v: (sum(map(abs, v)), v)):
        first = next((x for x in v if x), 0)
        if first <= 0 or math.gcd(*v) != 1:
            continue
        total = sum(x * r.value for x, (_, r) in zip(v, known, strict=True))
        error = sum(abs(x) * r.error for x, (_, r) in zip(v, known, strict=True))
        if abs(total) <= error * 2 + 1e-15 * largest:
            full = [0] * len(rates)
            for x, (j, _) in zip(v, known, strict=True):
                full[j] = x
            if len(found) < len(known) - 1 and _independent(found, full):
                found.append(tuple(full))
    return tuple(found)


def _independent(found: list[tuple[int, ...]], new: list[int]) -> bool:
    rows = np.array([*found, new], dtype=float)
    return int(np.linalg.matrix_rank(rows)) == len(rows)

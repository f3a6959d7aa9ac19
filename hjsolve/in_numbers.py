"""The motion in numbers on one screen: read, separate, and evaluate for a start state."""

from __future__ import annotations

import json
from collections.abc import Mapping
from dataclasses import replace
from functools import lru_cache
from typing import Any

from hjsolve.algebra.roots import open_squares
from hjsolve.motion.numbers import find_actions, find_trajectory
from hjsolve.reading import read_problem
from hjsolve.records import Actions, Hamiltonian, Separation, Trajectory
from hjsolve.separation import detect, separate


@lru_cache(maxsize=64)
def separated(hamiltonian: Hamiltonian) -> Separation:
    """The separation alone, without quadratures and certificate."""
    opened = replace(hamiltonian, expression=open_squares(hamiltonian.expression))
    return separate(opened, detect(opened))


def actions(
    problem: Mapping[str, object], values: Mapping[str, Any], start: Mapping[str, Any]
) -> Actions:
    """Turning points, actions and frequencies; ``values`` may override the problem's numbers.

    Raises:
        InputError: see ``hjsolve.motion.numbers``.
    """
    separation, rest = _prepared(problem, values)
    return find_actions(separation, rest, start)


def trajectory(
    problem: Mapping[str, object],
    values: Mapping[str, Any],
    start: Mapping[str, Any],
    times: Any,
    *,
    check: bool = False,
) -> Trajectory:
    """States at ``times``; ``values`` may override the problem's numbers.

    Raises:
        InputError: see ``hjsolve.motion.numbers``.
    """
    separation, rest = _prepared(problem, values)
    return find_trajectory(separation, rest, start, times, check=check)


@lru_cache(maxsize=64)
def _read(problem: str) -> Hamiltonian:
    """The problem of a JSON text: a scan asks a thousand times for the same."""
    return read_problem(json.loads(problem))


def _prepared(
    problem: Mapping[str, object], values: Mapping[str, Any]
) -> tuple[Separation, dict[str, Any]]:
    """The separation with overridden numbers put in, and the values that are left."""
    read = _read(json.dumps(problem, default=str))
    numbers = {name for name, _ in read.numbers}
    changed = {name: value for name, value in values.items() if name in numbers}
    if changed:
        given = problem.get("parameters")
        assert isinstance(given, Mapping)
        put = {**problem, "parameters": {**given, **changed}}
        read = _read(json.dumps(put, default=str))
    return separated(read), {k: v for k, v in values.items() if k not in numbers}

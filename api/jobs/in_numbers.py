"""Actions and trajectories as they leave a worker: JSON text, or a NumPy archive."""

from __future__ import annotations

import io
import json
import math
from collections.abc import Callable
from functools import partial
from typing import Any

import numpy as np

from hjsolve.errors import InputError
from hjsolve.in_numbers import actions, trajectory
from hjsolve.records import Actions, Estimate, Trajectory


def answer_in_numbers(
    kind: str, problem: dict[str, Any], request: dict[str, Any], answer: str
) -> bytes:
    """The answer to a request for ``actions`` or a ``trajectory``.

    Raises:
        hjsolve.errors.InputError: the request cannot be meant, or this motion has no numbers.
    """
    if kind == "actions":
        work: Callable[[Any, Any], Any] = partial(actions, problem)
        write: Callable[[Any], dict[str, Any]] = actions_document
        pack: Callable[[list[Any]], bytes] = _actions_archive
    else:
        work = partial(_trajectory, problem, _times(request["times"]), bool(request["check"]))
        write, pack = trajectory_document, _trajectories_archive
    values, cases = request["values"], request["cases"]
    if cases is None:
        made = work(values, request["start"])
        return pack([made]) if answer == "npz" else _text(write(made))
    if kind == "trajectory" and len(cases) * len(_times(request["times"])) > STATES:
        raise InputError(
            f"{len(cases)} cases at {len(_times(request['times']))} times are more than"
            f" {STATES} states",
            pointer="/cases",
            code="too-many",
        )
    found = [_case(work, {**values, **case["values"]}, case["start"]) for case in cases]
    if answer == "npz":
        return pack(found)
    return _text({"cases": [_refusal(f) if _refused(f) else write(f) for f in found]})


STATES = 1_000_000
"""States made in one call, over all cases."""


def _trajectory(
    problem: dict[str, Any], times: Any, check: bool, values: Any, start: Any
) -> Trajectory:
    return trajectory(problem, values, start, times, check=check)


def _case(work: Callable[[Any, Any], Any], values: Any, start: Any) -> Any:
    """What a case of a scan gives; a refusal does not end the scan."""
    try:
        return work(values, start)
    except InputError as error:
        return error


def _refused(found: Any) -> bool:
    return isinstance(found, InputError)


def _refusal(error: InputError) -> dict[str, Any]:
    members = {"detail": error.detail, "code": error.code}
    return {"problem_detail": members | ({"pointer": error.pointer} if error.pointer else {})}


def _times(asked: Any) -> Any:
    if isinstance(asked, dict):
        return np.linspace(asked["from"], asked["to"], asked["count"])
    return np.array(asked, dtype=float)


def _number(value: Estimate | None) -> dict[str, Any] | None:
    if value is None:
        return None
    document: dict[str, Any] = {"value": value.value, "error": value.error}
    if value.guaranteed:
        document["guaranteed"] = True
    return document


def actions_document(found: Actions) -> dict[str, Any]:
    """The members that the contract names, and periods, angles, resonances and notes."""
    document: dict[str, Any] = {
        "constants": {name: _number(n) for name, n in found.constants},
        "turning_points": {
            name: [_number(low), _number(high)] for name, (low, high) in found.turning_points
        },
        "kinds": dict(found.kinds),
        "actions": {name: _number(n) for name, n in found.actions},
        "frequencies": {name: _number(n) for name, n in found.frequencies},
        "periods": {name: _number(n) for name, n in found.periods},
        "angles": dict(found.angles),
        "resonances": [list(each) for each in found.resonances],
    }
    if found.mean_rates:
        document["mean_rates"] = {name: _number(n) for name, n in found.mean_rates}
    if found.notes:
        document["notes"] = list(found.notes)
    return document


def trajectory_document(made: Trajectory) -> dict[str, Any]:
    """The members that the contract names, the errors of each name, and the checks asked for."""
    document: dict[str, Any] = {
        "times": made.times.tolist(),
        "coordinates": {name: _finite(x) for name, x in made.coordinates},
        "momenta": {name: _finite(x) for name, x in made.momenta},
        "error": _finite_or_none(made.error),
        "errors": {name: _finite_or_none(error) for name, error in made.errors},
        "method": made.method,
    }
    if made.checks:
        checks = [
            {"claim": c.claim, "verdict": str(c.verdict), "method": c.method, "bound": c.bound}
            for c in made.checks
        ]
        document["certificate"] = {"checks": checks}
    return document


def _finite(x: Any) -> list[float | None]:
    """Numbers, and null where the momentum is infinite (at a pole)."""
    if np.isfinite(x).all():
        found: list[float | None] = x.tolist()
        return found
    return [_finite_or_none(v) for v in x.tolist()]


def _finite_or_none(value: float) -> float | None:
    return value if math.isfinite(value) else None


def _trajectories_archive(found: list[Trajectory | InputError]) -> bytes:
    """A NumPy archive of ``times``, every coordinate and momentum by its name, and ``about``.

    One row a case (one alone is no matrix), nan where it was refused; ``about`` is JSON text.
    """
    good = next((f for f in found if isinstance(f, Trajectory)), None)
    if good is None:
        raise next(f for f in found if isinstance(f, InputError))
    names = [name for name, _ in (*good.coordinates, *good.momenta)]
    rows: dict[str, list[Any]] = {name: [] for name in names}
    about: list[dict[str, Any]] = []
    for made in found:
        if isinstance(made, InputError):
            about.append(_refusal(made))
            for name in names:
                rows[name].append(np.full(len(good.times), np.nan))
            continue
        about.append({"error": made.error, "errors": dict(made.errors), "method": made.method})
        for name, values in (*made.coordinates, *made.momenta):
            rows[name].append(values)
    single = len(found) == 1
    columns = {name: x[0] if single else np.array(x) for name, x in rows.items()}
    return _archive({"times": good.times, **columns}, about[0] if single else about)


def _actions_archive(found: list[Actions | InputError]) -> bytes:
    """A NumPy archive with an entry a case: ``actions_r``, ``frequencies_r``, ``alpha_1``, ….

    Each comes again with ``_error`` behind its name; nan where there is no such number.
    """
    columns: dict[str, list[float]] = {}
    about: list[dict[str, Any]] = []
    for place, made in enumerate(found):
        if isinstance(made, InputError):
            about.append(_refusal(made))
            continue
        about.append({"kinds": dict(made.kinds), "notes": list(made.notes)})
        groups = {"": made.constants, "actions_": made.actions}
        groups |= {"frequencies_": made.frequencies, "mean_rates_": made.mean_rates}
        groups |= {"periods_": made.periods}
        for prefix, numbers in groups.items():
            for name, number in numbers:
                for suffix in ("", "_error"):
                    key = f"{prefix}{name}{suffix}"
                    column = columns.setdefault(key, [math.nan] * len(found))
                    if number is not None:
                        column[place] = number.error if suffix else number.value
    return _archive({key: np.array(column) for key, column in columns.items()}, about)


def _archive(columns: dict[str, Any], about: Any) -> bytes:
    target = io.BytesIO()
    np.savez(target, allow_pickle=False, about=np.array(json.dumps(about)), **columns)
    return target.getvalue()


def _text(document: dict[str, Any]) -> bytes:
    return json.dumps(document, allow_nan=False).encode()

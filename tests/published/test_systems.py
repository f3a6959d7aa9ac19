"""The systems of systems.json: W and every ∂W/∂α in closed form, compared with mpmath.

Most of the long comparisons are marked slow; the ordinary run takes all families and,
of the comparisons, those of QUICK.
"""

from __future__ import annotations

import time
from collections.abc import Callable
from typing import Any

import pytest
from quadratures import Case, by_name, compare, listed, quadratures

from hjsolve.quadrature import integrate
from hjsolve.records import Antiderivative

SYSTEMS = listed("systems")
COUNT = 48
SLOWEST = 5.0
"""Seconds of processor time; the goal is 1.5."""

Answer = Callable[[dict[str, Any], str], tuple[Case, Antiderivative, float]]
INTEGRALS = [(entry, what) for entry in SYSTEMS for what in entry["families"]]


def of_integral(value: Any) -> str:
    return value if isinstance(value, str) else by_name(value)


@pytest.fixture(scope="module")
def answer() -> Answer:
    """The antiderivative of one integral of a system, worked out once."""
    known: dict[tuple[str, str], tuple[Case, Antiderivative, float]] = {}

    def find(entry: dict[str, Any], what: str) -> tuple[Case, Antiderivative, float]:
        key = entry["system"], what
        if key not in known:
            case = quadratures(entry)[what]
            began = time.process_time()
            found = integrate(case.integrand, case.variable, case.domain, seconds=30)
            known[key] = case, found, time.process_time() - began
        return known[key]

    return find


def test_every_system_has_its_action_and_all_its_constants() -> None:
    assert len({entry["system"] for entry in SYSTEMS}) == len(SYSTEMS) >= COUNT
    for entry in SYSTEMS:
        cases = quadratures(entry)
        letters = {n for n in cases["W"].symbols if n.startswith("alpha_")}
        assert set(cases) == set(entry["families"])
        assert set(entry["families"]) - {"W", "drift"} == letters


@pytest.mark.parametrize(("entry", "what"), INTEGRALS, ids=of_integral)
def test_definite_integrals(entry: dict[str, Any], what: str, answer: Answer) -> None:
    case, found, seconds = answer(entry, what)
    assert found.family == entry["families"][what], found.reason
    assert bool(found.closed_forms) == (found.family != "unevaluated")
    assert seconds < SLOWEST
    for index, formula in enumerate(found.closed_forms):
        compare(case, formula, f"{entry['system']} {what} {index}", entry.get("pole", "1"))

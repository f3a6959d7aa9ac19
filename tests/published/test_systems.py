"""The systems of systems.json: W and every ∂W/∂α in closed form, compared with mpmath.

The systems with many regimes take three quarters of the time and are marked slow.
"""

from __future__ import annotations

import time
from typing import Any

import pytest
from quadratures import by_name, compare, listed, operations, quadratures

from hjsolve.quadrature import integrate

SYSTEMS = listed("systems")
COUNT = 48
SLOWEST = 5.0
"""Seconds of processor time; the goal is 1.5."""

LONGEST = 310
"""Operations of a form, equal parts counted once; the goal for the action of Kerr is 300."""

MANY_REGIMES = (
    "Stark, eta",
    "two centres, xi",
    "two centres, xi, in the plane",
    "two centres, eta",
    "two centres, eta, in the plane",
    "Kerr, r",
    "Kerr, theta",
    "Schwarzschild, r",
    "Kepler with inverse cube",
)


def marked(entry: dict[str, Any], what: str) -> Any:
    slow = entry["system"] in MANY_REGIMES
    return pytest.param(entry, what, marks=[pytest.mark.slow] if slow else [])


INTEGRALS = [marked(entry, what) for entry in SYSTEMS for what in entry["families"]]


def of_integral(value: Any) -> str:
    return value if isinstance(value, str) else by_name(value)


def test_every_system_has_its_action_and_all_its_constants() -> None:
    assert len({entry["system"] for entry in SYSTEMS}) == len(SYSTEMS) >= COUNT
    for entry in SYSTEMS:
        cases = quadratures(entry)
        letters = {n for n in cases["W"].symbols if n.startswith("alpha_")}
        assert set(cases) == set(entry["families"])
        assert set(entry["families"]) - {"W", "drift"} == letters


@pytest.mark.parametrize(("entry", "what"), INTEGRALS, ids=of_integral)
def test_definite_integrals(entry: dict[str, Any], what: str) -> None:
    case = quadratures(entry)[what]
    began = time.process_time()
    found = integrate(case.integrand, case.variable, case.domain, seconds=30)
    assert time.process_time() - began < SLOWEST
    assert found.family == entry["families"][what], found.reason
    assert bool(found.closed_forms) == (found.family != "unevaluated")
    for index, formula in enumerate(found.closed_forms):
        assert operations(formula)[1] <= LONGEST
        compare(case, formula, f"{entry['system']} {what} {index}", entry.get("pole", "1"))

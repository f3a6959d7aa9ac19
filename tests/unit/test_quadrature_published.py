"""The suite of integrals in tests/published/integrals.json, by independent numerics.

Every closed form is compared with mpmath's quadrature to 30 digits (see quadratures.py).
"""

from __future__ import annotations

import itertools
import random
import sys
import time
from collections.abc import Callable
from pathlib import Path
from typing import Any

import mpmath
import pytest
import sympy as sp

sys.path.insert(0, str(Path(__file__).parents[1] / "published"))

from quadratures import SETS, Case, Numbers, by_name, compare, listed, read, real

from hjsolve.quadrature import integrate
from hjsolve.records import Antiderivative, Formula

SUITE = listed("integrals")

SLOWEST = 5.0
"""Seconds of processor time; the goal is 1.5."""


@pytest.fixture(scope="module")
def answers() -> Callable[[dict[str, Any]], tuple[Case, Antiderivative, float]]:
    """The antiderivative of an entry, worked out once."""
    known: dict[str, tuple[Case, Antiderivative, float]] = {}

    def answer(entry: dict[str, Any]) -> tuple[Case, Antiderivative, float]:
        if entry["system"] not in known:
            case = read(entry)
            began = time.process_time()
            found = integrate(case.integrand, case.variable, case.domain, seconds=30)
            known[entry["system"]] = case, found, time.process_time() - began
        return known[entry["system"]]

    return answer


CLOSED = [e for e in SUITE if e["family"] != "unevaluated"]


def test_the_suite_is_large_enough() -> None:
    assert len(CLOSED) >= 110
    assert len([e for e in SUITE if e["family"] == "elliptic"]) >= 55
    assert len(SUITE) - len(CLOSED) >= 4
    assert len({e["system"] for e in SUITE}) == len(SUITE)


@pytest.mark.parametrize("entry", SUITE, ids=by_name)
def test_family_and_regimes(entry: dict[str, Any], answers: Any) -> None:
    case, found, seconds = answers(entry)
    assert found.family == entry["family"], found.reason
    assert [[str(v) for v in f.valid] for f in found.closed_forms] == entry["regimes"]
    assert found.integrand == case.integrand
    assert bool(found.reason) == (entry["family"] == "unevaluated")
    assert seconds < SLOWEST


@pytest.mark.parametrize("entry", CLOSED, ids=by_name)
def test_regimes_exclude_each_other_and_leave_nothing_out(
    entry: dict[str, Any], answers: Any
) -> None:
    case, found, _ = answers(entry)
    anywhere = Numbers.of(case, Formula(case.integrand))
    strict = [f for f in found.closed_forms if all(v.rel_op == "<" for v in f.valid)]
    sides = [
        [Numbers.of(case, f).function(v.rhs - v.lhs) for v in f.valid]
        + [Numbers.of(case, f).function(1 + d.symbol**2) for d in f.where]
        for f in strict
    ]
    # half of a circle, or a rare pattern of roots, may be left out
    partial_domain = any(v.has(sp.pi) for f in strict for v in f.valid)
    partial_domain = partial_domain or any(f.where for f in strict)
    for q, values in itertools.islice(anywhere.points(random.Random(entry["system"])), 60):
        holding = [holds(conditions, values, q) for conditions in sides]
        assert sum(holding) == 1 or (partial_domain and not any(holding)), (q, values)


@pytest.mark.parametrize("entry", CLOSED, ids=by_name)
def test_definite_integrals(entry: dict[str, Any], answers: Any) -> None:
    case, found, _ = answers(entry)
    for index, formula in enumerate(found.closed_forms):
        compare(case, formula, f"{entry['system']} {index}", entry.get("pole", "1"))


@pytest.mark.parametrize("entry", [e for e in CLOSED if "between" in e], ids=by_name)
def test_values_between_the_turning_points(entry: dict[str, Any], answers: Any) -> None:
    case, found, _ = answers(entry)
    numbers = Numbers.of(case, found.closed_forms[0])
    integrand = numbers.function(case.integrand)
    antiderivative = numbers.function(found.closed_forms[0].expression)
    published = numbers.function(case.parse(entry["between"]))
    done = 0
    for q, values in numbers.points(random.Random(entry["system"])):
        ends = turning_points(numbers, integrand, q, values)
        if ends is None:
            continue
        with mpmath.workdps(60):
            want = published(values, 0)
            got = mpmath.re(antiderivative(values, ends[1]) - antiderivative(values, ends[0]))
            assert abs(got - want) < mpmath.mpf(10) ** -18 * (1 + abs(want)), (q, values)
        done += 1
        if done == SETS:
            return
    pytest.fail("too few bound motions found")


def holds(conditions: list[Callable[..., Any]], values: tuple[Any, ...], q: Any) -> bool:
    """Whether all conditions are met; those on a root that does not exist are not."""
    try:
        with mpmath.workdps(30):
            return all(real(side(values, q)) > 0 for side in conditions)
    except (IndexError, TypeError):
        return False


def turning_points(
    numbers: Numbers, integrand: Callable[..., Any], q: Any, values: tuple[Any, ...]
) -> tuple[Any, Any] | None:
    """Where the integrand stops being real on either side of q, to 50 digits."""
    ends = []
    with mpmath.workdps(60):
        for sign in (-1, 1):
            inside, step = mpmath.mpf(q), (abs(q) + 1) / mpmath.mpf(64)
            outside = None
            for _ in range(400):
                at = inside + sign * step
                if at <= 0 and numbers.case.domain.lower == 0:
                    at = inside / 2
                if real_or_none(integrand, at, values) is None:
                    outside = at
                    break
                inside = at
            if outside is None:
                return None
            for _ in range(170):
                middle = (inside + outside) / 2
                if real_or_none(integrand, middle, values) is None:
                    outside = middle
                else:
                    inside = middle
            ends.append(inside)
    return ends[0], ends[1]


def real_or_none(f: Callable[..., Any], at: Any, values: tuple[Any, ...]) -> Any | None:
    try:
        return real(f(values, at))
    except (ZeroDivisionError, OverflowError, TypeError):
        return None

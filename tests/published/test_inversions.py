"""Published motions in closed form: every formula obeys Hamilton's equations over three periods.

The systems are in inversions.json, each with its source.  Parameters and states
are drawn at random here; the formulas are evaluated by mpmath at 60 digits.
"""

from __future__ import annotations

import json
import random
from functools import cache
from pathlib import Path
from typing import Any

import mpmath
import pytest
import sympy as sp
from phase import WORKING, Curve, NotReal, State, holds, three_periods, value, with_names

from hjsolve.reading import read_problem
from hjsolve.records import Formula, Parametrisation, Solution
from hjsolve.solve import solve

ROWS = json.loads((Path(__file__).parent / "inversions.json").read_text(encoding="utf-8"))[
    "systems"
]
SETS = 2
"""States of the regime that are followed."""

DRAWS = 400
MOMENTS = 5
TINY = mpmath.mpf(10) ** -25


@cache
def answer(index: int) -> Solution:
    return solve(read_problem(ROWS[index]["request"]))


def in_time(solution: Solution, q: sp.Symbol) -> list[dict[sp.Symbol, Formula]]:
    """The explicit motion in each regime of one coordinate, with all others that are explicit."""
    motion = solution.motion
    assert motion is not None
    h = solution.hamiltonian
    p = dict(zip(h.coordinates, h.momenta, strict=True))
    known = {s: f for s, f in (*motion.coordinates, *motion.momenta) if f is not None}
    found = [known] if q in known else []
    for other in motion.others:
        if other.coordinate == q:
            found.append(known | {q: other.motion, p[q]: other.momentum})
    return found


def right_regime(row: dict[str, Any], formula: Formula) -> bool:
    return set(row.get("regime", ())) <= {str(v) for v in formula.valid}


def draws(solution: Solution, seed: str) -> Any:
    rng = random.Random(seed)
    for _ in range(DRAWS):
        try:
            state = State.drawn(solution.hamiltonian, solution.separation.constants, rng)
        except NotReal:
            continue
        betas = {
            sp.Symbol(f"beta_{k}", real=True): mpmath.mpf(rng.randint(-60, 60)) / 83
            for k in range(1, len(solution.separation.constants) + 1)
        }
        signs = {e.sign: mpmath.mpf(rng.choice((-1, 1))) for e in solution.separation.equations}
        yield state.numbers | betas | signs, rng


def moments(curve: Curve, formula: Formula, p: sp.Symbol, step: Any, at: Any, x: Any) -> Any:
    """Moments of three periods at which the motion is in its regime, with the coordinates then.

    ``x`` is (the variable, the names at hand); an escaping motion leaves the range of its
    parameter, where nothing is claimed.
    """
    variable, needed, rng = x
    end = three_periods(curve, p, step)
    for _ in range(5):
        found = []
        for _ in range(8 * MOMENTS):
            moment = end * mpmath.mpf(rng.randint(-500, 1000)) / 1001
            try:
                now = dict(at) | {s: curve(s, moment) for s in needed} | {variable: moment}
                if holds(formula.valid, with_names(formula.where, now)):
                    found.append((moment, now))
            except NotReal:
                continue
            if len(found) == MOMENTS:
                return found
        end /= 4
    pytest.fail("the motion is hardly ever in its regime")


def agrees(got: Any, wanted: Any) -> bool:
    return bool(abs(got - wanted) < TINY * (1 + abs(wanted)))


TIMED = [i for i, row in enumerate(ROWS) if "time" in row["inverts"].values()]
BY_PARAMETER = [i for i, row in enumerate(ROWS) if "parameter" in row["inverts"].values()]


def cases(indices: list[int]) -> list[Any]:
    """A case for each row, named, the slow ones marked."""
    return [
        pytest.param(
            i,
            id=ROWS[i]["system"].replace(" ", "-").replace(",", ""),
            marks=[pytest.mark.slow] if ROWS[i].get("slow") else [],
        )
        for i in indices
    ]


def test_enough_of_them_are_explicit() -> None:
    assert len(ROWS) >= 48
    assert len(TIMED) >= 27


@pytest.mark.parametrize("index", cases(TIMED))
def test_explicit_in_time(index: int) -> None:
    row, solution = ROWS[index], answer(index)
    h = solution.hamiltonian
    for q, p in zip(h.coordinates, h.momenta, strict=True):
        if row["inverts"].get(q.name) != "time":
            continue
        cases = [c for c in in_time(solution, q) if right_regime(row, c[q])]
        assert cases, f"{q} is not explicit"
        done = 0
        for at, rng in draws(solution, row["system"]):
            case = next((c for c in cases if _fits(c[q], at)), None)
            if case is None:
                continue
            rate = sp.diff(h.expression, p).free_symbols | sp.diff(h.expression, q).free_symbols
            needed = (rate & {*h.coordinates, *h.momenta}) | {q, p}
            assert needed <= set(case), needed
            with mpmath.workdps(WORKING):
                curve = Curve({s: case[s] for s in needed}, h.time, at)
                step = (abs(at[q]) + 1) / (10 * (abs(value(sp.diff(h.expression, p), at)) + 1))
                how = (h.time, needed, rng)
                for x, now in moments(curve, case[q], p, step, at, how):
                    velocity, force = sp.diff(h.expression, p), -sp.diff(h.expression, q)
                    assert agrees(curve.slope(q, x), value(velocity, now)), (q, x)
                    assert agrees(curve.slope(p, x), value(force, now)), (p, x)
                    _keeps(solution, at, now, needed)
            done += 1
            if done == SETS:
                break
        assert done == SETS, "too few states of the regime were drawn"


def _keeps(solution: Solution, at: Any, now: Any, needed: set[sp.Symbol]) -> None:
    """The constants are those asked for: it is this motion, not one of other constants."""
    h = solution.hamiltonian
    for c in solution.separation.constants:
        moving = c.first_integral.free_symbols & {*h.coordinates, *h.momenta}
        if moving <= needed:
            assert agrees(value(c.first_integral, now), at[c.symbol]), c.symbol


def _fits(formula: Formula, at: Any) -> bool:
    try:
        with mpmath.workdps(WORKING):
            return holds(formula.valid, with_names(formula.where, at))
    except NotReal:
        return False


@pytest.mark.parametrize("index", cases(BY_PARAMETER))
def test_by_a_parameter(index: int) -> None:
    row, solution = ROWS[index], answer(index)
    h = solution.hamiltonian
    wanted = {q for q in h.coordinates if row["inverts"].get(q.name) == "parameter"}
    assert solution.motion is not None
    given = [
        g
        for g in solution.motion.parametrisations
        if wanted <= {q for q, _ in g.coordinates} and right_regime(row, g.coordinates[0][1])
    ]
    assert given, "not given by a parameter"
    done = 0
    for at, rng in draws(solution, row["system"]):
        case = next((g for g in given if _fits(g.coordinates[0][1], at)), None)
        if case is None:
            continue
        with mpmath.workdps(WORKING):
            _follows(case, solution, at, rng)
        done += 1
        if done == SETS:
            return
    pytest.fail("too few states of the regime were drawn")


def _follows(case: Parametrisation, solution: Solution, at: Any, rng: random.Random) -> None:
    h, parameter = solution.hamiltonian, case.parameter
    laws = {s: f for s, f in case.laws if not f.expression.has(sp.Integral)}
    constants = {
        d.symbol: mpmath.mpf(rng.randint(-60, 60)) / 83
        for _, f in case.laws
        for d in f.where
        if d.free is not None
    }
    formulas = dict(case.coordinates) | dict(case.momenta) | laws
    curve = Curve(formulas, parameter, dict(at) | constants)
    rates = {s: f.expression for s, f in case.rates}
    momentum = dict(zip(h.coordinates, h.momenta, strict=True))
    p = momentum[case.coordinates[0][0]]
    moving = {q for q, _ in case.coordinates}
    needed = moving | {momentum[q] for q in moving}
    how = (parameter, needed, rng)
    formula = case.coordinates[0][1]
    for x, now in moments(curve, formula, p, mpmath.mpf(1) / 10, at, how):
        clock = value(rates[h.time], now)
        for q in moving:
            velocity, force = sp.diff(h.expression, momentum[q]), -sp.diff(h.expression, q)
            assert agrees(curve.slope(q, x), clock * value(velocity, now)), (q, x)
            assert agrees(curve.slope(momentum[q], x), clock * value(force, now)), (q, x)
        for s, rate in rates.items():
            if s != h.time:
                velocity = sp.diff(h.expression, momentum[s])
                assert agrees(value(rate, now), clock * value(velocity, now)), s
            if s in laws:
                assert agrees(curve.slope(s, x), value(rate, now)), (s, x)
        energy = solution.separation.constants[0]
        assert agrees(value(energy.first_integral, now), at[energy.symbol])

"""Published motions obey Hamilton's equations, and the solver's q(t) runs through them."""

from typing import Any

import flint
import mpmath
import pytest
import sympy as sp
from curve import as_number, runs_through
from formula import evaluate
from oracle import Problem
from phase_space import TINY, gradient, number, tree_of

from hjsolve.reading import read_problem
from hjsolve.records import Formula
from hjsolve.solve import solve


def state(row: dict[str, Any], time: Any, problem: Problem) -> dict[str, Any]:
    """Coordinates and momenta at a time (a number or a power series in time)."""
    values = {name: number(text, {}) for name, text in row["values"].items()}
    values[problem.time] = time
    found = dict(values)
    for name, text in row["others"].items():
        found[name] = number(text, values)
    for q, p in problem.pairs:
        if q in row["coordinates"]:
            found[q] = number(row["coordinates"][q], values)
            found[p] = number(row["momenta"][q], values)
    return found


def test_it_obeys_the_equations_of_motion(motions: dict[str, Any]) -> None:
    problem = Problem(motions["request"])
    with flint.ctx.workprec(400):
        for text in motions["times"]:
            time = number(text, {})
            series = state(motions, flint.acb_series([time, 1, 0]), problem)
            now = state(motions, time, problem)
            for q, p in problem.pairs:
                if q not in motions["coordinates"]:
                    continue
                velocity, force = gradient(problem.tree, [p, q], now, {})
                moving = [
                    flint.acb(x[1]) if isinstance(x, flint.acb_series) else flint.acb(0)
                    for x in (series[q], series[p])
                ]
                assert abs(moving[0] - velocity) < TINY
                assert abs(moving[1] + force) < TINY


@pytest.mark.usefixtures("forty_digits")
def test_the_solver_runs_through_it(motions: dict[str, Any]) -> None:
    solution = solve(read_problem(motions["request"]))
    assert solution.motion is not None
    found = {str(q): formula for q, formula in solution.motion.coordinates}
    formulas = [found[q] for q in motions["coordinates"]]
    assert None not in formulas
    problem = Problem(motions["request"])
    with flint.ctx.workprec(200):
        moments = [number(text, {}) for text in motions["times"]]
        states = [state(motions, time, problem) for time in moments]
        known = dict(states[0])
        for constant in solution.separation.constants:
            tree = tree_of(constant.first_integral, [])
            known[str(constant.symbol)] = evaluate(tree, states[0], {})
        known.pop(problem.time)
        numbers = {name: as_number(value) for name, value in known.items()}
        paths = [[as_number(s[q]) for q in motions["coordinates"]] for s in states]
        times = [as_number(time) for time in moments]
    assert runs_through(formulas, numbers, solution.hamiltonian.time, times, paths)


@pytest.mark.usefixtures("forty_digits")
def test_a_curve_that_misses_is_noticed() -> None:
    time, beta = sp.Symbol("t", real=True), sp.Symbol("beta_1", real=True)
    curve = [Formula(sp.sin(3 * (time + beta)))]
    times = [mpmath.mpf(k) / 10 for k in range(3)]
    hit = [[mpmath.sin(3 * t + 1)] for t in times]
    near = [[x[0] * (1 + mpmath.mpf(10) ** -12)] for x in hit]
    assert runs_through(curve, {}, time, times, hit)
    assert not runs_through(curve, {}, time, times, near)

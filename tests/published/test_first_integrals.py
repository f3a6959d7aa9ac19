"""Published first integrals are functions of the constants that the solver finds."""

import random
from typing import Any

import flint
from formula import parse
from oracle import Problem
from phase_space import TINY, bracket, gradient, rank_is, tree_of

from hjsolve.reading import read_problem
from hjsolve.separation import detect, separate


def test_it_commutes_with_the_hamiltonian(first_integrals: dict[str, Any]) -> None:
    problem = Problem(first_integrals["request"])
    rng = random.Random(1)
    with flint.ctx.workprec(400):
        point, functions = problem.point(rng), problem.functions_at(rng)
        energy = gradient(problem.tree, problem.names, point, functions)
        for formula in first_integrals["integrals"]:
            tree = parse(formula, problem.functions)
            claimed = gradient(tree, problem.names, point, functions)
            assert abs(bracket(claimed, energy)) < TINY
            assert any(abs(x) > TINY for x in claimed)


def test_the_solver_finds_it(first_integrals: dict[str, Any]) -> None:
    hamiltonian = read_problem(first_integrals["request"])
    separation = separate(hamiltonian, detect(hamiltonian))
    problem = Problem(first_integrals["request"])
    found = [constant.first_integral for constant in separation.constants]
    assert None not in found
    if separation.verdict.separability == "complete":
        assert len(found) == len(problem.pairs)
    rng = random.Random(2)
    with flint.ctx.workprec(400):
        point, functions = problem.point(rng), problem.functions_at(rng)
        rows = [
            gradient(tree_of(f, problem.functions), problem.names, point, functions) for f in found
        ]
        assert rank_is(rows, len(rows))
        assert all(abs(bracket(f, g)) < TINY for f in rows for g in rows)
        for formula in first_integrals["integrals"]:
            tree = parse(formula, problem.functions)
            claimed = gradient(tree, problem.names, point, functions)
            assert rank_is([*rows, claimed], len(rows))


def test_a_foreign_function_is_noticed() -> None:
    """L_x commutes with Kepler's H, but is no function of H, L² and L_z."""
    problem = Problem(
        {
            "coordinates": ["r", "theta", "phi"],
            "hamiltonian": "p_r**2/2 + (p_theta**2 + p_phi**2/sin(theta)**2)/(2*r**2) - 1/r",
        }
    )
    others = (
        "p_theta**2 + p_phi**2/sin(theta)**2",
        "p_phi",
        "p_theta*sin(phi) + p_phi*cos(phi)*cos(theta)/sin(theta)",
    )
    with flint.ctx.workprec(400):
        point = problem.point(random.Random(3))
        trees = (problem.tree, *(parse(f, []) for f in others))
        rows = [gradient(tree, problem.names, point, {}) for tree in trees]
        assert rank_is(rows[:3], 3)
        assert abs(bracket(rows[0], rows[3])) < TINY
        assert not rank_is(rows, 3)
        assert not abs(bracket(rows[2], rows[3])) < TINY

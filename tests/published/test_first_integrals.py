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
            gradient(tree_of(f, problem.functions), problem.names, point, functions)
            for f in found
        ]
        assert rank_is(rows, len(rows))
        assert all(abs(bracket(f, g)) < TINY for f in rows for g in rows)
        for formula in first_integrals["integrals"]:
            tree = parse(formula, problem.functions)
            claimed = gradient(tree, problem.names, point, functions)
            assert rank_is([*rows, claimed], len(rows))

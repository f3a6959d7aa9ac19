"""Published complete integrals solve the equation, and the solver's momenta are theirs."""

import random
from typing import Any

import flint
from formula import evaluate, parse
from oracle import Problem
from phase_space import TINY, number, tree_of

from hjsolve.reading import read_problem
from hjsolve.separation import detect, separate


def states(row: dict[str, Any], problem: Problem, functions: Any) -> list[dict[str, Any]]:
    """The points of the entry with the momenta that the published integral gives them."""
    values = {name: number(text, {}) for name, text in row["values"].items()}
    found = []
    for place in row["points"]:
        state = {**values, **{q: number(text, {}) for q, text in place.items()}}
        momenta = {
            p: evaluate(parse(row["gradient"][q], problem.functions), state, functions)
            for q, p in problem.pairs
        }
        found.append({**state, **momenta})
    return found


def test_it_solves_the_equation(complete_integrals: dict[str, Any]) -> None:
    problem = Problem(complete_integrals["request"])
    with flint.ctx.workprec(400):
        functions = problem.functions_at(random.Random(1))
        for state in states(complete_integrals, problem, functions):
            energy = evaluate(parse(complete_integrals["energy"], []), state, {})
            value = evaluate(problem.tree, state, functions)
            assert abs(flint.acb(value) - flint.acb(energy)) < TINY


def test_the_solver_has_the_same_momenta(complete_integrals: dict[str, Any]) -> None:
    hamiltonian = read_problem(complete_integrals["request"])
    separation = separate(hamiltonian, detect(hamiltonian))
    assert separation.verdict.separability == "complete"
    problem = Problem(complete_integrals["request"])
    with flint.ctx.workprec(400):
        functions = problem.functions_at(random.Random(1))
        first, second = states(complete_integrals, problem, functions)
        constants = {}
        for constant in separation.constants:
            tree = tree_of(constant.first_integral, problem.functions)
            here, there = (flint.acb(evaluate(tree, s, functions)) for s in (first, second))
            assert abs(here - there) < TINY, constant.meaning
            constants[str(constant.symbol)] = here
        for part in separation.equations:
            for state in (first, second):
                sides = []
                for sign in (1, -1):
                    values = {**state, **constants, str(part.sign): flint.fmpq(sign)}
                    for name in part.where:
                        values[str(name.symbol)] = evaluate(
                            tree_of(name.definition, problem.functions), values, functions
                        )
                    tree = tree_of(part.solution, problem.functions)
                    sides.append(flint.acb(evaluate(tree, values, functions)))
                wanted = flint.acb(state[str(part.momentum)])
                assert any(abs(side - wanted) < TINY for side in sides), part.coordinate

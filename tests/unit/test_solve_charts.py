"""Coordinate systems in the pipeline: searched, named, used, told."""

import json
from pathlib import Path

import pytest

from hjsolve.catalogue import catalogue
from hjsolve.errors import InputError
from hjsolve.reading import read_problem
from hjsolve.records import Truth
from hjsolve.solve import refuse_unknown_charts, solve
from hjsolve.writing import content_id, problem_document, solution_document

TWO_CENTRES = {
    "coordinates": ["x", "y"],
    "hamiltonian": "(p_x**2 + p_y**2)/2 - 1/sqrt((x-1)**2 + y**2) - 2/sqrt((x+1)**2 + y**2)",
    "charts": "search",
}


def test_two_centres_are_worked_out_in_elliptic_coordinates():
    solution = solve(read_problem(TWO_CENTRES))
    answer = solution_document(solution)
    assert [c["family"] for c in answer["charts"]] == ["elliptic"]
    assert sorted(answer["charts"][0]["geometry"]["foci"]) == [["-1", "0"], ["1", "0"]]
    assert answer["charts_complete"] is True
    assert answer["chart_used"] == 0
    assert [e["coordinate"] for e in answer["separated_equations"]] == ["mu", "nu"]
    assert answer["problem"]["coordinates"] == ["x", "y"]
    solves = [c for c in solution.certificate.checks if "Hamilton–Jacobi" in c.claim]
    assert [c.verdict for c in solves] == [Truth.PROVED]


def test_what_separates_as_given_stays_there():
    kepler = {
        "coordinates": ["x", "y"],
        "hamiltonian": "(p_x**2 + p_y**2)/2 + x**2 + 4*y**2",
        "charts": "search",
    }
    answer = solution_document(solve(read_problem(kepler)))
    assert answer["chart_used"] is None
    assert {c["family"] for c in answer["charts"]} == {"cartesian", "parabolic"}


def test_none_comes_with_its_proof():
    problem = TWO_CENTRES | {"hamiltonian": "(p_x**2 + p_y**2)/2 + x**2*y**2"}
    solution = solve(read_problem(problem))
    answer = solution_document(solution)
    assert answer["charts"] == []
    assert answer["charts_complete"] is True
    assert answer["verdict"]["separability"] == "none"
    claims = [c.claim for c in solution.certificate.checks]
    assert any("no orthogonal separable coordinates" in claim for claim in claims)


def test_a_named_system_is_tried():
    problem = TWO_CENTRES | {
        "hamiltonian": "(p_x**2 + p_y**2)/2 - 1/sqrt(x**2 + y**2)",
        "charts": ["polar", "cartesian"],
    }
    answer = solution_document(solve(read_problem(problem)))
    assert [c["family"] for c in answer["charts"]] == ["polar"]
    assert answer["charts_complete"] is False
    assert answer["chart_used"] == 0


def test_an_unknown_system_is_refused():
    with pytest.raises(InputError) as caught:
        refuse_unknown_charts(read_problem(TWO_CENTRES | {"charts": ["toroidal"]}))
    assert caught.value.pointer == "/charts"


def test_the_charts_asked_for_belong_to_the_problem():
    searched = read_problem(TWO_CENTRES)
    given = read_problem(TWO_CENTRES | {"charts": "as-given"})
    assert content_id(searched, "1") != content_id(given, "1")
    assert read_problem(problem_document(searched)) == searched


def test_the_catalogue_served_is_the_registry():
    served = json.loads((Path(__file__).parents[2] / "api/catalogue.json").read_text("utf-8"))
    assert served == json.loads(json.dumps(catalogue()))
    assert [c["dimension"] for c in served].count(2) == 4
    assert [c["dimension"] for c in served].count(3) == 11

"""Transformations through the real service and the real command."""

import json
import os
import subprocess
import sys

import pytest
from running import HERE, ROOT

OSCILLATOR = {
    "old": {"coordinates": ["q"], "momenta": ["p"]},
    "new": {"coordinates": ["Q"], "momenta": ["P"]},
    "parameters": {"m": "positive", "omega": "positive"},
    "hamiltonian": "p**2/(2*m) + m*omega**2*q**2/2",
    "generating_function": {"kinds": [1], "function": "m*omega*q**2*cot(Q)/2"},
}
CONTRACT = {
    "canonical", "old_in_new", "new_in_old", "new_hamiltonian", "generating_function",
    "generating_functions", "branches", "obstruction", "certificate",
}  # fmt: skip


def post(service, request, **more):
    return service.client.post("/v1/transformations", json=request, **more)


def test_the_answer_has_the_shape_of_the_contract(service):
    response = post(service, OSCILLATOR)
    assert response.status_code == 200, response.text
    assert response.headers["content-type"] == "application/json"
    answer = response.json()
    assert set(answer) >= CONTRACT
    assert answer["canonical"] is True
    assert set(answer["old_in_new"]) == {"q", "p"}
    assert set(answer["new_in_old"]) == {"Q", "P"}
    assert set(answer["old_in_new"]["q"]) >= {"infix", "latex"}
    assert answer["generating_function"]["kinds"] == [1]
    assert answer["new_hamiltonian"]["infix"] == "P*omega"
    assert len(answer["branches"]) == 1
    assert answer["obstruction"] is None
    assert {c["verdict"] for c in answer["certificate"]["checks"]} == {"proved"}
    assert "mathml" not in response.text


def test_mathml_on_request(service):
    answer = post(service, OSCILLATOR, params={"notation": "mathml"}).json()
    assert answer["old_in_new"]["q"]["mathml"].startswith("<math")


def test_what_is_not_canonical_shows_the_bracket(service):
    request = {k: v for k, v in OSCILLATOR.items() if k != "generating_function"}
    answer = post(service, {**request, "transformation": {"Q": "q**2", "P": "p/q"}}).json()
    assert answer["canonical"] is False
    assert answer["multiplier"]["infix"] == "2"
    assert answer["obstruction"]["bracket"] == ["Q", "P"]
    assert answer["obstruction"]["formula"]["infix"] == "2"


@pytest.mark.parametrize(
    ("change", "pointer"),
    [
        (
            {"generating_function": {"kinds": [2], "function": "q + P"}},
            "/generating_function/function",
        ),
        (
            {"generating_function": {"kinds": [1], "function": "q*P"}},
            "/generating_function/function",
        ),
        (
            {"generating_function": {"kinds": [5], "function": "q*Q"}},
            "/generating_function/kinds/0",
        ),
        (
            {"generating_function": {"kinds": [1, 1], "function": "q*Q"}},
            "/generating_function/kinds",
        ),
        ({"generating_function": None}, ""),
        ({"new": {"coordinates": ["q"], "momenta": ["P"]}}, "/new/coordinates/0"),
        ({"new": {"coordinates": ["Q", "R"]}}, "/new/coordinates"),
        ({"transformation": {"Q": "p"}}, "/generating_function"),
        ({"hamiltonian": "P**2"}, "/hamiltonian"),
        ({"surplus": 1}, "/surplus"),
        ({"domains": {"z": "line"}}, "/domains/z"),
    ],
)
def test_what_cannot_be_meant_is_a_422_that_points(service, change, pointer):
    response = post(service, {**OSCILLATOR, **change})
    assert response.status_code == 422, response.text
    assert response.headers["content-type"] == "application/problem+json"
    assert response.json().get("pointer") == pointer


def test_the_problem_in_the_new_variables_is_solved_too(service):
    answer = post(service, {**OSCILLATOR, "solve": True}).json()
    assert answer["new_problem"]["hamiltonian"] == "P*omega"
    name = answer["solution"]["id"]
    assert answer["solution"]["location"] == f"/v1/solutions/{name}"
    solution = service.wait_state(name, "finished")
    assert solution["verdict"]["separability"] == "complete"
    assert "solution" not in post(service, OSCILLATOR).json()


def test_a_new_hamiltonian_that_is_no_problem_says_why(service):
    request = {**OSCILLATOR, "solve": True, "hamiltonian": "p**2"}
    request["generating_function"] = {"kinds": [1], "function": "q*Q"}
    solution = post(service, request).json()["solution"]
    assert solution["problem_detail"]["status"] == 422


def test_decimal_numbers_stay_exact_in_later_steps(service):
    step = {
        "new": {"coordinates": ["A"], "momenta": ["B"]},
        "parameters": {"k": 0.1},
        "generating_function": {"kinds": [2], "function": "Q*B*k"},
    }
    request = {**OSCILLATOR, "generating_function": {"kinds": [1], "function": "q*Q"}}
    answer = post(service, {**request, "then": [step]}).json()
    assert answer["new_in_old"]["A"]["infix"] == "p/10"


def test_no_json_is_a_400(service):
    response = service.client.post("/v1/transformations", content=b"{")
    assert response.status_code == 400


def test_a_position_in_a_formula(service):
    request = {**OSCILLATOR, "generating_function": {"kinds": [1], "function": "q*Q + * 2"}}
    answer = post(service, request).json()
    assert answer["pointer"] == "/generating_function/function"
    assert answer["position"] == 6


def test_it_is_documented(service):
    document = service.client.get("/openapi.json").json()
    assert "/v1/transformations" in document["paths"]
    text = json.dumps(document)
    for reference in {part.split('"')[0] for part in text.split("#/components/schemas/")[1:]}:
        assert reference in document["components"]["schemas"], reference


def hjsolve(*arguments, given=None):
    clean = {k: v for k, v in os.environ.items() if not k.startswith("HJSOLVE_")}
    paths = os.pathsep.join([str(ROOT), str(HERE)])
    return subprocess.run(
        [sys.executable, "-P", "-m", "api.command", *map(str, arguments)],
        input=given,
        capture_output=True,
        env={**clean, "PYTHONPATH": paths},
        cwd=ROOT,
        timeout=60,
        check=False,
    )


def test_the_command_prints_for_a_person():
    done = hjsolve("transform", "-", given=json.dumps(OSCILLATOR).encode())
    assert done.returncode == 0, done.stderr.decode()
    text = done.stdout.decode()
    assert text.startswith("The transformation is canonical.")
    assert "K = P·ω" in text


def test_the_command_prints_the_answer_of_the_service(service):
    done = hjsolve("transform", "-", "--json", given=json.dumps(OSCILLATOR).encode())
    assert done.returncode == 0, done.stderr.decode()
    assert json.loads(done.stdout) == post(service, OSCILLATOR).json()


def test_the_command_refuses_a_degenerate_function():
    request = {**OSCILLATOR, "generating_function": {"kinds": [2], "function": "q + P"}}
    done = hjsolve("transform", "-", given=json.dumps(request).encode())
    assert done.returncode == 2
    assert "vanishes identically" in done.stderr.decode()
    assert done.stdout == b""

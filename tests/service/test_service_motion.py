"""Actions and trajectories over the wire, in the shapes of the contract."""

import io
import math

import numpy as np
import pytest
from scipy.special import ellipk

KEPLER = {
    "coordinates": ["r", "theta"],
    "momenta": ["p_r", "p_theta"],
    "hamiltonian": "p_r**2/(2*m) + p_theta**2/(2*m*r**2) - k/r",
    "parameters": {"m": "positive", "k": "positive"},
    "domains": {"r": "half-line", "theta": "angle"},
}
ASKED = {
    "values": {"m": 1, "k": 1},
    "start": {"r": 1, "theta": 0, "p_r": 0, "p_theta": 1.1},
}


@pytest.fixture(scope="module")
def kepler(service):
    return f"/v1/solutions/{service.post(KEPLER).json()['id']}"


def test_actions_of_kepler_are_the_closed_forms(service, kepler):
    response = service.client.post(f"{kepler}/actions", json=ASKED)
    assert response.status_code == 200, response.text
    answer = response.json()
    energy = 1.1**2 / 2 - 1
    assert answer["constants"]["alpha_1"]["value"] == pytest.approx(energy, rel=1e-15)
    assert answer["constants"]["alpha_1"]["guaranteed"] is True
    low, high = answer["turning_points"]["r"]
    assert low["value"] == 1
    assert high["value"] == pytest.approx(-1 / energy - 1, rel=1e-14)
    assert answer["turning_points"]["theta"] == [None, None]
    assert answer["kinds"] == {"r": "libration", "theta": "rotation"}
    assert answer["actions"]["theta"]["value"] == 1.1
    radial = 1 / math.sqrt(-2 * energy) - 1.1
    assert answer["actions"]["r"]["value"] == pytest.approx(radial, abs=1e-15)
    for name in ("r", "theta"):
        number = answer["frequencies"][name]
        assert abs(number["value"] - 0.79**1.5) <= number["error"] + 2e-16
    assert answer["resonances"] == [[1, -1]]


def test_a_trajectory_closes_after_a_period(service, kepler):
    energy = 1.1**2 / 2 - 1
    period = 2 * math.pi / (-2 * energy) ** 1.5
    times = [0, period, 1000 * period, -7 * period]
    response = service.client.post(f"{kepler}/trajectory", json={**ASKED, "times": times})
    assert response.status_code == 200, response.text
    answer = response.json()
    assert answer["times"] == times
    assert answer["coordinates"]["r"] == pytest.approx([1] * 4, abs=1e-12)
    turns = [0, 1, 1000, -7]
    assert answer["coordinates"]["theta"] == pytest.approx(
        [2 * math.pi * n for n in turns], abs=5e-12
    )
    assert answer["momenta"]["p_theta"] == [1.1] * 4
    assert 0 < answer["error"] < 1e-11
    assert isinstance(answer["method"], str)


def test_a_range_of_times_and_a_check(service, kepler):
    asked = {**ASKED, "times": {"from": 0, "to": 50, "count": 101}, "check": True}
    answer = service.client.post(f"{kepler}/trajectory", json=asked).json()
    assert len(answer["times"]) == len(answer["coordinates"]["r"]) == 101
    assert answer["times"][-1] == 50
    check = answer["certificate"]["checks"][0]
    assert "DOP853" in check["method"]
    assert check["bound"] < 1e-9


def test_large_answers_come_as_an_archive(service, kepler):
    asked = {**ASKED, "times": {"from": 0, "to": 1000, "count": 20_000}}
    response = service.client.post(
        f"{kepler}/trajectory", json=asked, headers={"Accept": "application/x-npz"}
    )
    assert response.headers["content-type"] == "application/x-npz"
    archive = np.load(io.BytesIO(response.content), allow_pickle=False)
    assert archive["r"].shape == archive["p_theta"].shape == (20_000,)
    r, p_r = archive["r"], archive["p_r"]
    energy = p_r**2 / 2 + 1.1**2 / (2 * r**2) - 1 / r
    assert np.abs(energy - (1.1**2 / 2 - 1)).max() < 1e-13


@pytest.mark.parametrize(
    ("change", "pointer"),
    [
        ({"values": {"m": 1}}, "/values"),
        ({"values": {"m": -1, "k": 1}}, "/values/m"),
        ({"values": {"m": 1, "k": 1, "g": 2}}, "/values/g"),
        ({"start": {"r": 1, "theta": 0, "p_r": 0}}, "/start"),
        ({"start": {"r": -1, "theta": 0, "p_r": 0, "p_theta": 1}}, "/start/r"),
        ({"start": {"r": "x", "theta": 0, "p_r": 0, "p_theta": 1}}, "/start/r"),
        ({"start": {"r": "1e999999999", "theta": 0, "p_r": 0, "p_theta": 1}}, "/start/r"),
    ],
)
def test_what_cannot_be_meant_is_refused_with_its_place(service, kepler, change, pointer):
    response = service.client.post(f"{kepler}/actions", json={**ASKED, **change})
    assert response.status_code == 422, response.text
    assert response.headers["content-type"] == "application/problem+json"
    assert response.json()["pointer"] == pointer


def test_values_override_a_number_of_the_problem(service):
    problem = {**KEPLER, "parameters": {"m": 1, "k": 5}}
    name = service.post(problem).json()["id"]
    answer = service.client.post(
        f"/v1/solutions/{name}/actions", json={**ASKED, "values": {"k": 1}}
    ).json()
    assert answer["constants"]["alpha_1"]["value"] == pytest.approx(1.1**2 / 2 - 1)


def test_what_does_not_separate_has_no_numbers(service):
    problem = {
        "coordinates": ["x", "y"],
        "hamiltonian": "(p_x**2 + p_y**2)/2 + x**4 + 3*x**2*y**2 + 8*y**4",
    }
    name = service.post(problem).json()["id"]
    start = {"x": 1, "y": 0.3, "p_x": 0, "p_y": 0.1}
    response = service.client.post(f"/v1/solutions/{name}/actions", json={"start": start})
    assert response.status_code == 422
    assert "separation" in response.json()["detail"]


def test_times_that_are_none(service, kepler):
    for times in ([], ["a"], {"from": 0, "to": 1}, {"from": 0, "to": 1, "count": 0}):
        response = service.client.post(f"{kepler}/trajectory", json={**ASKED, "times": times})
        assert response.status_code == 422
        assert response.json()["pointer"].startswith("/times")


def test_an_unknown_solution(service):
    response = service.client.post("/v1/solutions/nothing/actions", json=ASKED)
    assert response.status_code == 404


def test_a_scan_of_a_thousand_energies(service):
    problem = {
        "coordinates": ["q"],
        "hamiltonian": "p_q**2/2 - g*cos(q)",
        "parameters": {"g": "positive"},
        "domains": {"q": "angle"},
    }
    name = service.post(problem).json()["id"]
    speeds = [round(0.0035 * (k + 1), 4) for k in range(1000)]
    cases = [{"start": {"q": 0, "p_q": p}} for p in speeds]
    asked = {"values": {"g": 1}, "cases": cases}
    address = f"/v1/solutions/{name}/actions"
    answer = service.client.post(address, json=asked).json()["cases"]
    assert len(answer) == 1000
    for speed, each in zip(speeds, answer, strict=True):
        kind = "libration" if speed < 2 else "rotation"
        assert each["kinds"]["q"] == kind
        m = speed**2 / 4
        true = math.pi / (2 * ellipk(m)) if m < 1 else math.pi * math.sqrt(m) / ellipk(1 / m)
        assert each["frequencies"]["q"]["value"] == pytest.approx(true, rel=1e-12)
    headers = {"Accept": "application/x-npz"}
    response = service.client.post(address, json=asked, headers=headers)
    archive = np.load(io.BytesIO(response.content), allow_pickle=False)
    assert archive["frequencies_q"].shape == (1000,)
    assert archive["frequencies_q"][7] == answer[7]["frequencies"]["q"]["value"]


def test_a_case_that_is_refused_does_not_end_a_scan(service, kepler):
    cases = [{"start": ASKED["start"]}, {"start": {**ASKED["start"], "r": -1}}]
    asked = {"values": ASKED["values"], "cases": cases, "times": [0, 1, 2]}
    answer = service.client.post(f"{kepler}/trajectory", json=asked).json()["cases"]
    assert len(answer[0]["coordinates"]["r"]) == 3
    assert answer[1]["problem_detail"]["pointer"] == "/start/r"


def test_start_or_cases(service, kepler):
    for asked in ({"values": ASKED["values"]}, {**ASKED, "cases": [{"start": ASKED["start"]}]}):
        assert service.client.post(f"{kepler}/actions", json=asked).status_code == 422

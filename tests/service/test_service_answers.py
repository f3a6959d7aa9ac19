"""Answers of the real solver through the real service."""

import json

import pytest
from running import ROOT

SAMPLES = sorted((ROOT / "samples").glob("*.json"))
FORMULA_NOTATIONS = {"infix", "latex"}
CONTRACT = {
    "id", "state", "problem", "verdict", "hamilton_jacobi_equation", "constants",
    "separated_equations", "complete_integral", "motion", "certificate",
}  # fmt: skip


def formulas(value):
    """Every formula object in an answer."""
    if isinstance(value, dict):
        if isinstance(value.get("infix"), str):
            yield value
        for each in value.values():
            yield from formulas(each)
    elif isinstance(value, list):
        for each in value:
            yield from formulas(each)


def test_the_samples_are_there():
    assert len(SAMPLES) >= 10


@pytest.mark.parametrize("sample", SAMPLES, ids=[sample.stem for sample in SAMPLES])
def test_a_sample_is_solved(service, sample):
    problem = json.loads(sample.read_text("utf-8"))
    response = service.post(problem, prefer="wait=25")
    assert response.status_code == 200
    answer = response.json()
    assert answer["state"] == "finished", answer.get("problem_detail")
    assert set(answer) >= CONTRACT
    if problem.get("charts") == "search":
        assert answer["charts"]
        assert answer["charts_complete"] is True
    assert answer["verdict"]["separability"] in ("complete", "partial", "none", "undecided")
    assert not [c for c in answer["certificate"]["checks"] if c["verdict"] == "refuted"]
    assert all(set(formula) >= FORMULA_NOTATIONS for formula in formulas(answer))


def test_mathml_on_request_and_only_then(service):
    problem = json.loads((ROOT / "samples/satellite_kepler.json").read_text("utf-8"))
    plain = service.post(problem, prefer="wait=25").json()
    full = service.post(problem, params={"notation": "mathml"}).json()
    assert list(formulas(plain))
    assert not any("mathml" in formula for formula in formulas(plain))
    assert all(formula["mathml"].startswith("<math") for formula in formulas(full))
    fetched = service.client.get(f"/v1/solutions/{full['id']}", params={"notation": "mathml"})
    assert fetched.json() == full

    def stripped(value):
        if isinstance(value, dict):
            return {key: stripped(each) for key, each in value.items() if key != "mathml"}
        return [stripped(each) for each in value] if isinstance(value, list) else value

    assert stripped(full) == plain


def openapi(service):
    return service.client.get("/openapi.json").json()


def test_the_examples_of_the_schema_work(service):
    body = openapi(service)["paths"]["/v1/solutions"]["post"]["requestBody"]
    examples = body["content"]["application/json"]["examples"]
    assert len(examples) >= 3
    for name, example in examples.items():
        answer = service.post(example["value"], prefer="wait=25").json()
        assert answer["state"] == "finished", (name, answer)
        expected = "none" if "do not separate" in example["summary"] else "complete"
        assert answer["verdict"]["separability"] == expected


def test_the_schema_describes_errors_as_they_are(service):
    document = openapi(service)
    text = json.dumps(document)
    assert "HTTPValidationError" not in text
    for path, operations in document["paths"].items():
        for operation in operations.values():
            for status, response in operation["responses"].items():
                if path.startswith("/v1/") and int(status) >= 400:
                    assert list(response["content"]) == ["application/problem+json"]
    for reference in {part.split('"')[0] for part in text.split('"$ref": "#/')[1:]}:
        place = document
        for step in reference.split("/"):
            place = place[step]
    request = document["components"]["schemas"]["ProblemRequest"]
    assert request["additionalProperties"] is False
    assert set(request["required"]) == {"coordinates", "hamiltonian"}


def test_health(service):
    alive = service.client.get("/healthz")
    assert alive.json()["status"] == "alive"
    ready = service.client.get("/readyz")
    assert ready.status_code == 200
    assert ready.json() == {
        "ready": True,
        "checks": {"workers": True, "queue": True, "accepting": True},
    }

"""Every error has one shape, and nothing that can be posted stops the service."""

import json
import re
import socket

import pytest
from running import ROOT

OSCILLATOR = {
    "coordinates": ["x"],
    "hamiltonian": "p_x**2/(2*m) + k*x**2/2",
    "parameters": {"m": "positive", "k": "positive"},
}


def assert_problem(response, status):
    assert response.status_code == status, response.text
    assert response.headers["Content-Type"] == "application/problem+json"
    problem = response.json()
    assert problem["status"] == status
    assert problem["title"]
    assert problem["detail"]
    return problem


def post_text(service, content):
    return service.client.post(
        "/v1/solutions", content=content, headers={"Content-Type": "application/json"}
    )


NO_JSON = {
    "empty": b"",
    "half": b'{"coordinates": ["x"',
    "word": b"coordinates",
    "nan": b'{"coordinates": ["x"], "hamiltonian": "p_x", "parameters": {"m": NaN}}',
    "infinity": b'{"parameters": {"m": -Infinity}}',
    "twice": b'{"coordinates": ["x"], "time": "t", "time": "s"}',
    "twice-within": b'{"parameters": {"m": 1, "m": 2}}',
    "latin-1": '{"coordinates": ["é"]}'.encode("latin-1"),
    "utf-16": json.dumps(OSCILLATOR).encode("utf-16"),
    "surrogate": b'{"coordinates": ["\\ud800"], "hamiltonian": "p"}',
    "surrogate-key": b'{"\\udfff": 1}',
    "deep-lists": b"[" * 45_000 + b"]" * 45_000,
    "deep-open": b"[" * 90_000,
    "deep-objects": b'{"a":' * 15_000 + b"1" + b"}" * 15_000,
}


@pytest.mark.parametrize("content", NO_JSON.values(), ids=NO_JSON)
def test_what_is_no_json(service, content):
    problem = assert_problem(post_text(service, content), 400)
    assert problem["type"] == "/problems/not-json"


def test_no_json_is_told_with_its_place(service):
    problem = assert_problem(post_text(service, b'{"coordinates": ["x"], }'), 400)
    assert problem["position"] in (21, 23)
    assert "line 1" in problem["detail"]


def changed(**members):
    return {**OSCILLATOR, **members}


WITHOUT_MEANING = [
    ([], ""),
    ("text", ""),
    (3, ""),
    (True, ""),
    ({}, "/coordinates"),
    ({"coordinates": ["x"]}, "/hamiltonian"),
    (changed(coordinates=[]), "/coordinates"),
    (changed(coordinates="x"), "/coordinates"),
    (changed(coordinates=[1]), "/coordinates/0"),
    (changed(coordinates=["x", "x"]), "/coordinates/1"),
    (changed(coordinates=["x y"]), "/coordinates/0"),
    (changed(momenta=["p", "q"]), "/momenta"),
    (changed(momenta=[None]), "/momenta/0"),
    (changed(hamiltonian=7), "/hamiltonian"),
    (changed(hamiltonian=""), "/hamiltonian"),
    (changed(hamiltonian="p_x**2/2 + y"), "/hamiltonian"),
    (changed(hamiltonian="x" * 99_000), "/hamiltonian"),
    (changed(parameters={"m": "large", "k": 1}), "/parameters/m"),
    (changed(parameters={"m": True, "k": 1}), "/parameters/m"),
    (changed(parameters={"m": None, "k": 1}), "/parameters/m"),
    (changed(parameters={"m": [1], "k": 1}), "/parameters/m"),
    (changed(parameters=["m"]), "/parameters"),
    (changed(parameters={"": 1}), "/parameters/"),
    (changed(parameters={"a/b~c": 1}), "/parameters/a~1b~0c"),
    (changed(functions="V"), "/functions"),
    (changed(domains={"x": "sphere"}), "/domains/x"),
    (changed(domains={"x": [1]}), "/domains/x"),
    (changed(domains={"x": [2, 1]}), "/domains/x"),
    (changed(domains={"y": "line"}), "/domains/y"),
    (changed(domains={"x": {"from": 1}}), "/domains/x"),
    (changed(time=5), "/time"),
    (changed(time="x"), "/time"),
    (changed(charts="all"), "/charts"),
    (changed(charts=["toroidal"]), "/charts"),
    (changed(charts=[]), "/charts"),
    (changed(charts=3), "/charts"),
    (changed(parameter_conditions=True), "/parameter_conditions"),
    (changed(potential="x"), "/potential"),
    ({f"m{i}": i for i in range(5000)}, ""),
    (changed(coordinates=[f"x{i}" for i in range(9000)]), "/coordinates"),
    (changed(parameters={f"m{i}": i for i in range(4000)}), "/parameters"),
]


@pytest.mark.parametrize(
    ("content", "pointer"), WITHOUT_MEANING, ids=lambda value: f"{value!r:.40}"
)
def test_what_has_no_meaning(service, content, pointer):
    response = service.post(content)
    problem = assert_problem(response, 422)
    assert problem["type"] == "/problems/not-a-problem"
    assert problem.get("pointer", "") == pointer
    assert response.elapsed.total_seconds() < 2


def test_conditions_say_what_this_version_does(service):
    problem = assert_problem(service.post(changed(parameter_conditions=True)), 422)
    assert "this version" in problem["detail"].lower()
    assert problem["code"] == "not-in-scope"
    assert service.post(changed(charts="as-given"), "respond-async").status_code == 202


LONG = "9" * 5000


@pytest.mark.parametrize(
    "number", [LONG, f"{LONG}.5", "1e999999999999999999999", "1e9999999", "-1e-9999999"]
)
def test_numbers_out_of_range(service, number):
    content = b'{"coordinates": ["x"], "hamiltonian": "p_x**2/m", "parameters": {"m": %s}}'
    assert_problem(post_text(service, content % number.encode()), 422)


def test_numbers_are_exact(service):
    content = b'{"coordinates": ["x"], "hamiltonian": "m*p_x**2", "parameters": {"m": %s}}'
    texts = [b"0.1", b"1e-1", b'"0.1"', b'"1/10"', b"0.10000000000000000000"]
    names = set()
    for text in texts:
        response = service.client.post(
            "/v1/solutions", content=content % text, headers={"Prefer": "respond-async"}
        )
        assert response.json()["problem"]["parameters"] == {"m": "1/10"}
        names.add(response.json()["id"])
    assert len(names) == 1
    close = service.client.post("/v1/solutions", content=content % b"0.10000000000000000001")
    assert close.json()["id"] not in names


def test_a_formula_error_points_at_its_place(service):
    problem = assert_problem(service.post(changed(hamiltonian="p_x**2/(2*m) + * x")), 422)
    assert problem["pointer"] == "/hamiltonian"
    assert problem["position"] == 15
    assert problem["expected"]


def test_reading_refuses_under_respond_async_too(service):
    refused = service.post(changed(hamiltonian="p_x**2 + z"), prefer="respond-async")
    assert assert_problem(refused, 422)["pointer"] == "/hamiltonian"


@pytest.mark.parametrize("size", [100_001, 700_000])
def test_a_body_too_large(service, size):
    problem = assert_problem(post_text(service, b" " * size), 413)
    assert "100000" in problem["detail"]


def test_a_body_too_large_without_a_length(service):
    chunks = (b" " * 1000 for _ in range(200))
    assert_problem(service.client.post("/v1/solutions", content=chunks), 413)


def test_a_client_that_leaves_in_the_middle_of_its_body(service):
    head = b"POST /v1/solutions HTTP/1.1\r\nHost: x\r\nContent-Length: 1000\r\n\r\n{"
    with socket.create_connection(("127.0.0.1", service.port)) as connection:
        connection.sendall(head)
    assert service.client.get("/healthz").status_code == 200
    assert service.post(OSCILLATOR).status_code in (200, 202)
    assert "Traceback" not in service.log.read_text()


@pytest.mark.parametrize(
    ("method", "path", "status"),
    [
        ("GET", "/", 404),
        ("GET", "/v2/solutions", 404),
        ("GET", "/v1/solutions/unknown", 404),
        ("DELETE", "/v1/solutions/unknown", 404),
        ("GET", "/v1/solutions/unknown/progress", 404),
        ("GET", "/v1/solutions/%F0%9F%92%A5%0A", 404),
        ("POST", "/v1/solutions/unknown/actions", 404),
        ("POST", "/v1/solutions/unknown/trajectory", 404),
        ("POST", "/v1/transformations", 422),
        ("GET", "/problems/unknown", 404),
        ("GET", "/v1/solutions", 405),
        ("PUT", "/v1/solutions", 405),
        ("POST", "/v1/solutions/unknown", 405),
        ("POST", "/v1/solutions?notation=troff", 422),
    ],
)
def test_addresses_and_methods(service, method, path, status):
    response = service.client.request(method, path, json={})
    assert_problem(response, status)
    if status == 405:
        assert response.headers["Allow"]


@pytest.mark.parametrize(
    "prefer", ["wait=soon", "wait=-1", "wait=", "wait=1e9", "=", ";;,,", "wait", "handling=strict"]
)
def test_malformed_preferences_are_ignored(service, prefer):
    response = service.post(OSCILLATOR, prefer=prefer)
    assert response.status_code in (200, 202)
    assert "Preference-Applied" not in response.headers


def test_each_kind_of_error_is_explained_where_its_type_points(service):
    listed = service.client.get("/problems/unknown").json()["detail"]
    names = re.sub(r".*there are ", "", listed).rstrip(".").split(", ")
    assert len(names) > 9
    for name in names:
        explained = service.client.get(f"/problems/{name}").json()
        assert explained["type"] == f"/problems/{name}"
        assert explained["remedy"]
        assert 400 <= explained["status"] < 600


HOSTILE = json.loads((ROOT / "tests/unit/hostile.json").read_text("utf-8"))


@pytest.mark.parametrize("case", HOSTILE, ids=[f"{i}" for i in range(len(HOSTILE))])
def test_hostile_formulas(service, case):
    text = case["hamiltonian"]
    names = dict.fromkeys(re.findall(r"(?<![\w.])[A-Za-z_]\w*(?!\w*\()", text[:5000], re.ASCII))
    problem = {
        "coordinates": ["x"],
        "momenta": ["p"],
        "hamiltonian": text,
        "parameters": {name: "real" for name in list(names)[:90] if name not in ("x", "p")},
    }
    body = json.dumps(problem).encode()
    large = len(body) > 100_000
    response = service.client.post(
        "/v1/solutions", content=body, headers={"Prefer": "respond-async"}
    )
    assert response.elapsed.total_seconds() < 3
    if large:
        assert_problem(response, 413)
    elif case["expect"] == "reject":
        assert_problem(response, 422)
    else:
        assert response.status_code in (202, 422)
    if response.status_code == 202:
        name = response.json()["id"]
        deleted = service.client.delete(f"/v1/solutions/{name}")
        assert deleted.status_code == 200
        assert deleted.elapsed.total_seconds() < 1
    alive = service.client.get("/healthz")
    assert alive.status_code == 200
    assert alive.elapsed.total_seconds() < 0.5

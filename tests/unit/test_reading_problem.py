"""Requests -> Hamiltonians, field by field."""

from __future__ import annotations

from decimal import Decimal
from typing import Any

import pytest
from sympy import Function, Rational, Symbol, oo, pi, sin

from hjsolve.errors import InputError
from hjsolve.reading import read_problem
from hjsolve.records import Domain

KEPLER: dict[str, Any] = {
    "coordinates": ["r", "theta"],
    "momenta": ["p_r", "p_theta"],
    "hamiltonian": "p_r**2/(2*m) + p_theta**2/(2*m*r**2) - k/r",
    "parameters": {"m": "positive", "k": "nonzero"},
    "domains": {"r": "half-line", "theta": "angle"},
}


def changed(**fields: Any) -> dict[str, Any]:
    return {k: v for k, v in {**KEPLER, **fields}.items() if v is not ...}


def test_kepler() -> None:
    read = read_problem(KEPLER)
    r, theta = Symbol("r", positive=True), Symbol("theta", real=True)
    p_r, p_theta = Symbol("p_r", real=True), Symbol("p_theta", real=True)
    m, k = Symbol("m", positive=True), Symbol("k", nonzero=True, real=True)
    assert read.coordinates == (r, theta)
    assert read.momenta == (p_r, p_theta)
    assert read.expression == p_r**2 / (2 * m) + p_theta**2 / (2 * m * r**2) - k / r
    assert [(p.symbol, p.sign) for p in read.parameters] == [(k, "nonzero"), (m, "positive")]
    assert read.domains == (
        Domain("half-line", Rational(0), oo),
        Domain("angle", Rational(0), 2 * pi),
    )
    assert read.time == Symbol("t", real=True)
    assert not read.explicit_time
    assert hash(read) == hash(read_problem(KEPLER))


def test_defaults() -> None:
    read = read_problem({"coordinates": ["x"], "hamiltonian": "p_x^2 + t*x"})
    assert [p.name for p in read.momenta] == ["p_x"]
    assert read.domains == (Domain(),)
    assert read.explicit_time
    assert read.parameters == read.numbers == read.functions == ()
    explicit = {"momenta": None, "parameters": None, "functions": None, "domains": None}
    posted = {"coordinates": ["x"], "hamiltonian": "p_x^2 + t*x", "time": None, **explicit}
    assert read_problem(posted) == read
    assert read_problem(posted | {"charts": "as-given", "parameter_conditions": True}) == read
    assert read_problem(posted | {"charts": "search"}).charts == ("search",)
    assert read_problem(posted | {"charts": ["polar"]}).charts == ("polar",)


def test_nothing_is_inferred_of_domains() -> None:
    read = read_problem(changed(domains=...))
    assert [d.kind for d in read.domains] == ["line", "line"]
    assert read.coordinates[0].is_positive is None


@pytest.mark.parametrize(
    ("posted", "value"),
    [
        (3, Rational(3)),
        (0.1, Rational(1, 10)),
        (-2.5e-3, Rational(-1, 400)),
        (1e300, Rational(10) ** 300),
        ("3/7", Rational(3, 7)),
        ("-0.1", Rational(-1, 10)),
        (" +1e-40 ", Rational(1, 10**40)),
        ("1.5/2.5", Rational(3, 5)),
        (Decimal("0.30"), Rational(3, 10)),
        (0, Rational(0)),
    ],
)
def test_numbers_are_exact(posted: object, value: Rational) -> None:
    read = read_problem(changed(parameters={"m": "positive", "k": posted}))
    assert read.numbers == (("k", value),)
    assert read.expression.coeff(1 / read.coordinates[0], 1) == -value


def test_functions_and_interval() -> None:
    read = read_problem(
        {
            "coordinates": ["u"],
            "hamiltonian": "p_u^2 + V(u) + sin(a*tau)",
            "functions": ["W", "V"],
            "parameters": {"a": "negative"},
            "time": "tau",
            "domains": {"u": ["-pi/2", "a^2"]},
        }
    )
    a = Symbol("a", negative=True)
    assert read.functions == ("V", "W")
    assert read.expression.has(Function("V")(read.coordinates[0]), sin(a * read.time))
    assert read.domains == (Domain("interval", -pi / 2, a**2),)
    number = read_problem({"coordinates": ["u"], "hamiltonian": "p_u^2", "domains": {"u": [0, 1]}})
    assert number.domains == (Domain("interval", Rational(0), Rational(1)),)


@pytest.mark.parametrize(
    ("fields", "pointer", "code"),
    [
        ({"coordinates": ...}, "/coordinates", "missing"),
        ({"hamiltonian": ...}, "/hamiltonian", "missing"),
        ({"hamiltonian": 3}, "/hamiltonian", "wrong-type"),
        ({"coordinates": "r"}, "/coordinates", "wrong-type"),
        ({"coordinates": []}, "/coordinates", "empty"),
        ({"coordinates": ["r", 3]}, "/coordinates/1", "wrong-type"),
        ({"coordinates": ["r", "the ta"]}, "/coordinates/1", "bad-name"),
        ({"coordinates": ["r", "sin"]}, "/coordinates/1", "reserved-name"),
        ({"coordinates": ["r", "pi"]}, "/coordinates/1", "reserved-name"),
        ({"coordinates": ["r", "sigma_r"]}, "/coordinates/1", "reserved-name"),
        ({"coordinates": ["r", "r"]}, "/coordinates/1", "duplicate-name"),
        ({"coordinates": ["r", "х"]}, "/coordinates/1", "bad-name"),
        ({"coordinates": ["r", "<b>"]}, "/coordinates/1", "bad-name"),
        ({"momenta": ["p_r"]}, "/momenta", "wrong-count"),
        ({"momenta": {"p_r": 1}}, "/momenta", "wrong-type"),
        ({"momenta": ["p_r", "r"]}, "/momenta/1", "duplicate-name"),
        ({"coordinates": ["r", "q" * 39], "momenta": ...}, "/coordinates/1", "bad-name"),
        ({"parameters": ["m"]}, "/parameters", "wrong-type"),
        ({"parameters": {"m": "positive", "k": True}}, "/parameters/k", "bad-parameter"),
        ({"parameters": {"m": "positive", "k": None}}, "/parameters/k", "bad-parameter"),
        ({"parameters": {"m": "positive", "k": "big"}}, "/parameters/k", "bad-parameter"),
        ({"parameters": {"m": float("nan")}}, "/parameters/m", "bad-parameter"),
        ({"parameters": {"m": float("inf")}}, "/parameters/m", "bad-parameter"),
        ({"parameters": {"m": "1/0"}}, "/parameters/m", "division-by-zero"),
        ({"parameters": {"m": "1e99999"}}, "/parameters/m", "number-too-large"),
        ({"parameters": {"m": 10**5000}}, "/parameters/m", "number-too-large"),
        ({"parameters": {"a/b~": "real"}}, "/parameters/a~1b~0", "bad-name"),
        ({"parameters": {"m": "real", "k": "real", "t": 1}}, "/time", "duplicate-name"),
        ({"parameters": {"m": "positive"}}, "/hamiltonian", "unknown-name"),
        ({"parameters": {"m": 0, "k": "real"}}, "/hamiltonian", "division-by-zero"),
        ({"functions": "V"}, "/functions", "wrong-type"),
        ({"functions": ["integral"]}, "/functions/0", "reserved-name"),
        ({"functions": ["m"]}, "/functions/0", "duplicate-name"),
        ({"domains": ["r"]}, "/domains", "wrong-type"),
        ({"domains": {"x": "line"}}, "/domains/x", "unknown-name"),
        ({"domains": {"r": "circle"}}, "/domains/r", "bad-domain"),
        ({"domains": {"r": [0]}}, "/domains/r", "bad-domain"),
        ({"domains": {"r": [1, "1"]}}, "/domains/r", "bad-domain"),
        ({"domains": {"r": ["0", "r"]}}, "/domains/r/1", "unknown-name"),
        ({"domains": {"r": [0, True]}}, "/domains/r/1", "bad-parameter"),
        ({"time": 3}, "/time", "wrong-type"),
        ({"time": "r"}, "/time", "duplicate-name"),
        ({"hamiltonian": "p_r**2*m*k + r*theta"}, "/coordinates/1", "no-momentum"),
        ({"hamiltonian": "p_r**2*m*k + p_theta - p_theta"}, "/coordinates/1", "no-momentum"),
        ({"parameter": {}}, "/parameter", "unknown-field"),
    ],
)
def test_refusals(fields: dict[str, Any], pointer: str, code: str) -> None:
    with pytest.raises(InputError) as refusal:
        read_problem(changed(**fields))
    assert (refusal.value.pointer, refusal.value.code) == (pointer, code)
    assert refusal.value.detail


def test_a_problem_is_an_object() -> None:
    with pytest.raises(InputError, match="a problem is an object"):
        read_problem([KEPLER])  # type: ignore[arg-type]


def test_too_many_names() -> None:
    many = {f"x{i}": "real" for i in range(3000)}
    with pytest.raises(InputError) as refusal:
        read_problem(changed(parameters=many))
    assert refusal.value.code == "too-many-names"

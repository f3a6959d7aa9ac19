"""Every transformation of transformations.json, checked by numbers at points."""

import itertools
import json
import time
from pathlib import Path
from typing import Any

import mpmath
import pytest
from canonical import close, kind_variables, sample, slope, value

from hjsolve.errors import InputError
from hjsolve.transform import document, transform

ROWS = json.loads((Path(__file__).parent / "transformations.json").read_text("utf-8"))
REFUSED = [row for row in ROWS if "refused" in row["expect"]]
CANONICAL = [row for row in ROWS if row["expect"].get("canonical")]
OTHERS = [row for row in ROWS if row["expect"].get("canonical") is False]
POINTS = 3
PARTLY = 30
"""Points looked at where a function says it is right on a part of the branch."""
SECONDS = 6.0
"""Of the processor; twice what the slowest took when measured."""

_answers: dict[str, dict[str, Any]] = {}
_seconds: dict[str, float] = {}


def answer(row: dict[str, Any]) -> dict[str, Any]:
    if row["id"] not in _answers:
        began = time.process_time()
        _answers[row["id"]] = document(transform(row["request"]), ("infix",))
        _seconds[row["id"]] = time.process_time() - began
    return _answers[row["id"]]


def points(row: dict[str, Any], found: dict[str, Any], count: int = POINTS) -> list[dict[str, Any]]:
    """Old and new variables that belong together, by the expected map, else by the answer's."""
    expected = row["expect"].get("old_in_new", {})
    made = []
    for seed in range(count):
        at = sample(row, seed)
        if found["old_in_new"] is not None:
            for name, formula in found["old_in_new"].items():
                at[name] = value(formula["infix"], at)
        for name, text in expected.items():
            want = value(text, at)
            assert close(at.get(name, want), want), (name, text)
            at[name] = want
        made.append(at)
    return made


def ids(rows: list[dict[str, Any]]) -> list[str]:
    return [row["id"] for row in rows]


def test_there_are_enough_of_them() -> None:
    assert len(CANONICAL) >= 40
    assert len(OTHERS) >= 10


@pytest.fixture(autouse=True)
def sixty_digits() -> Any:
    with mpmath.workdps(60):
        yield


@pytest.mark.parametrize("row", REFUSED, ids=ids(REFUSED))
def test_what_has_no_meaning_is_refused(row: dict[str, Any]) -> None:
    with pytest.raises(InputError) as refused:
        transform(row["request"])
    assert refused.value.code == row["expect"]["refused"]
    assert refused.value.pointer.split("/")[1] in ("generating_function", "transformation")


@pytest.mark.parametrize("row", OTHERS, ids=ids(OTHERS))
def test_near_misses_are_not_canonical(row: dict[str, Any]) -> None:
    found, expect = answer(row), row["expect"]
    assert found["canonical"] is False
    if expect["multiplier"]:
        at = sample(row, 0)
        assert close(value(found["multiplier"]["infix"], at), value(expect["multiplier"], at))
    else:
        assert "multiplier" not in found
    wrong = found["obstruction"]
    assert abs(wrong["excess"]["mid"]) > wrong["excess"]["radius"]
    at = {
        name: mpmath.mpf(0.5) + k / 7 for k, name in enumerate(row["request"].get("parameters", {}))
    }
    for k, name in enumerate(
        [*row["request"]["old"]["coordinates"], *row["request"]["old"]["momenta"], "t"]
    ):
        at[name] = mpmath.mpf(3 + k) / 11
    at |= {name: value(text, {}) for name, text in wrong["point"].items()}
    assert close_to(_bracket(row, wrong["bracket"], at), value(wrong["formula"]["infix"], at))
    assert abs(_bracket(row, wrong["bracket"], at) - wrong["value"]["mid"]) < 1e-9
    if "obstruction" in expect and expect["obstruction"]["bracket"] == wrong["bracket"]:
        assert close(
            value(wrong["formula"]["infix"], at), value(expect["obstruction"]["value"], at)
        )
    if "new_hamiltonian" in expect:
        at = points(row, found)[0]
        assert close(
            value(found["new_hamiltonian"]["infix"], at), value(expect["new_hamiltonian"], at)
        )


def close_to(a: Any, b: Any) -> bool:
    return bool(abs(a - b) < mpmath.mpf(10) ** -25 * (1 + abs(a)))


def _bracket(row: dict[str, Any], pair: list[str], at: dict[str, Any]) -> Any:
    old, formulas = row["request"]["old"], row["request"]["transformation"]
    return sum(
        slope(formulas[pair[0]], q, at) * slope(formulas[pair[1]], p, at)
        - slope(formulas[pair[0]], p, at) * slope(formulas[pair[1]], q, at)
        for q, p in zip(old["coordinates"], old["momenta"], strict=True)
    )


@pytest.mark.parametrize("row", CANONICAL, ids=ids(CANONICAL))
def test_canonical_transformations_are_right(row: dict[str, Any]) -> None:
    found, expect = answer(row), row["expect"]
    assert found["canonical"] is True
    assert not [c for c in found["certificate"]["checks"] if c["verdict"] == "refuted"]
    assert "multiplier" not in found
    if not expect.get("implicit"):
        assert found["old_in_new"] is not None
        assert found["new_in_old"] is not None
        for at in points(row, found):
            _maps_agree(row, found, at)
            if expect.get("new_hamiltonian"):
                shown = value(found["new_hamiltonian"]["infix"], at)
                assert close(shown, value(expect["new_hamiltonian"], at))
        _functions_generate(row, found)
    if "branches" in expect:
        assert len(found["branches"]) == expect["branches"]


def _maps_agree(row: dict[str, Any], found: dict[str, Any], at: dict[str, Any]) -> None:
    new = [*row["request"]["new"]["coordinates"], *row["request"]["new"]["momenta"]]
    for name in new:
        assert close(value(found["new_in_old"][name]["infix"], at), at[name]), name
    for name, text in row["request"].get("transformation", {}).items():
        assert close(value(text, at), at[name]), name
    for name, text in row["expect"].get("new_in_old", {}).items():
        assert close(value(text, at), at[name]), name


def _functions_generate(row: dict[str, Any], found: dict[str, Any]) -> None:
    """At every point; those that say they generate a part of the branch only, at some."""
    for g in found["generating_functions"]:
        if "remark" in g:
            many = points(row, found, PARTLY)
            assert any(_relations_hold(row, g, at) for at in many), g
        else:
            assert all(_relations_hold(row, g, at) for at in points(row, found)), g


def _relations_hold(row: dict[str, Any], g: dict[str, Any], at: dict[str, Any]) -> bool:
    text = g["function"]["infix"]
    return all(
        close_to(sign * slope(text, variable, at), at[determined])
        for variable, determined, sign in kind_variables(row["request"], g["kinds"])
    )


@pytest.mark.parametrize("row", CANONICAL, ids=ids(CANONICAL))
def test_the_kinds_that_exist_are_found(row: dict[str, Any]) -> None:
    found, expect = answer(row), row["expect"]
    kinds = [g["kinds"] for g in found["generating_functions"]]
    missing = {tuple(g["kinds"]): g for g in found["generating_functions_missing"]}
    n = len(row["request"]["old"]["coordinates"])
    every = {tuple(k) for k in itertools.product((1, 2, 3, 4), repeat=n)}
    if found["generating_functions"] and not expect.get("implicit"):
        assert {tuple(k) for k in kinds} | set(missing) == every
    assert all(k in kinds for k in expect.get("exist", []))
    assert all(missing[tuple(k)]["exists"] is False for k in expect.get("missing", []))
    if "all" in expect:
        assert sorted(kinds) == expect["all"]
        assert all(g["exists"] is False and g["reason"] for g in missing.values())
    for kind, text in expect.get("functions", {}).items():
        g = next(g for g in found["generating_functions"] if g["kinds"] == [int(kind)])
        for at in points(row, found):
            for variable, _, _ in kind_variables(row["request"], [int(kind)]):
                got = slope(g["function"]["infix"], variable, at)
                assert close_to(got, slope(text, variable, at))


@pytest.mark.parametrize("row", CANONICAL + OTHERS, ids=ids(CANONICAL + OTHERS))
def test_each_in_bounded_time(row: dict[str, Any]) -> None:
    answer(row)
    assert _seconds[row["id"]] < SECONDS

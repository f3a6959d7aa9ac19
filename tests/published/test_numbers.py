"""Published numbers of actions, periods and frequencies (numbers.json)."""

import json

import mpmath
import pytest
from facts import HERE

from hjsolve.in_numbers import actions

ROWS = json.loads((HERE / "numbers.json").read_text(encoding="utf-8"))


def number(found, where):
    kind, name = where
    return mpmath.mpf(dict(getattr(found, kind))[name].value)


def factor(text):
    top, _, below = text.replace("(", "").replace(")", "").partition("/")
    value = mpmath.mpf(1)
    for word in top.split("*"):
        value *= mpmath.pi if word == "pi" else mpmath.mpf(word)
    for word in below.split("*") if below else ():
        value /= mpmath.pi if word == "pi" else mpmath.mpf(word)
    return value


@pytest.mark.parametrize("row", ROWS, ids=[row["id"] for row in ROWS])
def test_number(row):
    found = actions(row["request"], row["values"], row["start"])
    for expected in row["expect"]:
        value = number(found, expected["of"]) * factor(expected.get("factor", "1"))
        if "over" in expected:
            value /= number(found, expected["over"])
        true = mpmath.mpf(expected["value"])
        assert abs(value - true) <= row["tolerance"] * abs(true), (expected, mpmath.nstr(value, 18))


def test_the_facts_are_complete():
    assert len({row["id"] for row in ROWS}) == len(ROWS)
    for row in ROWS:
        assert row["claim"]
        assert row["source"]
        assert row["expect"]
        assert row["citation"] in ("found", "memory")
        assert row["confirmed"] in ("recomputed", "found", "memory")
        assert 0 < row["tolerance"] <= 1e-10


def test_the_stark_level_of_the_old_quantum_theory():
    """n1 = 2, n2 = 1, m = 2 at field 1e-5: a level computed apart (no printed source)."""
    level = mpmath.mpf("-0.0199265035815403725")
    problem = {
        "coordinates": ["xi", "eta", "phi"],
        "hamiltonian": "2*(xi*p_xi**2+eta*p_eta**2)/(xi+eta) + p_phi**2/(2*xi*eta) - 2/(xi+eta)"
        " + F*(xi-eta)/2",
        "parameters": {"F": "positive"},
        "domains": {"xi": "half-line", "eta": "half-line", "phi": "angle"},
    }
    field = mpmath.mpf("1e-5")
    xi = eta = mpmath.mpf(20)

    def found(share):
        """The actions where the share of ξ in the nuclear charge is given."""
        p_xi = mpmath.sqrt(-field * xi / 4 + level / 2 - 1 / xi**2 + share / xi)
        p_eta = mpmath.sqrt(field * eta / 4 + level / 2 - 1 / eta**2 + (1 - share) / eta)
        start = {"xi": 20, "eta": 20, "phi": 0, "p_phi": 2}
        start |= {"p_xi": mpmath.nstr(p_xi, 35), "p_eta": mpmath.nstr(p_eta, 35)}
        return dict(actions(problem, {"F": "1e-5"}, start).actions)

    with mpmath.workdps(40):
        share = mpmath.findroot(
            lambda b: found(b)["xi"].value - 2, (0.55, 0.6), solver="secant", tol=1e-14
        )
        assert found(share)["eta"].value == pytest.approx(1, abs=2e-13)

"""Actions over one cycle, as the literature has them, from the request to the answer's JSON.

The period of a pendulum is compared with tables of K; see ``actions.json`` for
the sources of the closed forms.
"""

from __future__ import annotations

import json
from functools import cache
from pathlib import Path
from typing import Any

import mpmath
import pytest
import sympy as sp

from hjsolve.quadrature import integrate
from hjsolve.quadrature.complete import complete
from hjsolve.quadrature.cycles import with_cycles
from hjsolve.reading import read_problem
from hjsolve.records import Solution
from hjsolve.separation import detect, separate
from hjsolve.solve import solve
from hjsolve.writing import for_person, solution_document

LISTED = json.loads((Path(__file__).parent / "actions.json").read_text("utf-8"))["actions"]

PENDULUM = next(e for e in LISTED if e["system"] == "pendulum")


@cache
def answer(text: str) -> dict[str, Any]:
    """The answer up to its complete integral: motion and certificate have tests of their own."""
    hamiltonian = read_problem(json.loads(text))
    separation = separate(hamiltonian, detect(hamiltonian))
    integral = complete(separation, integrate)
    return solution_document(Solution(separation, with_cycles(separation, integral, integrate)))


def cycles(entry: dict[str, Any]) -> dict[str, Any]:
    document = answer(json.dumps(entry["problem"]))
    return {t["coordinate"]: t["cycles"] for t in document["complete_integral"]["terms"]}


def number(text: str, at: dict[str, float]) -> Any:
    """The formula at exact values of its letters."""
    letters = {name: sp.Symbol(name, real=True) for name in at}
    functions = {n: getattr(sp, n) for n in ("elliptic_k", "elliptic_e", "gamma", "Rational")}
    read = sp.sympify(text, locals={**functions, **letters})
    return mpmath.mpf(read.subs({letters[n]: sp.Rational(str(v)) for n, v in at.items()}).evalf(40))


def holds(valid: list[str], at: dict[str, float]) -> bool:
    return all(bool(sp.sympify(v, locals={n: sp.Float(x) for n, x in at.items()})) for v in valid)


@pytest.mark.parametrize("entry", LISTED, ids=lambda e: e["system"])
def test_actions_are_those_of_the_literature(entry: dict[str, Any]) -> None:
    found = cycles(entry)
    assert set(found) == set(entry["actions"])
    with mpmath.workdps(40):
        for q, expected in entry["actions"].items():
            for want in expected:
                at = {**entry["at"], **{k: v for k, v in want.items() if k in entry["at"]}}
                (cycle,) = (
                    c
                    for c in found[q]
                    if c["kind"] == want["kind"] and holds(c["action"].get("valid", []), at)
                )
                got = number(cycle["action"]["infix"], at)
                published = number(want["action"], at)
                assert abs(got - published) < mpmath.mpf(10) ** -30 * abs(published)
            # no regime more than the literature has
            assert len({(c["kind"], c["action"]["infix"]) for c in found[q]}) == len(expected)


@pytest.mark.parametrize("entry", LISTED, ids=lambda e: e["system"])
def test_derivatives_are_those_of_the_published_action(entry: dict[str, Any]) -> None:
    """Numerically, by mpmath's differences of the published form."""
    found = cycles(entry)
    with mpmath.workdps(60):
        for q, expected in entry["actions"].items():
            want = expected[0]
            at = {k: v for k, v in entry["at"].items()}
            (cycle,) = (
                c
                for c in found[q]
                if c["kind"] == want["kind"] and holds(c["action"].get("valid", []), at)
            )
            assert cycle["derivatives"]
            for alpha, formula in cycle["derivatives"].items():
                letter = sp.Symbol("z", real=True)
                letters = {n: sp.Rational(str(v)) for n, v in at.items() if n != alpha}
                functions = {
                    n: getattr(sp, n) for n in ("elliptic_k", "elliptic_e", "gamma", "Rational")
                }
                published = sp.sympify(
                    want["action"], locals={**functions, **letters, alpha: letter}
                )
                slope = mpmath.diff(
                    sp.lambdify(letter, published, "mpmath"), mpmath.mpf(str(at[alpha]))
                )
                got = number(formula["infix"], at)
                assert abs(got - slope) < mpmath.mpf(10) ** -15 * (1 + abs(slope)), alpha


# K(m) at m = sin²(θ0/2): Abramowitz & Stegun, Table 17.2, modular angles 15° to 75°
# (from memory); T/T0 = 2K/π
COMPLETE_K = {
    30: "1.598142002",
    60: "1.685750355",
    90: "1.854074677",
    120: "2.156515648",
    150: "2.768063145",
}


@pytest.mark.parametrize("amplitude", sorted(COMPLETE_K))
def test_period_of_the_pendulum_against_tables_of_k(amplitude: int) -> None:
    (swing,) = (c for c in cycles(PENDULUM)["theta"] if c["kind"] == "libration")
    with mpmath.workdps(30):
        energy = -mpmath.cos(mpmath.radians(amplitude))
        at = {"m": 1, "l": 1, "g": 1, "alpha_1": mpmath.nstr(energy, 28)}
        period = 2 * mpmath.pi * number(swing["derivatives"]["alpha_1"]["infix"], at)
        small = 2 * mpmath.pi
        assert abs(period / small - 2 * mpmath.mpf(COMPLETE_K[amplitude]) / mpmath.pi) < 1e-9


def test_a_person_reads_the_action() -> None:
    entry = next(e for e in LISTED if e["system"] == "Morse")
    text = for_person(solve(read_problem(entry["problem"])))
    assert "Jₓ(α₁) = √(2)·√(D)·√(μ)/a − √(2)·√(μ)·√(D − α₁)/a   (action, libration)" in text
    assert "the action of x and its derivatives are integrals over a cycle" in " ".join(
        text.split()
    )

"""Whole solutions: the JSON body, the problem and its identity, the terminal, LaTeX."""

from __future__ import annotations

import dataclasses
import json
import os
import subprocess
import sys
from pathlib import Path
from typing import Any

import pytest
from sympy import Eq, Expr, Function, Rational, S, Symbol, acos, log, sqrt

from hjsolve.reading import read_formula, read_problem
from hjsolve.records import (
    Antiderivative,
    Certificate,
    Check,
    CompleteIntegral,
    Constant,
    Formula,
    Hamiltonian,
    Motion,
    Obstruction,
    ReducedEquation,
    Relation,
    SeparatedEquation,
    Separation,
    Solution,
    Term,
    Truth,
    Verdict,
)
from hjsolve.writing import (
    as_latex,
    content_id,
    for_person,
    formula_object,
    problem_document,
    solution_document,
)

ROOT = Path(__file__).parents[2]
SAMPLES = sorted((ROOT / "samples").glob("*.json"))
MORSE = {
    "coordinates": ["x"],
    "hamiltonian": "p_x^2/2 + D*x",
    "parameters": {"D": "positive", "g": "9.81"},
}


def fall() -> Solution:
    """Uniform acceleration, worked out by hand: p = σ √(2 (α − D x))."""
    hamiltonian = read_problem(MORSE)
    (x,), (p,), t = hamiltonian.coordinates, hamiltonian.momenta, hamiltonian.time
    d = hamiltonian.parameters[0].symbol
    alpha, beta = Symbol("alpha_1", real=True), Symbol("beta_1", real=True)
    sigma = Symbol("sigma_x", real=True)
    root = sqrt(2 * (alpha - d * x))
    area = -(root**3) / (3 * d)
    equation = SeparatedEquation(x, p, sigma, S.Zero, root, root**2)
    term = Term(
        equation,
        Antiderivative(S.Zero, x, (), "elementary"),
        Antiderivative(
            root, x, (Formula(area, (), (d * x < alpha,)),), "elementary", alpha - d * x
        ),
    )
    s = Function("S")(x, t)
    position = -d * t**2 / 2 + beta * t
    return Solution(
        Separation(
            hamiltonian,
            Verdict("complete", ((x,),), (), ((x,),), "symbolic", 1e-30),
            (Constant(alpha, "energy", p**2 / 2 + d * x),),
            (equation,),
            time_momentum=-alpha,
        ),
        CompleteIntegral(
            Eq(s.diff(t) + s.diff(x) ** 2 / 2 + d * x, 0, evaluate=False),
            (term,),
            -alpha * t,
            Formula(sigma * area),
            Formula(sigma * area - alpha * t),
        ),
        Motion(
            (Relation(alpha, Formula(Eq(-sigma * root / d - t, beta, evaluate=False)), "when"),),
            ((x, Formula(position)),),
            ((p, None),),
        ),
        Certificate((Check("∂S/∂t + H = 0", Truth.PROVED, "symbolic", None),)),
    )


def bare(verdict: Verdict, **more: Any) -> Solution:
    hamiltonian = read_problem({"coordinates": ["x", "y"], "hamiltonian": "p_x^2+p_y^2+x*y"})
    return Solution(Separation(hamiltonian, verdict, **more))


def test_document() -> None:
    document = solution_document(fall())
    assert json.loads(json.dumps(document, allow_nan=False)) == document
    assert document["problem"]["parameters"] == {"D": "positive", "g": "981/100"}
    assert document["verdict"]["separability"] == "complete"
    assert document["verdict"]["obstruction"] is None
    assert (document["charts"], document["charts_complete"], document["chart_used"]) == (
        [],
        False,
        None,
    )
    (constant,) = document["constants"]
    assert (constant["symbol"], constant["meaning"]) == ("alpha_1", "energy")
    assert constant["first_integral"]["infix"] == "D*x + p_x**2/2"
    (separated,) = document["separated_equations"]
    assert separated["momentum"]["infix"] == "sigma_x*sqrt(2*alpha_1 - 2*D*x)"
    assert separated["momentum_squared"]["infix"] == "2*alpha_1 - 2*D*x"
    (term,) = document["complete_integral"]["terms"]
    assert term["integrand"]["infix"] == "sqrt(2*alpha_1 - 2*D*x)"
    assert term["closed_form"] == term["closed_forms"][0]
    assert term["closed_form"]["valid"] == ["D*x < alpha_1"]
    assert (term["family"], term["coordinate"]) == ("elementary", "x")
    assert term["substitution"]["infix"] == "alpha_1 - D*x"
    (relation,) = document["motion"]["relations"]
    assert relation["constant"] == "alpha_1"
    assert " = beta_1" in relation["equation"]["infix"]
    assert document["motion"]["momenta"] == {"x": None}
    assert document["motion"]["coordinates"]["x"]["infix"] == "beta_1*t - D*t**2/2"
    (check,) = document["certificate"]["checks"]
    assert check == {
        "claim": "∂S/∂t + H = 0",
        "verdict": "proved",
        "method": "symbolic",
        "bound": None,
    }


def test_notations_asked_for() -> None:
    document = solution_document(fall(), notations=("infix", "latex", "mathml"))
    assert set(document["hamilton_jacobi_equation"]) == {"infix", "latex", "mathml"}
    assert document["hamilton_jacobi_equation"]["infix"].endswith("= 0")


def test_missing_rooms_are_null_or_empty() -> None:
    whole = fall()
    document = solution_document(Solution(whole.separation))
    assert document["complete_integral"] is document["motion"] is None
    assert document["hamilton_jacobi_equation"] is None
    assert document["certificate"] == {"checks": []}
    assert document["reduced_equations"] == []


def test_parts_and_regimes_of_a_term() -> None:
    solution = fall()
    assert solution.integral is not None
    (term,) = solution.integral.terms
    x = term.equation.coordinate
    forms = (Formula(log(x), (), (x > 1,)), Formula(acos(x), (), (x < 1,)))
    two = dataclasses.replace(term.root, closed_forms=forms, family="elliptic")
    drift = Antiderivative(2 * x, x, (Formula(x**2),), "elementary")
    equation = dataclasses.replace(term.equation, drift=2 * x, squared=None)
    changed = dataclasses.replace(
        solution.integral, terms=(Term(equation, drift, two), Term(equation, drift, unevaluated()))
    )
    document = solution_document(dataclasses.replace(solution, integral=changed))
    first, second = document["complete_integral"]["terms"]
    assert [f["infix"] for f in first["closed_forms"]] == ["x**2 + log(x)", "x**2 + acos(x)"]
    assert [f["valid"] for f in first["closed_forms"]] == [["1 < x"], ["x < 1"]]
    assert first["family"] == "elliptic"
    assert (second["closed_form"], second["closed_forms"]) == (None, [])
    assert (second["family"], second["reason"]) == ("unevaluated", "of genus 2")


def unevaluated() -> Antiderivative:
    x = Symbol("x", real=True)
    return Antiderivative(sqrt(x**5 + 1), x, (), "unevaluated", None, "of genus 2")


def obstructed() -> Solution:
    x, y = Symbol("x", real=True), Symbol("y", real=True)
    point = (("x", Rational(3, 7)), ("y", Rational(2)))
    found = Obstruction(("x", "y"), point, 0.12, 1e-40, (("V", x**2 + 1),))
    verdict = Verdict("none", ((x, y),), (), ((x, y),), "symbolic", 0.0, found)
    reduced = ReducedEquation((x, y), Eq(Function("W")(x, y).diff(x), x * y, evaluate=False))
    return bare(verdict, reduced=(reduced,))


def test_obstruction() -> None:
    document = solution_document(obstructed())
    assert document["verdict"]["obstruction"] == {
        "pair": ["x", "y"],
        "point": {"x": "3/7", "y": "2"},
        "value": {"mid": 0.12, "radius": 1e-40},
        "functions": {"V": "x**2 + 1"},
    }
    (reduced,) = document["reduced_equations"]
    assert reduced["block"] == ["x", "y"]
    assert reduced["equation"]["infix"] == "derivative(W(x, y), x) = x*y"


@pytest.mark.parametrize("path", SAMPLES, ids=[path.stem for path in SAMPLES])
def test_samples_come_back_equal(path: Path) -> None:
    problem = json.loads(path.read_text(encoding="utf-8"))
    hamiltonian = read_problem(problem)
    document = problem_document(hamiltonian)
    again = read_problem(document)
    assert again == hamiltonian
    assert problem_document(again) == document
    assert content_id(again, "1") == content_id(hamiltonian, "1")


def read_more(**fields: Any) -> Hamiltonian:
    return read_problem({"coordinates": ["x"], "hamiltonian": "p_x^2 + a*x", **fields})


def test_identity_is_of_the_content() -> None:
    first = read_more(parameters={"a": "real", "b": "positive"})
    same = read_more(parameters={"b": "positive", "a": "real"}, momenta=["p_x"])
    spaced = read_more(hamiltonian="x * a + p_x**2", parameters={"b": "positive", "a": "real"})
    other = read_more(parameters={"a": "positive", "b": "positive"})
    assert content_id(first, "1") == content_id(same, "1") == content_id(spaced, "1")
    assert len({content_id(first, "1"), content_id(first, "2"), content_id(other, "1")}) == 3
    assert len(content_id(first, "1")) >= 24
    assert content_id(first, "1").replace("-", "").replace("_", "").isalnum()


def test_identity_and_text_do_not_depend_on_the_hash_seed() -> None:
    program = (
        "import json, pathlib\n"
        "from hjsolve.reading import read_problem\n"
        "from hjsolve.writing import content_id, problem_document\n"
        "for path in sorted(pathlib.Path('samples').glob('*.json')):\n"
        "    read = read_problem(json.loads(path.read_text(encoding='utf-8')))\n"
        "    print(content_id(read, '1'), json.dumps(problem_document(read)))\n"
    )
    seen = set()
    for seed in ("1", "2", "3"):
        environment = {**os.environ, "PYTHONHASHSEED": seed, "PYTHONPATH": str(ROOT)}
        done = subprocess.run(
            [sys.executable, "-c", program],
            cwd=ROOT,
            env=environment,
            capture_output=True,
            text=True,
            check=True,
            timeout=60,
        )
        seen.add(done.stdout)
    assert len(seen) == 1
    assert len(seen.pop().splitlines()) == len(SAMPLES)


def test_for_person() -> None:
    text = for_person(fall())
    lines = text.splitlines()
    assert lines[0] == "The Hamilton–Jacobi equation separates completely in x."
    headings = [line for line in lines if line and not line.startswith(" ")]
    order = ["Constants of the motion", "Separated equations", "Complete integral", "Motion"]
    assert [h for h in headings if h in order] == order
    assert max(map(len, lines)) <= 100
    assert "for D·x < α₁" in text
    assert "proved: ∂S/∂t + H = 0 (symbolic)" in text
    assert text.endswith("\n")


def test_for_person_says_why_not() -> None:
    text = for_person(obstructed())
    assert text.startswith("The Hamilton–Jacobi equation does not separate in x and y.")
    assert "x and y are coupled: Levi-Civita's expression is 0.12 ± 1e-40" in text
    undecided = Verdict("undecided", (), (), (), "numeric", 1e-60, None, "the time given")
    assert "Undecided because of this limit: the time given." in for_person(bare(undecided))


def test_wide_formulas_are_wrapped() -> None:
    solution = fall()
    x = solution.hamiltonian.coordinates[0]
    wide: Expr = sum((x**k * (x + k) ** k for k in range(1, 25)), S.Zero)
    constants = (Constant(Symbol("alpha_1"), "energy", wide),)
    changed = dataclasses.replace(solution.separation, constants=constants)
    text = for_person(dataclasses.replace(solution, separation=changed))
    assert max(map(len, text.splitlines())) <= 100


def test_as_latex() -> None:
    text = as_latex(fall())
    for environment in ("itemize", "align*"):
        opened = text.count(f"\\begin{{{environment}}}")
        assert opened == text.count(f"\\end{{{environment}}}")
        assert opened > 0
    assert text.count("{") == text.count("}")
    assert r"\paragraph{Verdict} The Hamilton–Jacobi equation separates completely in x." in text
    assert r"\sigma_{x}" in text
    assert r"\alpha_{1} &= D x + \frac{p_{x}^{2}}{2}" in text


def test_every_infix_without_words_of_answers_reads_back() -> None:
    solution = fall()
    names = {s.name: s for s in solution.hamiltonian.expression.free_symbols}
    names |= {"alpha_1": Symbol("alpha_1", real=True)}
    (equation,) = solution.separation.equations
    assert equation.squared is not None
    written = formula_object(equation.squared)["infix"]
    assert read_formula(written, names, (), pointer="") == equation.squared

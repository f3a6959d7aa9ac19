"""The notations one by one, and the formula objects of an answer."""

from __future__ import annotations

import xml.etree.ElementTree as ElementTree

import pytest
from sympy import Eq, Expr, Function, Ge, Gt, Integral, Lt, Rational, Symbol, exp, oo, sin, sqrt

from hjsolve.algebra.functions import weierstrass_p
from hjsolve.reading import read_formula
from hjsolve.records import Definition, Formula
from hjsolve.writing import WRITERS, Notation, formula_object
from hjsolve.writing.infix import write_infix
from hjsolve.writing.registry import writer
from hjsolve.writing.tex import latex_name, write_latex

NAMES = {
    n: Symbol(n, real=True)
    for n in ("x", "y", "u", "m", "E", "I", "beta", "k", "p_theta", "alpha_1", "lambda", "θ")
}
x, y, u, m = (NAMES[n] for n in ("x", "y", "u", "m"))
V = Function("V")


def read(text: str) -> Expr:
    return read_formula(text, NAMES, ("V",), pointer="")


@pytest.mark.parametrize("entry", WRITERS, ids=[entry.name for entry in WRITERS])
def test_examples(entry: Notation) -> None:
    assert entry.source
    assert entry.examples
    for formula, written in entry.examples:
        assert entry.write(read(formula)) == written


@pytest.mark.parametrize(
    ("formula", "written"),
    [
        ("x - y", "x - y"),
        ("y - x", "y - x"),
        ("-x - y", "-x - y"),
        ("-x/2", "-x/2"),
        ("3/7*x", "3*x/7"),
        ("x/(2*y)", "x/(2*y)"),
        ("(x + y)/(2*u*(x - y))", "(x + y)/(2*u*(x - y))"),
        ("1/x", "1/x"),
        ("1/sqrt(x)", "1/sqrt(x)"),
        ("x^(-3/2)", "1/x**(3/2)"),
        ("(x + y)^2", "(x + y)**2"),
        ("(-x)^y", "(-x)**y"),
        ("x^(y*u)", "x**(u*y)"),
        ("(x^y)^(1/3)", "(x**y)**(1/3)"),
        ("-3/7", "-3/7"),
        ("exp(1)", "exp(1)"),
        ("exp(-x)", "exp(-x)"),
        ("abs(x)", "abs(x)"),
        ("lambert_w(x)", "lambert_w(x)"),
        ("elliptic_pi(x, y, m)", "elliptic_pi(x, y, m)"),
        ("jacobi_am(u, m)", "jacobi_am(u, m)"),
        ("elliptic_k(1/2)", "elliptic_k(1/2)"),
        ("elliptic_k(-1)*x", "x*elliptic_k(-1)"),
        ("elliptic_f(pi/2, 1/2)", "elliptic_f(pi/2, 1/2)"),
        ("V(x^2)", "V(x**2)"),
        ("lambda + θ", "lambda + θ"),
    ],
)
def test_infix(formula: str, written: str) -> None:
    assert write_infix(read(formula)) == written
    assert read(written) == read(formula)


def test_words_of_answers_alone() -> None:
    assert write_infix(Integral(sqrt(x), (x, 1, y))) == "integral(sqrt(x), x, 1, y)"
    assert write_infix(V(x).diff(x, 2)) == "derivative(V(x), x, x)"
    chained = write_infix(V(x**2).diff(x))
    assert chained == "2*x*at(derivative(V(xi_1), xi_1), xi_1, x**2)"


def test_relations() -> None:
    assert write_infix(Eq(x**2, y, evaluate=False)) == "x**2 = y"
    assert write_infix(Lt(x, y)) == "x < y"
    assert write_infix(Gt(x, y)) == "y < x"
    assert write_infix(Ge(x, 0)) == "0 <= x"
    assert write_infix(Lt(x, oo, evaluate=False)) == "x < infinity"


@pytest.mark.parametrize(
    ("name", "written"),
    [
        ("x", "x"),
        ("p_theta", r"p_{\theta}"),
        ("alpha_1", r"\alpha_{1}"),
        ("alpha_1_", r"\alpha_{1}'"),
        ("sigma_r", r"\sigma_{r}"),
        ("x1", "x_{1}"),
        ("p_x1", r"p_{\mathrm{x1}}"),
        ("omega_c", r"\omega_{c}"),
        ("mass", r"\mathrm{mass}"),
        ("θ", r"{\theta}"),
        ("a__b", r"\mathrm{a\_\_b}"),
    ],
)
def test_latex_names(name: str, written: str) -> None:
    assert latex_name(name) == written


@pytest.mark.parametrize(
    ("expression", "written"),
    [
        (read("log(x)^2"), r"\ln^{2}\left(x\right)"),
        (read("atan(x)"), r"\arctan{\left(x \right)}"),
        (read("asinh(x)"), r"\operatorname{arsinh}{\left(x \right)}"),
        (read("jacobi_cn(u, m)^2"), r"\operatorname{cn}^{2}\left(u \mid m\right)"),
        (weierstrass_p(u, x, y), r"\wp\left(u; x, y\right)"),
        (read("carlson_rf(x, y, u)^2"), r"{R_F}^{2}\left(x, y, u\right)"),
        (Function("gamma")(x), r"\gamma{\left(x \right)}"),
        (Function("pot")(x), r"\operatorname{pot}{\left(x \right)}"),
    ],
)
def test_latex(expression: Expr, written: str) -> None:
    assert write_latex(expression) == written


def test_mathml_is_xml_and_keeps_names() -> None:
    expression = V(x**2).diff(x) + Integral(sin(x), (x, 0, y)) + read("log(θ)*jacobi_sn(u, m)/2")
    text = writer("mathml").write(expression)
    assert text.isascii()
    words = "".join(ElementTree.fromstring(text).itertext())
    for word in ("V", "sin", "ln", "θ", "sn", "∫"):
        assert word in words


def test_formula_object() -> None:
    k, e_2 = Symbol("k_1"), Symbol("e_2")
    formula = Formula(
        k * x + e_2,
        (
            Definition(k, definition=sqrt(m)),
            Definition(e_2, root_of=u**3 - m * u + 1, unknown=u, index=2),
        ),
        (Lt(0, m), Gt(x, e_2)),
    )
    assert formula_object(formula) == {
        "infix": "e_2 + k_1*x",
        "latex": "e_{2} + k_{1} x",
        "where": [
            {"name": "k_1", "definition": "sqrt(m)"},
            {"name": "e_2", "root_of": "u**3 - m*u + 1", "in": "u", "index": 2},
        ],
        "valid": ["0 < m", "e_2 < x"],
    }
    assert list(formula_object(x, ("latex",))) == ["latex"]
    assert list(formula_object(x, ("infix", "latex", "mathml"))) == ["infix", "latex", "mathml"]
    with pytest.raises(KeyError):
        formula_object(x, ("content-mathml",))


def test_deep_formulas_can_be_written() -> None:
    text = "1/(1-x/(" * 50 + "y" + "))" * 50
    expression = read(text)
    for _ in range(40):
        expression = exp(Rational(1, 2) + x * expression)
    for entry in WRITERS:
        assert entry.write(expression)

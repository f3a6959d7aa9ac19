"""Random formulas: text -> expression -> text -> the same expression."""

from __future__ import annotations

import xml.etree.ElementTree as ElementTree

from hypothesis import assume, example, given, settings
from hypothesis import strategies as st
from sympy import Abs, Add, Expr, Function, I, Integer, Mul, Pow, Rational, Symbol, nan, oo, pi, zoo

from hjsolve.errors import InputError
from hjsolve.reading import read_formula
from hjsolve.reading.functions import FUNCTIONS
from hjsolve.writing import WRITERS

NAMES: dict[str, Expr] = {
    n: Symbol(n, real=True) for n in ("x", "y", "E", "I", "S", "beta", "pi_1", "lambda", "θ")
}
NAMES |= {"r": Symbol("r", positive=True), "m": Symbol("m", negative=True)}
SMOOTH = "sqrt exp log sin cos tan sinh cosh tanh asin atan asinh abs sign lambert_w elliptic_k"
TWO = "atan2 elliptic_f elliptic_e jacobi_sn jacobi_dn carlson_rc"

Tree = tuple  # ("name", n) | ("number", q) | (operator, left, right) | ("neg", a) | ("call", f, …)


def leaves() -> st.SearchStrategy[Tree]:
    number = st.fractions(min_value=0, max_value=9, max_denominator=12)
    return st.one_of(
        st.sampled_from(sorted(NAMES)).map(lambda n: ("name", n)),
        st.just(("name", "pi")),
        number.map(lambda q: ("number", Rational(q.numerator, q.denominator))),
    )


def larger(inner: st.SearchStrategy[Tree]) -> st.SearchStrategy[Tree]:
    exponent = st.sampled_from([-3, -2, -1, 2, 3, 5]).map(Integer) | st.sampled_from(
        [Rational(1, 2), Rational(-1, 2), Rational(3, 2), Rational(-2, 3)]
    )
    return st.one_of(
        st.tuples(st.sampled_from("+-*/"), inner, inner),
        st.tuples(st.just("neg"), inner),
        st.tuples(st.just("power"), inner, exponent),
        st.tuples(st.just("call"), st.sampled_from(SMOOTH.split()), inner),
        st.tuples(st.just("call"), st.sampled_from(TWO.split()), inner, inner),
        st.tuples(st.just("call"), st.just("V"), inner),
        st.tuples(st.just("call"), st.just("W"), inner, inner),
    )


TREES = st.recursive(leaves(), larger, max_leaves=12)


def text(tree: Tree) -> str:
    """Every operation in brackets, so that the text says nothing about precedence."""
    match tree:
        case ("name", name):
            return str(name)
        case ("number", value):
            return f"({value.p}/{value.q})"
        case ("neg", inner):
            return f"(-{text(inner)})"
        case ("power", base, exponent):
            return f"({text(base)}^({exponent.p}/{exponent.q}))"
        case ("call", name, *arguments):
            return f"{name}({', '.join(map(text, arguments))})"
        case (sign, left, right):
            return f"({text(left)} {sign} {text(right)})"
    raise AssertionError(tree)


def meaning(tree: Tree) -> Expr:
    """The same tree made by SymPy's constructors, without the reader."""
    match tree:
        case ("name", name):
            return pi if name == "pi" else NAMES[name]
        case ("number", value):
            return value
        case ("neg", inner):
            return Mul(-1, meaning(inner))
        case ("power", base, exponent):
            return Pow(meaning(base), exponent)
        case ("call", name, *arguments):
            made = [meaning(argument) for argument in arguments]
            known = FUNCTIONS.get(name)
            return known.make(*made) if known else Function(name)(*made)
        case ("+", left, right):
            return Add(meaning(left), meaning(right))
        case ("-", left, right):
            return Add(meaning(left), Mul(-1, meaning(right)))
        case ("*", left, right):
            return Mul(meaning(left), meaning(right))
        case ("/", left, right):
            return Mul(meaning(left), Pow(meaning(right), -1))
    raise AssertionError(tree)


def read(formula: str) -> Expr:
    return read_formula(formula, NAMES, ("V", "W"), pointer="")


@given(TREES)
@example(("call", "atan2", ("name", "pi"), ("call", "jacobi_sn", ("name", "pi"), ("name", "pi"))))
@settings(max_examples=400, deadline=None)
def test_written_infix_reads_back(tree: Tree) -> None:
    try:
        expression = read(text(tree))
    except InputError:
        assume(False)
    infix, latex, mathml = (entry.write(expression) for entry in WRITERS)
    assert read(infix) == expression
    assert latex.count("{") == latex.count("}")
    ElementTree.fromstring(mathml)


@given(TREES)
@settings(max_examples=400, deadline=None)
def test_reading_means_what_the_tree_means(tree: Tree) -> None:
    """Numerically: the reader gathers sums and products before SymPy sees them."""
    try:
        expression = read(text(tree))
    except InputError:
        assume(False)
    wanted = meaning(tree)
    assert not expression.has(zoo, nan, oo, I)
    if expression == wanted:
        return
    assume(not wanted.has(zoo, nan, oo, Abs))
    point = {
        symbol: Rational(3 + 2 * place, 7) * (-1 if symbol.is_negative else 1)
        for place, symbol in enumerate(sorted(expression.free_symbols, key=str))
    }
    difference = (expression - wanted).subs(point)
    if not difference.has(Function("V"), Function("W")) and difference.is_number:
        value = difference.evalf(20, maxn=60)
        assume(value.is_finite and not value.free_symbols)
        assert abs(complex(value)) < 1e-9

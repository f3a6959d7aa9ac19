"""Expressions as fractions of generators, and back."""

import pytest
import sympy as sp
from sympy import cos, cot, exp, sin, sqrt, symbols, tanh

from hjsolve.algebra.generators import Generators, NotRational
from hjsolve.algebra.identity import vanish
from hjsolve.algebra.roots import open_squares
from hjsolve.records import Truth

x, y, p = symbols("x y p", real=True)
a, b = symbols("a b", positive=True)

EXPRESSIONS = [
    p**2 / (2 * a) + sin(2 * x) ** 2 / cos(x),
    exp(-2 * y) / (1 + exp(y / 2)) + tanh(y),
    sqrt(b**2 + y**2) ** 3 / (1 + sqrt(b**2 + y**2)),
    x ** (2 * a) + cot(x) ** 2 / (1 + x**a),
    sp.Function("V")(x) / (x + sp.Function("V")(x)),
    sp.E * x + sp.pi / x,
]


@pytest.mark.parametrize("expression", EXPRESSIONS, ids=str)
def test_a_fraction_is_the_expression_it_came_from(expression):
    ring = Generators([expression])
    back = ring.expression(ring.ratio(expression))
    assert vanish([back - expression])[0].truth is Truth.PROVED


def test_equal_expressions_get_equal_fractions():
    one, other = sin(x) ** 4 - cos(x) ** 4, sin(x) ** 2 - cos(x) ** 2
    ring = Generators([one, other])
    assert (ring.ratio(one) - ring.ratio(other)).is_zero()


def test_a_bomb_is_refused():
    letters = symbols("u:9")
    with pytest.raises(NotRational):
        Generators([sum(letters) ** 60]).ratio(sum(letters) ** 60)


def test_perfect_squares_are_opened():
    xi, eta = symbols("xi eta", positive=True)
    u = (xi**2 / 2 - eta**2 / 2) ** 2 + xi**2 * eta**2
    assert open_squares(sqrt(u)) == xi**2 / 2 + eta**2 / 2
    assert open_squares(1 / sqrt(a**2 * sin(x) ** 2 + a**2 * cos(x) ** 2)) == 1 / a
    assert open_squares(sqrt(x**2 + 2 * x * y + y**2)) == abs(x + y)
    assert open_squares(sqrt(x**2 + y)) == sqrt(x**2 + y)

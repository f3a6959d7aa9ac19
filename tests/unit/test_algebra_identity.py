"""The zero test: what it proves, what it refutes, what it leaves undecided."""

import pytest
import sympy as sp
from sympy import Function, Rational, cos, cosh, exp, log, sin, sinh, sqrt, symbols, tan

from hjsolve.algebra.identity import vanish
from hjsolve.records import Truth

x, y = symbols("x y", real=True)
a, b = symbols("a b", positive=True)
V = Function("V")

ZERO = [
    sin(x + y) - sin(x) * cos(y) - cos(x) * sin(y),
    sin(3 * x / 2) - 3 * sin(x / 2) + 4 * sin(x / 2) ** 3,
    exp(x + y, evaluate=False) / exp(x) / exp(y) - 1,
    cosh(x) ** 2 - sinh(x) ** 2 - 1,
    log(a * b) - log(a) - log(b),
    x**a * x - x ** (a + 1),
    V(x + y) - V(y + x),
    tan(x / 2) - sin(x) / (1 + cos(x)),
    sin(x + sp.pi / 2, evaluate=False) - cos(x),
    ((x**3 + 1) ** Rational(1, 3)) ** 2 - (x**3 + 1) ** Rational(2, 3),
    abs(x - y) - abs(y - x),
    exp((x + y) ** 2) / exp(x**2) / exp(2 * x * y) / exp(y**2) - 1,
    sp.LambertW(a) * exp(sp.LambertW(a)) - a - (sp.LambertW(a) * exp(sp.LambertW(a)) - a),
    V(x).diff(x).subs(x, x + y) - V(x + y).diff(x),
]
NONZERO = [
    x - Rational(1, 10**40),
    sin(x) - x,
    V(x + y) - V(x - y),
    sqrt(a) - a,
    exp(1000) * x - exp(999) * x,
    sp.atan(x) + sp.atan(1 / x) - sp.pi / 2,  # zero for x > 0 only
    (x + 10 ** Rational(-18)) ** 2 - x**2,
]


@pytest.mark.parametrize("expression", ZERO, ids=str)
def test_an_identity_is_proved(expression):
    found = vanish([expression], functions=["V"])[0]
    assert found.truth is Truth.PROVED
    assert found.bound < 1e-20


@pytest.mark.parametrize("expression", NONZERO, ids=str)
def test_a_nonzero_is_refuted_at_a_point(expression):
    found = vanish([expression], functions=["V"])[0]
    assert found.truth is Truth.REFUTED
    assert found.point


def test_an_identity_of_one_branch_is_left_undecided_with_its_bound():
    branch = vanish([sqrt(x**2 + 2 * x + 1) - abs(x + 1)])[0]
    assert branch.truth is not Truth.REFUTED


def test_dependent_roots_are_unified():
    k = symbols("k", positive=True)
    residue = sqrt(2 * k - x**2) - sqrt(2 * k) * sqrt(1 - x**2 / (2 * k))
    assert vanish([residue])[0].truth is Truth.PROVED


def test_nothing_is_known_without_a_real_point():
    found = vanish([sqrt(-1 - x**2) - x])[0]
    assert found.truth is Truth.UNDECIDED
    assert found.bound is None

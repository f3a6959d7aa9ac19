"""Algebraic functions with dependent roots: what is proved zero, and what must not be."""

import math

import pytest
import sympy as sp
from sympy import Lt, Rational, cos, exp, pi, sin, sqrt, symbols

from hjsolve.algebra.covering import coprime
from hjsolve.algebra.identity import refute
from hjsolve.algebra.named import Names
from hjsolve.algebra.tower import Claim, prove
from hjsolve.records import Definition, Truth

x, y, a, c = symbols("x y a c", real=True)
k, m = symbols("k m", positive=True)
u = symbols("u", real=True)
e = symbols("e_1:4", real=True)


def proved(expression, *conditions, where=(), positive=()):
    proof = prove(Claim(expression, tuple(where), conditions, positive, (x,)))
    return proof is not None and proof.bound < 1e-20


def roots_of(polynomial, *indices):
    return [Definition(e[i - 1], root_of=polynomial, unknown=u, index=i) for i in indices]


@pytest.mark.parametrize(
    ("expression", "conditions"),
    [
        (sqrt(x**2 - 1) - sqrt(x - 1) * sqrt(x + 1), ()),
        (sqrt((x - 1) ** 2 * (x + 2)) - (x - 1) * sqrt(x + 2), (Lt(1, x),)),
        (sqrt((x - 1) ** 2 * (x + 2)) - (1 - x) * sqrt(x + 2), (Lt(x, 1),)),
        (sqrt(12 * k + 12) - 2 * sqrt(3) * sqrt(k + 1), ()),
        (sqrt(x + 2 * sqrt(x - 1)) - 1 - sqrt(x - 1), ()),
        (sqrt(x - 2 * sqrt(x - 1)) - 1 + sqrt(x - 1), (Lt(x, 2),)),
        (sqrt(x - 2 * sqrt(x - 1)) + 1 - sqrt(x - 1), (Lt(2, x),)),
        (sqrt(k + sqrt(k**2 - m)) * sqrt(k - sqrt(k**2 - m)) - sqrt(m), ()),
        (sqrt(1 + sqrt(1 + x**2)) * sqrt(sqrt(1 + x**2) - 1) - x, (Lt(0, x),)),
        ((16 * k) ** Rational(1, 4) - 2 * sqrt(sqrt(k)), ()),
        (sqrt(1 - cos(x)) - sqrt(2) * sin(x / 2), (Lt(0, x), Lt(x, 2 * pi))),
        (sqrt(exp(2 * x) - 1) - sqrt(exp(x) - 1) * sqrt(exp(x) + 1), ()),
        (sp.Abs((x - y) * (x + y)) - y**2 + x**2, (Lt(x**2, y**2),)),
    ],
)
def test_true_under_the_conditions(expression, conditions):
    assert proved(expression, *conditions)


@pytest.mark.parametrize(
    ("expression", "conditions"),
    [
        (sqrt((x - 1) ** 2 * (x + 2)) - (x - 1) * sqrt(x + 2), ()),
        (sqrt((x - 1) ** 2 * (x + 2)) - (x - 1) * sqrt(x + 2), (Lt(x, 1),)),
        (sqrt((x - 1) ** 2 * (x + 2)) - (x - 1) * sqrt(x + 2), (Lt(0, x),)),
        (sqrt(x - 2 * sqrt(x - 1)) - 1 + sqrt(x - 1), ()),
        (sqrt(x - 2 * sqrt(x - 1)) - 1 + sqrt(x - 1), (Lt(2, x),)),
        (sqrt(1 + sqrt(1 + x**2)) * sqrt(sqrt(1 + x**2) - 1) - x, ()),
        (sqrt(1 - cos(x)) - sqrt(2) * sin(x / 2), (Lt(2 * pi, x), Lt(x, 4 * pi))),
        (sqrt(1 - cos(x)) - sqrt(2) * sin(x / 2), ()),
        (sqrt(k) - sqrt(k + Rational(1, 10**12)), ()),
        (sqrt(2) * sqrt(k) - Rational(14142135623730951, 10**16) * sqrt(k), ()),
        (sqrt(x - 2) * 0 + sqrt(x - 1) - sqrt(x) + 1, (Lt(x, 1), Lt(1, x))),
    ],
)
def test_not_true_on_all_of_the_regime(expression, conditions):
    assert not proved(expression, *conditions)


def test_a_regime_in_which_the_function_is_not_real_proves_nothing():
    """√(−2 − k) is never real; that √(−2 − k) = 2√(−2 − k)/2 there says nothing."""
    root = sqrt(-2 - k)
    assert not proved(2 * root - sqrt(-8 - 4 * k, evaluate=False))


def test_named_roots_obey_vieta():
    cubic = u**3 - 3 * a * u**2 + c * u - k
    where = roots_of(cubic, 1, 2, 3)
    assert proved(sum(e) - 3 * a, where=where)
    assert proved(e[0] * e[1] * e[2] - k, where=where)
    assert not proved(e[0] + e[1] - 3 * a, where=where)
    value = cubic.xreplace({u: x})
    between = (Lt(e[0], x), Lt(x, e[1]))
    product = sqrt(x - e[0]) * sqrt(e[1] - x) * sqrt(e[2] - x)
    assert proved(sqrt(value) - product, *between, where=where)
    assert not proved(sqrt(value) + product, *between, where=where)
    swapped = product.xreplace({e[1]: e[2], e[2]: e[1]})
    assert proved(sqrt(value) - swapped, *between, where=where)  # the same product
    wrong = sqrt(x - e[1]) * sqrt(e[0] - x) * sqrt(e[2] - x)
    assert not proved(sqrt(value) - wrong, *between, where=where)


def test_names_that_fit_no_polynomial_prove_nothing():
    """Two names for one root, and the fourth root of a cubic."""
    cubic = u**3 - 3 * a * u**2 + c * u - k
    first, second = roots_of(cubic, 1, 2)
    again = Definition(e[1], root_of=cubic, unknown=u, index=1)
    fourth = Definition(e[1], root_of=cubic, unknown=u, index=4)
    right = sqrt((e[1] - e[0]) ** 2) - e[1] + e[0]
    assert proved(right, where=(first, second))
    assert not proved(right, where=(first, again))
    assert not proved(right, where=(first, fourth))


def test_the_order_of_named_roots_is_used():
    where = roots_of(u**4 - 3 * a * u**2 + c * u - k, 1, 2)
    assert proved(sqrt((e[0] - e[1]) ** 2) - e[1] + e[0], where=where)
    assert not proved(sqrt((e[0] - e[1]) ** 2) - e[0] + e[1], where=where)


def test_a_proof_offers_points_of_its_regime():
    """All four roots of a quartic real and x between two of them: seldom met at random."""
    quartic = u**4 + a * u**3 + y * u**2 + c * u - k
    where = tuple(
        Definition(s, root_of=quartic, unknown=u, index=i)
        for i, s in enumerate(symbols("e_1:5", real=True), 1)
    )
    names = [d.symbol for d in where]
    conditions = (Lt(names[2], x), Lt(x, names[3]))
    value = -quartic.xreplace({u: x})
    root = math.prod(sqrt(x - n) for n in names[:3]) * sqrt(names[3] - x)
    proof = prove(Claim(sqrt(value) - root, where, conditions))
    assert proof is not None
    seen = refute(sqrt(value) - root, {}, (), 4, conditions, 3, Names(where), proof.places)
    assert seen.truth is Truth.UNDECIDED
    assert seen.bound is not None
    assert seen.bound < 1e-30
    again = prove(Claim(sqrt(value) - root, where, conditions))
    assert again is not None
    wrong = refute(sqrt(value) + root, {}, (), 4, conditions, 3, Names(where), again.places)
    assert wrong.truth is Truth.REFUTED


@pytest.mark.parametrize("numbers", [[12, 3, 50], [6, 10, 15], [4, 9], [1], [36, 8, 2], [7, 7, 49]])
def test_a_coprime_base(numbers):
    base = coprime(numbers)
    assert all(math.gcd(p, q) == 1 for i, p in enumerate(base) for q in base[:i])
    assert all(b > 1 and math.isqrt(b) ** 2 != b for b in base)
    for n in numbers:
        for b in base:
            while n % b == 0:
                n //= b
        assert n == 1

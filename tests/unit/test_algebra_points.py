"""Points drawn in a crowd, conditions on paths, values put under derivatives."""

from __future__ import annotations

from itertools import pairwise

import mpmath
import pytest
import sympy as sp

from hjsolve.algebra.calculus import put_in
from hjsolve.algebra.crowd import likely
from hjsolve.algebra.identity import refute
from hjsolve.algebra.regimes import inside
from hjsolve.records import Definition, Domain, Truth

a, b, x, u = sp.symbols("a b x u", real=True)
ROOTS = sp.symbols("e_1:4", real=True)
CUBIC = u**3 - a * u + b
WHERE = tuple(Definition(s, root_of=CUBIC, unknown=u, index=i) for i, s in enumerate(ROOTS, 1))


def test_the_points_meet_conditions_on_named_roots() -> None:
    between = (ROOTS[0] < x, x < ROOTS[1])
    found = list(likely({a, b, x}, {}, between, WHERE, 20))
    assert len(found) == 20
    for point in found:
        roots = mpmath.polyroots([1, 0, -float(point[a]), float(point[b])])
        reals = sorted(float(z.real) for z in roots if abs(z.imag) < 1e-9)
        assert len(reals) == 3
        assert reals[0] < point[x] < reals[1]


def test_a_root_that_does_not_exist_offers_no_point() -> None:
    fourth = (*WHERE, Definition(sp.Symbol("e_4"), root_of=CUBIC, unknown=u, index=4))
    assert not list(likely({a, b}, {}, (), fourth, 5))
    free = (Definition(sp.Symbol("x_0"), free="any"),)
    assert not list(likely({a}, {}, (), free, 5))


def test_what_is_drawn_keeps_to_signs_and_ranges() -> None:
    p, n = sp.Symbol("p", positive=True), sp.Symbol("n", negative=True)
    ranges = {x: (sp.Integer(-1), sp.Integer(1)), b: (sp.Integer(2), sp.oo)}
    for point in likely({p, n, x, b}, ranges, (), (), 30):
        assert point[p] > 0 > point[n]
        assert -1 < point[x] < 1
        assert point[b] > 2


def test_a_narrow_regime_is_met() -> None:
    narrow = [sp.Lt(x, y, evaluate=False) for x, y in pairwise((a, b, a + b / 50))]
    assert refute(a - b, {}, (), 24, narrow).truth is Truth.REFUTED


@pytest.mark.parametrize("kind", ["half-line", "polar-angle", "interval"])
def test_a_path_is_kept_in_its_domain(kind) -> None:
    upper = sp.oo if kind == "half-line" else sp.pi
    found = inside(Domain(kind, sp.Integer(0), upper), x**2 - 1)
    assert sp.Lt(0, x**2 - 1, evaluate=False) in found
    assert len(found) == (1 if kind == "half-line" else 2)
    assert not inside(Domain("angle", sp.Integer(0), 2 * sp.pi), x)


def test_a_derivative_is_taken_before_the_value_is_put_in() -> None:
    f = sp.Function("f")(x)
    found = put_in(x * f.diff(x) + f, {x: a**2})
    put = found.subs(sp.Function("f"), sp.Lambda(u, u**3)).doit()
    assert sp.expand(put - 4 * a**6) == 0

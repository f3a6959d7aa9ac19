"""Random cubics and quartics in every configuration of roots, with poles up to order 3."""

from __future__ import annotations

import random
from typing import Any

import mpmath
import pytest
import sympy as sp
from sympy import Rational

from hjsolve.quadrature import integrate
from hjsolve.records import Definition, Domain, Formula

x = sp.Symbol("x", real=True)
KINDS = ("3 real", "1 real", "4 real", "2 real", "no real")
ALL, FEW = 200, 15
DIGITS = 30


def radicand(rng: random.Random, kind: str) -> sp.Expr:
    """A polynomial with roots as told; half of them with roots that are not rational."""

    def root() -> Rational:
        return Rational(rng.randint(-40, 40), rng.choice((3, 5, 7)))

    def pair() -> sp.Expr:
        return (x - root()) ** 2 + Rational(rng.randint(2, 30), rng.choice((3, 5, 7))) ** 2

    lead = Rational(rng.randint(1, 9), rng.randint(1, 5))
    if kind != "no real":
        lead *= rng.choice((-1, 1))
    match kind:
        case "3 real" | "4 real":
            roots: set[Rational] = set()
            while len(roots) < int(kind[0]):
                roots.add(root())
            product = sp.Mul(*(x - r for r in roots))
        case "1 real":
            product = (x - root()) * pair()
        case "2 real":
            product = (x - root()) * (x - root() - Rational(1, 11)) * pair()
        case _:
            product = pair() * pair()
    shift = Rational(rng.choice((-1, 1)), rng.randint(20, 90)) if rng.random() < 0.5 else 0
    return sp.expand(lead * product + shift)


def named(form: Formula) -> dict[sp.Symbol, Any]:
    """The values of the names of a formula without parameters."""
    values: dict[sp.Symbol, Any] = {}
    for d in form.where:
        values[d.symbol] = value_of(d, values)
    return values


def value_of(d: Definition, known: dict[sp.Symbol, Any]) -> Any:
    if d.definition is not None:
        return sp.lambdify(list(known), d.definition, "mpmath")(*known.values())
    numbers = [mpmath.mpf(c.p) / c.q for c in sp.Poly(d.root_of, d.unknown).all_coeffs()]
    found = mpmath.polyroots(numbers, maxsteps=500, extraprec=400)
    small = mpmath.mpf(10) ** (-mpmath.mp.dps // 2) * max(abs(z) for z in found)
    return sorted(z.real for z in found if abs(mpmath.im(z)) < small)[d.index - 1]


def inside(form: Formula, values: dict[sp.Symbol, Any], at: Any) -> bool:
    sides = [v.rhs - v.lhs for v in form.valid]
    call = sp.lambdify([x, *values], sides, "mpmath")
    return all(mpmath.im(s) == 0 and s > 0 for s in call(at, *values.values()))


@pytest.mark.parametrize(
    "seed",
    [pytest.param(i, marks=[] if i < FEW else [pytest.mark.slow]) for i in range(ALL)],
)
def test_random_radicand(seed: int) -> None:
    rng = random.Random(seed)
    p = radicand(rng, KINDS[seed % 5])
    pole, order = Rational(rng.randint(-50, 50), rng.choice((3, 7))), rng.randint(0, 3)
    above = rng.randint(-5, 5) * x**2 + rng.randint(1, 5) * x + rng.randint(-5, 5)
    integrand = above / ((x - pole) ** order * sp.sqrt(p))
    found = integrate(integrand, x, Domain(), seconds=30)
    assert found.family == "elliptic", found.reason
    call = sp.lambdify(x, integrand, "mpmath")
    compared = 0
    with mpmath.workdps(60):
        for form in found.closed_forms:
            values = named(form)
            f = sp.lambdify([x, *values], form.expression, "mpmath")
            places = [mpmath.mpf(rng.uniform(-14, 14)) for _ in range(400)]
            good = sorted(a for a in places if inside(form, values, a))
            for low, high in zip(good[1::4], good[2::4], strict=False):
                if not inside(form, values, (low + high) / 2) or high - low < 1e-3:
                    continue
                got = f(high, *values.values()) - f(low, *values.values())
                with mpmath.workdps(DIGITS + 15):
                    want = mpmath.quad(call, mpmath.linspace(low, high, 5), maxdegree=9)
                assert abs(mpmath.im(got)) < mpmath.mpf(10) ** -DIGITS
                assert abs(got - want) < mpmath.mpf(10) ** -DIGITS * (1 + abs(want)), form
                compared += 1
                break
    assert compared

"""The special functions: values of the literature, derivatives, balls, exact relations."""

from __future__ import annotations

import json
import random
from fractions import Fraction
from pathlib import Path
from typing import Any

import mpmath
import numpy as np
import pytest
import sympy as sp
from sympy import Integer, Rational, Symbol, sqrt

from hjsolve.algebra.balls import BallWalk, NotSupported, OutsideDomain, precision
from hjsolve.algebra.functions import (
    CARLSON,
    JACOBI,
    carlson_rc,
    carlson_rd,
    carlson_rf,
    carlson_rj,
    jacobi_am,
    jacobi_cn,
    jacobi_dn,
    jacobi_sn,
    weierstrass_p,
)
from hjsolve.algebra.graph import Graph
from hjsolve.algebra.identity import vanish
from hjsolve.quadrature import integrate
from hjsolve.quadrature.elliptic_floats import FLOATS
from hjsolve.records import Domain, Truth

VALUES = {
    entry["id"]: entry
    for entry in json.loads(
        (Path(__file__).parent / "elliptic_values.json").read_text(encoding="utf-8")
    )["values"]
}

u, m, n, p = symbols = sp.symbols("u m n p", real=True)
t, k = sp.symbols("t k", positive=True)
LEGENDRE = [(sp.elliptic_f, 2), (sp.elliptic_e, 2), (sp.elliptic_k, 1), (sp.elliptic_e, 1)]
LEGENDRE += [(sp.elliptic_pi, 3)]
ALL = [(f, 2) for f in JACOBI] + list(zip(CARLSON, (3, 2, 3, 4), strict=True)) + LEGENDRE


def ball(e: sp.Expr, point: dict[Symbol, Fraction] | None = None) -> Any:
    """The value in balls, as an mpmath number."""
    with precision(192):
        [jet] = BallWalk(Graph([e]), point or {}, {}).run()
    return mpmath.mpf(jet.value.mid().str(50, radius=False))


def number(text: str) -> sp.Expr:
    return sp.nsimplify(text, rational=True)


def close(e: sp.Expr, value: Any, digits: float) -> None:
    """Both evaluations agree with a published value."""
    with mpmath.workdps(50):
        want, tolerance = mpmath.mpf(value), mpmath.mpf(10) ** -digits
        assert abs(ball(e) - want) < tolerance * (1 + abs(want)), e
        assert abs(mpmath.mpf(str(e.evalf(40))) - want) < tolerance * (1 + abs(want)), e


# --------------------------------------------------------- published values


@pytest.mark.parametrize("name", VALUES["EL-01"]["value"])
def test_complete_integrals(name: str) -> None:
    kind, at = name[0], number(name[2:-1])
    f = sp.elliptic_k if kind == "K" else sp.elliptic_e
    close(f(at, evaluate=False), VALUES["EL-01"]["value"][name], 14)


@pytest.mark.parametrize("degrees", VALUES["EL-02"]["value"])
def test_complete_integrals_by_modular_angle(degrees: str) -> None:
    at = sp.sin(sp.pi * int(degrees) / 180) ** 2
    first, second = VALUES["EL-02"]["value"][degrees]
    close(sp.elliptic_k(at, evaluate=False), first, 14)
    close(sp.elliptic_e(at, evaluate=False), second, 14)


def test_a_worked_example() -> None:
    close(sp.elliptic_k(number(VALUES["EL-03"]["parameters"]["m"])), VALUES["EL-03"]["value"], 13)


RATIOS = {
    "sn": jacobi_sn,
    "cn": jacobi_cn,
    "dn": jacobi_dn,
    "dc": lambda x, y: jacobi_dn(x, y) / jacobi_cn(x, y),
    "cs": lambda x, y: jacobi_cn(x, y) / jacobi_sn(x, y),
    "sc": lambda x, y: jacobi_sn(x, y) / jacobi_cn(x, y),
}


@pytest.mark.parametrize("name", VALUES["EL-04"]["value"])
def test_jacobi_functions(name: str) -> None:
    first, second = name[3:-1].split("|")
    # the examples give the argument, or the value, to few digits
    close(
        RATIOS[name[:2]](number(first), number(second)),
        VALUES["EL-04"]["value"][name],
        3 if name.startswith("dc") else 4.5,
    )


def test_jacobi_functions_by_the_dlmf() -> None:
    entry = VALUES["EL-06"]
    at = (number(str(entry["parameters"]["x"])), number(str(entry["parameters"]["k"])) ** 2)
    for name, value in entry["value"].items():
        close(RATIOS[name](*at), value, 11)


def test_carlson_by_the_dlmf() -> None:
    close(carlson_rf(1, 2, 4), VALUES["EL-07"]["value"], 13)


@pytest.mark.parametrize("name", VALUES["EL-08"]["value"])
def test_carlson_by_his_own_values(name: str) -> None:
    kinds = {"R_F": carlson_rf, "R_C": carlson_rc, "R_D": carlson_rd, "R_J": carlson_rj}
    if name[:3] not in kinds:
        pytest.skip("R_G is no function of the contract")
    parts = [sp.sympify(a, rational=True) for a in name[4:-1].split(",")]
    e = kinds[name[:3]](*parts)
    want = sp.sympify(VALUES["EL-08"]["value"][name])
    assert abs(sp.N(e, 30) - want) < 1e-12
    if all(a.is_nonnegative for a in parts):
        with mpmath.workdps(30):
            assert abs(ball(e) - mpmath.mpf(str(want))) < 1e-12


def test_weierstrass_half_periods() -> None:
    """℘ at a half-period is a root of 4x³ − g2 x − g3."""
    values = VALUES["EL-16"]["value"]
    half = sp.Float(values["lemniscatic"], 18)
    assert abs(weierstrass_p(half, 1, 0).evalf(15) - Rational(1, 2)) < 1e-14
    half = sp.Float(values["equianharmonic"], 18)
    assert abs(weierstrass_p(half, 0, 1).evalf(15) - (Rational(1, 4)) ** Rational(1, 3)) < 1e-14


@pytest.mark.parametrize(
    ("name", "radicand", "ends"),
    [
        ("EL-09", "(a - t)*(b - t)*(t - c)", ("c", "y")),
        ("EL-11", "(a**2 + t**2)*(b**2 - t**2)", ("y", "b")),
        ("EL-12", "(a**2 - t**2)*(t**2 - b**2)", ("y", "a")),
        ("EL-13", "(a - t)*(t - b)*((t - b1)**2 + a1**2)", ("b", "a")),
    ],
)
def test_integrals_of_the_handbook(name: str, radicand: str, ends: tuple[str, str]) -> None:
    """Byrd & Friedman's integrals, worked out by the quadrature room."""
    entry = VALUES[name]
    numbers = {s: number(str(v)) for s, v in entry["parameters"].items() if s != "note"}
    x = Symbol("t", real=True)
    p_ = sp.sympify(radicand, locals={"t": x}).subs(numbers)
    low, high = (numbers[e] for e in ends)
    found = integrate(1 / sqrt(p_), x, Domain("interval", low, high))
    assert found.family == "elliptic"
    [form] = found.closed_forms
    e = form.expression
    for d in reversed(form.where):
        assert d.definition is not None or d.root_of is not None
        value = d.definition
        if value is None:
            roots = sorted(sp.real_roots(sp.Poly(d.root_of, d.unknown)), key=lambda r: r.evalf(20))
            value = roots[d.index - 1]
        e = e.subs(d.symbol, value)
    with mpmath.workdps(30):
        f = sp.lambdify(x, e, "mpmath")
        got = mpmath.re(f(mpmath.mpf(high.p) / high.q) - f(mpmath.mpf(low.p) / low.q))
        assert abs(got - mpmath.mpf(entry["value"])) < 1e-12


# ------------------------------------------------- derivatives and evaluation


def point(f: Any, count: int, rng: random.Random) -> list[Fraction]:
    if f in CARLSON:
        return [Fraction(rng.randint(20, 60) + 40 * i, 100) for i in range(count)]
    if count == 1:
        return [Fraction(rng.randint(10, 95), 100)]
    if f is sp.elliptic_pi:
        parts = (rng.randint(-150, 60), rng.randint(-140, 140), rng.randint(5, 90))
        return [Fraction(2 * a + 1, 201) for a in parts]
    return [Fraction(rng.randint(-400, 400), 101), Fraction(rng.randint(5, 97), 100)]


@pytest.mark.parametrize(("f", "count"), ALL, ids=lambda x: getattr(x, "__name__", str(x)))
def test_values_and_derivatives_in_every_argument(f: Any, count: int) -> None:
    """Balls against mpmath, and the derivative against a difference quotient."""
    rng = random.Random(f"{f.__name__} {count}")
    e = f(*symbols[:count])
    graph = Graph([e])
    step = sp.Rational(1, 10**12)
    for _ in range(5):
        at = point(f, count, rng)
        exact = [sp.Rational(a.numerator, a.denominator) for a in at]

        def value(args: list[sp.Expr]) -> Any:
            return mpmath.mpf(str(f(*args, evaluate=False).evalf(45)))

        index = {s: i for i, s in enumerate(symbols[:count])}
        with precision(192):
            [jet] = BallWalk(graph, dict(zip(symbols, at, strict=False)), {}, index).run()
        with mpmath.workdps(45):
            here = mpmath.mpf(jet.value.mid().str(50, radius=False))
            assert abs(here - value(exact)) < mpmath.mpf(10) ** -38 * (1 + abs(here))
            for i in range(count):
                above, below = list(exact), list(exact)
                above[i], below[i] = above[i] + step, below[i] - step
                slope = (value(above) - value(below)) * 10**12 / 2
                got = mpmath.mpf(jet.first[i].mid().str(50, radius=False))
                assert abs(got - slope) < mpmath.mpf(10) ** -17 * (1 + abs(got)), (f, i, at)


def test_the_amplitude_runs_on() -> None:
    for at in (Rational(-31, 2), Rational(7, 3), Integer(20)):
        for parameter in (Rational(3, 10), Rational(-2), Rational(99, 100)):
            e = sp.elliptic_f(jacobi_am(at, parameter), parameter)
            close(e, str(sp.N(at, 45)), 35)


def test_beyond_the_unit_parameter() -> None:
    """sn(u, m) = sn(√m u, 1/m)/√m, dn(u, m) = cn(√m u, 1/m), DLMF 22.17."""
    four = Integer(4)
    for at in (Rational(3, 10), Rational(9, 10), Rational(7, 2)):
        close(jacobi_sn(at, four), str((jacobi_sn(2 * at, 1 / four) / 2).evalf(40)), 35)
        close(jacobi_dn(at, four), str(jacobi_cn(2 * at, 1 / four).evalf(40)), 35)
    with pytest.raises(NotSupported), precision(128):
        BallWalk(Graph([jacobi_am(u, m)]), {u: Fraction(3), m: Fraction(4)}, {}, {m: 0}).run()


def test_no_value_outside_of_the_real_domain() -> None:
    with pytest.raises(OutsideDomain), precision(128):
        BallWalk(Graph([sp.elliptic_f(u, m)]), {u: Fraction(3, 2), m: Fraction(3)}, {}).run()


def test_parity() -> None:
    assert jacobi_sn(-u, m) == -jacobi_sn(u, m)
    assert jacobi_am(-u, m) == -jacobi_am(u, m)
    assert jacobi_cn(-u, m) == jacobi_cn(u, m)
    assert jacobi_dn(-u, m) == jacobi_dn(u, m)
    assert (jacobi_sn(0, m), jacobi_cn(0, m), jacobi_dn(0, m)) == (0, 1, 1)


@pytest.mark.parametrize("name", sorted(FLOATS))
def test_floating_point(name: str) -> None:
    classes = {f.__name__: f for f in (*JACOBI, *CARLSON)}
    rng = random.Random(name)
    for _ in range(20):
        match name:
            case "carlson_rf" | "carlson_rj":
                args = [rng.uniform(0.1, 3) for _ in range(3 if name == "carlson_rf" else 4)]
            case "elliptic_k":
                args = [rng.uniform(-3, 0.99)]
            case "elliptic_pi":
                args = [rng.uniform(-3, 0.95), rng.uniform(-6, 6), rng.uniform(-3, 0.99)]
            case _:
                args = [rng.uniform(-6, 6), rng.uniform(-3, 0.99)]
        numbers = {
            "elliptic_k": mpmath.ellipk,
            "elliptic_f": mpmath.ellipf,
            "elliptic_e": mpmath.ellipe,
            "elliptic_pi": mpmath.ellippi,
        }
        want = (numbers.get(name) or classes[name].number)(*map(mpmath.mpf, args))
        with np.errstate(all="ignore"):
            got = FLOATS[name](*(np.array([a]) for a in args))[0]
        assert abs(got - float(mpmath.re(want))) < 1e-12 * (1 + abs(got)), args


# ------------------------------------------------------------ exact relations


@pytest.mark.parametrize(
    "zero",
    [
        jacobi_sn(t, k) ** 2 + jacobi_cn(t, k) ** 2 - 1,
        jacobi_dn(t, k) ** 2 + k * jacobi_sn(t, k) ** 2 - 1,
        sp.sin(jacobi_am(t, k)) - jacobi_sn(t, k),
        jacobi_am(t, k).diff(t, 2) + k * sp.sin(2 * jacobi_am(t, k)) / 2,
        jacobi_cn(t, k).diff(t, 2) - jacobi_cn(t, k) * (2 * k - 1 - 2 * k * jacobi_cn(t, k) ** 2),
        (2 * sp.asin(k * jacobi_sn(t, k**2))).diff(t, 2)
        + sp.sin(2 * sp.asin(k * jacobi_sn(t, k**2))),
    ],
)
def test_relations_are_proved(zero: sp.Expr) -> None:
    [finding] = vanish([zero])
    assert finding.truth is Truth.PROVED


@pytest.mark.parametrize(
    "other",
    [
        jacobi_sn(t, k) - jacobi_cn(t, k),
        jacobi_dn(t, k) - sqrt(1 - k * jacobi_sn(t, k) ** 2),  # dn changes its sign where k > 1
        jacobi_am(t, k).diff(t) - jacobi_cn(t, k),
    ],
)
def test_what_is_no_relation_is_refuted(other: sp.Expr) -> None:
    [finding] = vanish([other])
    assert finding.truth is Truth.REFUTED

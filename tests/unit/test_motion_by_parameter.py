"""Names of an answer in balls, integrals that run on, and motions given by a parameter."""

from __future__ import annotations

import importlib
from dataclasses import replace
from fractions import Fraction

import mpmath
import pytest
import sympy as sp

from hjsolve.algebra.functions import jacobi_am, jacobi_cn, jacobi_dn, jacobi_sn
from hjsolve.algebra.identity import refute
from hjsolve.algebra.isolate import isolate
from hjsolve.algebra.named import Names
from hjsolve.algebra.regimes import has_value, regime
from hjsolve.motion import by_parameter, set_in_motion
from hjsolve.motion.common import first_kind
from hjsolve.motion.smooth import smooth_antiderivatives
from hjsolve.quadrature import integrate
from hjsolve.reading import read_problem
from hjsolve.records import Definition, Formula, Truth
from hjsolve.separation import detect, separate
from hjsolve.solve import solve
from hjsolve.writing import solution_document

STARK = {
    "coordinates": ["xi", "eta", "phi"],
    "hamiltonian": "2*(xi*p_xi**2 + eta*p_eta**2)/(m*(xi + eta)) + p_phi**2/(2*m*xi*eta)"
    " - 2*k/(xi + eta) + F*(xi - eta)/2",
    "parameters": {"m": "positive", "k": "positive", "F": "positive"},
    "domains": {"xi": "half-line", "eta": "half-line", "phi": "angle"},
}
KEPLER = {
    "coordinates": ["r", "phi"],
    "hamiltonian": "p_r**2/2 + p_phi**2/(2*r**2) - k/r",
    "parameters": {"k": "positive"},
    "domains": {"r": "half-line", "phi": "angle"},
}

a, b, u = sp.symbols("a b u", real=True)
e1, e2, e3, width = sp.symbols("e_1 e_2 e_3 width", real=True)
CUBIC = u**3 - a * u + b
ROOTS = tuple(
    Definition(s, root_of=CUBIC, unknown=u, index=i) for i, s in enumerate((e1, e2, e3), 1)
)


def test_names_have_the_values_that_define_them() -> None:
    names = Names((*ROOTS, Definition(width, definition=sp.sqrt(e3 - e1))))
    assert names.letters == {a, b}
    at = names.at({a: Fraction(5), b: Fraction(1)})
    assert at is not None
    found = [float(at[s]().mid()) for s in (e1, e2, e3)]
    want = sorted(float(mpmath.re(z)) for z in mpmath.polyroots([1, 0, -5, 1]))
    assert found == pytest.approx(want, rel=1e-14)
    assert float(at[width]) == pytest.approx((want[2] - want[0]) ** 0.5)
    assert names.at({a: Fraction(1), b: Fraction(1)}) is None  # one real root only


def test_roots_take_the_place_of_letters() -> None:
    put = Names(ROOTS).eliminated()
    relations = [e1 + e2 + e3, e1 * e2 + e2 * e3 + e1 * e3 + a, e1 * e2 * e3 + b]
    assert all(sp.cancel(r.xreplace(put)) == 0 for r in relations)


def test_a_fraction_of_one_function_is_isolated() -> None:
    x, y = sp.Symbol("x", real=True), sp.Symbol("y", real=True)
    k = sp.log((1 + 2 * sp.sin(x)) / (3 - sp.sin(x)))
    assert isolate(k, y, x) is None
    found = isolate(k, y, x, fractions=True)
    assert found is not None
    assert (
        sp.simplify(sp.sin(found.centre + found.half) - (3 * sp.exp(y) - 1) / (sp.exp(y) + 2)) == 0
    )
    assert isolate(x + sp.sin(x), y, x, fractions=True) is None


RATES = [
    lambda s, c, d, m, n: s**2,
    lambda s, c, d, m, n: 1 / (1 - n * s**2),
    lambda s, c, d, m, n: 1 / (1 - n * s**2) ** 2,
    lambda s, c, d, m, n: (2 + c**2) / ((1 - n * s**2) * (1 + s**2)),
    lambda s, c, d, m, n: 3 + d**2,
]


@pytest.mark.parametrize("rate", RATES)
def test_integrals_of_elliptic_functions_run_on(rate) -> None:
    """Against mpmath's quadrature over more than one period (Byrd & Friedman 310.02, 336.02)."""
    t = sp.Symbol("t", real=True)
    m, n, w = sp.Rational(2, 5), sp.Rational(-3, 7), sp.Rational(3, 2)
    argument = w * t + sp.Rational(1, 3)
    f = rate(*(g(argument, m) for g in (jacobi_sn, jacobi_cn, jacobi_dn)), m, n)
    found = next(smooth_antiderivatives(f, t))
    assert all(e > 0 for e in found.positive)
    with mpmath.workdps(30):
        names = {
            "jacobi_sn": lambda x, k: mpmath.ellipfun("sn", x, m=k),
            "jacobi_cn": lambda x, k: mpmath.ellipfun("cn", x, m=k),
            "jacobi_dn": lambda x, k: mpmath.ellipfun("dn", x, m=k),
            "jacobi_am": lambda x, k: sp.N(
                jacobi_am(sp.Float(x, 40), sp.Float(k, 40)), 40
            )._to_mpmath(130),
            "elliptic_e": mpmath.ellipe,
            "elliptic_pi": mpmath.ellippi,
        }
        whole = sp.lambdify(t, found.expression, modules=[names, "mpmath"])
        call = sp.lambdify(t, f, modules=[names, "mpmath"])
        end = mpmath.mpf(5)
        want = mpmath.quad(call, mpmath.linspace(0, end, 12))
        assert abs(whole(end) - whole(mpmath.mpf(0)) - want) < mpmath.mpf(10) ** -20


PERIODIC = [
    "1/(5 + 3*cos(3*t/2 + 1/3))",
    "1/(-5 + 3*cos(3*t/2 + 1/3))",
    "1/(5 - 3*sin(3*t/2 + 1/3))**2",
    "(2 + sin(3*t))**2/((3 + sin(3*t))*(2 - sin(3*t)))",
    "1/(2*cosh(t/2 - 1) - 1)",
    "cosh(t)/(3*cosh(t) - 2)**2",
    "(t**2 + 4)/((t**2 + 1)*(2*t**2 + 3)**2)",
]


@pytest.mark.parametrize("rate", PERIODIC)
def test_integrals_of_periodic_functions_run_on(rate: str) -> None:
    """Against mpmath's quadrature over more than one period (Gradshteyn & Ryzhik 2.553)."""
    t = sp.Symbol("t", real=True)
    f = sp.sympify(rate, locals={"t": t})
    fitting = [s for s in smooth_antiderivatives(f, t) if all(e > 0 for e in s.positive)]
    assert len(fitting) == 1
    with mpmath.workdps(30):
        whole, call = (sp.lambdify(t, e, modules="mpmath") for e in (fitting[0].expression, f))
        end = mpmath.mpf(9)
        want = mpmath.quad(call, mpmath.linspace(0, end, 30))
        assert abs(whole(end) - whole(mpmath.mpf(0)) - want) < mpmath.mpf(10) ** -20


def test_a_pole_on_the_way_is_told() -> None:
    t = sp.Symbol("t", real=True)
    found = next(smooth_antiderivatives(1 / (1 - 3 * jacobi_sn(t, sp.Rational(1, 2)) ** 2), t))
    assert any(e < 0 for e in found.positive)


def test_the_parameter_of_the_first_kind_makes_the_radicand_a_polynomial() -> None:
    r, theta = sp.Symbol("r", positive=True), sp.Symbol("theta", real=True)
    E, k, L = sp.symbols("E k L", positive=True)
    assert first_kind(2 * E + 2 * k / r - L**2 / r**2, r, r) in (1 / r, -1 / r)
    g = first_kind(E + k * sp.cos(theta) - L**2 / sp.sin(theta) ** 2, sp.cos(theta), theta)
    assert g is not None
    inside = (E + k * sp.cos(theta) - L**2 / sp.sin(theta) ** 2) * sp.sin(theta) ** 2 / g**2
    x = sp.Symbol("x")
    polynomial = sp.cancel(sp.expand_trig(inside).subs(sp.sin(theta) ** 2, 1 - sp.cos(theta) ** 2))
    assert sp.Poly(polynomial.subs(sp.cos(theta), x), x).degree() == 3


def test_conditions_that_contradict_each_other_are_not_forgotten() -> None:
    x = sp.Symbol("x", real=True)
    _, left = regime((sp.Lt(0, x, evaluate=False), sp.Lt(x, -1, evaluate=False)))
    assert sp.false in left


def test_the_square_of_an_imaginary_path_is_no_value() -> None:
    x = sp.Symbol("x", real=True)
    path = sp.sqrt(-1 - x**2)
    assert refute(path**2 + 1, {}).truth is Truth.REFUTED
    assert refute(path**2 + 1, {}, (), 24, [has_value(path)]).bound is None


def test_a_name_that_is_taken_is_left_to_the_request() -> None:
    request = KEPLER | {
        "hamiltonian": "p_r**2/2 + p_phi**2/(2*r**2) - lambda/r",
        "parameters": {"lambda": "positive"},
    }
    motion = solve(read_problem(request)).motion
    assert motion is not None
    assert {g.parameter.name for g in motion.parametrisations} == {"lambda_"}


def test_the_answer_carries_it() -> None:
    body = solution_document(solve(read_problem(KEPLER)))
    given = body["motion"]["parametrisations"]
    assert given[0]["says"].startswith("orbit: r as a function of phi")
    assert set(given[0]) == {"parameter", "says", "coordinates", "momenta", "rates", "laws"}
    assert set(given[0]["laws"]) == {"t", "phi"}
    assert given[0]["rates"]["t"]["infix"] == "r**2/alpha_2"
    assert body["motion"]["relations"][0]["reason"] == ""


def test_coupled_coordinates_share_a_parameter() -> None:
    motion = solve(read_problem(STARK)).motion
    assert motion is not None
    first = motion.parametrisations[0]
    assert [q.name for q, _ in first.coordinates] == ["xi", "eta"]
    # every name that a condition holds is defined beside it
    for _, formula in (*first.coordinates, *first.momenta, *first.laws):
        held = {s for v in formula.valid for s in v.free_symbols if s.name.startswith("e_")}
        assert held <= {d.symbol for d in formula.where}
    assert dict(first.laws)[sp.Symbol("phi", real=True)].expression.has(sp.elliptic_pi)


def test_only_the_refuted_part_is_left_out(monkeypatch) -> None:
    """A fault drill: one parametrisation with a wrong coefficient goes, and nothing else."""
    module = importlib.import_module("hjsolve.solve")
    right = module.by_parameter

    def wrong(*args, **more):
        motion = right(*args, **more)
        first = motion.parametrisations[0]
        q, formula = first.coordinates[0]
        spoilt = replace(first, coordinates=((q, Formula(formula.expression * 2)),))
        return replace(motion, parametrisations=(spoilt, *motion.parametrisations[1:]))

    monkeypatch.setattr(module, "by_parameter", wrong)
    solution = solve(read_problem(KEPLER))
    assert solution.motion is not None
    assert len(solution.motion.parametrisations) == 3
    assert all(not g.says.startswith("orbit") for g in solution.motion.parametrisations)
    left = [c for c in solution.certificate.checks if "left out" in c.claim]
    assert len(left) == 1
    assert left[0].verdict is Truth.UNDECIDED


def test_without_time_the_motion_stays_as_it_was() -> None:
    h = read_problem(KEPLER)
    separation = separate(h, detect(h))
    motion = set_in_motion(separation, integrate)
    assert motion is not None
    assert by_parameter(separation, motion, integrate, 0.001) == motion


def test_an_integral_left_as_it_stands_begins_at_a_turning_point() -> None:
    request = {
        "coordinates": ["x"],
        "hamiltonian": "p_x**2/2 + log(x)",
        "domains": {"x": "half-line"},
    }
    body = solution_document(solve(read_problem(request)))
    term = body["complete_integral"]["terms"][0]
    assert term["family"] in ("unevaluated", "elementary")
    relation = body["motion"]["relations"][0]
    if "integral" in relation["equation"]["infix"]:
        (where,) = relation["equation"]["where"]
        assert where["name"] == "x_0"
        assert "log(x_0)" in where["zero_of"]
        assert relation["reason"].startswith("x: ")

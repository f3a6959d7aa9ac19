"""Integrals over a cycle against mpmath's quadrature, the actions in numbers, and drills."""

from __future__ import annotations

import dataclasses
import itertools
import random
import time
from functools import cache, lru_cache, partial
from typing import Any

import mpmath
import pytest
import sympy as sp
from test_quadrature_published import SUITE, Case, Numbers, by_name, read, turning_points

import hjsolve.solve
from hjsolve.algebra.calculus import root_derivative
from hjsolve.certification import certify
from hjsolve.in_numbers import actions
from hjsolve.quadrature import cycles as room
from hjsolve.quadrature import integrate
from hjsolve.quadrature.complete import complete
from hjsolve.reading import read_problem
from hjsolve.records import CompleteIntegral, Cycle, Formula, SeparatedEquation, Separation, Term
from hjsolve.separation import detect, separate
from hjsolve.solve import solve

SETS = 2
"""Parameter sets a formula."""

MOMENTA = [e for e in SUITE if e["family"] != "unevaluated" and " action" in e["system"]] + [
    e
    for e in SUITE
    if e["system"]
    in (
        "oscillator in a constant force",
        "free fall",
        "trigonometric Poeschl-Teller",
        "hyperbolic Poeschl-Teller",
        "Rosen-Morse",
        "Eckart",
        "Scarf II",
        "pendulum",
        "quartic oscillator",
        "cosh well",
        "linear radial",
        "Kepler with inverse cube",
        "spherical pendulum",
        "Hartmann ring, polar angle",
        "polar angle of the free symmetric top",
        "Kepler in parabolic coordinates",
    )
]

WITHOUT = {
    "inverted oscillator, action",
    "free fall, action",
    "free fall",
    "Toda exponential, action",
    "inverted quartic, action",
    "sextic, action",
    "Kerr, r, action",
    "Schwarzschild, radial action",
}
"""Unbound, or at the end of the domain with a finite momentum; the last two have bound orbits,
but no antiderivative in that rare pattern of roots."""


@cache
def found(system: str) -> tuple[Case, Term]:
    """The entry of the suite read as a momentum, with its cycles."""
    case = read(next(e for e in SUITE if e["system"] == system))
    q, root = case.variable, case.integrand
    sign = sp.Symbol(f"sigma_{q.name}", real=True)
    equation = SeparatedEquation(q, sp.Symbol("p", real=True), sign, sp.S.Zero, root, root**2)
    again = lru_cache(maxsize=None)(integrate)
    zero = again(sp.S.Zero, q, case.domain)
    term = Term(equation, zero, again(root, q, case.domain))
    alphas = [case.symbols[n] for n in sorted(case.symbols) if n.startswith("alpha")]
    cycles = room.cycles(term, case.domain, alphas, again, seconds=60)
    return case, dataclasses.replace(term, cycles=cycles)


def claims(system: str) -> list[tuple[Cycle, sp.Expr, Formula | None]]:
    """Each formula of each cycle with the integrand it is the mean of."""
    _, term = found(system)
    out = []
    for cycle in term.cycles:
        out.append((cycle, term.equation.root, cycle.action))
        for alpha, formula in cycle.derivatives:
            out.append((cycle, root_derivative(term.equation.root, alpha), formula))
    return out


def between(integrand: Any, ends: tuple[Any, Any]) -> Any:
    """(1/π)∫ by equal steps of φ, q = mid − amp·cos φ, as many as 27 digits take."""
    middle, amplitude = (ends[0] + ends[1]) / 2, (ends[1] - ends[0]) / 2

    def mean(steps: int) -> Any:
        total = mpmath.mpf(0)
        for k in range(steps):
            phi = mpmath.pi * (2 * k + 1) / (2 * steps)
            value = integrand(middle - amplitude * mpmath.cos(phi))
            total += mpmath.re(value) * amplitude * mpmath.sin(phi)
        return total / steps

    return settled(mean)


def around(integrand: Any) -> Any:
    """(1/2π)∫ over a turn by equal steps."""
    return settled(lambda n: sum(integrand(2 * mpmath.pi * k / n) for k in range(n)) / n)


def settled(mean: Any) -> Any:
    last, steps = mean(24), 72
    while steps < 10_000:
        now = mean(steps)
        if abs(now - last) < mpmath.mpf(10) ** -14 * abs(now) or abs(now) < 1e-30:
            return now  # three times the steps have three times the digits
        last, steps = now, 3 * steps
    return None


def within(ends: tuple[Any, Any], case: Case, domain: list[Any]) -> bool:
    """Whether the turning points lie inside of the domain: none was stepped over at its end."""
    if case.domain.kind == "angle":
        return True
    low, high = domain
    return (low is None or low < ends[0]) and (high is None or ends[1] < high)


@pytest.mark.parametrize("entry", [e for e in MOMENTA if e["system"] not in WITHOUT], ids=by_name)
def test_every_formula_is_the_mean_of_its_integrand(entry: dict[str, Any]) -> None:
    system = entry["system"]
    case, term = found(system)
    for index, (cycle, integrand, formula) in enumerate(claims(system)):
        assert formula is not None
        shown = formula.expression.xreplace({term.equation.sign: sp.S.One})
        numbers = Numbers.of(dataclasses.replace(case, integrand=term.equation.root), formula)
        momentum, f = numbers.function(term.equation.root), numbers.function(integrand)
        closed = numbers.function(shown)
        done = 0
        for q, values in numbers.points(random.Random(f"{system} {index}")):
            with mpmath.workdps(50):
                if cycle.kind == "rotation":
                    want = around(partial(f, values))
                else:
                    ends = turning_points(numbers, momentum, q, values)
                    if ends is None or not within(ends, case, numbers.ends(values)):
                        continue
                    want = between(partial(f, values), ends)
                if want is None:
                    continue
                got = closed(values, 0)
                assert abs(got - want) < mpmath.mpf(10) ** -25 * (1 + abs(want)), (formula, values)
            done += 1
            if done == SETS:
                break
        assert done == SETS, formula.valid


@pytest.mark.parametrize("entry", [e for e in MOMENTA if "between" in e], ids=by_name)
def test_the_published_values(entry: dict[str, Any]) -> None:
    """π·J of the first regime is the listed integral between the turning points."""
    case, term = found(entry["system"])
    action = term.cycles[0].action
    assert action is not None
    numbers = Numbers.of(case, action)
    ours, published = numbers.function(sp.pi * action.expression), case.parse(entry["between"])
    theirs = numbers.function(published)
    points = numbers.points(random.Random(entry["system"]))
    for _, values in itertools.islice(points, SETS):
        with mpmath.workdps(40):
            got, want = ours(values, 0), theirs(values, 0)
            assert abs(got - want) < mpmath.mpf(10) ** -30 * (1 + abs(want))


@pytest.mark.parametrize("entry", MOMENTA, ids=by_name)
def test_motion_has_an_action_just_where_it_has_a_cycle(entry: dict[str, Any]) -> None:
    assert bool(found(entry["system"])[1].cycles) == (entry["system"] not in WITHOUT)


def test_unbound_and_separatrix_regimes_have_none() -> None:
    kepler = [c.action for c in found("Kepler, radial action")[1].cycles]
    assert [[str(v) for v in a.valid] for a in kepler if a] == [["alpha_1 < 0"]]
    pendulum = [(c.kind, c.action) for c in found("pendulum")[1].cycles]
    assert [(k, [str(v) for v in a.valid]) for k, a in pendulum if a] == [
        ("libration", ["alpha_1 < A"]),
        ("rotation", ["A < alpha_1"]),
    ]
    well = [
        [str(v) for v in c.action.valid] for c in found("double well, action")[1].cycles if c.action
    ]
    assert well == [["0 < alpha_1"], ["alpha_1 < 0", "0 < x"], ["alpha_1 < 0", "x < 0"]]


# ------------------------------------------------------------------- drills


def worked(problem: dict[str, Any]) -> tuple[Separation, CompleteIntegral]:
    hamiltonian = read_problem(problem)
    separation = separate(hamiltonian, detect(hamiltonian))
    again = lru_cache(maxsize=None)(integrate)
    return separation, room.with_cycles(separation, complete(separation, again), again)


KEPLER = {
    "coordinates": ["r", "phi"],
    "hamiltonian": "(p_r**2 + p_phi**2/r**2)/(2*m) - k/r",
    "parameters": {"m": "positive", "k": "positive"},
    "domains": {"r": "half-line", "phi": "angle"},
}


def spoiled(integral: CompleteIntegral, factor: sp.Expr) -> CompleteIntegral:
    """The action of the first coordinate with a wrong coefficient."""
    first = integral.terms[0]
    (cycle,) = first.cycles
    assert cycle.action is not None
    wrong = dataclasses.replace(cycle.action, expression=factor * cycle.action.expression)
    cycles = (dataclasses.replace(cycle, action=wrong),)
    return dataclasses.replace(
        integral, terms=(dataclasses.replace(first, cycles=cycles), *integral.terms[1:])
    )


def test_a_wrong_coefficient_is_refuted_by_the_certificate() -> None:
    separation, integral = worked(KEPLER)
    claims = [c for c in certify(separation, integral, None).checks if "over a cycle" in c.claim]
    assert [str(c.verdict) for c in claims] == ["undecided", "proved"]
    assert claims[0].bound is not None
    assert claims[0].bound < 1e-25
    wrong = spoiled(integral, 1 + sp.Rational(1, 10**15))
    certificate = certify(separation, wrong, None)
    assert certificate.left_out == (wrong.terms[0],)
    assert any(
        c.claim.startswith("refuted by its own certificate and left out: the action of r")
        for c in certificate.checks
    )
    assert [bool(t.cycles) for t in wrong.without(certificate.left_out).terms] == [False, True]


def test_a_refuted_cycle_does_not_cost_the_rest(monkeypatch: pytest.MonkeyPatch) -> None:
    true = hjsolve.solve.with_cycles
    monkeypatch.setattr(
        hjsolve.solve, "with_cycles", lambda *a: spoiled(true(*a), sp.Rational(1001, 1000))
    )
    solution = solve(read_problem(KEPLER))
    assert solution.integral is not None
    assert solution.motion is not None
    assert [bool(t.cycles) for t in solution.integral.terms] == [False, True]
    assert any(
        "over a cycle" in c.claim and "left out" in c.claim for c in solution.certificate.checks
    )


def test_a_limit_read_wrongly_is_not_returned(monkeypatch: pytest.MonkeyPatch) -> None:
    true = room.mean
    monkeypatch.setattr(room, "mean", lambda *a: true(*a) * (1 + sp.Rational(1, 10**20)))
    separation, integral = worked(KEPLER)
    assert integral.terms[0].cycles == ()
    assert integral.terms[1].cycles != ()  # of phi: a constant momentum needs no limit
    assert len(separation.constants) == 2


def test_time_is_bounded_and_what_was_found_is_kept() -> None:
    case, term = found("two centres in the plane, xi, action")
    alphas = [case.symbols[n] for n in sorted(case.symbols) if n.startswith("alpha")]
    again = cache(integrate)
    for alpha in alphas:
        again(root_derivative(term.equation.root, alpha), case.variable, case.domain)
    began = time.monotonic()
    some = room.cycles(term, case.domain, alphas, again, seconds=0.3)
    assert time.monotonic() - began < 0.3 + 0.5
    assert some == term.cycles[: len(some)]


def test_an_angle_whose_momentum_is_not_periodic_has_no_cycle() -> None:
    problem = {"coordinates": ["q"], "hamiltonian": "p_q**2/2 + q**2", "domains": {"q": "angle"}}
    assert worked(problem)[1].terms[0].cycles == ()
    line = {"coordinates": ["q"], "hamiltonian": "p_q**2/2 + q**2"}
    (cycle,) = worked(line)[1].terms[0].cycles
    assert str(cycle.action.expression if cycle.action else None) == "sqrt(2)*alpha_1/2"


# --------------------------------------------------------- actions in numbers

STARTS = [
    (
        KEPLER,
        {"m": 1.25, "k": 2.0},
        {"r": 1.0, "phi": 0.3, "p_r": 0.4, "p_phi": -1.1},
    ),
    (
        {
            "coordinates": ["theta"],
            "hamiltonian": "p_theta**2/2 - A*cos(theta)",
            "parameters": {"A": "positive"},
            "domains": {"theta": "angle"},
        },
        {"A": 1.5},
        {"theta": 0.5, "p_theta": 0.75},
    ),
    (
        {
            "coordinates": ["theta"],
            "hamiltonian": "p_theta**2/2 - A*cos(theta)",
            "parameters": {"A": "positive"},
            "domains": {"theta": "angle"},
        },
        {"A": 1.5},
        {"theta": 0.5, "p_theta": -4.0},
    ),
    (
        {
            "coordinates": ["x"],
            "hamiltonian": "p_x**2/2 - k*x**2/2 + A*x**4",
            "parameters": {"A": "positive", "k": "positive"},
        },
        {"A": 0.75, "k": 2.0},
        {"x": -0.5, "p_x": 0.125},
    ),
    (
        {
            "coordinates": ["theta", "phi"],
            "hamiltonian": "p_theta**2/2 + p_phi**2/(2*sin(theta)**2) - A*cos(theta)",
            "parameters": {"A": "positive"},
            "domains": {"theta": "polar-angle", "phi": "angle"},
        },
        {"A": 1.5},
        {"theta": 0.75, "phi": 0.0, "p_theta": 0.5, "p_phi": 0.625},
    ),
]


TWO_HARMONICS = {
    "coordinates": ["q"],
    "hamiltonian": "(p_q - sin(q)/4)**2/2 + 9*cos(q)/2 + 8*cos(q)**2/3",
    "domains": {"q": "angle"},
}
# about π, past the place at which the antiderivative turns back; and round the circle
STARTS += [
    (TWO_HARMONICS, {}, {"q": 3.0, "p_q": 0.75}),
    (TWO_HARMONICS, {}, {"q": 3.0, "p_q": 6.0}),
    (TWO_HARMONICS, {}, {"q": 3.0, "p_q": -6.0}),
]


@pytest.mark.parametrize(("problem", "values", "start"), STARTS)
def test_the_actions_in_numbers(
    problem: dict[str, Any], values: dict[str, float], start: dict[str, float]
) -> None:
    """Guaranteed balls of the motion in numbers, which know no antiderivative."""
    numbers = actions(problem, values, start)
    separation, integral = worked(problem)
    at: dict[Any, Any] = {
        p.symbol: sp.Rational(values[p.symbol.name]) for p in separation.hamiltonian.parameters
    }
    known = {
        q: sp.Rational(start[q.name])
        for q in (*separation.hamiltonian.coordinates, *separation.hamiltonian.momenta)
    }
    for c in separation.constants:
        assert c.first_integral is not None
        at[c.symbol] = c.first_integral.subs({**at, **known}).evalf(40)
    for term in integral.terms:
        e = term.equation
        at[e.sign] = sp.sign((known[e.momentum] - e.drift).subs({**at, **known}).evalf())
        want = dict(numbers.actions)[e.coordinate.name]
        kind = dict(numbers.kinds)[e.coordinate.name]
        cycle = next(c for c in term.cycles if c.kind == kind and inside(c, at | known))
        assert want is not None
        assert want.guaranteed
        assert abs(value(cycle.action, at) - want.value) <= want.error + 1e-15


def inside(cycle: Cycle, at: dict[Any, Any]) -> bool:
    assert cycle.action is not None
    named = named_values(cycle.action, at)
    return all(bool(v.subs({**at, **named})) for v in cycle.action.valid)


def value(formula: Formula | None, at: dict[Any, Any]) -> float:
    assert formula is not None
    return float(formula.expression.subs({**at, **named_values(formula, at)}).evalf(25))


def named_values(formula: Formula, at: dict[Any, Any]) -> dict[Any, Any]:
    out: dict[Any, Any] = {}
    for d in formula.where:
        if d.definition is not None:
            out[d.symbol] = d.definition.subs({**at, **out}).evalf(40)
        else:
            roots = sp.Poly(d.root_of.subs(at), d.unknown).nroots(n=40)
            out[d.symbol] = sorted(r for r in roots if r.is_real)[d.index - 1]
    return out

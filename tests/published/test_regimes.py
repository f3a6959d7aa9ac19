"""Every regime of four published systems, separatrices and thresholds included.

The motion of each regime is compared with the formula of the literature (from memory: Whittaker,
Analytical Dynamics, 4th ed., sections 44 and 48; Landau & Lifshitz, Mechanics, sections 11 and 15;
Barker's equation as in Battin, An Introduction to the Mathematics and Methods of Astrodynamics) and
put into Hamilton's equations.
"""

from __future__ import annotations

import random
from functools import cache
from typing import Any

import mpmath
import pytest
import sympy as sp
from phase import WORKING, Curve, value

from hjsolve.reading import read_problem
from hjsolve.records import Formula, Parametrisation, Solution
from hjsolve.solve import solve

TINY = mpmath.mpf(10) ** -25

REQUESTS: dict[str, dict[str, Any]] = {
    "pendulum": {
        "coordinates": ["theta"],
        "hamiltonian": "p_theta**2/(2*m*l**2) - m*g*l*cos(theta)",
        "parameters": {"m": "positive", "l": "positive", "g": "positive"},
        "domains": {"theta": "angle"},
    },
    "double well": {
        "coordinates": ["x"],
        "hamiltonian": "p_x**2/(2*m) - k*x**2/2 + A*x**4/4",
        "parameters": {"m": "positive", "k": "positive", "A": "positive"},
    },
    "Morse": {
        "coordinates": ["x"],
        "hamiltonian": "p_x**2/(2*m) + D*(1 - exp(-a*x))**2",
        "parameters": {"m": "positive", "D": "positive", "a": "positive"},
    },
    "Kepler": {
        "coordinates": ["r", "phi"],
        "hamiltonian": "p_r**2/(2*m) + p_phi**2/(2*m*r**2) - k/r",
        "parameters": {"m": "positive", "k": "positive"},
        "domains": {"r": "half-line", "phi": "angle"},
    },
}

# system, what the conditions of the regime say, the published motion with t for t + β
REGIMES = [
    ("pendulum", {"alpha_1 < g*l*m"}, "2*asin(K*sn(sqrt(g/l)*t, K**2))"),
    ("pendulum", {"g*l*m < alpha_1"}, "2*am(K*sqrt(g/l)*t, 1/K**2)"),
    ("pendulum", {"g*l*m <= alpha_1", "alpha_1 <= g*l*m"}, "2*asin(tanh(sqrt(g/l)*t))"),
    ("double well", {"0 < alpha_1"}, None),
    ("double well", {"alpha_1 < 0", "0 < x"}, None),
    ("double well", {"alpha_1 < 0", "x < 0"}, None),
    (
        "double well",
        {"alpha_1 <= 0", "0 <= alpha_1", "0 < x"},
        "sqrt(2*k/A)/cosh(sqrt(k/m)*t)",
    ),
    (
        "double well",
        {"alpha_1 <= 0", "0 <= alpha_1", "x < 0"},
        "-sqrt(2*k/A)/cosh(sqrt(k/m)*t)",
    ),
    (
        "Morse",
        {"alpha_1 < D"},
        "log((D + sqrt(D*alpha_1)*sin(a*sqrt(2*(D - alpha_1)/m)*t))/(D - alpha_1))/a",
    ),
    (
        "Morse",
        {"D < alpha_1"},
        "log((sqrt(D*alpha_1)*cosh(a*sqrt(2*(alpha_1 - D)/m)*t) - D)/(alpha_1 - D))/a",
    ),
    ("Morse", {"D <= alpha_1", "alpha_1 <= D"}, "log(1/2 + D*a**2*t**2/m)/a"),
]


@cache
def answer(name: str) -> Solution:
    return solve(read_problem(REQUESTS[name]))


def text(formula: Formula) -> set[str]:
    return {str(v) for v in formula.valid}


def motions(solution: Solution) -> list[tuple[Formula, Formula]]:
    """(q(t), p(t)) of the first coordinate in each regime."""
    motion = solution.motion
    assert motion is not None
    q, p = solution.hamiltonian.coordinates[0], solution.hamiltonian.momenta[0]
    found = [(dict(motion.coordinates)[q], dict(motion.momenta)[p])]
    found += [(o.motion, o.momentum) for o in motion.others if o.coordinate == q]
    return [(a, b) for a, b in found if a is not None and b is not None]


def constants(solution: Solution, said: set[str], rng: random.Random) -> dict[sp.Symbol, Any]:
    """Random parameters, and an energy that is where the conditions say."""
    at = {p.symbol: mpmath.mpf(rng.randint(40, 200)) / 97 for p in solution.hamiltonian.parameters}
    (energy, *rest) = [c.symbol for c in solution.separation.constants]
    letters = {s.name: s for s in (*at, energy)}
    border = mpmath.mpf(0)
    for condition in said:
        sides = [sp.sympify(s, locals=letters) for s in condition.replace("=", "").split("<")]
        if energy in sides:
            border = value(sides[1 - sides.index(energy)], at)
    share = mpmath.mpf(rng.randint(20, 80)) / 100
    below = {f"{energy} < {other}" for other in ("g*l*m", "D", "0")} & said
    above = {f"{other} < {energy}" for other in ("g*l*m", "D", "0")} & said
    if below:
        floor = {"D": mpmath.mpf(0), "g*l*m": -border}.get(next(iter(below)).split("< ")[1])
        if floor is None:
            wells = {s.name: v for s, v in at.items()}
            floor = -(wells["k"] ** 2) / (4 * wells["A"]) if "A" in wells else -mpmath.mpf(1) / 20
        at[energy] = floor + share * (border - floor)
    elif above:
        at[energy] = border + share
    else:
        at[energy] = border
    at |= {s: mpmath.mpf(rng.randint(40, 90)) / 97 for s in rest}
    at |= {e.sign: mpmath.mpf(1) for e in solution.separation.equations}
    at |= {
        sp.Symbol(c.symbol.name.replace("alpha", "beta"), real=True): mpmath.mpf(0)
        for c in solution.separation.constants
    }
    return at


def published(formula: str, at: dict[sp.Symbol, Any], t: Any) -> Any:
    names = {s.name: v for s, v in at.items()}
    if "K" in formula:
        g, l_, m = names["g"], names["l"], names["m"]
        names["K"] = mpmath.sqrt((names["alpha_1"] + m * g * l_) / (2 * m * g * l_))
    return eval(  # a formula of this file
        formula.replace("1/2", "mpf(1)/2"),
        {
            **names,
            "t": t,
            "sn": lambda u, m: mpmath.ellipfun("sn", u, m=m),
            "am": lambda u, m: mpmath.asin(mpmath.ellipfun("sn", u, m=m)),
            **{
                n: getattr(mpmath, n) for n in ("asin", "sqrt", "tanh", "cosh", "log", "sin", "mpf")
            },
        },
    )


def check(curve: Curve, solution: Solution, at: dict[sp.Symbol, Any], moments: list[Any]) -> None:
    h = solution.hamiltonian
    q, p = h.coordinates[0], h.momenta[0]
    for t in moments:
        now = dict(at) | {q: curve(q, t), p: curve(p, t)}
        for s, want in ((q, sp.diff(h.expression, p)), (p, -sp.diff(h.expression, q))):
            wanted = value(want, now)
            assert abs(curve.slope(s, t) - wanted) < TINY * (1 + abs(wanted)), (s, t)
        energy = value(h.expression, now)
        assert abs(energy - at[solution.separation.constants[0].symbol]) < TINY * (1 + abs(energy))


@pytest.mark.parametrize(("system", "said", "formula"), REGIMES)
def test_a_regime_has_its_published_motion(
    system: str, said: set[str], formula: str | None
) -> None:
    solution = answer(system)
    fitting = [m for m in motions(solution) if said <= text(m[0])]
    fitting = [m for m in fitting if all("<=" in v or v in said | EXTRA for v in text(m[0]))]
    assert len(fitting) == 1, [text(m[0]) for m in motions(solution)]
    rng = random.Random(f"{system} {sorted(said)}")
    h = solution.hamiltonian
    q, p = h.coordinates[0], h.momenta[0]
    for _ in range(3):
        with mpmath.workdps(WORKING):
            at = constants(solution, said, rng)
            curve = Curve({q: fitting[0][0], p: fitting[0][1]}, h.time, at)
            moments = [mpmath.mpf(rng.randint(-300, 300)) / 101 for _ in range(5)]
            check(curve, solution, at, moments)
            if formula is not None:
                for t in (mpmath.mpf(1) / 7, -mpmath.mpf(2) / 9):
                    got, want = curve(q, t), published(formula, at, t)
                    assert abs(got - want) < TINY * (1 + abs(want))


EXTRA = {"theta < pi"}
"""An angle counted from −π to π."""


def parametrised(said: set[str]) -> Parametrisation:
    motion = answer("Kepler").motion
    assert motion is not None
    return next(g for g in motion.parametrisations if text(g.coordinates[0][1]) == said)


def test_kepler_equation() -> None:
    """r = a(1 − e cos E), n t = E − e sin E with λ = E/√(−2mα₁) from another phase."""
    given = parametrised({"alpha_1 < 0"})
    solution = answer("Kepler")
    with mpmath.workdps(WORKING):
        at = constants(solution, {"alpha_1 < 0"}, random.Random(1))
        names = {s.name: v for s, v in at.items()}
        m, k, energy, momentum = (names[n] for n in ("m", "k", "alpha_1", "alpha_2"))
        a = -k / (2 * energy)
        e = mpmath.sqrt(1 + 2 * energy * momentum**2 / (m * k**2))
        n = mpmath.sqrt(k / (m * a**3))
        at |= {sp.Symbol("t_0", real=True): 0, sp.Symbol("phi_0", real=True): 0}
        formulas = dict(given.coordinates) | {answer("Kepler").hamiltonian.time: given.laws[0][1]}
        curve = Curve(formulas, given.parameter, at)
        r, t = solution.hamiltonian.coordinates[0], solution.hamiltonian.time
        rate = mpmath.sqrt(-2 * m * energy)
        start = curve(t, mpmath.mpf(0))
        for x in (mpmath.mpf(1) / 3, mpmath.mpf(5), mpmath.mpf(-7)):
            # sin(rate λ) is −cos E or cos E of the anomaly from pericentre
            anomaly = rate * x - mpmath.pi / 2
            if abs(curve(r, x) - a * (1 - e * mpmath.cos(anomaly))) > TINY:
                anomaly += mpmath.pi
            assert abs(curve(r, x) - a * (1 - e * mpmath.cos(anomaly))) < TINY
            mean = anomaly - e * mpmath.sin(anomaly)
            first = anomaly - rate * x
            begin = first - e * mpmath.sin(first)
            assert abs(n * (curve(t, x) - start) - (mean - begin)) < TINY * (1 + abs(mean))


def test_barker() -> None:
    """On the parabola tan(f/2) + tan³(f/2)/3 = 2 √(k/(m p³)) t, r = p/(1 + cos f), p = α₂²/(mk)."""
    solution = answer("Kepler")
    q, p = solution.hamiltonian.coordinates[0], solution.hamiltonian.momenta[0]
    (found,) = [m for m in motions(solution) if text(m[0]) == {"alpha_1 <= 0", "0 <= alpha_1"}]
    rng = random.Random(2)
    with mpmath.workdps(WORKING):
        at = constants(solution, {"alpha_1 <= 0", "0 <= alpha_1"}, rng)
        names = {s.name: v for s, v in at.items()}
        m, k, momentum = (names[n] for n in ("m", "k", "alpha_2"))
        latus = momentum**2 / (m * k)
        curve = Curve({q: found[0], p: found[1]}, solution.hamiltonian.time, at)
        for half in (mpmath.mpf(1) / 5, mpmath.mpf(-3) / 2):
            t = (half + half**3 / 3) / (2 * mpmath.sqrt(k / (m * latus**3)))
            assert abs(curve(q, t) - latus * (1 + half**2) / 2) < TINY
        wanted = [mpmath.mpf(x) / 3 for x in (-4, 1, 5)]
        for t in wanted:
            now = dict(at) | {q: curve(q, t), p: curve(p, t)}
            now |= {solution.hamiltonian.momenta[1]: momentum}
            energy = value(solution.hamiltonian.expression, now)
            assert abs(energy) < TINY
            assert abs(curve.slope(q, t) - curve(p, t) / m) < TINY


def test_the_orbit_is_a_conic() -> None:
    """r = p/(1 + e cos(φ − ω)) in every regime (Goldstein, chapter 3; from memory)."""
    solution = answer("Kepler")
    given = next(g for g in solution.motion.parametrisations if g.says.startswith("orbit"))  # type: ignore[union-attr]
    assert not given.coordinates[0][1].valid
    r = solution.hamiltonian.coordinates[0]
    for said in ({"alpha_1 < 0"}, {"0 < alpha_1"}, {"alpha_1 <= 0", "0 <= alpha_1"}):
        with mpmath.workdps(WORKING):
            at = constants(solution, said, random.Random(3))
            names = {s.name: v for s, v in at.items()}
            m, k, energy, momentum = (names[n] for n in ("m", "k", "alpha_1", "alpha_2"))
            latus = momentum**2 / (m * k)
            e = mpmath.sqrt(1 + 2 * energy * momentum**2 / (m * k**2))
            curve = Curve(dict(given.coordinates), given.parameter, at)
            for x in (mpmath.mpf(1) / 5, mpmath.mpf(-1) / 3):
                # λ = φ − φ₀, and λ = 0 lies a quarter turn from the pericentre
                want = {latus / (1 + s * e * mpmath.sin(x)) for s in (1, -1)}
                assert min(abs(curve(r, x) - w) for w in want) < TINY


def test_no_regime_is_given_twice() -> None:
    for name in REQUESTS:
        found = [frozenset(text(m[0])) for m in motions(answer(name))]
        assert len(found) == len(set(found))

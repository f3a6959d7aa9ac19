"""Trajectories against SciPy's DOP853, Hamilton's equations and the constants of the motion."""

import numpy as np
import pytest
import sympy as sp
from scipy.integrate import solve_ivp

from hjsolve.errors import InputError
from hjsolve.in_numbers import actions, trajectory
from hjsolve.reading import read_problem

ROUND = {"r": "half-line", "theta": "polar-angle", "phi": "angle"}
PLANE = {"r": "half-line", "phi": "angle"}


def system(hamiltonian, start, domains=None, span=60.0, **more):
    coordinates = [n for n in start if not n.startswith("p_") and n != "time"]
    problem = {"coordinates": coordinates, "hamiltonian": hamiltonian, **more}
    if domains:
        problem["domains"] = {q: d for q, d in domains.items() if q in coordinates}
    return problem, start, span


RADIAL = "p_r**2/2 + p_phi**2/(2*r**2)"
KEPLER = "p_r**2/2 + p_theta**2/(2*r**2) + p_phi**2/(2*r**2*sin(theta)**2) - 1/r"
STARK = (
    "2*(xi*p_xi**2 + eta*p_eta**2)/(xi + eta) + p_phi**2/(2*xi*eta) - 2/(xi + eta) + F*(xi - eta)/2"
)
PARABOLIC = {"xi": "half-line", "eta": "half-line", "phi": "angle"}
STARK_START = {"xi": 1, "eta": 1.5, "phi": 0, "p_xi": 0.2, "p_eta": 0.3, "p_phi": 0.4}
PROLATE = {"eta": [-1, 1], "phi": "angle"}
CENTRES = (
    "(p_xi**2*(xi**2 - 1) + p_eta**2*(1 - eta**2))/(2*(xi**2 - eta**2))"
    " + p_phi**2/(2*(xi**2 - 1)*(1 - eta**2)) - (3*xi/2 + eta/2)/(xi**2 - eta**2)"
)
KERR = (
    "((r**2 - 2*r + a**2)*p_r**2 + p_theta**2 - ((r**2 + a**2)*p_t + a*p_phi)**2"
    "/(r**2 - 2*r + a**2) + (p_phi + a*sin(theta)**2*p_t)**2/sin(theta)**2)"
    "/(2*(r**2 + a**2*cos(theta)**2))"
)
TOP = "p_theta**2/2 + (p_phi - p_psi*cos(theta))**2/(2*sin(theta)**2) + p_psi**2 + cos(theta)"
EULER = {"theta": "polar-angle", "phi": "angle", "psi": "angle"}

SYSTEMS = {
    "oscillator": system("p_x**2/2 + x**2/2", {"x": 1, "p_x": 0.2}),
    "Duffing": system("p_x**2/2 + x**2/2 + x**4/4", {"x": 1.5, "p_x": 0}),
    "double well, inside": system("p_x**2/2 - x**2 + x**4/4", {"x": 1, "p_x": 0.1}),
    "double well, outside": system("p_x**2/2 - x**2 + x**4/4", {"x": 1, "p_x": 2}),
    "pendulum, libration": system("p_q**2/2 - cos(q)", {"q": 0.3, "p_q": 1}, {"q": "angle"}),
    "pendulum, rotation": system("p_q**2/2 - cos(q)", {"q": 7.3, "p_q": -2.5}, {"q": "angle"}),
    "pendulum, angle undeclared": system("p_q**2/2 - cos(q)", {"q": 0.3, "p_q": 2.5}),
    "Morse, bound": system("p_x**2/2 + (1 - exp(-x))**2", {"x": 0, "p_x": 0.9}),
    "Morse, unbound": system("p_x**2/2 + (1 - exp(-x))**2", {"x": 3, "p_x": -0.9}),
    "free fall": system("p_x**2/2 + x", {"x": 1, "p_x": 0.5}, span=10),
    "inverted oscillator, over": system("p_x**2/2 - x**2/2", {"x": -1, "p_x": 1.2}, span=5),
    "inverted oscillator, back": system("p_x**2/2 - x**2/2", {"x": -1, "p_x": 0.8}, span=5),
    "sech well, unbound": system("p_x**2/2 - 1/cosh(x)**2", {"x": -3, "p_x": 0.7}),
    "relativistic oscillator": system("sqrt(1 + p_x**2) + x**2/2", {"x": 0.5, "p_x": 1}),
    "quartic in p": system("p_x**4/4 + x**2/2", {"x": 1, "p_x": 0.3}, span=20),
    "gauge drift": system("(p_x - x**2/3)**2/2 + x**2/2", {"x": 1, "p_x": 0.3}),
    "isotropic oscillator": system(
        RADIAL + " + r**2/2", {"r": 1, "phi": 0.2, "p_r": 0.3, "p_phi": -0.4}, PLANE
    ),
    "isochrone": system(
        RADIAL + " - 1/(1 + sqrt(1 + r**2))", {"r": 1, "phi": 0, "p_r": 0.1, "p_phi": 0.5}, PLANE
    ),
    "logarithmic": system(
        RADIAL + " + log(r)", {"r": 1, "phi": 0, "p_r": 0.2, "p_phi": 0.5}, PLANE
    ),
    "Kepler with 1/r**3": system(
        RADIAL + " - 1/r - 1/(200*r**3)", {"r": 1, "phi": 0, "p_r": 0.1, "p_phi": 0.9}, PLANE
    ),
    "relativistic Kepler": system(
        "sqrt(1 + p_r**2 + p_phi**2/r**2) - 1/(2*r)",
        {"r": 3, "phi": 0, "p_r": 0.1, "p_phi": 1},
        PLANE,
    ),
    "Kepler, parabolic orbit": system(
        RADIAL + " - 1/r", {"r": 0.5, "phi": 0, "p_r": 0, "p_phi": 1}, PLANE
    ),
    "Kepler 3D": system(
        KEPLER, {"r": 1, "theta": 1.2, "phi": 0, "p_r": 0.1, "p_theta": 0.5, "p_phi": 0.6}, ROUND
    ),
    "Kepler 3D, scattering": system(
        KEPLER, {"r": 1, "theta": 1.2, "phi": 0, "p_r": 1.5, "p_theta": 0.5, "p_phi": 0.6}, ROUND
    ),
    "spherical pendulum": system(
        "p_theta**2/2 + p_phi**2/(2*sin(theta)**2) - cos(theta)",
        {"theta": 1, "phi": 0, "p_theta": 0.3, "p_phi": 0.5},
        ROUND,
    ),
    "symmetric top": system(
        TOP, {"theta": 1, "phi": 0, "psi": 0, "p_theta": 0, "p_phi": 1, "p_psi": 1.5}, EULER
    ),
    "Penning trap": system(
        "p_r**2/2 + (p_phi - 3*r**2/2)**2/(2*r**2) + p_z**2/2 + z**2/2 - r**2/4",
        {"r": 1, "phi": 0, "z": 0.3, "p_r": 0.1, "p_phi": 0.2, "p_z": 0},
        PLANE,
    ),
    "Landau gauge": system("p_x**2/2 + (p_y - 2*x)**2/2", {"x": 1, "y": 0, "p_x": 0.1, "p_y": 0.2}),
    "Smorodinsky–Winternitz": system(
        RADIAL + " + r**2/2 + (3/10/cos(phi)**2 + 2/5/sin(phi)**2)/r**2",
        {"r": 1.5, "phi": 0.7, "p_r": 0.2, "p_phi": 0.5},
        {"r": "half-line", "phi": [0, "pi/2"]},
    ),
    "Stark": system(STARK, STARK_START, PARABOLIC, parameters={"F": "1/50"}),
    "Stark, ionising": system(STARK, STARK_START, PARABOLIC, 20.0, parameters={"F": "1/2"}),
    "two centres": system(
        CENTRES,
        {"xi": 1.5, "eta": 0.2, "phi": 0, "p_xi": 0.1, "p_eta": 0.3, "p_phi": 0.4},
        PROLATE,
        40.0,
    ),
    "two centres, scattering": system(
        CENTRES,
        {"xi": 1.5, "eta": 0.2, "phi": 0, "p_xi": 2, "p_eta": 0.3, "p_phi": 0.4},
        PROLATE,
        20.0,
    ),
    "Kerr, bound": system(
        KERR,
        {"t": 0, "r": 8, "theta": 1.2, "phi": 0}
        | {"p_t": -0.95, "p_r": 0, "p_theta": 2, "p_phi": 2.5},
        ROUND,
        600.0,
        time="tau",
        parameters={"a": "9/10"},
    ),
    "Kerr, unbound": system(
        KERR,
        {"t": 0, "r": 20, "theta": 1.2, "phi": 0}
        | {"p_t": -1.2, "p_r": -0.5, "p_theta": 4, "p_phi": 5},
        ROUND,
        60.0,
        time="tau",
        parameters={"a": "9/10"},
    ),
    "Stäckel 2D": system(
        "((p_x**2 + p_y**2)/2 + x**4 + y**4 + x**2)/(3 + x**2 + y**2)",
        {"x": 1, "y": 0.5, "p_x": 0.3, "p_y": 1},
        span=150,
    ),
    "Stäckel 3D": system(
        "((p_x**2 + p_y**2 + p_z**2)/2 + x**4 + 2*y**2 + z**4 + z**2)/(4 + x**2 + y**2 + cos(z)/2)",
        {"x": 1, "y": 0.5, "z": 0.2, "p_x": 0.3, "p_y": 1, "p_z": 0.7},
        span=150,
    ),
    "two modes": system(
        "(p_x**2 + p_y**2)/2 + x**2 + x**4 + 2*y**2 + x**2/3",
        {"x": 0.5, "y": 0.3, "p_x": 0.1, "p_y": 0.4},
    ),
    "bound beside unbound": system(
        "p_x**2/2 + x**2/2 + p_y**2/2 - y", {"x": 1, "y": -3, "p_x": 0, "p_y": 0.7}, span=20
    ),
    "a common factor of time": system(
        "(2 + cos(t))*(p_x**2/2 + x**4/4)", {"x": 1, "p_x": 0.3, "time": 1}
    ),
    "a factor of time for one of two": system(
        "p_x**2/2 + x**2/2 + (1 + t**2/100)*(p_y**2/2 + y**4)",
        {"x": 1, "y": 0.5, "p_x": 0, "p_y": 0.2},
        span=20,
    ),
}


@pytest.fixture(params=SYSTEMS)
def case(request):
    return SYSTEMS[request.param]


def field(problem):
    read = read_problem(problem)
    h, z = read.expression, [*read.coordinates, *read.momenta]
    right = [sp.diff(h, p) for p in read.momenta] + [-sp.diff(h, q) for q in read.coordinates]
    return read, sp.lambdify([read.time, z], right, "numpy", cse=True)


def table(made):
    return np.array([x for _, x in (*made.coordinates, *made.momenta)])


def test_agrees_with_direct_integration(case):
    problem, start, span = case
    read, f = field(problem)
    begin = float(start.get("time", 0))
    y0 = [float(start[s.name]) for s in (*read.coordinates, *read.momenta)]
    for side in (1, -1):
        times = begin + side * np.linspace(0, span, 60)
        direct = solve_ivp(f, (times[0], times[-1]), y0, "DOP853", times, rtol=1e-12, atol=1e-14)
        assert direct.status == 0
        made = table(trajectory(problem, {}, start, times))
        assert (np.abs(made - direct.y) <= 3e-8 * (1 + np.abs(made))).all()


def test_obeys_hamiltons_equations(case):
    problem, start, span = case
    f = field(problem)[1]
    begin = float(start.get("time", 0))
    h = 2e-3
    middle = begin + np.linspace(-0.6, 0.8, 9) * span
    steps = np.arange(-3, 4)
    weights = np.array([-1, 9, -45, 0, 45, -9, 1]) / (60 * h)
    times = (middle[:, None] + h * steps).ravel()
    made = table(trajectory(problem, {}, start, times)).reshape(-1, len(middle), len(steps))
    slope = made @ weights
    right = np.array(
        [np.broadcast_to(v, middle.shape) for v in f(middle, made[:, :, 3])], dtype=float
    )
    size = 1 + np.abs(made).max(axis=2)
    assert (np.abs(slope - right) <= 1e-8 * (size + np.abs(right))).all()


def test_the_start_comes_back_at_the_start_time(case):
    problem, start, _ = case
    begin = float(start.get("time", 0))
    made = trajectory(problem, {}, start, [begin])
    for name, values in (*made.coordinates, *made.momenta):
        assert abs(values[0] - float(start[name])) <= dict(made.errors)[name] + 1e-15


def test_energy_after_a_hundred_thousand_spans(case):
    problem, start, span = case
    read = read_problem(problem)
    if read.explicit_time:
        pytest.skip("H is no constant of the motion")
    found = actions(problem, {}, start)
    kinds = dict(found.kinds)
    ignorable = {q.name for q in read.coordinates if not read.expression.has(q)}
    if any(k == "unbounded" and q not in ignorable for q, k in kinds.items()):
        pytest.skip("the motion leaves")
    numbers = [*found.frequencies, *found.mean_rates]
    rates = [abs(r.value) for _, r in numbers if r is not None and abs(r.value) > 1e-9]
    times = np.random.default_rng(3).uniform(-1, 1, 50) * 1e5 * 2 * np.pi / min(rates)
    made = table(trajectory(problem, {}, start, times))
    h = sp.lambdify([[*read.coordinates, *read.momenta]], read.expression, "numpy")
    energy = h([float(start[s.name]) for s in (*read.coordinates, *read.momenta)])
    for letters in [[*read.coordinates, *read.momenta]]:
        slopes = [
            np.abs(sp.lambdify([letters], sp.diff(read.expression, s), "numpy")(made))
            for s in letters
        ]
    spread = sum(
        np.max(s) * (np.max(np.abs(x)) if n.name not in ignorable else 0)
        for s, x, n in zip(slopes, made, letters, strict=True)
    )
    assert np.abs(h(made) - energy).max() <= 2e-14 * max(1.0, float(spread))
    del span


def test_more_than_thirty_systems():
    assert len(SYSTEMS) >= 35


REFUSED = {
    "escape": system("p_x**2/2 - x**4/4", {"x": 1, "p_x": 0.5}),
    "wall": system("p_x**2/2 + x", {"x": 1, "p_x": 0.5}, {"x": "half-line"}),
    "branches": system("p_x**3/3 - p_x + x**2/2", {"x": 0.1, "p_x": 1.5}),
}


@pytest.mark.parametrize("name", REFUSED)
def test_what_has_no_numbers_is_refused_in_words(name):
    problem, start, span = REFUSED[name]
    with pytest.raises(InputError) as refusal:
        trajectory(problem, {}, start, [0.0, span])
    assert len(refusal.value.detail) > 20

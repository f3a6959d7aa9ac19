"""CPU of 10⁴ states against direct integration, on the seven systems of the trade.

    python tests/benchmarks/trajectory.py [--periods 10 1000 100000] [--only NAME …]

Times are processor seconds of one process (the smallest of several repeats for
the evaluator).  The reference is SciPy's DOP853 at rtol 1e-12; beyond
``DIRECT_LIMIT`` periods it is not run.  Where a general Taylor-series
integrator (heyoka) is installed it is timed too, at tolerance 1e-16.
"""

from __future__ import annotations

import argparse
import time

import numpy as np
import sympy as sp
from flint import ctx
from scipy.integrate import quad, solve_ivp

from hjsolve.in_numbers import separated
from hjsolve.motion.numbers.actions import find_actions
from hjsolve.motion.numbers.oscillations import branches
from hjsolve.motion.numbers.periodic import states
from hjsolve.motion.numbers.start import BITS, compiled, set_up
from hjsolve.motion.numbers.trajectory import find_trajectory, movers_of
from hjsolve.reading import read_problem

try:
    import heyoka
except ImportError:
    heyoka = None

STATES = 10_000
DIRECT_LIMIT = 1000
TAYLOR_LIMIT = 1e5

ROUND = {"r": "half-line", "theta": "polar-angle", "phi": "angle"}
SYSTEMS = {
    "spherical pendulum": (
        {
            "coordinates": ["theta", "phi"],
            "hamiltonian": "p_theta**2/2 + p_phi**2/(2*sin(theta)**2) - cos(theta)",
            "domains": {"theta": "polar-angle", "phi": "angle"},
        },
        {"theta": 1, "phi": 0, "p_theta": 0.3, "p_phi": 0.5},
    ),
    "Kepler 3D": (
        {
            "coordinates": ["r", "theta", "phi"],
            "hamiltonian": "p_r**2/2 + p_theta**2/(2*r**2) + p_phi**2/(2*r**2*sin(theta)**2) - 1/r",
            "domains": ROUND,
        },
        {"r": 0.4, "theta": 1.2, "phi": 0, "p_r": 0, "p_theta": 0.6, "p_phi": 0.49},
    ),
    "Stark": (
        {
            "coordinates": ["xi", "eta", "phi"],
            "hamiltonian": "2*(xi*p_xi**2 + eta*p_eta**2)/(xi + eta) + p_phi**2/(2*xi*eta)"
            " - 2/(xi + eta) + (xi - eta)/100",
            "domains": {"xi": "half-line", "eta": "half-line", "phi": "angle"},
        },
        {"xi": 1, "eta": 1.5, "phi": 0, "p_xi": 0.2, "p_eta": 0.3, "p_phi": 0.4},
    ),
    "two centres 3D": (
        {
            "coordinates": ["xi", "eta", "phi"],
            "hamiltonian": "(p_xi**2*(xi**2 - 1) + p_eta**2*(1 - eta**2))/(2*(xi**2 - eta**2))"
            " + p_phi**2/(2*(xi**2 - 1)*(1 - eta**2)) - (3*xi/2 + eta/2)/(xi**2 - eta**2)",
            "domains": {"xi": [1, 1000], "eta": [-1, 1], "phi": "angle"},
        },
        {"xi": 1.5, "eta": 0.2, "phi": 0, "p_xi": 0.1, "p_eta": 0.3, "p_phi": 0.4},
    ),
    "Kerr bound orbit": (
        {
            "coordinates": ["t", "r", "theta", "phi"],
            "time": "tau",
            "hamiltonian": "((r**2 - 2*r + a**2)*p_r**2 + p_theta**2"
            " - ((r**2 + a**2)*p_t + a*p_phi)**2/(r**2 - 2*r + a**2)"
            " + (p_phi + a*sin(theta)**2*p_t)**2/sin(theta)**2)/(2*(r**2 + a**2*cos(theta)**2))",
            "parameters": {"a": "9/10"},
            "domains": ROUND,
        },
        {
            "t": 0,
            "r": 8,
            "theta": 1.2,
            "phi": 0,
            "p_t": -0.95,
            "p_r": 0,
            "p_theta": 2,
            "p_phi": 2.5,
        },
    ),
    "quartic Stäckel 2D": (
        {
            "coordinates": ["x", "y"],
            "hamiltonian": "((p_x**2 + p_y**2)/2 + x**4 + y**4 + x**2)/(3 + x**2 + y**2)",
        },
        {"x": 1, "y": 0.5, "p_x": 0.3, "p_y": 1},
    ),
    "Stäckel 3D": (
        {
            "coordinates": ["x", "y", "z"],
            "hamiltonian": "((p_x**2 + p_y**2 + p_z**2)/2 + x**4 + 2*y**2 + z**4 + z**2)"
            "/(4 + x**2 + y**2 + cos(z)/2)",
        },
        {"x": 1, "y": 0.5, "z": 0.2, "p_x": 0.3, "p_y": 1, "p_z": 0.7},
    ),
}


def cpu(repeats, work, *arguments):
    """The smallest processor time of several runs, and what the last one gave."""
    best = np.inf
    for _ in range(repeats):
        begin = time.process_time()
        made = work(*arguments)
        best = min(best, time.process_time() - begin)
    return best, made


def field(hamiltonian):
    """Hamilton's equations as fast scalar code."""
    h = hamiltonian.expression
    z = [*hamiltonian.coordinates, *hamiltonian.momenta]
    right = [sp.diff(h, p) for p in hamiltonian.momenta]
    right += [-sp.diff(h, q) for q in hamiltonian.coordinates]
    f = sp.lambdify([z], right, "math", cse=True)
    return lambda t, y: f(y)


def taylor(hamiltonian, start):
    """A Taylor integrator of Hamilton's equations."""
    z = [*hamiltonian.coordinates, *hamiltonian.momenta]
    names = heyoka.make_vars(*[s.name for s in z])
    h = heyoka.from_sympy(hamiltonian.expression.evalf(17))
    n = len(hamiltonian.coordinates)
    right = [(names[j], heyoka.diff(h, names[n + j])) for j in range(n)]
    right += [(names[n + j], -heyoka.diff(h, names[j])) for j in range(n)]
    return heyoka.taylor_adaptive(right, start, tol=1e-16)


def main():
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--periods", type=float, nargs="+", default=[10, 1000, 1e5, 1e9])
    parser.add_argument("--only", nargs="+")
    options = parser.parse_args()
    ctx.prec = BITS
    reference, _ = cpu(5, quad, lambda x: 1 / np.sqrt(1 - x**2 / 2), -1, 1)
    print(f"one scipy.integrate.quad: {reference * 1e3:.3f} ms")
    for name, (problem, start) in SYSTEMS.items():
        if not options.only or name in options.only:
            system(name, problem, start, options.periods)


def system(name, problem, start, spans):
    """Print the lines of one system."""
    hamiltonian = read_problem(problem)
    separation = separated(hamiltonian)
    compiled(separation)
    setup, found = cpu(3, find_actions, separation, {}, start)
    tables, _ = cpu(3, find_trajectory, separation, {}, start, [0.0])
    period = 2 * np.pi / min(abs(r.value) for _, r in found.frequencies if r is not None)
    print(f"{name}: actions {setup * 1e3:.1f} ms, tables {tables * 1e3:.1f} ms")
    setting = set_up(separation, {}, start)
    motion = movers_of(setting, branches(setting))
    y0 = [float(start[s.name]) for s in (*hamiltonian.coordinates, *hamiltonian.momenta)]
    for periods in spans:
        times = np.linspace(0, periods * period, STATES)
        whole, made = cpu(3, find_trajectory, separation, {}, start, times)
        ours, _ = cpu(7, states, motion, {0: times})
        line = f"  {periods:g} periods: {ours / STATES * 1e9:.0f} ns a state"
        columns = np.array([x for _, x in (*made.coordinates, *made.momenta)])
        others = {}
        if periods <= DIRECT_LIMIT:
            others["DOP853"] = cpu(1, direct, field(hamiltonian), y0, times)
        if heyoka is not None and periods <= TAYLOR_LIMIT:
            integrator = taylor(hamiltonian, y0)
            used, out = cpu(1, integrator.propagate_grid, times)
            others["Taylor"] = used, out[-1].T
        for other, (used, theirs) in others.items():
            gap = np.abs(theirs - columns).max()
            line += f"; {other}/ours {used / ours:.1f}, with tables {used / whole:.2f}"
            line += f" (differ by {gap:.1e})"
        print(line, flush=True)


def direct(f, y0, times):
    """States by DOP853."""
    return solve_ivp(f, (0, times[-1]), y0, "DOP853", times, rtol=1e-12, atol=1e-13).y


if __name__ == "__main__":
    main()

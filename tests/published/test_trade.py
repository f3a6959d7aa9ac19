"""Facts of the trade (common practice, no source) about the oscillator in two dimensions."""

import sympy as sp

from hjsolve.algebra.identity import vanish
from hjsolve.reading import read_problem
from hjsolve.records import Truth
from hjsolve.solve import solve

PLANE = {
    "coordinates": ["x", "y"],
    "hamiltonian": "(p_x**2 + p_y**2)/(2*m) + k*(x**2 + y**2)/2",
    "parameters": {"m": "positive", "k": "positive"},
}


def orbit(phase, split):
    """x(t), y(t) with β₂ = ``phase`` periods and the share ``split`` of the energy in x."""
    solution = solve(read_problem(PLANE))
    letters = {p.symbol.name: p.symbol for p in solution.hamiltonian.parameters}
    t = solution.hamiltonian.time
    alpha_1, alpha_2 = (c.symbol for c in solution.separation.constants)
    beta_1, beta_2 = (r.constant for r in solution.motion.relations)
    put = {letters["m"]: 2, letters["k"]: 3, alpha_1: 1, alpha_2: split, beta_1: 0}
    period = 2 * sp.pi * sp.sqrt(sp.Rational(2, 3))
    put[beta_2] = phase * period
    x, y = (f.expression.subs(put) for _, f in solution.motion.coordinates)
    return x, y, t


def is_zero(expression, t):
    return all(abs(expression.subs(t, v).evalf(40)) < 1e-30 for v in (0, 1, 2, 3, 5, 7))


def test_equal_or_opposite_phases_run_on_a_straight_line():
    for phase in (0, sp.Rational(1, 2)):
        x, y, t = orbit(phase, sp.Rational(1, 5))
        sign = 1 if phase == 0 else -1
        assert is_zero(x * 2 - sign * y, t)


def test_a_quarter_period_at_equal_amplitudes_is_a_circle():
    x, y, t = orbit(sp.Rational(1, 4), sp.Rational(1, 2))
    assert is_zero(x**2 + y**2 - (x**2 + y**2).subs(t, 0), t)


def test_else_it_is_an_ellipse():
    x, y, t = orbit(sp.Rational(1, 8), sp.Rational(1, 5))
    points = [(x.subs(t, v).evalf(40), y.subs(t, v).evalf(40)) for v in (0, 1, 2, 3, 4, 5)]
    rows = sp.Matrix([[u**2, u * v, v**2] for u, v in points])
    conic = rows[:3, :].LUsolve(sp.ones(3, 1))
    a, b, c = conic
    assert 4 * a * c - b**2 > 0
    assert abs(4 * a * c - b**2 - (a + c) ** 2) > 0.01
    assert max(abs(v - 1) for v in rows * conic) < 1e-30


def test_the_polar_form_has_the_angle_ignorable():
    polar = {
        "coordinates": ["r", "phi"],
        "hamiltonian": "(p_r**2 + p_phi**2/r**2)/(2*m) + k*r**2/2",
        "parameters": PLANE["parameters"],
        "domains": {"r": "half-line", "phi": "angle"},
    }
    solution = solve(read_problem(polar))
    assert [q.name for q in solution.separation.verdict.ignorable] == ["phi"]
    assert solution.separation.constants[1].meaning == "momentum of phi (angular momentum)"


def test_the_momentum_is_m_times_the_velocity():
    solution = solve(read_problem(PLANE))
    m = next(p.symbol for p in solution.hamiltonian.parameters if p.symbol.name == "m")
    t = solution.hamiltonian.time
    momenta = dict(solution.motion.momenta)
    for q, formula in solution.motion.coordinates:
        p = next(p for p in momenta if p.name == f"p_{q.name}")
        residue = momenta[p].expression - m * sp.diff(formula.expression, t)
        assert vanish([residue])[0].truth is Truth.PROVED

"""The Jacobi relations and the explicit motion: regimes, branches, what follows what."""

import mpmath
import pytest
import sympy as sp

from hjsolve.algebra import functions
from hjsolve.motion.inversions import INVERSIONS, invert
from hjsolve.reading import read_problem
from hjsolve.records import Domain, Truth
from hjsolve.solve import solve

TAU = sp.Symbol("tau", real=True)


@pytest.mark.parametrize("entry", INVERSIONS, ids=lambda e: e.name)
def test_an_example_of_an_inversion_inverts(entry):
    q, a, w = sp.Symbol("q", real=True), *sp.symbols("a w", positive=True)
    names = {"q": q, "a": a, "w": w, "tau": TAU, "k": sp.Symbol("k", positive=True)}
    names |= {n: getattr(functions, n) for n in dir(functions) if n.startswith("jacobi_")}
    for form, path in entry.examples:
        form, path = sp.sympify(form, locals=names), sp.sympify(path, locals=names)
        found = invert(form, q, TAU, Domain(), ())[0][0]
        at = {
            a: sp.Rational(3, 2),
            w: sp.Rational(4, 3),
            TAU: sp.Rational(1, 7),
            names["k"]: sp.Rational(2, 5),
        }
        assert abs((found - path).subs(at).evalf(30)) < 1e-25


def solved(hamiltonian, **more):
    coordinates = more.pop("coordinates", ["x"])
    return solve(read_problem({"coordinates": coordinates, "hamiltonian": hamiltonian, **more}))


def test_a_boundary_regime_is_not_the_general_motion():
    """Radial Kepler: explicit for zero energy only, implicit for general energy."""
    s = solved("p_x**2/2 - 1/x", domains={"x": "half-line"})
    assert dict(s.motion.coordinates)[s.hamiltonian.coordinates[0]] is None
    parabolic = [o for o in s.motion.others if len(o.motion.valid) == 2]
    assert parabolic


def test_every_regime_of_the_barrier_is_there_and_proved():
    s = solved("p_x**2/2 - x**2/2")
    kinds = {type(f) for o in s.motion.others for f in o.motion.expression.atoms(sp.Function)}
    assert {sp.sinh, sp.cosh} <= kinds
    claims = [c for c in s.certificate.checks if "Hamilton's equations" in c.claim]
    assert len(claims) == 1 + len(s.motion.others)
    assert all(c.verdict is Truth.PROVED for c in claims)


def test_the_relations_hold_along_the_motion():
    """β from the relations is the β of q(t), the drift along y included."""
    s = solved(
        "p_x**2/(2*m) + (p_y - b*x)**2/(2*m)",
        coordinates=["x", "y"],
        parameters={"m": "positive", "b": "positive"},
    )
    t = s.hamiltonian.time
    names = {"m": 2, "b": 3, "alpha_1": 5, "alpha_2": "1/3", "beta_1": "1/7", "beta_2": "2/5"}
    names |= {"sigma_x": 1, "t": "1/11"}

    def number(expression):
        put = {v: sp.Rational(str(names[v.name])) for v in expression.free_symbols}
        return mpmath.mpf(expression.subs(put).evalf(30))

    with mpmath.workdps(30):
        along = {q: f.expression for q, f in s.motion.coordinates}
        for relation in s.motion.relations:
            left, right = relation.equation.expression.args
            assert abs(number(left.subs(along)) - number(right)) < 1e-25
    assert t in along[s.hamiltonian.coordinates[1]].free_symbols


def test_sums_give_every_coordinate_its_own_time():
    s = solved("(p_x**2 + p_y**2)/2 + x**2/2 + y", coordinates=["x", "y"])
    assert all(f is not None for _, f in s.motion.coordinates)
    assert "grows uniformly with time" in s.motion.relations[0].says
    assert "relative to each other" in s.motion.relations[1].says

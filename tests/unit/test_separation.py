"""Verdict details, constants and separated equations beyond the tables."""

import pytest
import sympy as sp

from hjsolve.algebra.identity import vanish
from hjsolve.errors import InputError
from hjsolve.reading import read_problem
from hjsolve.records import Truth
from hjsolve.separation import detect, separate
from hjsolve.separation.freezing import Block
from hjsolve.separation.staeckel import leaves

SPHERICAL = {
    "coordinates": ["r", "theta", "phi"],
    "hamiltonian": "p_r**2/(2*m) + (p_theta**2 + p_phi**2/sin(theta)**2)/(2*m*r**2) - k/r",
    "parameters": {"m": "positive", "k": "positive"},
    "domains": {"r": "half-line", "theta": "polar-angle", "phi": "angle"},
}
ELLIPSOIDAL = {
    "coordinates": ["u", "v", "w"],
    "hamiltonian": "(4*(u-1)*(u-2)*(u-3)*p_u**2 + u**3)/(2*(u-v)*(u-w))"
    " + (4*(v-1)*(v-2)*(v-3)*p_v**2 + v**3)/(2*(v-u)*(v-w))"
    " + (4*(w-1)*(w-2)*(w-3)*p_w**2 + w**3)/(2*(w-u)*(w-v))",
}


def separated(problem):
    h = read_problem(problem)
    return separate(h, detect(h))


def test_kepler_gets_the_constants_of_the_literature():
    s = separated(SPHERICAL)
    assert [c.meaning for c in s.constants] == [
        "energy",
        "momentum of phi (angular momentum)",
        "square of the total angular momentum",
    ]
    assert [str(e.squared) for e in s.equations[:2]] == [
        "2*alpha_1*m - alpha_3/r**2 + 2*k*m/r",
        "-alpha_2**2/sin(theta)**2 + alpha_3",
    ]


def test_an_obstruction_is_a_point_where_the_balls_exclude_zero():
    h = read_problem({"coordinates": ["x", "y"], "hamiltonian": "p_x**2+p_y**2+x*y/10**40"})
    v = detect(h)
    assert v.separability == "none"
    found = v.obstruction
    assert found.pair == ("x", "y")
    assert abs(found.midpoint) > found.radius > 0
    values = {s: dict(found.point)[s.name] for s in h.expression.free_symbols}
    q, p = h.coordinates, h.momenta
    d = lambda *by: sp.diff(h.expression, *by)  # noqa: E731
    bracket = (
        d(q[0]) * d(q[1]) * d(p[0], p[1])
        + d(p[0]) * d(p[1]) * d(q[0], q[1])
        - d(q[0]) * d(p[1]) * d(p[0], q[1])
        - d(p[0]) * d(q[1]) * d(q[0], p[1])
    )
    assert abs(float(bracket.subs(values)) - found.midpoint) <= found.radius


def test_the_constants_do_not_know_the_base_point():
    h = read_problem(ELLIPSOIDAL)
    blocks = [Block((q,), (p,)) for q, p in zip(h.coordinates, h.momenta, strict=True)]
    epsilon, b1, b2 = sp.symbols("epsilon b1 b2", real=True)
    answers = [leaves(h.expression, epsilon, blocks, [], [b1, b2], n) for n in (1, 3, 5)]
    for other in answers[1:]:
        assert other.leaves == answers[0].leaves
        assert other.integrals == answers[0].integrals


@pytest.mark.parametrize("problem", [SPHERICAL, ELLIPSOIDAL], ids=["spherical", "ellipsoidal"])
def test_the_momenta_solve_the_equation(problem):
    h = read_problem(problem)
    s = separated(problem)
    put = {e.momentum: e.solution.xreplace({e.sign: sp.S.One}) for e in s.equations}
    assert vanish([h.expression.xreplace(put) - s.constants[0].symbol])[0].truth is Truth.PROVED


def test_a_hidden_parameter_is_refused():
    problem = {
        "coordinates": ["x", "y"],
        "hamiltonian": "p_x**2 + (p_y + x)**2 - p_y**2 - 2*p_y*x + y**2",
    }
    with pytest.raises(InputError) as caught:
        detect(read_problem(problem))
    assert caught.value.pointer == "/coordinates/1"


def test_a_name_of_the_request_is_not_taken_again():
    problem = {
        "coordinates": ["x"],
        "hamiltonian": "p_x**2/2 + alpha_1*x**2",
        "parameters": {"alpha_1": "positive"},
    }
    assert separated(problem).constants[0].symbol.name == "alpha_1_"


def test_blocks_and_direct_sum_with_time():
    h = read_problem(
        {"coordinates": ["x", "y"], "hamiltonian": "(p_x**2+p_y**2)/2 + x**2 + y**2*(1+t**2)"}
    )
    v = detect(h)
    assert [[s.name for s in b] for b in v.blocks] == [["x"], ["y", "t"]]
    assert [[s.name for s in b] for b in v.direct_sum] == [["x"], ["y"]]


def test_separated_momenta_of_many_shapes():
    shapes = {
        "exp(p_x)*(1+x**2)": "log(alpha_1/(x**2 + 1))",
        "cosh(p_x) + x": "sigma_x*acosh(alpha_1 - x)",
        "p_x**4/4 + p_x**2/2 + x**2": "sigma_x*sqrt(sqrt(4*alpha_1 - 4*x**2 + 1) - 1)",
        "sqrt(1 + p_x**2) + x": "sigma_x*sqrt((alpha_1 - x)**2 - 1)",
        "p_x**2/2 + p_x*x": "sigma_x*sqrt(2*alpha_1 + x**2) - x",
        "p_x*x": "alpha_1/x",
    }
    for text, expected in shapes.items():
        s = separated({"coordinates": ["x"], "hamiltonian": text})
        assert str(s.equations[0].solution) == expected

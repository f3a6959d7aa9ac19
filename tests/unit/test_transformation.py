"""The parts of the transformation room, and its requests."""

import pytest
import sympy as sp

from hjsolve.errors import InputError
from hjsolve.transform import document, for_person, transform
from hjsolve.transformation.system import solve
from hjsolve.transformation.tidy import derivative, determinant, tidied
from hjsolve.transformation.univariate import roots

ONE = {
    "old": {"coordinates": ["q"], "momenta": ["p"]},
    "new": {"coordinates": ["Q"], "momenta": ["P"]},
    "parameters": {"m": "positive", "w": "positive"},
}
q, p, Q, P, x, y = sp.symbols("q p Q P x y", real=True)
r, a = sp.symbols("r a", positive=True)
theta = sp.Symbol("theta", real=True)


def answer(**more):
    return document(transform({**ONE, **more}), ("infix",))


def texts(values):
    return None if values is None else {name: f["infix"] for name, f in values.items()}


@pytest.mark.parametrize(
    ("equation", "values"),
    [
        (2 * x - a, {a / 2}),
        (x**2 - a, {sp.sqrt(a), -sp.sqrt(a)}),
        (x**2 - 2 * x - 3, {sp.Integer(3), sp.Integer(-1)}),
        (x**4 - 5 * x**2 + 4, {sp.Integer(n) for n in (1, -1, 2, -2)}),
        (sp.exp(2 * x) - 3 * sp.exp(x) + 2, {sp.S.Zero, sp.log(2)}),
        (x**3 - y, {sp.sign(y) * sp.Abs(y) ** sp.Rational(1, 3)}),
        (sp.sin(x) - a * sp.cos(x), {sp.atan(a)}),
        (sp.sqrt(x) - a, {a**2}),
    ],
)
def test_roots_of_one_equation(equation, values):
    found = {root.value for root in roots(equation, x)}
    assert {tidied(v) for v in values} == {tidied(v) for v in found}


def test_an_equation_without_a_closed_root_has_none():
    assert roots(x + sp.sin(x) - a, x) == ()


def test_polar_coordinates_are_eliminated_as_a_pair():
    (found,) = solve([x - r * sp.cos(theta), y - r * sp.sin(theta)], [r, theta], 5)
    assert found.values == {r: sp.sqrt(x**2 + y**2), theta: sp.atan2(y, x)}


def test_a_linear_system():
    c, s = sp.cos(theta), sp.sin(theta)
    (found,) = solve([Q - c * x - s * y, P + s * x - c * y], [x, y], 5)
    assert sp.expand(found.values[x] - (c * Q - s * P)) == 0


def test_the_derivative_of_an_absolute_value_is_a_sign():
    assert derivative(sp.Abs(q * p), q) == sp.sign(q * p) * p or derivative(
        sp.Abs(q * p), q
    ) == sp.Abs(p) * sp.sign(q)


def test_a_determinant():
    rows = [[x, y, 1], [0, a, 2], [1, 0, 3]]
    assert sp.expand(determinant(rows) - sp.Matrix(rows).det()) == 0


@pytest.mark.parametrize(
    ("generator", "image"),
    [
        ("p", {"Q": "q + s", "P": "p"}),
        ("q*p", {"Q": "q*exp(s)", "P": "p*exp(-s)"}),
        ("q**3", {"Q": "q", "P": "p - 3*q**2*s"}),
        (
            "p**2/(2*m) + m*w**2*q**2/2",
            {"Q": "q*cos(s*w) + p*sin(s*w)/(m*w)", "P": "p*cos(s*w) - m*q*w*sin(s*w)"},
        ),
        ("q**2*p", {"Q": "1/(1/q - s)", "P": "p*(q*s - 1)**2"}),
    ],
)
def test_the_flow_of_a_generator(generator, image):
    found = answer(generator={"function": generator, "parameter": "s"})
    assert found["canonical"] is True
    assert texts(found["new_in_old"]) == image
    assert {c["verdict"] for c in found["certificate"]["checks"]} == {"proved"}


def test_a_flow_without_a_sum_is_told_to_first_order():
    found = answer(generator={"function": "p**2/2 + q**3", "parameter": "s"})
    assert texts(found["first_order"]) == {"Q": "p*s + q", "P": "p - 3*q**2*s"}
    assert found["new_in_old"] is None


def test_the_parameter_of_a_flow_is_no_variable():
    with pytest.raises(InputError) as refused:
        answer(generator={"function": "p", "parameter": "q"})
    assert refused.value.pointer == "/generator/parameter"


def test_a_composition():
    step = {
        "new": {"coordinates": ["A"], "momenta": ["B"]},
        "generating_function": {"kinds": [1], "function": "Q*A"},
    }
    exchange = {"kinds": [1], "function": "q*Q"}
    found = answer(generating_function=exchange, then=[step], hamiltonian="p**2/2 + q**4")
    assert texts(found["new_in_old"]) == {"A": "-q", "B": "-p"}
    assert texts(found["old_in_new"]) == {"q": "-A", "p": "-B"}
    assert found["new_hamiltonian"]["infix"] == "A**4 + B**2/2"


def test_an_error_in_a_later_step_points_there():
    step = {
        "new": {"coordinates": ["A"], "momenta": ["B"]},
        "generating_function": {"kinds": [2], "function": "Q + B"},
    }
    with pytest.raises(InputError) as refused:
        answer(generating_function={"kinds": [1], "function": "q*Q"}, then=[step])
    assert refused.value.pointer == "/then/0/generating_function/function"


def test_a_principal_function_as_a_transformation():
    problem = {
        "coordinates": ["q"],
        "momenta": ["p"],
        "hamiltonian": "p**2/(2*m) + m*g*q",
        "parameters": {"m": "positive", "g": "positive"},
    }
    found = document(transform({"principal_function_of": problem}), ("infix",))
    assert found["canonical"] is True
    assert found["new_hamiltonian"]["infix"] == "0"
    assert texts(found["new_in_old"]) == {
        "beta_1": "-t - p/(g*m)",
        "alpha_1": "g*m*q + p**2/(2*m)",
    }
    claims = {c["claim"]: c["verdict"] for c in found["certificate"]["checks"]}
    assert claims["the new Hamiltonian H(q, ∂S/∂q, t) + ∂S/∂t is zero"] == "proved"


def test_old_variables_given_in_the_new_ones():
    found = answer(transformation={"q": "sqrt(2*P)*sin(Q)", "p": "sqrt(2*P)*cos(Q)"})
    assert found["canonical"] is True
    assert texts(found["new_in_old"])["P"] in ("p**2/2 + q**2/2", "(p**2 + q**2)/2")


def test_a_hopeless_inversion_keeps_its_relations():
    found = answer(generating_function={"kinds": [2], "function": "q*P + sin(q)*cosh(P)"})
    assert found["old_in_new"] is None
    assert found["new_in_old"] is None
    assert [f["infix"] for f in found["relations"]] == [
        "p = P + cos(q)*cosh(P)",
        "Q = q + sin(q)*sinh(P)",
    ]


def test_the_answer_for_a_person():
    text = for_person(transform({**ONE, "transformation": {"Q": "q**2", "P": "p/q"}}))
    assert text.startswith("The transformation is not canonical: [Q, P] = 2, not 1")

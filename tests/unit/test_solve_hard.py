"""Problems on which an answer once was wrong or a stage broke; what is right is said here."""

import pytest
import sympy as sp

from hjsolve.errors import InputError
from hjsolve.reading import read_problem
from hjsolve.solve import solve


def solved(hamiltonian, coordinates="x", **more):
    problem = {"coordinates": coordinates.split(), "hamiltonian": hamiltonian, **more}
    return solve(read_problem(problem))


def motion(solution):
    return {q.name: f for q, f in solution.motion.coordinates}


def equations(solution):
    return {e.coordinate.name: str(e.solution) for e in solution.separation.equations}


def test_of_two_inverses_the_one_with_a_real_momentum():
    """log|a − x| has two inverses; p = log(a − x) is real on one of them only."""
    found = motion(solved("exp(p_x) + p_y**2 + x", "x y"))["x"]
    assert str(found.expression) == "alpha_1 - alpha_2**2 - exp(-beta_1 - t)"


@pytest.mark.parametrize("text", ["p_x*x", "p_x*x + x**2", "p_x/x"])
def test_a_sheet_says_its_side(text):
    s = solved(text)
    assert str(motion(s)["x"].valid) == "(0 < x,)"
    assert [str(o.motion.valid) for o in s.motion.others] == ["(x < 0,)"]


def test_a_momentum_that_cannot_turn_is_good_for_one_sign_of_time():
    found = motion(solved("p_x*sqrt(x)", domains={"x": "half-line"}))["x"]
    assert any("0 <= beta_1 + t" in str(v) for v in found.valid)


def test_a_named_root_is_not_a_constant():
    s = solved("p_x**3 + p_x + x")
    (definition,) = s.separation.equations[0].where
    assert definition.index == 1
    assert s.integral.terms[0].drift.family == "unevaluated"
    u = solved("p_u**3 + 2*p_u + u", "u").separation.equations[0].where[0]
    assert u.unknown.name != "u"


def test_names_of_the_request_stay_its_own():
    s = solved("p_x**2/2 + beta_1*x**2", parameters={"beta_1": "positive"})
    assert s.motion.relations[0].constant.name == "beta_1_"
    v = solved("p_x**2/2 + V(x - x_0)", parameters={"x_0": "real"}, functions=["V"])
    names = {d.symbol.name for d in v.integral.characteristic.where}
    assert names == {"x_0_"}


@pytest.mark.parametrize("text", ["(p_x**2 + x**2 - p_y**2 - y**2)**2", "cos(p_x**2 + p_y**4)"])
def test_a_branch_is_not_lost_without_a_word(text):
    """Undoing an even function of a group would keep one of two energies."""
    s = solved(text, "x y")
    assert not [e for e in s.separation.equations if e.root != 0]


def test_four_branches_get_a_name():
    (e,) = solved("p_x**4 - p_x**2 + x").separation.equations
    assert e.where
    assert e.where[0].root_of is not None


@pytest.mark.parametrize(
    "text",
    [
        "p_x**2 + p_y**2 + abs(x + y) + abs(x - y)",
        "p_x**2 + p_y**2 + sign(x - y)",
        "p_x**2 + p_y**2 + atan(x*y) + atan(1/(x*y))",
        "p_x**2 + atan(x) + atan(y) - atan((x + y)/(1 - x*y)) + p_y",
    ],
)
def test_pieces_are_not_a_separation(text):
    v = solved(text, "x y").separation.verdict
    assert v.separability == "undecided"
    assert "piece by piece" in v.limit


def test_absolute_values_that_come_apart_do_separate():
    s = solved("p_x**2 + p_y**2 + sqrt(x**2)*sqrt(y**2) - abs(x*y) + x", "x y")
    assert s.separation.verdict.separability == "complete"
    assert len(s.separation.equations) == 2


def test_numeric_evidence_is_called_numeric_every_time():
    text = "p_x**2 + p_y**2 + (sqrt(2) + sqrt(3) - sqrt(5 + 2*sqrt(6)))*x*y"
    assert {solved(text, "x y").separation.verdict.proof for _ in range(4)} == {"numeric"}


@pytest.mark.parametrize("text", ["1/p_x + x", "p_x**3 + x", "(p_x**2 + x**2 + 1)**(7/3)"])
def test_no_artefacts_in_formulas(text):
    s = solved(text)
    found = [f.equation.expression for f in s.motion.relations]
    found += [f.expression for _, f in s.motion.coordinates if f is not None]
    assert not any(
        e.has(sp.DiracDelta, sp.Piecewise, sp.zoo, sp.nan, sp.AccumBounds) for e in found
    )


def test_one_over_p():
    assert equations(solved("1/p_x + x")) == {"x": "1/(alpha_1 - x)"}


@pytest.mark.parametrize(
    "text",
    [
        "p_x**2 + p_y**2 + (x - t)**2 + y**2",
        "(p_x**2 + x**2)/(p_y**2 + y**2)",
        "y**2*(p_x**2 + p_y**2)/2",
    ],
)
def test_two_coordinates_that_once_broke_a_stage(text):
    s = solved(text, "x y")
    assert not [c for c in s.certificate.checks if "in this program" in c.claim]
    assert s.separation.equations


@pytest.mark.parametrize(
    "text",
    [
        "cosh(p_x) + x",
        "sinh(p_x)**2 + x",
        "asin(p_x**2 + x**2)",
        "acos(p_x) + x",
        "atan(p_x) + x",
        "p_x**2 + sign(x)",
        "abs(t)*p_x**2 + abs(t)*x**2",
        "abs(p_x) + abs(x)",
        "p_x**2/2 + abs(x)",
        "p_x**2 + 1e400*x",
    ],
)
def test_one_coordinate_that_once_broke_a_stage(text):
    s = solved(text)
    checks = s.certificate.checks
    assert not [c for c in checks if "in this program" in c.claim or "refuted" in c.claim]
    assert s.separation.equations


def test_a_bounded_inverse_says_its_bounds():
    (e,) = solved("atan(p_x) + x").separation.equations
    assert len(e.valid) == 2


@pytest.mark.parametrize("text", ["p_x**2 + asin(2)*x", "p_x**2 + (-8)**(1/3)*x", "p_x**2+(-1)**x"])
def test_what_is_real_nowhere_is_refused(text):
    with pytest.raises(InputError):
        solved(text)


def test_what_follows_a_coordinate_through_its_linear_part():
    found = motion(solved("p_x**2/2 + p_x*p_y + x**2", "x y"))
    assert found["y"] is not None


def test_the_angular_momentum_is_one_only_for_a_polar_angle():
    text = "p_z**2/2 + (p_x**2 + p_y**2/sin(x)**2)/(2*z**2)"
    s = solved(text, "x y z", domains={"z": "half-line"})
    assert "angular momentum" not in " ".join(c.meaning for c in s.separation.constants)

"""Closed forms with dependent or named roots: proved where they are right, never where wrong."""

from dataclasses import replace
from functools import cache

import pytest
import sympy as sp

from hjsolve.certification import forms
from hjsolve.certification.forms import differentiated
from hjsolve.quadrature import integrate
from hjsolve.reading import read_problem
from hjsolve.records import Definition, Formula, Truth
from hjsolve.separation import detect, separate


def problem(coordinates, hamiltonian, parameters, **domains):
    return {
        "coordinates": coordinates.split(),
        "momenta": [f"p_{q}" for q in coordinates.split()],
        "hamiltonian": hamiltonian,
        "parameters": dict.fromkeys(parameters.split(), "positive"),
        "domains": {q: d.replace("_", "-") for q, d in domains.items()},
    }


PROBLEMS = {
    "pendulum": problem(
        "theta", "p_theta**2/(2*m*l**2) - m*g*l*cos(theta)", "m l g", theta="angle"
    ),
    "double well": problem("x", "p_x**2/(2*m) - a*x**2/2 + b*x**4/4", "m a b"),
    "Duffing": problem("x", "p_x**2/(2*m) + k*x**2/2 + b*x**4/4", "m k b"),
    "cubic": problem("x", "p_x**2/(2*m) + k*x**2/2 - b*x**3/3", "m k b"),
    "quartic": problem("x", "p_x**2/(2*m) + a*x**4 + b*x**3 + c*x**2 + d*x", "m a b c d"),
    "spherical pendulum": problem(
        "theta phi",
        "(p_theta**2 + p_phi**2/sin(theta)**2)/(2*m*l**2) - m*g*l*cos(theta)",
        "m l g",
        theta="polar_angle",
        phi="angle",
    ),
    "Lagrange top": problem(
        "theta phi psi",
        "p_theta**2/(2*A) + (p_phi - p_psi*cos(theta))**2/(2*A*sin(theta)**2) + p_psi**2/(2*C)"
        " + m*g*l*cos(theta)",
        "A C m l g",
        theta="polar_angle",
        phi="angle",
        psi="angle",
    ),
    "Stark": problem(
        "xi eta phi",
        "(p_xi**2 + p_eta**2)/(2*m*(xi**2 + eta**2)) + p_phi**2/(2*m*xi**2*eta**2)"
        " - 2*k/(xi**2 + eta**2) + F*(xi**2 - eta**2)/2",
        "m k F",
        xi="half_line",
        eta="half_line",
        phi="angle",
    ),
    "isochrone": problem(
        "r phi",
        "(p_r**2 + p_phi**2/r**2)/2 - k/(b + sqrt(b**2 + r**2))",
        "k b",
        r="half_line",
        phi="angle",
    ),
    "Schwarzschild": problem(
        "x0 r phi",
        "-p_x0**2/(2*(1 - 2*M/r)) + (1 - 2*M/r)*p_r**2/2 + p_phi**2/(2*r**2)",
        "M",
        r="half_line",
        phi="angle",
    ),
    "Kerr": problem(
        "r theta phi x0",
        "((r**2 - 2*M*r + a**2)*p_r**2 + p_theta**2"
        " - ((r**2 + a**2)*p_x0 + a*p_phi)**2/(r**2 - 2*M*r + a**2)"
        " + (a*sin(theta)*p_x0 + p_phi/sin(theta))**2)/(2*(r**2 + a**2*cos(theta)**2))",
        "M a",
        r="half_line",
        theta="polar_angle",
        phi="angle",
    ),
    "oblate satellite": {
        **problem(
            "rho eta phi",
            "((rho**2 + c**2)*p_rho**2 + (1 - eta**2)*p_eta**2)/(2*(rho**2 + c**2*eta**2))"
            " + p_phi**2/(2*(rho**2 + c**2)*(1 - eta**2)) - mu*rho/(rho**2 + c**2*eta**2)",
            "mu",
            rho="half_line",
            phi="angle",
        ),
        "parameters": {"mu": "398600.44", "c": "209.9"},
        "domains": {"rho": "half-line", "eta": ["-1", "1"], "phi": "angle"},
    },
}


@pytest.fixture(autouse=True)
def _patience(monkeypatch):
    """What is proved does not depend on how busy the machine is."""
    monkeypatch.setattr(forms, "PROOF_SECONDS", 60.0)


@cache
def formed(name, coordinate):
    """(H, the quadrature of p dq, the range of the coordinate)."""
    h = read_problem(PROBLEMS[name])
    separation = separate(h, detect(h))
    domains = dict(zip(h.coordinates, h.domains, strict=True))
    (equation,) = (e for e in separation.equations if e.coordinate.name == coordinate)
    domain = domains[equation.coordinate]
    anti = integrate(equation.root, equation.coordinate, domain, seconds=60)
    ranges = {q: (d.lower, d.upper) for q, d in domains.items() if d.lower.is_finite}
    return h, anti, ranges


def truths(name, coordinate, form):
    h, anti, ranges = formed(name, coordinate)
    return {f.truth for f in differentiated(form, anti, h, ranges, ())}


@pytest.mark.parametrize(
    ("name", "coordinate", "least"),
    [
        ("pendulum", "theta", 3),  # libration, rotation, the separatrix
        ("double well", "x", 5),  # above, in either well, the separatrix on either side
        ("Duffing", "x", 1),
        ("cubic", "x", 2),  # between the roots, beyond them, one real root
        ("quartic", "x", 1),
        ("spherical pendulum", "theta", 1),
        ("Lagrange top", "theta", 1),
        ("Stark", "xi", 1),
        ("Stark", "eta", 2),
        ("isochrone", "r", 3),  # √(b² + r²) inside of roots
        ("Kerr", "theta", 7),
    ],
)
def test_every_form_is_proved(name, coordinate, least):
    _, anti, _ = formed(name, coordinate)
    assert len(anti.closed_forms) >= least
    for form in anti.closed_forms:
        assert truths(name, coordinate, form) == {Truth.PROVED}, form.valid


def test_schwarzschild_with_three_real_roots_is_proved():
    _, anti, _ = formed("Schwarzschild", "r")
    three = [f for f in anti.closed_forms if sum(d.index is not None for d in f.where) == 3]
    assert three
    for form in three:
        assert truths("Schwarzschild", "r", form) == {Truth.PROVED}, form.valid


def test_a_form_is_looked_at_in_the_domain_of_its_coordinate_only():
    """W of |η| < 1 in a regime 0 < η: beyond 1 the form differs, and was once called refuted."""
    _, anti, _ = formed("oblate satellite", "eta")
    assert any(f.valid and f.valid[-1].lhs == 0 for f in anti.closed_forms)
    for form in anti.closed_forms:
        assert Truth.REFUTED not in truths("oblate satellite", "eta", form), form.valid


# ------------------------------------------------------------------- faults


def with_term(form, n, factor):
    terms = list(sp.Add.make_args(form.expression))
    terms[n] *= factor
    return replace(form, expression=sp.Add(*terms))


def with_function(form, kind, change):
    """The first function of a kind with other arguments."""
    old = sorted(form.expression.atoms(kind), key=str)[0]
    return replace(form, expression=form.expression.xreplace({old: kind(*change(*old.args))}))


def with_letters(form, put):
    letters = {d.symbol.name[-1]: d.symbol for d in form.where}
    return replace(
        form, expression=form.expression.xreplace({letters[a]: letters[b] for a, b in put.items()})
    )


WRONG_TERMS = [
    ("pendulum", "theta", 0),
    ("pendulum", "theta", 1),
    ("double well", "x", 0),
    ("double well", "x", 1),
    ("Duffing", "x", 0),
    ("cubic", "x", 0),
    ("cubic", "x", 1),
    ("cubic", "x", 2),
    ("spherical pendulum", "theta", 0),
    ("Lagrange top", "theta", 0),
    ("Stark", "xi", 0),
    ("Stark", "eta", 1),
    ("isochrone", "r", 0),
    ("isochrone", "r", 1),
    ("Kerr", "theta", 0),
]


@pytest.mark.parametrize(("name", "coordinate", "n"), WRONG_TERMS)
@pytest.mark.parametrize("factor", [-1, 2, sp.Rational(10**9 + 1, 10**9)])
def test_a_wrong_coefficient_or_sign_of_a_term_is_not_proved(name, coordinate, n, factor):
    form = formed(name, coordinate)[1].closed_forms[n]
    terms = sp.Add.make_args(form.expression)
    for k in range(len(terms)):
        assert Truth.PROVED not in truths(name, coordinate, with_term(form, k, factor)), terms[k]


@pytest.mark.parametrize(
    ("name", "coordinate", "n", "put"),
    [
        ("cubic", "x", 0, {"1": "2", "2": "1"}),
        ("cubic", "x", 0, {"1": "3", "3": "1"}),
        ("cubic", "x", 0, {"2": "3"}),
        ("cubic", "x", 2, {"3": "2", "2": "3"}),
        ("spherical pendulum", "theta", 0, {"3": "2", "2": "3"}),
        ("spherical pendulum", "theta", 0, {"1": "2"}),
        ("Lagrange top", "theta", 0, {"1": "2", "2": "1"}),
        ("Stark", "xi", 0, {"3": "1", "1": "3"}),
        ("Stark", "eta", 0, {"1": "2", "2": "1"}),
    ],
)
def test_a_wrong_named_root_is_not_proved(name, coordinate, n, put):
    form = formed(name, coordinate)[1].closed_forms[n]
    assert Truth.PROVED not in truths(name, coordinate, with_letters(form, put))


@pytest.mark.parametrize(
    ("name", "coordinate", "n"),
    [
        ("spherical pendulum", "theta", 0),
        ("Lagrange top", "theta", 0),
        ("Stark", "xi", 0),
        ("Stark", "eta", 0),
        ("Kerr", "theta", 0),
    ],
)
@pytest.mark.parametrize(
    "change", [lambda n: 2 * n, lambda n: n + 1, lambda n: 1 / n, lambda n: -n]
)
def test_a_wrong_characteristic_is_not_proved(name, coordinate, n, change):
    form = formed(name, coordinate)[1].closed_forms[n]
    wrong = with_function(form, sp.elliptic_pi, lambda n, phi, m: (change(n), phi, m))
    assert Truth.PROVED not in truths(name, coordinate, wrong)


@pytest.mark.parametrize(
    ("name", "coordinate", "n"),
    [
        ("pendulum", "theta", 0),
        ("double well", "x", 1),
        ("cubic", "x", 0),
    ],
)
@pytest.mark.parametrize("change", [lambda m: 1 - m, lambda m: 1 / m, lambda m: m / 2])
def test_a_wrong_parameter_is_not_proved(name, coordinate, n, change):
    form = formed(name, coordinate)[1].closed_forms[n]
    wrong = with_function(form, sp.elliptic_f, lambda phi, m: (phi, change(m)))
    assert Truth.PROVED not in truths(name, coordinate, wrong)


@pytest.mark.parametrize("name", ["cubic", "quartic"])
def test_a_wrong_definition_is_not_proved(name):
    """Twice e_d1 and the like, and a name for a root that there is not."""
    form = max(formed(name, "x")[1].closed_forms, key=lambda f: len(f.where))
    for k, d in enumerate(form.where):
        if d.definition is not None:
            wrong = replace(d, definition=2 * d.definition)
        else:
            wrong = replace(d, index=d.index + 3)
        where = (*form.where[:k], wrong, *form.where[k + 1 :])
        assert Truth.PROVED not in truths(name, "x", replace(form, where=where)), d.symbol


def test_the_regime_decides_the_sign():
    """√(x²(1 + x²)) = −x√(1 + x²) below 0: proved there, refuted above, undecided without side."""
    h, anti, ranges = formed("Duffing", "x")
    x = anti.variable
    anti = replace(anti, integrand=sp.sqrt(x**2 + x**4))
    form = Formula(-((1 + x**2) ** sp.Rational(3, 2)) / 3)

    def found(valid):
        return [f.truth for f in differentiated(replace(form, valid=valid), anti, h, ranges, ())]

    assert found((sp.Lt(x, 0),)) == [Truth.PROVED]
    assert found((sp.Lt(0, x),)) == [Truth.REFUTED]
    assert found(()) == [Truth.REFUTED]


def test_an_empty_regime_proves_nothing():
    h, anti, ranges = formed("cubic", "x")
    form = anti.closed_forms[0]
    first = next(d.symbol for d in form.where if isinstance(d, Definition) and d.index == 1)
    empty = (*form.valid, sp.Lt(anti.variable, first))
    assert {f.truth for f in differentiated(replace(form, valid=empty), anti, h, ranges, ())} == {
        Truth.UNDECIDED
    }

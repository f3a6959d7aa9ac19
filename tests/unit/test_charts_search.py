"""The search beyond the tables: proofs, names, masses, special parameters, and what it refuses."""

import pytest
import sympy as sp

from hjsolve.algebra.identity import vanish
from hjsolve.charts import CHARTS, in_chart, named, search, special, upright
from hjsolve.charts.search.proof import solved
from hjsolve.charts.search.sampled import sampled
from hjsolve.charts.search.tensors import Conditions, concircular, spherical
from hjsolve.errors import InputError
from hjsolve.reading import read_problem
from hjsolve.records import Truth
from hjsolve.separation import detect

PLANE = "(p_x**2 + p_y**2)/2"
SPACE = "(p_x**2 + p_y**2 + p_z**2)/2"
KEPLER = "-k/sqrt(x**2 + y**2 + z**2)"


TWO_BODIES = {
    "coordinates": ["x1", "y1", "z1", "x2", "y2", "z2"],
    "hamiltonian": "(p_x1**2 + p_y1**2 + p_z1**2)/(2*m_1) + (p_x2**2 + p_y2**2 + p_z2**2)/(2*m_2)"
    " - k/sqrt((x1 - x2)**2 + (y1 - y2)**2 + (z1 - z2)**2)",
    "parameters": {"k": "positive", "m_1": "positive", "m_2": "positive"},
}


def problem(potential, kinetic=None, coordinates="xy", **parameters):
    functions = parameters.pop("functions", [])
    kinetic = kinetic or (PLANE if len(coordinates) == 2 else SPACE)
    return read_problem(
        {
            "coordinates": list(coordinates),
            "hamiltonian": f"{kinetic} + {potential}",
            "parameters": parameters,
            "functions": functions,
        }
    )


def found(h):
    charts = search(h, detect)
    return [c.family for c in charts.found], charts


# ------------------------------------------------------------------ proofs


def test_none_comes_with_a_rank_that_can_be_checked_again():
    """The witness is refuted or confirmed here without the solver's own linear algebra."""
    h = problem("(x**2 + y**2)/2 + x**2*y - y**3/3")
    charts = search(h)
    assert (charts.found, charts.complete, charts.rank, charts.unknowns) == ((), True, 5, 5)
    assert "no orthogonal separable coordinates" in charts.checks[0].claim
    assert "integrable" not in charts.checks[0].claim
    x, y = h.coordinates
    V = h.expression.subs(dict.fromkeys(h.momenta, 0))
    a, b, c, d, e = sp.symbols("a b c d e")
    L = sp.Matrix(
        [[a + 2 * c * x + e * x * x, b + c * y + d * x + e * x * y], [0, 2 * d * y + e * y * y]]
    )
    L[1, 0] = L[0, 1]
    w = (L.trace() * sp.eye(2) - L) * sp.Matrix([V.diff(x), V.diff(y)])
    condition = sp.expand(w[1].diff(x) - w[0].diff(y))
    rows = []
    for point in charts.witness:
        at = {s: v for s in (x, y) for name, v in point if name == s.name}
        rows.append([condition.coeff(s).subs(at) for s in (a, b, c, d, e)])
    assert sp.Matrix(rows).rank() == 5


def test_the_tensors_found_solve_the_condition_by_another_way():
    """The first integral ½ pKp + U exists: d(K dV) = 0 checked by SymPy's own derivatives."""
    h = problem("-k/sqrt((x - a)**2 + (y - b)**2)", k="positive", a="real", b="real")
    V = h.expression.subs(dict.fromkeys(h.momenta, 0))
    one = ((sp.S.One, sp.S.Zero), (sp.S.Zero, sp.S.One))
    fields = concircular(h.coordinates, one)
    basis = Conditions(h.coordinates, fields, V).solve()
    assert len(basis) == 3
    x, y = h.coordinates
    for vector in basis:
        M = sp.zeros(2, 2)
        for v, field in zip(vector, fields, strict=True):
            M += v * sp.Matrix(2, 2, field)
        w = M * sp.Matrix([V.diff(x), V.diff(y)])
        assert vanish([w[1].diff(x) - w[0].diff(y)])[0].truth is Truth.PROVED


def test_the_spheres_fields_are_the_quadratic_forms_in_angular_momenta():
    y = sp.symbols("y1:4", real=True)
    p = sp.symbols("p1:4", real=True)
    J = sp.Matrix(y).cross(sp.Matrix(p))
    one = sp.eye(3).tolist()
    kinds = [(0, 0), (0, 1), (0, 2), (1, 1), (1, 2)]
    for (i, j), field in zip(kinds, spherical(y, one), strict=True):
        form = (sp.Matrix([p]) * sp.Matrix(3, 3, field) * sp.Matrix(p))[0]
        expected = J[i] * J[j] * (1 if i == j else 2)
        assert sp.expand(form - expected) == 0


def test_sampling_finds_what_collecting_finds():
    one = ((sp.S.One, sp.S.Zero), (sp.S.Zero, sp.S.One))
    for potential in ("1/x**2", "(x**2+y**2)**2 + x**2 + 5*y**2", "x*y", "x**4 + x*y"):
        h = problem(potential)
        V = h.expression.subs(dict.fromkeys(h.momenta, 0))
        fields = concircular(h.coordinates, one)
        exact = sp.Matrix(Conditions(h.coordinates, fields, V).solve())
        other = sp.Matrix(sampled(h.coordinates, fields, V))
        assert exact.rref()[0] == other.rref()[0]


def test_sampling_does_not_take_tensors_of_the_parameters_for_numbers():
    h = problem("-1/sqrt((x - a)**2 + y**2)", a="real")
    V = h.expression.subs(dict.fromkeys(h.momenta, 0))
    one = ((sp.S.One, sp.S.Zero), (sp.S.Zero, sp.S.One))
    for vector in sampled(h.coordinates, concircular(h.coordinates, one), V):
        # (x − a)y and y² terms know a; only the axis through the centre does not
        assert vector[4] == 0


def test_two_ways_that_do_not_meet_are_not_called_complete():
    """Where |x| and |y| keep their signs more separates; nobody says so, nobody denies it."""
    families, charts = found(problem("abs(x) + abs(y)"))
    assert families == ["cartesian"]
    assert charts.found[0].geometry == (("angle", 0),)
    assert not charts.complete
    assert "absolute value" in charts.reason
    one = ((sp.S.One, sp.S.Zero), (sp.S.Zero, sp.S.One))
    h = problem("abs(x) + abs(y)")
    result = solved(h.coordinates, concircular(h.coordinates, one), abs(h.coordinates[0]))
    assert result.reason


def test_a_sign_that_depends_on_parameters_is_not_guessed():
    families, charts = found(problem("(x**2+y**2)**2 + a*x**2 + b*y**2", a="real", b="real"))
    assert families == []
    assert not charts.complete
    assert "sign" in charts.reason


def test_every_chart_of_a_detector_that_denies_is_taken_out():
    h = problem("x**4 + y**2")
    none = detect(problem("x**4 + x*y**3"))
    charts = search(h, lambda _h: none)
    assert charts.found == ()
    assert not charts.complete
    assert charts.checks[0].verdict is Truth.REFUTED


# ------------------------------------------------------- what is no search


@pytest.mark.parametrize(
    ("h", "word"),
    [
        (problem("x", kinetic="(p_x + y)**2/2 + p_y**2/2"), "linear in the momenta"),
        (problem("x", kinetic="p_x**2/2 + p_y**2/(2*x**2)"), "constant coefficients"),
        (problem("t*x"), "time"),
        (problem("x", kinetic="p_x**4 + p_y**2"), "constant coefficients"),
        (problem("x", kinetic="p_x**2/2 - p_y**2/2"), "positive"),
    ],
)
def test_other_hamiltonians_are_left_with_a_reason(h, word):
    charts = search(h)
    assert not charts.complete
    assert word in charts.reason


def test_two_bodies_separate_into_centre_of_mass_and_kepler():
    h = read_problem(TWO_BODIES)
    charts = search(h, detect)
    (chart,) = charts.found
    assert [b.family for b in chart.blocks] == ["cartesian"] * 3 + ["spherical"]
    assert charts.checks[0].verdict is Truth.PROVED
    assert not charts.complete
    carried = in_chart(h, chart)
    k, m1, m2 = (p.symbol for p in h.parameters)
    r, theta = carried.coordinates[3:5]
    p = carried.momenta
    reduced = m1 * m2 / (m1 + m2)
    textbook = (p[0] ** 2 + p[1] ** 2 + p[2] ** 2) / (2 * (m1 + m2)) - k / r
    textbook += (p[3] ** 2 + (p[4] ** 2 + p[5] ** 2 / sp.sin(theta) ** 2) / r**2) / (2 * reduced)
    assert vanish([carried.expression - textbook])[0].truth is Truth.PROVED


def test_a_chain_goes_to_its_normal_modes():
    h = read_problem(
        {
            "coordinates": list("abcd"),
            "hamiltonian": "(p_a**2+p_b**2+p_c**2+p_d**2)/2 + (a-b)**2 + (b-c)**2 + (c-d)**2",
        }
    )
    charts = search(h, detect)
    assert [c.verdict for c in charts.checks] == [Truth.PROVED]
    carried = in_chart(h, charts.found[0])
    # V = Σ k_i q_i²/2 and T = Σ w_i p_i²/2: the squared frequencies are 2(2 − 2cos(jπ/4))
    squares = sorted(
        float(carried.expression.diff(p, 2) * carried.expression.diff(q, 2))
        for q, p in zip(carried.coordinates, carried.momenta, strict=True)
    )
    assert squares == pytest.approx([0, 4 - 2 * 2**0.5, 4, 4 + 2 * 2**0.5])


def test_four_dimensions_know_none_but_no_charts():
    none = problem(
        "x**2*y + y**2*z + z**2*w + w**2*x + x**4",
        kinetic=SPACE + " + p_w**2/2",
        coordinates="xyzw",
    )
    assert search(none).complete
    some = problem("x**2 + y**2 + z**2 + w**4", kinetic=SPACE + " + p_w**2/2", coordinates="xyzw")
    charts = search(some)
    assert not charts.complete
    assert charts.found[0].family == "separable"
    whole = problem("(x**2+y**2+z**2+w**2)**2", kinetic=SPACE + " + p_w**2/2", coordinates="xyzw")
    assert "do not split" in search(whole).reason


# -------------------------------------------------------------- the charts


def test_kepler_in_a_named_chart_is_the_one_of_the_textbooks():
    h = problem(KEPLER, coordinates="xyz", k="positive", kinetic=SPACE + "/m", m="positive")
    carried = in_chart(h, named(h, "spherical"))
    r, theta, _ = carried.coordinates
    p = carried.momenta
    m, k = (q.symbol for q in (h.parameters[1], h.parameters[0]))
    textbook = (p[0] ** 2 + p[1] ** 2 / r**2 + p[2] ** 2 / (r * sp.sin(theta)) ** 2) / (
        2 * m
    ) - k / r
    assert vanish([carried.expression - textbook])[0].truth is Truth.PROVED
    assert [d.kind for d in carried.domains] == ["half-line", "polar-angle", "angle"]


@pytest.mark.parametrize("entry", [e for e in CHARTS if e.dimension == 3], ids=lambda e: e.name)
def test_any_system_can_be_asked_for_by_name(entry):
    h = problem("x*y*z + x**4", coordinates="xyz")
    chart = named(h, entry.name)
    carried = in_chart(h, chart)
    assert chart.family == entry.family
    assert [n for n, _ in chart.geometry] == list(entry.geometry)
    assert detect(carried).separability in {"none", "partial"}


def test_an_unknown_name_is_refused_with_the_known_ones():
    with pytest.raises(InputError) as caught:
        named(problem("x*y"), "toroidal")
    assert caught.value.pointer == "/charts"
    assert "elliptic" in caught.value.expected


def test_a_chart_does_not_take_the_names_of_the_problem():
    h = problem("-r/sqrt(x**2 + y**2) + phi", r="positive", phi="real")
    chart = named(h, "polar")
    assert [q.name for q in chart.coordinates] == ["r_", "phi_"]
    assert chart.momenta[0].name == "p_r_"


def test_carrying_over_keeps_the_value_of_h():
    """H is the same number at the same point of phase space, momenta by the chain rule."""
    h = problem("-k/sqrt((x - 1)**2 + y**2) + x*y**2", k="positive")
    for family in ("cartesian", "polar", "parabolic", "elliptic"):
        chart = named(h, family)
        carried = in_chart(h, chart)
        place = sp.Matrix([e for _, e in chart.transformation])
        at = {q: sp.Rational(7, 5) + k for k, q in enumerate(chart.coordinates)}
        at |= {s: sp.Rational(3, 4) for s in chart.free}
        at |= {p.symbol: sp.Rational(2, 3) for p in h.parameters}
        J = place.jacobian(chart.coordinates).subs(at).evalf(30)
        p = sp.Matrix([sp.Rational(3, 7), sp.Rational(-2, 5)])
        new = J.T * p
        old = dict(zip(h.coordinates, place.subs(at).evalf(30), strict=True))
        old |= dict(zip(h.momenta, p, strict=True)) | at
        moved = at | dict(zip(chart.momenta, new, strict=True))
        assert (
            abs(h.expression.subs(old).evalf(25) - carried.expression.subs(moved).evalf(25)) < 1e-18
        )


@pytest.mark.parametrize(
    "h",
    [
        problem(KEPLER, coordinates="xyz", k="positive"),
        problem("k*(x**2 + y**2)", k="positive"),
        problem("a*x + b*y", a="real", b="real"),
        read_problem(TWO_BODIES),
    ],
    ids=["kepler", "oscillator", "field", "two bodies"],
)
def test_a_family_stands_upright_when_its_angles_are_zero(h):
    for chart in search(h).found:
        straight = upright(chart)
        assert not {s.name for s in straight.free} & {"theta_0", "phi_0", "psi_0"}
        assert detect(in_chart(h, straight)).separability == "complete"


def test_masses_go_into_the_map():
    h = problem(
        "k*(x - y)**2/2",
        kinetic="p_x**2/(2*m_1) + p_y**2/(2*m_2)",
        k="positive",
        m_1="positive",
        m_2="positive",
    )
    families, charts = found(h)
    assert families == ["cartesian"]
    A = sp.Matrix(charts.found[0].mass_map)
    m1, m2 = (p.symbol for p in h.parameters[1:])
    assert A * sp.diag(1 / m1, 1 / m2) * A.T == sp.eye(2)


def test_three_masses_on_a_line_separate_about_their_centre_of_mass():
    h = problem(
        "1/(x-y)**2 + 1/(y-z)**2 + 1/(x-z)**2",
        kinetic="p_x**2/2 + p_y**2/4 + p_z**2/6",
        coordinates="xyz",
    )
    families, charts = found(h)
    assert charts.complete, charts.reason
    assert families == ["circular_cylindrical", "spherical", "parabolic", "prolate", "oblate"]
    axis = dict(charts.found[0].geometry)["axis"]
    assert [sp.simplify(e**2) for e in axis] == [sp.Rational(k, 6) for k in (1, 2, 3)]


def test_the_free_particle_has_the_eleven_systems():
    families, charts = found(problem("0", coordinates="xyz"))
    assert charts.complete
    assert sorted(families) == sorted(e.family for e in CHARTS if e.dimension == 3)


# ------------------------------------------------------ special parameters


def cases(h):
    result = special(h, search)
    assert result.complete, result.reason
    return {
        ", ".join(f"{s} = {e}" for s, e in case.equations): [c.family for c in case.charts.found]
        for case in result.cases
    }


def test_the_cases_of_henon_and_heiles():
    h = problem("(x**2 + y**2)/2 + l*x**2*y + m*y**3", l="nonzero", m="real")
    assert cases(h) == {"m = l/3": ["cartesian"], "m = 2*l": ["parabolic"]}


def test_the_cases_of_the_even_quartic():
    h = problem("x**4 + b*x**2*y**2 + y**4", b="real")
    assert cases(h) == {"b = 0": ["cartesian"], "b = 2": ["polar"], "b = 6": ["cartesian"]}


def test_the_cases_of_the_quartic_of_two_parameters():
    h = problem("x**4 + b*x**2*y**2 + c*y**4", b="nonzero", c="real")
    assert cases(h) == {
        "b = 12, c = 16": ["parabolic"],
        "b = 2, c = 1": ["polar"],
        "b = 3/4, c = 1/16": ["parabolic"],
        "b = 6, c = 1": ["cartesian"],
    }


def test_a_parameter_inside_a_function_is_left():
    assert not special(problem("exp(a*x) + x*y", a="positive"), search).complete

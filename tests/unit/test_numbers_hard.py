"""Cases at the edge: circular orbits, axes, poles of the momentum, rest, near-radial Stark."""

import mpmath as mp
import numpy as np
import pytest
from flint import arb

from hjsolve.algebra.balls import precision
from hjsolve.errors import InputError
from hjsolve.in_numbers import actions, separated, trajectory
from hjsolve.motion.numbers.enclosures import enclose
from hjsolve.motion.numbers.oscillations import branches
from hjsolve.motion.numbers.start import BITS, set_up
from hjsolve.reading import read_problem

PLANE = {
    "coordinates": ["r", "phi"],
    "hamiltonian": "p_r**2/2 + p_phi**2/(2*r**2) - 1/r",
    "domains": {"r": "half-line", "phi": "angle"},
}
STARK = {
    "coordinates": ["xi", "eta", "phi"],
    "hamiltonian": "2*(xi*p_xi**2 + eta*p_eta**2)/(xi + eta) + p_phi**2/(2*xi*eta)"
    " - 2/(xi + eta) + (xi - eta)/100",
    "domains": {"xi": "half-line", "eta": "half-line", "phi": "angle"},
}
ELLIPSOID = {
    "coordinates": ["v", "w"],
    "hamiltonian": "2*((3+v)*(2+v)*(1+v)*p_v**2/(v*(v-w)) + (3+w)*(2+w)*(1+w)*p_w**2/(w*(w-v)))",
    "domains": {"v": [-2, -1], "w": [-3, -2]},
}
WELL = {"coordinates": ["x"], "hamiltonian": "p_x**2/2 - cos(x)", "domains": {"x": "angle"}}


def test_an_exactly_circular_orbit():
    start = {"r": 1, "phi": 0, "p_r": 0, "p_phi": 1}
    found = actions(PLANE, {}, start)
    assert dict(found.kinds) == {"r": "fixed", "phi": "rotation"}
    assert dict(found.actions)["r"].value == 0
    assert dict(found.frequencies)["r"].value == 1
    made = trajectory(PLANE, {}, start, [0, 1e6])
    assert list(made.coordinates[0][1]) == [1, 1]
    assert abs(made.coordinates[1][1][1] - 1e6) <= min(2e-10, dict(made.errors)["phi"])


@pytest.mark.parametrize("p_r", ["1e-30", "1e-16", "1e-8"])
def test_a_nearly_circular_orbit(p_r):
    start = {"r": 1, "phi": 0, "p_r": p_r, "p_phi": 1}
    found = actions(PLANE, {}, start)
    with mp.workdps(50):
        true = (1 - mp.mpf(p_r) ** 2) ** mp.mpf("1.5")
        for _, number in found.frequencies:
            assert abs(number.value - true) <= number.error + 1e-30
    r = trajectory(PLANE, {}, start, [np.pi / 2, 1e5])
    assert abs(r.coordinates[0][1][0] - 1 - float(p_r)) < 2e-15


def test_rest_stable_and_not():
    for x, stable in ((0, True), (mp.nstr(mp.pi, 15), None)):
        found = actions(WELL, {}, {"x": x, "p_x": 0})
        if stable:
            assert dict(found.kinds)["x"] == "fixed"
            assert dict(found.frequencies)["x"].value == 1
    saddle = {"coordinates": ["x"], "hamiltonian": "p_x**2/2 - x**2/2"}
    found = actions(saddle, {}, {"x": 0, "p_x": 0})
    assert dict(found.kinds)["x"] == "fixed"
    assert dict(found.frequencies)["x"] is None
    assert any("unstable" in note for note in found.notes)


@pytest.mark.parametrize("lz", ["1e-2", "1e-6"])
def test_twenty_thousand_phases_of_near_radial_stark(lz):
    start = {"xi": "0.9", "eta": "0.05", "phi": 0, "p_xi": "0.1", "p_eta": "0.2", "p_phi": lz}
    times = np.random.default_rng(11).uniform(-1e6, 1e6, 20_000)
    made = trajectory(STARK, {}, start, times)
    z = dict((*made.coordinates, *made.momenta))
    xi, eta = z["xi"], z["eta"]
    kinetic = 2 * (xi * z["p_xi"] ** 2 + eta * z["p_eta"] ** 2) / (xi + eta)
    potential = 2 / (xi + eta)
    energy = kinetic + z["p_phi"] ** 2 / (2 * xi * eta) - potential + (xi - eta) / 100
    true = dict(actions(STARK, {}, start).constants)["alpha_1"].value
    assert (np.abs(energy - true) <= 1e-13 * (1 + potential.max())).all()


def test_a_geodesic_of_the_triaxial_ellipsoid():
    """Turning points at poles of the momentum; both constants hold along the way."""
    start = {"v": "-1.5", "w": "-2.5", "p_v": "0.3", "p_w": "0.4"}
    found = actions(ELLIPSOID, {}, start)
    assert dict(found.turning_points)["w"][0].value == -3
    times = np.random.default_rng(4).uniform(0, 1e6, 300)
    made = trajectory(ELLIPSOID, {}, start, times)
    z = dict((*made.coordinates, *made.momenta))
    energy, other = (n.value for _, n in found.constants)
    for q, p in (("v", "p_v"), ("w", "p_w")):
        x = z[q]
        f = (x + 1) * (x + 2) * (x + 3)
        missed = np.abs(f * z[p] ** 2 - energy * x**2 / 2 - other * x)
        # the rounding of x alone moves f p² by p²·2⁻⁵³ next to a pole
        assert (missed <= 3e-14 + 3e-15 * z[p] ** 2).all()
    step = 1e-4
    around = np.array([7.0, 19.0, 123.0])
    shifted = trajectory(
        ELLIPSOID, {}, start, np.concatenate([around - step, around, around + step])
    )
    v, w = (dict(shifted.coordinates)[n].reshape(3, 3) for n in ("v", "w"))
    p = dict(shifted.momenta)["p_v"].reshape(3, 3)[1]
    speed = 4 * (v[1] + 1) * (v[1] + 2) * (v[1] + 3) * p / (v[1] * (v[1] - w[1]))
    assert np.abs((v[2] - v[0]) / (2 * step) - speed).max() < 1e-6


def rows(problem, values, start, digits):
    """The enclosed ∂J/∂α and J of each coordinate."""
    separation = separated(read_problem(problem))
    setting = set_up(separation, values, start)
    out = {}
    for b in branches(setting):
        found = enclose(b.coordinate, b.region, b.angle, len(setting.alphas), digits)
        assert found is not None, b.coordinate.name
        out[b.coordinate.name] = found
    return out


@pytest.mark.parametrize("digits", [17, 34])
def test_enclosures_contain_the_closed_forms(digits):
    with precision(BITS), mp.workdps(60):
        start = {"r": 1, "phi": 0, "p_r": "0.3", "p_phi": "0.8"}
        found = rows(PLANE, {}, start, digits)["r"]
        energy = mp.mpf("0.09") / 2 + mp.mpf("0.64") / 2 - 1
        true = 1 / mp.sqrt(-2 * energy) - mp.mpf("0.8"), (-2 * energy) ** mp.mpf("-1.5"), -1
        for ball, value in zip((found.action, *found.row), true, strict=True):
            assert ball.contains(arb(mp.nstr(value, 58))) or ball.overlaps(
                arb(mp.nstr(value, 58), 1e-55)
            )
            assert ball.rad() < 10.0 ** (1 - digits)
        m = mp.mpf("0.49")
        swing = rows(WELL, {}, {"x": 0, "p_x": "1.4"}, digits)["x"]
        period = 2 * mp.ellipk(m) / mp.pi
        area = 8 / mp.pi * (mp.ellipe(m) - (1 - m) * mp.ellipk(m))
        for ball, value in ((swing.row[0], period), (swing.action, area)):
            assert ball.overlaps(arb(mp.nstr(value, 58), 1e-55))
            assert ball.rad() < 10.0 ** (1 - digits)


def test_enclosures_agree_with_quadrature_where_there_is_no_closed_form():
    cases = [
        (STARK, {"xi": 1, "eta": "1.5", "phi": 0, "p_xi": "0.2", "p_eta": "0.3", "p_phi": "0.4"}),
        (ELLIPSOID, {"v": "-1.5", "w": "-2.5", "p_v": "0.3", "p_w": "0.4"}),
    ]
    with precision(BITS):
        for problem, start in cases:
            found = rows(problem, {}, start, 34)
            setting = set_up(separated(read_problem(problem)), {}, start)
            for b in branches(setting):
                for ball, other in zip(found[b.coordinate.name].row, b.row, strict=True):
                    assert abs(ball - other) < 1e-26
                assert abs(found[b.coordinate.name].action - b.action) < 1e-26


def test_the_end_of_a_domain_and_escape_are_said():
    wall = {"coordinates": ["x"], "hamiltonian": "p_x**2/2 + x", "domains": {"x": "half-line"}}
    found = actions(wall, {}, {"x": 1, "p_x": 0})
    assert any("end of its domain" in note for note in found.notes)
    runaway = {"coordinates": ["x"], "hamiltonian": "p_x**2/2 - x**4/4"}
    early = trajectory(runaway, {}, {"x": 1, "p_x": 0}, [0.5])
    assert early.coordinates[0][1][0] > 1
    with pytest.raises(InputError, match="infinity"):
        trajectory(runaway, {}, {"x": 1, "p_x": 0}, [5.0])


def test_a_coordinate_whose_start_is_no_number():
    with pytest.raises(InputError) as refusal:
        actions(PLANE, {}, {"r": "0.1e99999", "phi": 0, "p_r": 0, "p_phi": 1})
    assert refusal.value.pointer == "/start/r"


def test_an_angle_whose_equation_is_not_periodic_is_not_taken_round():
    """A linear potential on a circle is no function there; a libration needs no period."""
    tilted = {"coordinates": ["q"], "hamiltonian": "p_q**2/2 - cos(q/2)", "domains": {"q": "angle"}}
    with pytest.raises(InputError, match="period"):
        actions(tilted, {}, {"q": 1, "p_q": 5})
    found = actions(tilted, {}, {"q": 1, "p_q": 0})
    assert dict(found.kinds)["q"] == "libration"

"""States against closed forms at fifty digits, up to a thousand million periods."""

import mpmath as mp
import numpy as np
import pytest

from hjsolve.in_numbers import actions, trajectory

KEPLER = {
    "coordinates": ["r", "theta", "phi"],
    "hamiltonian": "p_r**2/2 + p_theta**2/(2*r**2) + p_phi**2/(2*r**2*sin(theta)**2) - 1/r",
    "domains": {"r": "half-line", "theta": "polar-angle", "phi": "angle"},
}
PENDULUM = {
    "coordinates": ["q"],
    "hamiltonian": "p_q**2/2 - cos(q)",
    "domains": {"q": "angle"},
}


@pytest.fixture(autouse=True)
def fifty_digits():
    with mp.workdps(50):
        yield


def anomaly(e, mean):
    """Kepler's equation by bisection and Newton, |mean| ≤ π."""
    low, high = mean - e, mean + e
    for _ in range(60):
        middle = (low + high) / 2
        if middle - e * mp.sin(middle) < mean:
            low = middle
        else:
            high = middle
    x = (low + high) / 2
    for _ in range(4):
        x -= (x - e * mp.sin(x) - mean) / (1 - e * mp.cos(x))
    return x


def kepler(e, lz):
    """A start at the pericentre of the orbit with a = 1, and the exact state at a time."""
    e, lz = mp.mpf(e), mp.mpf(lz)
    momentum, theta = mp.sqrt(1 - e * e), mp.mpf("1.2")
    p_theta = mp.sqrt(momentum**2 - lz**2 / mp.sin(theta) ** 2)
    start = {"r": mp.nstr(1 - e, 40), "theta": "1.2", "phi": 0, "p_r": 0}
    start |= {"p_theta": mp.nstr(p_theta, 40), "p_phi": mp.nstr(lz, 40)}
    towards = mp.matrix([mp.sin(theta), 0, mp.cos(theta)])
    along = p_theta * mp.matrix([mp.cos(theta), 0, -mp.sin(theta)])
    along += mp.matrix([0, lz / mp.sin(theta), 0])
    along /= mp.norm(along)

    def state(t):
        mean = mp.mpf(float(t))
        mean -= 2 * mp.pi * mp.nint(mean / (2 * mp.pi))
        x = anomaly(e, mean)
        r = 1 - e * mp.cos(x)
        place = towards * (mp.cos(x) - e) + along * (momentum * mp.sin(x))
        speed = (along * (momentum * mp.cos(x)) - towards * mp.sin(x)) / r
        radial = (place.T * speed)[0] / r
        polar = mp.acos(place[2] / r)
        return {
            "r": r,
            "theta": polar,
            "phi": mp.atan2(place[1], place[0]),
            "p_r": radial,
            "p_theta": r * (radial * place[2] / r - speed[2]) / mp.sin(polar),
        }

    return start, state


def off(name, value, true):
    gap = mp.mpf(float(value)) - true
    if name in ("phi", "q"):
        gap -= 2 * mp.pi * mp.nint(gap / (2 * mp.pi))
    return abs(gap)


@pytest.mark.parametrize("periods", [10, 1e3, 1e5, 1e9])
@pytest.mark.parametrize(
    ("e", "lz"), [("0.6", "0.5"), ("0.99", "0.05"), ("0.6", "0.000001"), ("0.0001", "0.5")]
)
def test_kepler_at_any_time(e, lz, periods):
    times = np.random.default_rng(1).uniform(-1, 1, 12) * periods * 2 * np.pi
    start, exact = kepler(e, lz)
    made = trajectory(KEPLER, {}, start, times)
    errors = dict(made.errors)
    for name, values in (*made.coordinates, *made.momenta):
        if name == "p_phi":
            continue
        for t, value in zip(times, values, strict=True):
            missed = off(name, value, exact(t)[name])
            # an unfolded angle of size x is rounded by x·2⁻⁵³, whatever is done
            assert missed <= 3e-14 + 2.3e-16 * abs(value)
            assert missed <= errors[name]


@pytest.mark.parametrize("distance", ["1e-2", "1e-6", "1e-10", "1e-14"])
@pytest.mark.parametrize("side", [-1, 1])
def test_the_pendulum_next_to_its_separatrix(distance, side):
    """Energy 1 ± distance (relative to the depth): sn, cn, dn and am at fifty digits."""
    energy = 1 + side * mp.mpf(distance)
    p = mp.sqrt(2 * (energy + 1))
    start = {"q": 0, "p_q": mp.nstr(p, 45)}
    p = mp.mpf(start["p_q"])
    m = p * p / 4
    times = np.array([0.3, -4.0, 17.0, 123.4, -1e4, 7.7e5])
    made = trajectory(PENDULUM, {}, start, times)
    (_, q), (_, momentum) = made.coordinates[0], made.momenta[0]
    for t, a, b in zip(times, q, momentum, strict=True):
        u = mp.mpf(float(t))
        if side < 0:
            sn, cn = mp.ellipfun("sn", u, m=m), mp.ellipfun("cn", u, m=m)
            true = 2 * mp.asin(mp.sqrt(m) * sn), 2 * mp.sqrt(m) * cn
        else:
            w, inner = u * mp.sqrt(m), 1 / m
            turns = mp.nint(w / (2 * mp.ellipk(inner)))
            w -= 2 * turns * mp.ellipk(inner)
            sn, dn = mp.ellipfun("sn", w, m=inner), mp.ellipfun("dn", w, m=inner)
            true = 2 * mp.asin(sn), 2 * mp.sqrt(m) * dn
        assert off("q", a, true[0]) <= 1e-13 + 3e-16 * abs(a)
        assert off("p_q", b, true[1]) <= 1e-13
        assert off("q", a, true[0]) <= dict(made.errors)["q"]
    found = actions(PENDULUM, {}, start)
    number = dict(found.frequencies)["q"]
    quarter = mp.ellipk(m) * 2 if side < 0 else mp.ellipk(1 / m) / mp.sqrt(m)
    true = mp.pi / quarter
    assert abs(mp.mpf(number.value) - true) <= number.error <= 1e-15


def test_the_pendulum_on_its_separatrix():
    found = actions(PENDULUM, {}, {"q": 0, "p_q": 2})
    assert dict(found.kinds) == {"q": "separatrix"}
    assert dict(found.frequencies) == {"q": None}
    assert any("separatrix" in note for note in found.notes)
    times = np.array([0.5, 3.0, -2.0, 40.0, 1e6])
    made = trajectory(PENDULUM, {}, {"q": 0, "p_q": 2}, times)
    for t, q, p in zip(times, made.coordinates[0][1], made.momenta[0][1], strict=True):
        u = mp.mpf(float(t))
        assert abs(q - 2 * mp.asin(mp.tanh(u))) < 1e-14
        assert abs(p - 2 * mp.sech(u)) < 1e-14


def test_hyperbolic_kepler():
    """Scattering: t = e·sinh F − F."""
    e = mp.mpf(2)
    start = {"r": 1, "theta": mp.nstr(mp.pi / 2, 40), "phi": 0, "p_r": 0, "p_theta": 0}
    start["p_phi"] = mp.nstr(mp.sqrt(e * e - 1), 40)
    times = np.array([0.1, -3.0, 20.0, -500.0])
    made = trajectory(KEPLER, {}, start, times)
    r, phi = (dict(made.coordinates)[n] for n in ("r", "phi"))
    for t, a, b in zip(times, r, phi, strict=True):
        u = mp.mpf(float(t))
        f = mp.findroot(lambda f: e * mp.sinh(f) - f - u, mp.asinh(u / e))  # noqa: B023
        assert abs(a - (e * mp.cosh(f) - 1)) < 1e-12 * a
        true = 2 * mp.atan(mp.sqrt((e + 1) / (e - 1)) * mp.tanh(f / 2))
        assert abs(b - true) < 1e-12

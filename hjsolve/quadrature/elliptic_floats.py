"""Elliptic integrals at many points at once in floating point, nan where not real.

Carlson's duplication (Numer. Algorithms 10 (1995) 13, from memory), with the
step over quarter periods that keeps F, E, Π continuous in φ.  Good to about
13 digits; used to look for jumps, never as a proof.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]

STEPS = 13


def carlson_rf(x: Floats, y: Floats, z: Floats) -> Floats:
    """R_F(x, y, z) for arguments that are not negative."""
    for _ in range(STEPS):
        sx, sy, sz = np.sqrt(x), np.sqrt(y), np.sqrt(z)
        step = sx * sy + sx * sz + sy * sz
        x, y, z = (x + step) / 4, (y + step) / 4, (z + step) / 4
    return np.asarray(1 / np.sqrt((x + y + z) / 3))


def _rc1(e: Floats) -> Floats:
    """R_C(1, 1 + e)."""
    root = np.sqrt(np.abs(e))
    safe = np.where(root > 1e-8, root, 1.0)
    curved = np.where(e > 0, np.arctan(safe), np.arctanh(np.where(e < 0, safe, 0.0))) / safe
    return np.where(root > 1e-8, curved, 1 - e / 3)


def carlson_rj(x: Floats, y: Floats, z: Floats, p: Floats) -> Floats:
    """R_J(x, y, z, p) for p > 0."""
    p = np.where(p > 0, p, np.nan)
    delta = (p - x) * (p - y) * (p - z)
    total, share = np.zeros_like(p), 1.0
    for _ in range(STEPS):
        sx, sy, sz, sp = np.sqrt(x), np.sqrt(y), np.sqrt(z), np.sqrt(p)
        step = sx * sy + sx * sz + sy * sz
        d = (sp + sx) * (sp + sy) * (sp + sz)
        total = total + share / d * _rc1(share**3 * delta / d**2)
        x, y, z, p = (x + step) / 4, (y + step) / 4, (z + step) / 4, (p + step) / 4
        share /= 4
    return np.asarray(share / ((x + y + z + 2 * p) / 5) ** 1.5 + 6 * total)


def elliptic_k(m: Floats) -> Floats:
    """K(m)."""
    one = np.ones_like(m)
    return carlson_rf(0 * one, 1 - m, one)


def _split(phi: Floats, m: Floats) -> tuple[Floats, Floats, Floats, Floats]:
    """(half turns, sin, cos², Δ²)."""
    turns = np.round(phi / np.pi)
    s = np.sin(phi - turns * np.pi)
    return turns, s, 1 - s * s, 1 - m * s * s


def elliptic_f(phi: Floats, m: Floats) -> Floats:
    """F(φ, m)."""
    turns, s, c2, d2 = _split(phi, m)
    part = s * carlson_rf(c2, d2, np.ones_like(s))
    return np.asarray(part + np.where(turns == 0, 0.0, 2 * turns * elliptic_k(m)))


def elliptic_e(*args: Floats) -> Floats:
    """E(m) or E(φ, m)."""
    if len(args) == 1:
        (m,) = args
        one = np.ones_like(m)
        return elliptic_k(m) - m / 3 * carlson_rj(0 * one, 1 - m, one, one)
    phi, m = args
    turns, s, c2, d2 = _split(phi, m)
    one = np.ones_like(s)
    part = s * carlson_rf(c2, d2, one) - m * s**3 / 3 * carlson_rj(c2, d2, one, one)
    return np.asarray(part + np.where(turns == 0, 0.0, 2 * turns * elliptic_e(m)))


def elliptic_pi(*args: Floats) -> Floats:
    """Π(n, m) or Π(n, φ, m)."""
    if len(args) == 2:
        n, m = args
        one = np.ones_like(n * m)
        return elliptic_k(m) + n / 3 * carlson_rj(0 * one, one - m, one, one - n)
    n, phi, m = args
    turns, s, c2, d2 = _split(phi, m)
    one = np.ones_like(n * s)
    part = s * carlson_rf(c2, d2, one) + n * s**3 / 3 * carlson_rj(c2, d2, one, 1 - n * s * s)
    return np.asarray(part + np.where(turns == 0, 0.0, 2 * turns * elliptic_pi(n, m)))


def jacobi_am(u: Floats, m: Floats) -> Floats:
    """am(u, m) for m < 1."""
    a, b = np.ones_like(m), np.sqrt(1 - m)
    ratios = []
    for _ in range(7):
        a, b, c = (a + b) / 2, np.sqrt(a * b), (a - b) / 2
        ratios.append(c / a)
    phase = a * u * 2.0 ** len(ratios)
    for ratio in reversed(ratios):
        phase = (phase + np.arcsin(ratio * np.sin(phase))) / 2
    return np.asarray(phase)


FLOATS: dict[str, Callable[..., Any]] = {
    f.__name__: f
    for f in (
        carlson_rf,
        carlson_rj,
        elliptic_e,
        elliptic_f,
        elliptic_k,
        elliptic_pi,
        jacobi_am,
    )
}
"""By the name under which a graph calls them."""

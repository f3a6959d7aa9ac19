"""Elliptic integrals and functions in real ball arithmetic.

The integrals are python-flint's.  The amplitude is Gauss's descending
transformation, exact at every step: with a_{n+1} = (a_n + b_n)/2,
b_{n+1} = √(a_n b_n), c_{n+1} = (a_n − b_n)/2 from a_0 = 1, b_0 = √(1 − m),

    φ_N = am(2^N a_N u, (c_N/a_N)²),   2φ_{n−1} − φ_n = asin((c_n/a_n) sin φ_n),

and |am(w, μ) − w| ≤ μ|w| for 0 ≤ μ < 1 ends it (A&S 16.4, 16.12; from memory).
sn, cn are sin, cos of the amplitude.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from functools import cache
from typing import Any

from flint import acb, arb, ctx
from sympy import Dummy, elliptic_e, elliptic_f, elliptic_k, elliptic_pi

from hjsolve.algebra.functions import CARLSON, JACOBI
from hjsolve.algebra.graph import Graph

CLASSES = {
    f.__name__: f for f in (elliptic_e, elliptic_f, elliptic_k, elliptic_pi, *JACOBI, *CARLSON)
}
"""By the name under which a graph calls them."""

STEPS = 40
"""Steps of the transformation; each doubles the digits."""


class Wide(Exception):
    """The balls are too wide to tell."""


class NotReal(Exception):
    """There is no real value."""


def amplitude(u: Any, m: Any) -> Any:
    """am(u, m) for real balls; raises Wide for an m that may lie on either side of 1."""
    if m > 1:
        root = m.sqrt()
        return (amplitude(u * root, 1 / m).sin() / root).asin()
    if m == 1:
        return 2 * (u / 2).tanh().atan()
    if not m < 1:
        raise Wide
    a, b = arb(1), (1 - m).sqrt()
    ratios: list[Any] = []
    for _ in range(STEPS):
        a, b, c = (a + b) / 2, (a * b).sqrt(), (a - b) / 2
        ratios.append(c / a)
        if abs(ratios[-1]) < arb(2) ** (-ctx.prec // 2 - 8):
            break
    phase = a * u * arb(2) ** len(ratios)
    phase += arb(0, 1) * abs(phase * ratios[-1] * ratios[-1]).upper()
    for ratio in reversed(ratios):
        phase = (phase + (ratio * phase.sin()).asin()) / 2
    if not phase.is_finite():
        raise Wide
    return phase


def delta_sign(u: Any, m: Any) -> int:
    """The sign of dn(u, m): +1 for m ≤ 1; raises Wide."""
    if m <= 1:
        return 1
    if not m > 1:
        raise Wide
    cosine = amplitude(u * m.sqrt(), 1 / m).cos()
    if cosine.contains(0):
        raise Wide
    return 1 if cosine > 0 else -1


def _real(value: Any) -> Any:
    """The real part of a complex ball that may be real."""
    if not value.is_finite():
        raise Wide
    if not value.imag.contains(0):
        raise NotReal
    return value.real


def _third(*args: Any) -> Any:
    """Π(n, m) complete or Π(n, φ, m)."""
    if len(args) == 2:
        return _real(acb.elliptic_pi(acb(args[0]), acb(args[1])))
    return _real(acb.elliptic_pi_inc(acb(args[0]), acb(args[1]), acb(args[2])))


def _second(*args: Any) -> Any:
    """E(m) complete or E(φ, m)."""
    if len(args) == 1:
        return _real(acb(args[0]).elliptic_e())
    return _real(acb.elliptic_e_inc(acb(args[0]), acb(args[1])))


def _carlson(name: str) -> Callable[..., Any]:
    method = getattr(acb, name)

    def value(*args: Any) -> Any:
        if not all(x >= 0 for x in args[:2]) or any(x < 0 for x in args):
            raise Wide if not any(x < 0 for x in args) else NotReal
        return _real(method(*(acb(x) for x in args)))

    return value


_VALUES: dict[str, Callable[..., Any]] = {
    "elliptic_k": lambda m: _real(acb(m).elliptic_k()),
    "elliptic_f": lambda phi, m: _real(acb.elliptic_f(acb(phi), acb(m))),
    "elliptic_e": _second,
    "elliptic_pi": _third,
    "jacobi_am": amplitude,
    "carlson_rf": _carlson("elliptic_rf"),
    "carlson_rc": _carlson("elliptic_rc"),
    "carlson_rd": _carlson("elliptic_rd"),
    "carlson_rj": _carlson("elliptic_rj"),
}


def known(name: str) -> bool:
    """Whether a called function has a value here."""
    return name in _VALUES


def value(name: str, args: Sequence[Any]) -> Any:
    """The function at real balls; raises Wide, NotReal."""
    return _VALUES[name](*args)


@cache
def partial(name: str, count: int, by: tuple[int, ...]) -> tuple[tuple[Any, ...], Graph]:
    """(arguments, graph) of the derivative by the arguments numbered in ``by``."""
    letters = tuple(Dummy(f"x_{k}", real=True) for k in range(count))
    e = CLASSES[name](*letters)
    for k in by:
        e = e.diff(letters[k])
    return letters, Graph([e])

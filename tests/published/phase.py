"""Motions as numbers: formulas of an answer by mpmath, and Hamilton's equations as their judge.

Nothing of the program's own evaluation is used: roots come from mpmath's
polyroots, elliptic functions and integrals from mpmath.
"""

from __future__ import annotations

import random
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import mpmath
import sympy as sp

from hjsolve.records import Definition, Formula, Hamiltonian

WORKING = 60
"""Digits at which everything is evaluated."""


def _amplitude(u: Any, m: Any) -> Any:
    """am(u, m) for 0 ≤ m < 1, unfolded."""
    half = 2 * mpmath.ellipk(m)
    turns = mpmath.nint(u / half)
    return turns * mpmath.pi + mpmath.asin(mpmath.ellipfun("sn", u - turns * half, m=m))


FUNCTIONS = {
    "jacobi_sn": lambda u, m: mpmath.ellipfun("sn", u, m=m),
    "jacobi_cn": lambda u, m: mpmath.ellipfun("cn", u, m=m),
    "jacobi_dn": lambda u, m: mpmath.ellipfun("dn", u, m=m),
    "jacobi_am": _amplitude,
    "elliptic_f": mpmath.ellipf,
    "elliptic_e": mpmath.ellipe,
    "elliptic_pi": mpmath.ellippi,
}


class NotReal(Exception):
    """A formula has no real value, or its names have none."""


def call(expression: sp.Expr, names: Sequence[sp.Symbol]) -> Callable[..., Any]:
    """The expression as a function of mpmath numbers."""
    return sp.lambdify(list(names), expression, modules=[FUNCTIONS, "mpmath"])


def value(expression: sp.Expr, at: Mapping[sp.Symbol, Any]) -> Any:
    """The real value of an expression at a point."""
    used = sorted(expression.free_symbols, key=str)
    try:
        number = call(expression, used)(*(at[s] for s in used))
    except (ZeroDivisionError, ValueError) as failure:
        raise NotReal from failure
    return _real(number)


def _real(number: Any) -> Any:
    number = mpmath.mpmathify(number)
    if abs(mpmath.im(number)) > mpmath.mpf(10) ** (-WORKING // 2) * (1 + abs(number)):
        raise NotReal
    real = mpmath.re(number)
    if not mpmath.isfinite(real):
        raise NotReal
    return real


def with_names(where: Sequence[Definition], at: Mapping[sp.Symbol, Any]) -> dict[sp.Symbol, Any]:
    """The point with the values of the names of an answer; NotReal where one has none."""
    known = dict(at)
    for d in where:
        if d.definition is not None:
            known[d.symbol] = value(d.definition, known)
        elif d.root_of is not None:
            coefficients = [value(c, known) for c in sp.Poly(d.root_of, d.unknown).all_coeffs()]
            found = mpmath.polyroots(coefficients, maxsteps=500, extraprec=400)
            size = max(abs(z) for z in found)
            reals = sorted(mpmath.re(z) for z in found if abs(mpmath.im(z)) < size * 1e-25)
            if len(reals) < d.index:
                raise NotReal
            known[d.symbol] = reals[d.index - 1]
    return known


def holds(valid: Sequence[Any], at: Mapping[sp.Symbol, Any]) -> bool:
    """Whether all strict conditions hold; a boundary between regimes never does."""
    return all(
        v.rel_op in ("<", ">") and value(v.gts - v.lts, at) > 0
        if v.rel_op in ("<", ">")
        else value(v.gts - v.lts, at) >= 0
        for v in valid
    )


@dataclass(frozen=True)
class State:
    """Parameters, a point of phase space, and the constants of the motion through it."""

    numbers: dict[sp.Symbol, Any]

    @classmethod
    def drawn(cls, h: Hamiltonian, constants: Sequence[Any], rng: random.Random) -> State:
        """A random state."""
        at: dict[sp.Symbol, Any] = {}
        for p in h.parameters:
            at[p.symbol] = _number(rng) * (1 if p.sign == "positive" else rng.choice((-1, 1)))
        for q, domain in zip(h.coordinates, h.domains, strict=True):
            at[q] = _within(domain, at, rng)
        for p in h.momenta:
            at[p] = _number(rng) * rng.choice((-1, 1))
        for c in constants:
            at[c.symbol] = value(c.first_integral, at)
        return cls(at)


def _number(rng: random.Random) -> Any:
    return mpmath.mpf(rng.randint(40, 200)) / 97


def _within(domain: Any, at: Mapping[sp.Symbol, Any], rng: random.Random) -> Any:
    low = value(domain.lower, at) if domain.lower.is_finite else None
    high = value(domain.upper, at) if domain.upper.is_finite else None
    if low is None:
        return _number(rng) * rng.choice((-1, 1))
    if high is None or high - low > 1e6:
        return low + 2 * _number(rng)
    return low + (high - low) * mpmath.mpf(rng.randint(10, 90)) / 100


class Curve:
    """Formulas as functions of one variable, the rest having been given numbers."""

    def __init__(
        self,
        formulas: Mapping[sp.Symbol, Formula],
        variable: sp.Symbol,
        at: Mapping[sp.Symbol, Any],
    ) -> None:
        where = dict.fromkeys(d for f in formulas.values() for d in f.where if d.free is None)
        known = with_names(list(where), at)
        self._calls = {}
        for name, f in formulas.items():
            used = sorted(f.expression.free_symbols - {variable}, key=str)
            whole = call(f.expression, [variable, *used])
            numbers = [known[s] for s in used]
            self._calls[name] = lambda x, whole=whole, numbers=numbers: _real(whole(x, *numbers))

    def __call__(self, name: sp.Symbol, x: Any) -> Any:
        """The value of one formula; NotReal where it has none."""
        try:
            return self._calls[name](x)
        except (ZeroDivisionError, ValueError) as failure:
            raise NotReal from failure

    def slope(self, name: sp.Symbol, x: Any) -> Any:
        """Its derivative, by differences at a higher precision."""
        with mpmath.workdps(2 * WORKING):
            step = mpmath.mpf(10) ** (-WORKING)
            return (self(name, x + step) - self(name, x - step)) / (2 * step)


def three_periods(curve: Curve, p: sp.Symbol, step: Any) -> Any:
    """The time in which a momentum has changed its sign six times; 60 steps if it does not."""
    signs, last = 0, None
    with mpmath.workdps(20):
        for k in range(600):
            try:
                now = mpmath.sign(curve(p, k * step))
            except NotReal:
                continue
            signs += last is not None and now != last
            last = now
            if signs == 6:
                return k * step
    return 60 * step

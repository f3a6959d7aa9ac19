"""From Q(u) √P(u) to a sum of basic integrals, without roots of P.

Hermite's reduction for a square-free P of any degree d.  With
D(B u^k √P) known exactly, every power u^n, n ≥ d − 1, and every pole of order
above one is traded for an algebraic part:

    ∫ Q √P du = A √P + Σ_{n ≤ d−2} w_n ∫ u^n du/√P + Σ_D ∫ N_D/(D √P) du,

where D runs over the simple irreducible pole factors coprime to P.  P = const
(d = 0) is the rational case of the same formulas.

Source: Hermite 1872; Bronstein, Symbolic Integration I (2005), chapter 2; for
the radical the recurrence of Byrd & Friedman 230 and following (all from memory).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

from hjsolve.quadrature import univariate as uv
from hjsolve.quadrature.ratios import GivenUp, Ratio, Ring, degree, factors
from hjsolve.quadrature.univariate import Poly

POLE_LIMIT = 8
"""A pole of higher order is given up."""


@dataclass(frozen=True)
class Pole:
    """∫ numerator/(factor √P) du with ``factor`` monic and irreducible."""

    factor: Poly
    numerator: Poly


@dataclass(frozen=True)
class Reduction:
    """∫ Q√P du = ``algebraic``·√P + Σ ``weights``[n] J_n + Σ poles.

    ``radicand`` is P as coefficients in u.
    """

    ring: Ring
    radicand: Poly
    algebraic: Ratio
    weights: Poly
    poles: tuple[Pole, ...]

    @property
    def degree(self) -> int:
        """The degree of P."""
        return len(self.radicand) - 1


def reduce(ring: Ring, q: Ratio, radicand: Any) -> Reduction:
    """Reduce ∫ q √radicand du; raises GivenUp past POLE_LIMIT."""
    p = uv.from_flint(ring, radicand)
    g = q * ring.polynomial(radicand)
    content, found = factors(g.den)
    lead = ring.number(content)
    polar: list[tuple[Poly, int, bool]] = []
    for factor, times in found:
        if degree(factor) <= 0:
            lead = lead * ring.polynomial(factor) ** times
            continue
        if times > POLE_LIMIT:
            raise GivenUp("a pole of high order")
        at_root = degree(factor.gcd(radicand)) > 0
        monic = uv.from_flint(ring, factor)
        lead = lead * monic[-1] ** times
        polar.append((uv.scale(monic, monic[-1].inverse()), times, at_root))
    numerator = uv.scale(uv.from_flint(ring, g.num), lead.inverse())
    denominator: Poly = [ring.one]
    for factor, times, _ in polar:
        denominator = uv.multiply(denominator, _power(factor, times, ring))
    whole, rest = uv.divide(numerator, denominator)
    algebraic = ring.zero
    poles: list[Pole] = []
    extra: Poly = []
    for factor, times, at_root in polar:
        digits = _digits(rest, denominator, factor, times, ring)
        part, simple, spill = _lower(ring, p, factor, digits, at_root)
        algebraic = algebraic + part
        extra = uv.add(extra, spill)
        if simple:
            poles.append(Pole(factor, simple))
    part, weights = _lower_degree(ring, p, uv.add(whole, extra))
    return Reduction(ring, p, algebraic + part, weights, tuple(poles))


def _power(a: Poly, n: int, ring: Ring) -> Poly:
    out: Poly = [ring.one]
    for _ in range(n):
        out = uv.multiply(out, a)
    return out


def _digits(rest: Poly, denominator: Poly, factor: Poly, times: int, ring: Ring) -> list[Poly]:
    """A_1, …, A_times of the partial fractions Σ A_k/factor^k of rest/denominator."""
    power = _power(factor, times, ring)
    others, _ = uv.divide(denominator, power)
    if len(others) == 1:
        local = uv.modulo(uv.scale(rest, others[0].inverse()), power)
    else:
        local = uv.modulo(uv.multiply(rest, uv.inverse_modulo(others, power)), power)
    digits: list[Poly] = []
    for _ in range(times):
        local, digit = uv.divide(local, factor)
        digits.append(digit)
    return digits[::-1]


def _lower(
    ring: Ring, p: Poly, factor: Poly, digits: list[Poly], at_root: bool
) -> tuple[Ratio, Poly, Poly]:
    """(algebraic part, numerator of the simple pole, polynomial left over).

    Coprime: d(√P B/D^{k−1}) = [(B′P + BP′/2)/D^{k−1} − (k−1) B D′P/D^k] du/√P.
    Where D divides P = D P₁ one power more can be taken away:
    d(√P B/D^k) = [B′P₁ + BP₁′/2 + …]/D^{k−1} + (½ − k) B D′P₁/D^k.
    """
    algebraic, spill = ring.zero, list[Ratio]()
    half = ring.number(2).inverse()
    slope, p_slope = uv.derivative(factor), uv.derivative(p)
    p1 = uv.divide(p, factor)[0] if at_root else p
    for k in range(len(digits), 0 if at_root else 1, -1):
        a = digits[k - 1]
        if not a:
            continue
        shift = half - ring.number(k) if at_root else ring.number(1 - k)
        unit = uv.modulo(uv.scale(uv.multiply(slope, p1), shift), factor)
        b = uv.modulo(uv.multiply(a, uv.inverse_modulo(unit, factor)), factor)
        order = k if at_root else k - 1
        algebraic = algebraic + uv.to_ratio(ring, b) / uv.to_ratio(ring, factor) ** order
        # what d(√P b/D^order)·√P leaves over D^(order+1), as one numerator
        left = uv.add(uv.multiply(uv.derivative(b), p), uv.scale(uv.multiply(b, p_slope), half))
        left = uv.add(
            uv.multiply(left, factor),
            uv.scale(uv.multiply(uv.multiply(b, slope), p), ring.number(-order)),
        )
        # left/D^(order+1) is a/D^k plus lower powers; subtract it from the digits
        level = order + 1
        remaining = uv.scale(left, ring.number(-1))
        while level > 0 and remaining:
            remaining, digit = uv.divide(remaining, factor)
            if level <= len(digits):
                digits[level - 1] = uv.add(digits[level - 1], digit)
            elif digit:
                raise GivenUp("the reduction of a pole failed")
            level -= 1
        spill = uv.add(spill, remaining)
        if digits[k - 1]:
            raise GivenUp("the reduction of a pole failed")
    return algebraic, ([] if at_root else digits[0]), spill


def _lower_degree(ring: Ring, p: Poly, whole: Poly) -> tuple[Ratio, Poly]:
    """Trade the powers u^n, n ≥ deg P − 1, for an algebraic part."""
    d = len(p) - 1
    half = ring.number(2).inverse()
    rest, algebraic = uv.trim(whole), ring.zero
    slope = uv.derivative(p)
    while len(rest) - 1 >= max(d - 1, 0):
        k = len(rest) - d
        c = rest[-1] / (p[-1] * (ring.number(k) + ring.number(d) * half))
        power = [*([ring.zero] * k), c]
        algebraic = algebraic + uv.to_ratio(ring, power)
        used = uv.add(
            uv.multiply(uv.derivative(power), p), uv.scale(uv.multiply(power, slope), half)
        )
        rest = uv.add(rest, uv.scale(used, ring.number(-1)))
    return algebraic, rest

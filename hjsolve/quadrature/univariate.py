"""Polynomials in u over the fractions of the constants: lists, lowest power first.

Degrees stay below about ten, so schoolbook arithmetic is the fastest.
"""

from __future__ import annotations

from typing import Any

from hjsolve.quadrature.ratios import GivenUp, Ratio, Ring, coefficients

Poly = list[Ratio]


def trim(a: Poly) -> Poly:
    """``a`` without leading zeros (a new list)."""
    n = len(a)
    while n and not a[n - 1]:
        n -= 1
    return a[:n]


def from_flint(ring: Ring, poly: Any) -> Poly:
    """The coefficients of an ``fmpz_mpoly`` in u."""
    return [ring.polynomial(c) for c in coefficients(poly)]


def to_ratio(ring: Ring, a: Poly) -> Ratio:
    """Σ a_k u^k as one fraction."""
    total = ring.zero
    for c in reversed(a):
        total = total * ring.u + c
    return total


def add(a: Poly, b: Poly) -> Poly:
    """The sum a + b."""
    if len(a) < len(b):
        a, b = b, a
    return trim([x + b[i] if i < len(b) else x for i, x in enumerate(a)])


def scale(a: Poly, factor: Ratio) -> Poly:
    """factor·a."""
    return trim([x * factor for x in a])


def multiply(a: Poly, b: Poly) -> Poly:
    """a·b."""
    if not a or not b:
        return []
    out: list[Ratio] = [a[0].ring.zero] * (len(a) + len(b) - 1)
    for i, x in enumerate(a):
        if x:
            for j, y in enumerate(b):
                out[i + j] = out[i + j] + x * y
    return trim(out)


def divide(a: Poly, b: Poly) -> tuple[Poly, Poly]:
    """(quotient, remainder) of a by b."""
    rest = trim(a)
    if len(rest) < len(b):
        return [], rest
    ring = b[-1].ring
    inverse = b[-1].inverse()
    quotient = [ring.zero] * (len(rest) - len(b) + 1)
    for k in range(len(quotient) - 1, -1, -1):
        c = rest[k + len(b) - 1] * inverse
        quotient[k] = c
        if c:
            for j, y in enumerate(b):
                rest[k + j] = rest[k + j] - c * y
    return trim(quotient), trim(rest)


def modulo(a: Poly, b: Poly) -> Poly:
    """The remainder of a by b."""
    return divide(a, b)[1]


def inverse_modulo(a: Poly, b: Poly) -> Poly:
    """1/a modulo b by Euclid's algorithm; raises GivenUp when they share a factor."""
    ring = b[-1].ring
    old, new = b, modulo(a, b)
    t_old: Poly = []
    t_new: Poly = [ring.one]
    while new:
        quotient, rest = divide(old, new)
        old, new = new, rest
        t_old, t_new = t_new, add(t_old, scale(multiply(quotient, t_new), ring.number(-1)))
    if len(old) != 1:
        raise GivenUp("a pole coincides with a root")
    return modulo(scale(t_old, old[0].inverse()), b)


def derivative(a: Poly) -> Poly:
    """da/du."""
    return trim([x * x.ring.number(k) for k, x in enumerate(a)][1:])


def value(a: Poly, at: Ratio) -> Ratio:
    """a(at)."""
    total = at.ring.zero
    for c in reversed(a):
        total = total * at + c
    return total


def shift(a: Poly, by: Ratio) -> Poly:
    """a(u + by) by Horner's scheme."""
    out = list(a)
    for i in range(len(out) - 1):
        for k in range(len(out) - 2, i - 1, -1):
            out[k] = out[k] + by * out[k + 1]
    return trim(out)

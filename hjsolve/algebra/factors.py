"""Fractions of polynomials as products of irreducible factors."""

from __future__ import annotations

import math
from fractions import Fraction
from typing import Any

import sympy as sp

from hjsolve.algebra.generators import NotRational, Ratio

TERMS = 1500
"""A polynomial with more terms is not factored."""


class Key:
    """A polynomial as a key of a mapping (``fmpz_mpoly`` itself is not hashable)."""

    __slots__ = ("_hash", "poly")

    def __init__(self, poly: Any) -> None:
        self.poly = poly
        self._hash = hash(tuple((e, int(c)) for e, c in poly.terms()))

    def __hash__(self) -> int:
        return self._hash

    def __eq__(self, other: object) -> bool:
        return isinstance(other, Key) and self.poly == other.poly


Factors = tuple[Fraction, list[tuple[Key, int]]]
"""c Π f^k: content, and irreducible polynomials over the integers with exponents."""


def split(value: Ratio) -> Factors:
    """The factors of a fraction; raises NotRational for 0 and for too many terms."""
    if value.is_zero():
        raise NotRational
    content, found = Fraction(1), []
    for polynomial, side in ((value.numerator, 1), (value.denominator, -1)):
        if len(polynomial) > TERMS:
            raise NotRational
        c, factors = polynomial.factor()
        content *= Fraction(int(c)) ** side
        found += [(Key(f), side * int(times)) for f, times in factors]
    return content, found


def square_part(n: int) -> tuple[int, int]:
    """(s, r) with n = s² r; s takes small primes, and all of |n| where it is a square."""
    square, rest = 1, n
    root = math.isqrt(abs(n))
    if root * root == abs(n):
        return root, n // (root * root)
    for prime in sp.primerange(200):
        while rest % (prime * prime) == 0:
            square, rest = square * prime, rest // (prime * prime)
    return square, rest

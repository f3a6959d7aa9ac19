"""Exact fractions of integer polynomials in the kernel u and the constants.

A ring is made once for a problem: its first generator is u, the others stand
for the parameters, constants and opaque constant expressions of the integrand.
Arithmetic is python-flint's ``fmpz_mpoly``; a product with its gcd removed costs
about ten microseconds, two orders below SymPy's fraction field on the same
data.  Division is only ever done by a polynomial gcd or with ``/``, which raises
when it is not exact.
"""

from __future__ import annotations

import time
from collections.abc import Sequence
from fractions import Fraction
from typing import Any

from flint import fmpz_mpoly_ctx
from sympy import Add, Expr, Integer, Mul, Pow, Rational, Symbol

from hjsolve.errors import OutOfTime

TERM_LIMIT = 3_000
"""A polynomial with more terms is given up: nothing readable comes of it."""

EXPONENT_LIMIT = 60
"""A power above this is given up before it is multiplied out."""


class GivenUp(Exception):
    """The integrand is outside what the caller can treat; the text says why."""


class Ring:
    """ℤ[u, g_1, …, g_n] with what each generator stands for.

    ``constants`` are the expressions of g_1, …, g_n; ``deadline`` is in seconds
    of ``time.monotonic``, and passing it raises OutOfTime from any operation.
    """

    def __init__(self, constants: Sequence[Expr], deadline: float) -> None:
        self.constants = tuple(constants)
        self.deadline = deadline
        names = ["u", *(f"g{i}" for i in range(1, len(self.constants) + 1))]
        self.context = fmpz_mpoly_ctx.get(names, "lex")
        generators = self.context.gens()
        self.zero = Ratio(self, self.context.constant(0), self.context.constant(1))
        self.one = self.number(1)
        self.u = Ratio(self, generators[0], self.context.constant(1))
        self.position = {c: i + 1 for i, c in enumerate(self.constants)}
        self._generators = tuple(Ratio(self, g, self.context.constant(1)) for g in generators[1:])

    def number(self, value: int | Fraction) -> Ratio:
        """A rational number as a fraction of the ring."""
        f = Fraction(value)
        return Ratio(self, self.context.constant(f.numerator), self.context.constant(f.denominator))

    def polynomial(self, poly: Any) -> Ratio:
        """An ``fmpz_mpoly`` of this ring as a fraction."""
        return Ratio(self, poly, self.context.constant(1))

    def constant(self, expression: Expr) -> Ratio:
        """A constant that is rational in the generators; raises GivenUp otherwise."""
        found = self.position.get(expression)
        if found is not None:
            return self._generators[found - 1]
        if isinstance(expression, Rational):
            return self.number(Fraction(int(expression.p), int(expression.q)))
        if isinstance(expression, Add):
            total = self.zero
            for term in expression.args:
                total = total + self.constant(term)
            return total
        if isinstance(expression, Mul):
            total = self.one
            for factor in expression.args:
                total = total * self.constant(factor)
            return total
        if isinstance(expression, Pow) and isinstance(expression.exp, Integer):
            return self.constant(expression.base) ** int(expression.exp)
        raise GivenUp(f"{expression} is no rational function of the constants")

    def check(self, poly: Any) -> None:
        """Raise OutOfTime past the deadline, GivenUp when ``poly`` is too large."""
        if time.monotonic() > self.deadline:
            raise OutOfTime("quadrature ran out of its time")
        if len(poly) > TERM_LIMIT:
            raise GivenUp(f"a polynomial of the problem has more than {TERM_LIMIT} terms")


class Ratio:
    """num/den in lowest terms, den with a positive leading coefficient."""

    __slots__ = ("den", "num", "ring")

    def __init__(self, ring: Ring, num: Any, den: Any) -> None:
        self.ring, self.num, self.den = ring, num, den

    def _cancelled(self, num: Any, den: Any) -> Ratio:
        if den.is_zero():
            raise GivenUp("a denominator of the problem vanishes identically")
        self.ring.check(num)
        self.ring.check(den)
        common = num.gcd(den)
        if not common.is_one():
            num, den = num / common, den / common
        if den.leading_coefficient() < 0:
            num, den = -num, -den
        return Ratio(self.ring, num, den)

    def __add__(self, other: Ratio) -> Ratio:
        if self.den == other.den:
            return self._cancelled(self.num + other.num, self.den)
        return self._cancelled(self.num * other.den + other.num * self.den, self.den * other.den)

    def __neg__(self) -> Ratio:
        return Ratio(self.ring, -self.num, self.den)

    def __sub__(self, other: Ratio) -> Ratio:
        return self + (-other)

    def __mul__(self, other: Ratio) -> Ratio:
        if self.num.is_zero() or other.num.is_zero():
            return self.ring.zero
        if len(self.num) * len(other.num) > TERM_LIMIT**2:
            raise GivenUp("a product of the problem is too large")
        return self._cancelled(self.num * other.num, self.den * other.den)

    def __truediv__(self, other: Ratio) -> Ratio:
        return self * other.inverse()

    def inverse(self) -> Ratio:
        """1/self; raises GivenUp for zero."""
        return self._cancelled(self.den, self.num)

    def __pow__(self, exponent: int) -> Ratio:
        if abs(exponent) > EXPONENT_LIMIT:
            raise GivenUp(f"a power above {EXPONENT_LIMIT}")
        base = self if exponent >= 0 else self.inverse()
        size = abs(exponent)
        if (len(base.num) > 1 or len(base.den) > 1) and size > 1:
            total = base
            for _ in range(size - 1):
                total = total * base
            return total
        return Ratio(self.ring, base.num**size, base.den**size)

    def __eq__(self, other: object) -> bool:
        return isinstance(other, Ratio) and self.num == other.num and self.den == other.den

    __hash__ = None  # type: ignore[assignment]

    def __bool__(self) -> bool:
        return not self.num.is_zero()

    @property
    def constant(self) -> bool:
        """Whether u does not occur."""
        return degree(self.num) <= 0 and degree(self.den) <= 0


def degree(poly: Any) -> int:
    """The degree in u of an ``fmpz_mpoly``, -1 for zero."""
    return -1 if poly.is_zero() else int(poly.degrees()[0])


def coefficients(poly: Any) -> list[Any]:
    """The coefficients of 1, u, u², … as polynomials free of u."""
    ring = poly.context()
    parts: list[dict[tuple[int, ...], Any]] = [{} for _ in range(degree(poly) + 1)]
    for exponents, c in poly.to_dict().items():
        parts[exponents[0]][(0, *exponents[1:])] = c
    return [ring.from_dict(part) for part in parts]


def factors(poly: Any) -> tuple[int, list[tuple[Any, int]]]:
    """(integer content with the sign, irreducible factors with multiplicity).

    Every factor has a positive leading coefficient, so that equal factors of
    different polynomials are equal.
    """
    if len(poly) > 400 or sum(poly.degrees()) > 80:
        raise GivenUp("a polynomial of the problem is too large to factor")
    content, found = poly.factor()
    sign, plain = int(content), []
    for factor, times in found:
        if factor.leading_coefficient() < 0:
            factor, sign = -factor, sign * (-1) ** int(times)
        plain.append((factor, int(times)))
    return sign, plain


def opaque(expression: Expr, found: dict[Expr, None]) -> None:
    """Collect into ``found`` the generators a constant expression is rational in.

    Square roots of constants need no generator: they are radicals like any
    other (see ``radicals``), so that √2·√m·√(E − V) and √(2m(E − V)) are one.
    """
    if isinstance(expression, Rational):
        return
    if isinstance(expression, Symbol):
        found.setdefault(expression)
    elif isinstance(expression, (Add, Mul)):
        for part in expression.args:
            opaque(part, found)
    elif (
        isinstance(expression, Pow)
        and isinstance(expression.exp, Rational)
        and expression.exp.q in (1, 2)
        and not (isinstance(expression.exp, Integer) and abs(expression.exp) > EXPONENT_LIMIT)
    ):
        opaque(expression.base, found)
    else:
        found.setdefault(expression)

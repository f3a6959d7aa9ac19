"""Fractions of the ring written as a practitioner would write them.

Factors of known sign leave the square roots, squares of constants of either
sign leave as absolute values, polynomials are collected in the kernel.
"""

from __future__ import annotations

from fractions import Fraction
from typing import Any

from sympy import Abs, Add, Expr, Integer, Lt, Mul, Pow, Rational, S
from sympy.core.relational import Relational

from hjsolve.algebra.factors import Key
from hjsolve.quadrature.kernel import Kernel
from hjsolve.quadrature.ratios import Ratio, coefficients, degree, factors
from hjsolve.quadrature.signs import Signs

HALF = Fraction(1, 2)


class Dress:
    """Writes fractions in the kernel ``u`` and the constants of a ring."""

    def __init__(self, signs: Signs, kernel: Kernel) -> None:
        self.signs, self.ring = signs, signs.ring
        self.u, self.partner, self.shifts = kernel.expression, kernel.partner, kernel.shifts

    def product(
        self, *parts: tuple[Ratio | Any, int | Fraction], times: tuple[Expr, ...] = ()
    ) -> Expr:
        """Π part^exponent · Π times.

        A part with a half-integer exponent counts by its absolute value; of it
        the factors of unknown sign stay together under one root of their
        product, which is positive where the formula holds.
        """
        plain: dict[Key, Fraction] = {}
        positive: dict[Key, Fraction] = {}
        out: list[Expr] = []
        grouped: dict[Fraction, list[Key]] = {}
        for part, exponent in parts:
            e = Fraction(exponent)
            content, found = _factors(part)
            out.append(_number(content, e))
            target = plain if e.denominator == 1 else positive
            for factor, times_ in found.items():
                n = times_
                if e.denominator == 2 and n % 2 and self.signs.factor(factor.poly) is None:
                    grouped.setdefault(e if n > 0 else -e, []).append(factor)
                    n -= 1 if n > 0 else -1
                if n:
                    target[factor] = target.get(factor, Fraction(0)) + n * e
        for e, group in grouped.items():
            out.append(self._group(group, e, plain))
        bases: dict[Fraction, list[Any]] = {}
        for key in {**plain, **positive}:
            whole, half = plain.get(key, Fraction(0)), positive.get(key, Fraction(0))
            sign = self.signs.factor(key.poly)
            if sign is None and half:
                out.append(self._absolute(key.poly, whole, half))
            elif sign is None:
                bases.setdefault(whole, []).append(key.poly)
            else:
                out.append(Integer(sign) ** int(whole))
                bases.setdefault(whole + half, []).append(key.poly if sign > 0 else -key.poly)
        for e, polys in bases.items():
            for p in _merged(polys):
                out.extend(Pow(f, _rational(e)) for f in self._parts(p))
        return _signed(out, times)

    def _group(self, group: list[Key], e: Fraction, plain: dict[Key, Fraction]) -> Expr:
        """|Π group|^e, taking in the same product to an integer power from ``plain``."""
        product = self.ring.context.constant(1)
        for key in group:
            product = product * key.poly
        sign = -1 if self.signs.maybe(product) == -1 else 1
        powers = {plain.get(key, Fraction(0)) for key in group}
        n = powers.pop() if len(powers) == 1 else Fraction(0)
        if n:
            for key in group:
                del plain[key]
        return Integer(sign) ** int(n) * Pow(self.polynomial(product * sign), _rational(n + e))

    def _absolute(self, factor: Any, plain: Fraction, positive: Fraction) -> Expr:
        """f^plain · |f|^positive for an f of unknown sign."""
        base = self.polynomial(factor)
        even = plain - plain % 2
        total = even + positive
        absolute = base if total % 2 == 0 else Abs(base)
        return Pow(absolute, _rational(total)) * Pow(base, _rational(plain - even))

    def root(self, radicand: Any) -> Expr:
        """√P for a P that is positive on the allowed interval."""
        content, found = factors(radicand)
        outside, inside = S.One, self.ring.context.constant(1 if content > 0 else -1)
        numbers = abs(content)
        for factor, times in found:
            sign = self.signs.factor(factor)
            if sign is None or degree(factor) > 0:
                inside = inside * factor**times
            else:
                outside *= Pow(self.polynomial(factor if sign > 0 else -factor), Rational(times, 2))
                inside = inside * self.ring.context.constant(sign**times)
        if inside.is_one():
            return outside * Pow(Integer(numbers), S.Half)
        return outside * Pow(Integer(numbers), S.Half) * Pow(self.polynomial(inside), S.Half)

    def ratio(self, value: Ratio) -> Expr:
        """A fraction, factored."""
        return self.product((value, 1)) if value else S.Zero

    def polynomial(self, poly: Any) -> Expr:
        """A polynomial, collected in u, or in the kernel's partner where that is shorter."""
        if degree(poly) <= 0:
            return self._constant(poly)
        shifted = self._shifted(poly)
        if shifted is not None:
            return Mul(*shifted)
        parts = coefficients(poly)
        plain = sum(map(len, parts))
        if self.partner is not None and degree(poly) >= self.partner.power:
            n, w = self.partner.power, self.partner.function
            exchanged = [self._exchange(parts[k::n]) for k in range(n)]
            if all(e is not None for e in exchanged):
                pairs = [(k, j, c) for k, e in enumerate(exchanged) for j, c in enumerate(e or [])]
                if sum(len(c) for _, _, c in pairs) < plain:
                    return Add(
                        *(self._coefficient(c) * self.u**k * w ** (2 * j) for k, j, c in pairs)
                    )
        return Add(*(self._coefficient(c) * self.u**k for k, c in enumerate(parts)))

    def _parts(self, poly: Any) -> tuple[Expr, ...]:
        """A polynomial as factors that keep apart under a power."""
        return self._shifted(poly) or (self.polynomial(poly),)

    def _shifted(self, poly: Any) -> tuple[Expr, ...] | None:
        """±(u − c) as number and rest, for the c at which the kernel writes it without loss."""
        for c, written in self.shifts:
            difference = self.ring.u.num - c
            if poly in (difference, -difference):
                number, rest = written.as_coeff_Mul()
                return (number if poly == difference else -number), rest
        return None

    def _exchange(self, parts: list[Any]) -> list[Any] | None:
        """Coefficients in w² of Σ c_k v^k with v = a + b w²; None unless polynomial."""
        assert self.partner is not None
        a = self.ring.constant(self.partner.constant)
        b = self.ring.constant(self.partner.factor)
        total: list[Ratio] = []
        for c in reversed(parts):
            shifted = [self.ring.zero] * (len(total) + 1)
            for k, x in enumerate(total):
                shifted[k] = shifted[k] + x * a
                shifted[k + 1] = shifted[k + 1] + x * b
            shifted[0] = shifted[0] + self.ring.polynomial(c)
            total = shifted
        if any(not x.den.is_one() for x in total):
            return None
        return [x.num for x in total]

    def _coefficient(self, poly: Any) -> Expr:
        """A polynomial free of u: factored where that is shorter than its terms."""
        if poly.is_zero():
            return S.Zero
        _, found = factors(poly)
        if sum(len(f) for f, _ in found) < len(poly) + (len(found) > 1 and len(found[0][0]) == 1):
            return self.product((self.ring.polynomial(poly), 1))
        return self._constant(poly)

    def _constant(self, poly: Any) -> Expr:
        names = self.ring.constants
        return Add(
            *(
                Mul(Integer(int(c)), *(n**k for n, k in zip(names, e[1:], strict=True) if k))
                for e, c in poly.to_dict().items()
            )
        )

    def inequality(self, poly: Any, sign: int) -> Relational:
        """sign·poly > 0 as ``smaller < larger`` with every term on its positive side."""
        small, large = S.Zero, S.Zero
        e = self.polynomial(poly if sign > 0 else -poly)
        for term in Add.make_args(e):
            if term.could_extract_minus_sign():
                small -= term
            else:
                large += term
        return Lt(small, large)


def _factors(part: Ratio | Any) -> tuple[Fraction, dict[Key, int]]:
    if not isinstance(part, Ratio):
        content, found = factors(part)
        return Fraction(content), {Key(f): n for f, n in found}
    content, found = factors(part.num)
    below, lower = factors(part.den)
    merged = {Key(f): n for f, n in found}
    for factor, times in lower:
        merged[Key(factor)] = merged.get(Key(factor), 0) - times
    return Fraction(content, below), merged


def _rational(f: Fraction) -> Rational:
    return Rational(f.numerator, f.denominator)


def _number(content: Fraction, e: Fraction) -> Expr:
    if e.denominator == 1:
        return _rational(content) ** int(e)
    return Pow(_rational(abs(content)), _rational(e))


def _merged(polys: list[Any]) -> list[Any]:
    """Polynomials multiplied where the product is no longer: (k − l)(k + l) = k² − l²."""
    out = list(polys)
    for i in range(len(out)):
        for j in range(i + 1, len(out)):
            product = out[i] * out[j]
            if len(product) <= 2 and len(product) < len(out[i]) + len(out[j]):
                rest = [p for k, p in enumerate(out) if k not in (i, j)]
                return _merged([*rest, product])
    return out


def _signed(out: list[Expr], times: tuple[Expr, ...]) -> Expr:
    """The product, with a minus sign taken into the first sum that has one."""
    whole = Mul(*out, *times)
    coefficient, rest = whole.as_coeff_Mul()
    if not coefficient.is_negative:
        return whole
    for factor in Mul.make_args(rest):
        if isinstance(factor, Add) and factor.could_extract_minus_sign():
            others = (f for f in Mul.make_args(rest) if f != factor)
            return Mul(-coefficient, *others, -factor)
    return whole

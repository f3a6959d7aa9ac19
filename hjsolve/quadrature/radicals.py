"""Sums Σ_j Q_j √P_j with rational Q_j and square-free P_j: the integrand in u.

Every square root of the integrand, of the constants and of the substitution
itself (sin θ = √(1 − u²) for u = cos θ) is an element of this algebra, so that
√X·√Y = √(XY) and √(K²P) = |K|√P hold by construction, with the sign of K asked
from ``signs``.  Real square roots only: the radicands are positive where the
integrand is real.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

from sympy import Add, Expr, Integer, Mul, Pow, Rational, Symbol, factorint

from hjsolve.algebra.factors import Key
from hjsolve.quadrature.ratios import GivenUp, Ratio, factors
from hjsolve.quadrature.signs import Signs

CLASS_LIMIT = 4
"""More independent square roots than this are given up."""

INTEGER_LIMIT = 10**18
"""An integer above this is not searched for square factors."""


class Radicals:
    """Σ Q·√P as a mapping from P (square-free, as a ``Key``) to Q."""

    __slots__ = ("signs", "terms")

    def __init__(self, signs: Signs, terms: dict[Key, Ratio]) -> None:
        self.signs = signs
        self.terms = {p: q for p, q in terms.items() if q}
        if len(self.terms) > CLASS_LIMIT:
            raise GivenUp("too many independent square roots")

    @classmethod
    def rational(cls, signs: Signs, ratio: Ratio) -> Radicals:
        """A fraction without roots."""
        return cls(signs, {Key(signs.ring.context.constant(1)): ratio})

    def __add__(self, other: Radicals) -> Radicals:
        terms = dict(self.terms)
        for p, q in other.terms.items():
            terms[p] = terms[p] + q if p in terms else q
        return Radicals(self.signs, terms)

    def __mul__(self, other: Radicals) -> Radicals:
        ring = self.signs.ring
        terms: dict[Key, Ratio] = {}
        for k1, q1 in self.terms.items():
            for k2, q2 in other.terms.items():
                common = k1.poly.gcd(k2.poly)
                p, q = Key((k1.poly / common) * (k2.poly / common)), q1 * q2
                if not common.is_one():
                    q = q * ring.polynomial(common) * ring.number(self.signs.of(common))
                terms[p] = terms[p] + q if p in terms else q
        return Radicals(self.signs, terms)

    def inverse(self) -> Radicals:
        """1/self; for two terms by the conjugate, GivenUp for more."""
        items = list(self.terms.items())
        if not items:
            raise GivenUp("the integrand divides by zero")
        if len(items) > 2:
            raise GivenUp("a sum of three square roots in a denominator")
        ring = self.signs.ring
        if len(items) == 1:
            p, q = items[0]
            return Radicals(self.signs, {p: (q * ring.polynomial(p.poly)).inverse()})
        (p1, q1), (p2, q2) = items
        norm = q1 * q1 * ring.polynomial(p1.poly) - q2 * q2 * ring.polynomial(p2.poly)
        return Radicals(self.signs, {p1: q1 / norm, p2: -q2 / norm})

    def power(self, exponent: int) -> Radicals:
        """An integer power, bounded."""
        if abs(exponent) > 24:
            raise GivenUp("a high power")
        base = self if exponent >= 0 else self.inverse()
        if len(base.terms) == 1:
            (p, q), ring = next(iter(base.terms.items())), self.signs.ring
            n = abs(exponent)
            whole = q**n * ring.polynomial(p.poly) ** (n // 2)
            return Radicals(self.signs, {p if n % 2 else Key(ring.context.constant(1)): whole})
        total = Radicals.rational(self.signs, self.signs.ring.one)
        for _ in range(abs(exponent)):
            total = total * base
        return total

    def root(self) -> Radicals:
        """The positive square root of a single rational term."""
        if not self.terms:
            return self
        items = list(self.terms.items())
        if len(items) != 1 or not items[0][0].poly.is_one():
            raise GivenUp("a square root of square roots")
        return square_root(self.signs, items[0][1])


def square_root(signs: Signs, ratio: Ratio) -> Radicals:
    """√(N/D) = K√P/|D'| with P square-free."""
    ring = signs.ring
    content, found = factors(ratio.num)
    below, lower = factors(ratio.den)
    kept, taken = square_part(content * below)
    p, outside = ring.context.constant(kept), ring.number(taken) / ring.number(below)
    for factor, times in found:
        if times % 2:
            p = p * factor
        if times >= 2:
            outside = outside * _absolute(signs, factor) ** (times // 2)
    for factor, times in lower:
        if times % 2:
            p = p * factor
        outside = outside * _absolute(signs, factor) ** (-((times + 1) // 2))
    return Radicals(signs, {Key(p): outside})


def _absolute(signs: Signs, factor: Any) -> Ratio:
    return signs.ring.polynomial(factor) * signs.ring.number(signs.of(factor))


def square_part(integer: int) -> tuple[int, int]:
    """(s, k) with integer = s·k² and s square-free, as far as it is cheap to find."""
    if abs(integer) > INTEGER_LIMIT:
        return integer, 1
    kept, taken = (1 if integer > 0 else -1), 1
    for prime, times in factorint(abs(integer), limit=1000).items():
        kept *= int(prime) ** (int(times) % 2)
        taken *= int(prime) ** (int(times) // 2)
    return kept, taken


class Reader:
    """Rewrites an integrand in the kernel.

    ``leaf`` gives the value of what depends on the variable and is not built by
    + · and rational powers (the variable itself, exp, sin, …), or None.
    ``originals`` keeps the radicands that are square-free as they stand.
    """

    def __init__(
        self, variable: Symbol, signs: Signs, leaf: Callable[[Expr, Signs], Radicals | None]
    ) -> None:
        self.variable, self.signs, self.leaf = variable, signs, leaf
        self._known: dict[Expr, Radicals] = {}
        self.originals: dict[Key, Expr] = {}

    def value(self, e: Expr) -> Radicals:
        """``e`` as Σ Q√P; raises GivenUp when it is not of that form."""
        if e not in self._known:
            self._known[e] = self._value(e)
        return self._known[e]

    def _value(self, e: Expr) -> Radicals:
        ring = self.signs.ring
        if isinstance(e, Rational) or e in ring.position:
            return Radicals.rational(self.signs, ring.constant(e))
        found = self.leaf(e, self.signs) if e.has(self.variable) else None
        if found is not None:
            return found
        if isinstance(e, Add):
            total = self.value(e.args[0])
            for term in e.args[1:]:
                total = total + self.value(term)
            return total
        if isinstance(e, Mul):
            total = self.value(e.args[0])
            for factor in e.args[1:]:
                total = total * self.value(factor)
            return total
        if isinstance(e, Pow):
            if isinstance(e.exp, Integer):
                return self.value(e.base).power(int(e.exp))
            if isinstance(e.exp, Rational) and e.exp.q == 2:
                root = self.value(e.base).root()
                self._remember(e.base, root)
                return root.power(int(e.exp.p))
        raise GivenUp(f"{type(e).__name__} of {self.variable} does not fit the substitution")

    def _remember(self, radicand: Expr, root: Radicals) -> None:
        """Keep how the integrand writes a square-free P."""
        if len(root.terms) == 1 and radicand.has(self.variable):
            ((key, factor),) = root.terms.items()
            if factor == self.signs.ring.one:
                self.originals.setdefault(key, radicand)

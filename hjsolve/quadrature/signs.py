"""Which sign has a polynomial of the problem?

The answer comes from the assumptions of the symbols, from the range of the
kernel u, and from what the present regime assumes.  A question without an
answer raises Undetermined; the caller opens one regime for each answer, so that
no formula ever rests on a sign that is not among its conditions.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

from sympy import Expr, oo

from hjsolve.algebra.factors import Key
from hjsolve.quadrature import univariate
from hjsolve.quadrature.ratios import GivenUp, Ratio, Ring, degree, factors


class Undetermined(Exception):
    """The sign of ``poly`` is needed; ``first`` is the answer to look at first."""

    def __init__(self, poly: Any, first: int) -> None:
        super().__init__(str(poly))
        self.poly, self.first = poly, first


@dataclass(frozen=True)
class Assumption:
    """``poly`` has this sign in the regime; ``kernel`` is u where u occurs, else None."""

    poly: Any
    sign: int
    kernel: Expr | None = None


class Signs:
    """Signs of polynomials while u runs through the open interval ``span``.

    With ``guess`` an unknown sign counts as positive and sets ``guessed``: good
    enough to compare kernels, never for a formula.
    """

    def __init__(
        self,
        ring: Ring,
        kernel: Expr,
        span: tuple[Expr, Expr],
        assumed: tuple[Assumption, ...] = (),
        *,
        guess: bool = False,
    ) -> None:
        self.ring, self.kernel, self.span = ring, kernel, span
        self.guess, self.guessed = guess, False
        self.assumed: dict[Key, int] = {
            Key(a.poly): a.sign for a in assumed if a.kernel is None or a.kernel == kernel
        }
        self._factors: dict[Key, int | None] = {}
        self._names = [Key(g) for g in ring.context.gens()]
        self._generators = [self._u_sign(), *(_symbol_sign(c) for c in ring.constants)]

    def _u_sign(self) -> int:
        lower, upper = self.span
        if lower.is_nonnegative:
            return 1
        return -1 if upper.is_nonpositive else 0

    def split(self, poly: Any) -> tuple[int, Any]:
        """(known sign, product of the factors whose sign is unknown)."""
        sign, found = factors(poly)
        known = 1 if sign > 0 else -1
        rest = self.ring.context.constant(1)
        for factor, times in found:
            if times % 2:
                s = self.factor(factor)
                if s is None:
                    rest = rest * factor
                else:
                    known *= s
        if not rest.is_one():
            of_rest = self._product(rest)
            if of_rest is not None:
                return known * of_rest, self.ring.context.constant(1)
        return known, rest

    def _product(self, rest: Any) -> int | None:
        """The sign of a product of factors of unknown sign, from the assumed products."""
        if Key(rest) in self.assumed:
            return self.assumed[Key(rest)]
        for key, sign in self.assumed.items():
            if key.poly.total_degree() > rest.total_degree():
                quotient, remainder = divmod(key.poly, rest)
                if remainder.is_zero():
                    signs = [self.factor(f) for f, n in factors(quotient)[1] if n % 2]
                    if all(s is not None for s in signs):
                        whole = sign * (1 if factors(quotient)[0] > 0 else -1)
                        for s in signs:
                            whole *= s or 1
                        return whole
        return None

    def maybe(self, poly: Any | Ratio) -> int | None:
        """+1, -1, or None when the sign is not known."""
        if isinstance(poly, Ratio):
            poly = poly.num * poly.den
        if poly.is_zero():
            raise GivenUp("a degenerate case: the sign of zero was asked for")
        known, rest = self.split(poly)
        return known if rest.is_one() else None

    def of(self, poly: Any | Ratio, first: int = 1) -> int:
        """+1 or -1; raises Undetermined, with the answer ``first`` for ``poly`` preferred."""
        if isinstance(poly, Ratio):
            poly = poly.num * poly.den
        if poly.is_zero():
            raise GivenUp("a degenerate case: the sign of zero was asked for")
        known, rest = self.split(poly)
        if rest.is_one():
            return known
        if self.guess:
            self.guessed = True
            return first
        raise Undetermined(rest, first * known)

    def suppose(self, poly: Any | Ratio, sign: int) -> None:
        """Take a sign that follows from the existence of an allowed interval.

        Such a sign is no condition of the regime: where it fails the integrand
        is nowhere real.
        """
        if isinstance(poly, Ratio):
            poly = poly.num * poly.den
        known, rest = self.split(poly)
        if not rest.is_one():
            self.assumed[Key(rest)] = sign * known
            self._factors.clear()

    def factor(self, poly: Any) -> int | None:
        """The sign of an irreducible polynomial with positive leading coefficient."""
        key = Key(poly)
        if key in self.assumed:
            return self.assumed[key]
        if key not in self._factors:
            sign = self._by_monomials(poly)
            if sign is None:
                sign = self._by_difference(poly)
            if sign is None and degree(poly) > 0:
                sign = self._by_range(poly)
            self._factors[key] = sign
        return self._factors[key]

    def _by_monomials(self, poly: Any) -> int | None:
        signs = set()
        for exponents, c in poly.to_dict().items():
            sign = 1 if c > 0 else -1
            for i, k in enumerate(exponents):
                if k % 2:
                    sign *= self._generator(i)
            signs.add(sign)
        return signs.pop() if len(signs) == 1 and 0 not in signs else None

    def _by_difference(self, poly: Any) -> int | None:
        """From poly = (poly ∓ g) ± g with g assumed: α > 0 once α > D > 0 is."""
        for key, sign in self.assumed.items():
            for wanted in (1, -1):
                rest = poly - key.poly * (wanted * sign)
                if rest.is_zero() or self._by_monomials(rest) == wanted:
                    return wanted
        return None

    def _generator(self, i: int) -> int:
        return self.assumed.get(self._names[i], self._generators[i])

    def _by_range(self, poly: Any) -> int | None:
        """Descartes' rule without sign changes, after mapping the span to v > 0."""
        ring = self.ring
        a = univariate.from_flint(ring, poly)
        lower, upper = self.span
        try:
            if lower is -oo and upper is oo:
                if len(a) == 3 and self._same([a[1] * a[1] - a[0] * a[2] * ring.number(4)]) == -1:
                    return self._same([a[2]])
                return self._same(a) if not any(a[1::2]) and a[0] else None
            if upper is oo:
                return self._same(univariate.shift(a, ring.constant(lower)))
            if lower is -oo:
                mirrored = [x if k % 2 == 0 else -x for k, x in enumerate(a)]
                return self._same(univariate.shift(mirrored, -ring.constant(upper)))
            low, high = ring.constant(lower), ring.constant(upper)
        except GivenUp:
            return None
        out: univariate.Poly = []
        for k, c in enumerate(a):
            term = [c]
            for j in range(len(a) - 1):
                step = [low, high] if j < k else [ring.one, ring.one]
                term = univariate.multiply(term, step)
            out = univariate.add(out, term)
        return self._same(out)

    def _same(self, a: univariate.Poly) -> int | None:
        signs = {self.maybe(c) for c in a if c}
        return signs.pop() if len(signs) == 1 else None


def _symbol_sign(constant: Expr) -> int:
    if constant.is_positive:
        return 1
    return -1 if constant.is_negative else 0

"""Which signs polynomials may have together where given fractions are positive.

A fraction is positive where the signs of its irreducible factors multiply to
+1: linear equations over the field of two elements.  A factor all of whose
terms have one sign, the signs of its letters being known, has that sign.
"""

from __future__ import annotations

from collections.abc import Collection, Iterable, Sequence
from itertools import product
from typing import Any

from hjsolve.algebra.factors import Factors, Key
from hjsolve.algebra.generators import coefficients

OPEN = 6
"""Signs that may be left open; their combinations are all looked at."""

MOVES, SHORT = 2, 3
"""Letters replaced one after the other, by distances from known factors of few terms."""

Group = tuple[Key, ...]
"""Factors that are met together only; their product counts."""


def groups(
    radicands: Iterable[Factors], sizes: Iterable[Factors]
) -> tuple[list[Group], list[Group]]:
    """(groups with a root of their product, all groups whose sign is needed).

    Factors are put together whose exponents are the same modulo 4 under every
    root, and modulo 2 in every size: √(f^a g^b) = |fg|^(a/2) g^((b − a)/2), where
    (b − a)/2 is even.
    """
    pattern: dict[Key, dict[int, int]] = {}
    radicands = list(radicands)
    for column, (_, factors) in enumerate(radicands):
        for f, times in factors:
            pattern.setdefault(f, {})[column] = times % 4
    for column, (_, factors) in enumerate(sizes, start=len(radicands)):
        for f, times in factors:
            pattern.setdefault(f, {})[column] = times % 2
    found: dict[tuple[tuple[int, int], ...], list[Key]] = {}
    for f, row in pattern.items():
        key = tuple(sorted((c, times) for c, times in row.items() if times))
        if key:
            found.setdefault(key, []).append(f)
    odd = [
        tuple(group)
        for key, group in found.items()
        if any(times % 2 and column < len(radicands) for column, times in key)
    ]
    return odd, [tuple(group) for group in found.values()]


class Signs:
    """Equations between the signs of irreducible polynomials, in echelon form.

    An equation is a set of polynomials and the bit that their signs add up to
    (0 for +, 1 for −).
    """

    def __init__(self) -> None:
        self.rows: list[tuple[Key, frozenset[Key], int]] = []
        self.contradictory = False
        self._seen: dict[Key, None] = {}

    def positive(self, factors: Factors) -> None:
        """Note that c Π f^k > 0."""
        content, found = factors
        self.note((f for f, times in found if times % 2), int(content < 0))

    def note(self, polynomials: Iterable[Key], bit: int) -> None:
        """Note that the signs of the polynomials multiply to (−1)^bit."""
        row = frozenset(polynomials)
        self._seen |= dict.fromkeys(row)
        row, bit = self._rest(row, bit)
        if not row:
            self.contradictory |= bool(bit)
            return
        pivot = min(row, key=_order)
        self.rows = [(p, r ^ row, b ^ bit) if pivot in r else (p, r, b) for p, r, b in self.rows]
        self.rows.append((pivot, row, bit))

    def _rest(self, row: frozenset[Key], bit: int) -> tuple[frozenset[Key], int]:
        for pivot, other, b in self.rows:
            if pivot in row:
                row, bit = row ^ other, bit ^ b
        return row, bit

    def of(self, polynomial: Key) -> int | None:
        """The sign of an irreducible polynomial where it is known."""
        rest, bit = self._rest(frozenset((polynomial,)), 0)
        return None if rest else 1 - 2 * bit

    def close(self, wanted: Iterable[Key]) -> None:
        """Find signs of all polynomials by their terms, of those ``wanted`` by other ways too."""
        wanted = dict.fromkeys(wanted)
        open_ = dict.fromkeys([*self._seen, *wanted])
        found = True
        while found:
            found = False
            for f in list(open_):
                known, sign = self.of(f), self._by_terms(f.poly, ())
                if known is not None:
                    self.contradictory |= sign is not None and sign != known
                    del open_[f]
                    continue
                if sign is None and f in wanted:
                    sign = self._by_parts(f.poly, ()) or self._moved(f.poly, (), MOVES)
                if sign is not None:
                    self.note((f,), int(sign < 0))
                    found = True

    def _by_terms(self, polynomial: Any, positive: Collection[int]) -> int | None:
        """The sign that all terms have; ``positive`` are letters that stand for distances."""
        gens = polynomial.context().gens()
        common = None
        for exponents, coefficient in polynomial.to_dict().items():
            odd = (k for k, e in enumerate(exponents) if e % 2 and k not in positive)
            rest, bit = self._rest(frozenset(Key(gens[k]) for k in odd), int(coefficient < 0))
            if rest or common not in (None, bit):
                return None
            common = bit
        return None if common is None else 1 - 2 * common

    def _by_parts(self, polynomial: Any, positive: Collection[int]) -> int | None:
        """The sign that all Σ A_k v^k have for a letter v, the A_k being factored."""
        context = polynomial.context()
        for v, degree in enumerate(polynomial.degrees()):
            letter = 1 if v in positive else self.of(Key(context.gen(v)))
            if not degree or letter is None:
                continue
            signs = {
                sign and sign * letter**exponent
                for exponent, part in coefficients(polynomial, v, context).items()
                for sign in [self._by_factors(part, positive)]
            }
            if len(signs) == 1:
                return signs.pop()
        return None

    def _by_factors(self, polynomial: Any, positive: Collection[int]) -> int | None:
        content, factors = polynomial.factor()
        odd = [f for f, times in factors if times % 2]
        near = [f for f in odd if any(f.degrees()[k] for k in positive)]
        far = frozenset(Key(f) for f in odd if f not in near)
        rest, bit = self._rest(far, int(content < 0))
        sign = 1 - 2 * bit
        for f in [*near, *(f.poly for f in rest)]:
            one = self._by_terms(f, positive)
            if one is None:
                return None
            sign *= one
        return sign

    def _moved(self, polynomial: Any, moved: tuple[int, ...], depth: int) -> int | None:
        """With a letter v replaced by its distance from where a known linear factor ±v + g is 0."""
        gens = polynomial.context().gens()
        degrees = polynomial.degrees()
        for factor, sign in self._linear():
            for v, ahead in factor.lines:
                if not degrees[v] or v in moved or factor.used & set(moved):
                    continue
                # f = a v + g has the sign s: v = a (s d − g) with a distance d > 0
                put = ahead * (sign * gens[v] - (factor.poly - ahead * gens[v]))
                inner = polynomial.compose(*(put if k == v else g for k, g in enumerate(gens)))
                now = (*moved, v)
                found = self._by_terms(inner, now) or self._by_parts(inner, now)
                if found is None and depth > 1:
                    found = self._moved(inner, now, depth - 1)
                if found is not None:
                    return found
        return None

    def _linear(self) -> list[tuple[_Line, int]]:
        """Known factors with a letter of coefficient ±1 and degree one."""
        found = []
        for pivot, row, bit in self.rows:
            if len(row) == 1 and 1 < len(pivot.poly) <= SHORT:
                line = _Line(pivot.poly)
                if line.lines:
                    found.append((line, 1 - 2 * bit))
        return found

    def cases(self, groups: Sequence[Group]) -> list[dict[Group, int]] | None:
        """All signs that products of factors may have together; None for too many."""
        if self.contradictory:
            return []
        rests = [self._rest(frozenset(group), 0) for group in groups]
        free = list(dict.fromkeys(g for rest, _ in rests for g in sorted(rest, key=_order)))
        if len(free) > OPEN:
            return None
        found = {}
        for bits in product((0, 1), repeat=len(free)):
            at = dict(zip(free, bits, strict=True))
            signs = tuple(1 - 2 * ((b + sum(at[g] for g in rest)) % 2) for rest, b in rests)
            found[signs] = dict(zip(groups, signs, strict=True))
        return list(found.values())


class _Line:
    """A polynomial with the letters (number, ±1) that stand alone in a term of it only."""

    def __init__(self, polynomial: Any) -> None:
        self.poly = polynomial
        self.used = {k for k, d in enumerate(polynomial.degrees()) if d}
        alone = {}
        for exponents, coefficient in polynomial.to_dict().items():
            letters = [k for k, e in enumerate(exponents) if e]
            if len(letters) == 1 and exponents[letters[0]] == 1 and abs(coefficient) == 1:
                alone[letters[0]] = int(coefficient)
        degrees = polynomial.degrees()
        terms = polynomial.to_dict()
        self.lines = [
            (k, a) for k, a in alone.items() if degrees[k] == 1 and sum(e[k] for e in terms) == 1
        ]


def _order(factor: Key) -> str:
    return str(factor.poly)

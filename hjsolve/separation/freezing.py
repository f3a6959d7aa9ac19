"""K(q, p) = ε with all coordinates but those of one block frozen at a base point.

Numbers stand at the base point where a generator may have any rational value
(Pythagorean triples for sin and cos), letters where it may not: momenta,
roots, arbitrary functions.  The energy at the base point eliminates one
momentum value.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import count
from typing import Any

import sympy as sp
from sympy import Dummy, Expr, Symbol

from hjsolve.algebra.generators import Generators, NotRational, Ratio, coefficients, divide
from hjsolve.algebra.linear import Exponents, common, uses
from hjsolve.separation.momentum import clear_radicals

TRIPLES = ((3, 4, 5), (5, 12, 13), (8, 15, 17), (7, 24, 25), (20, 21, 29), (12, 35, 37))
VALUES = (2, 3, 5, 7, 11, 13, 17, 19, 23, 29, 31, 37, 41, 43, 47, 53)


@dataclass(frozen=True, slots=True)
class Block:
    """Coordinates that stay together, with their momenta."""

    coordinates: tuple[Symbol, ...]
    momenta: tuple[Symbol, ...]

    @property
    def symbols(self) -> frozenset[Symbol]:
        """Coordinates and momenta."""
        return frozenset(self.coordinates) | frozenset(self.momenta)


class Frozen:
    """The frozen leaves of a group of blocks, as normed polynomials."""

    def __init__(
        self,
        k: Expr,
        epsilon: Symbol,
        blocks: Sequence[Block],
        momenta: Sequence[Symbol],
        offset: int,
    ) -> None:
        self.blocks = blocks
        self.epsilon = epsilon
        own = [s for b in blocks for s in (*b.momenta, *b.coordinates)]
        self.values = {p: Dummy(f"a_{p.name}", real=True) for b in blocks for p in b.momenta}
        self.opaque: dict[Expr, Symbol] = {}
        first = Generators([k])
        self.carriers = {p: _carrier(p, first.items) for p in self.values}
        for g in first.items:
            if g in self.carriers.values():
                continue
            if self._owner(g) is not None and not _has_number(g) and g not in self.values:
                self.opaque[g] = Dummy("c", real=True)
        varying = [*self.values.values(), *self.opaque.values()]
        self.ring = Generators([k], extra=[*own, epsilon, *momenta, *varying])
        index = self.ring.index
        self.varying = frozenset(index[s] for s in varying)
        self.fixed = frozenset(index[s] for s in (epsilon, *momenta))
        self.k = self.ring.ratio(k)
        self.frozen = self._base_point(offset)
        self._freeze_relations()
        whole = self.k.numerator - self.ring.generator(epsilon).numerator * self.k.denominator
        self.whole, self.shown = clear_radicals(self.ring, whole, self._ties)
        if self._joint_left():
            raise NotRational("a kernel holds two blocks")

    # ------------------------------------------------------ the base point

    def _owner(self, g: Expr) -> int | None:
        """The block a generator belongs to; None for parameters; -1 for two blocks."""
        free = g.free_symbols
        owners = [n for n, b in enumerate(self.blocks) if free & b.symbols]
        return None if not owners else owners[0] if len(owners) == 1 else -1

    def _ties(self, g: Expr) -> bool:
        """Whether a root holds two blocks together, or a momentum."""
        return self._owner(g) == -1 or self._moves(g)

    def _joint_left(self) -> bool:
        degrees = self.whole.degrees()
        held = set(self.carriers.values())
        return any(
            degrees[n] > 0 and (self._owner(g) == -1 or (self._moves(g) and g not in held))
            for n, g in enumerate(self.ring.items)
        )

    def _moves(self, g: Expr) -> bool:
        return any(g.free_symbols & set(b.momenta) for b in self.blocks)

    def _base_point(self, offset: int) -> dict[int, Ratio]:
        """A value for every generator of a block: a number, or a letter that varies."""
        number, triple = count(offset), count(offset)
        at: dict[int, Ratio] = {}
        index = self.ring.index
        for n, g in enumerate(self.ring.items):
            if self._owner(g) in (None, -1):
                continue
            held = next((p for p, c in self.carriers.items() if c == g), None)
            if held is not None:
                at[n] = self.ring.generator(self.values[held])
            elif g in self.opaque:
                at[n] = self.ring.generator(self.opaque[g])
            elif isinstance(g, sp.sin):
                a, b, c = TRIPLES[next(triple) % len(TRIPLES)]
                at[n] = self.ring.number(sp.Rational(a, c))
                at[index[sp.cos(g.args[0])]] = self.ring.number(sp.Rational(b, c))
            elif not isinstance(g, sp.cos):
                at[n] = self.ring.number(VALUES[next(number) % len(VALUES)])
        return at

    def _freeze_relations(self) -> None:
        """A letter that stands for a root at the base point keeps the root's relation."""
        for n, degree, power in list(self.ring.relations):
            g = self.ring.items[n]
            if g in self.opaque and not isinstance(g, sp.cos):
                letter = self.ring.index[self.opaque[g]]
                self.ring.relations.append((letter, degree, self._substitute_ratio(power)))

    def _substitute_ratio(self, value: Ratio) -> Ratio:
        return self.substitute(value.numerator, self.frozen) / self.substitute(
            value.denominator, self.frozen
        )

    def substitute(self, polynomial: Any, at: dict[int, Ratio]) -> Ratio:
        """The polynomial with fractions put in for some generators."""
        total = self.ring.number(0)
        grouped: dict[Exponents, dict[Exponents, Any]] = {}
        for exponents, c in polynomial.to_dict().items():
            put = tuple(e if n in at else 0 for n, e in enumerate(exponents))
            rest = tuple(0 if n in at else e for n, e in enumerate(exponents))
            grouped.setdefault(put, {})[rest] = c
        for put, terms in grouped.items():
            piece = Ratio(self.ring.context.from_dict(terms), self.ring.context.constant(1))
            for n, e in enumerate(put):
                if e:
                    piece = piece * self.ring.power(at[n], int(e))
            total = total + piece
        return self.ring.reduce(total)

    # ------------------------------------------------------- frozen leaves

    def leaf_polynomials(self) -> list[Any]:
        """One polynomial a block, with one momentum value eliminated through the energy."""
        frozen = []
        for n in range(len(self.blocks)):
            at = {k: v for k, v in self.frozen.items() if self._owner(self.ring.items[k]) != n}
            frozen.append(self.substitute(self.whole, at).numerator)
        constraint = self.substitute(self.whole, self.frozen).numerator
        for n in reversed(range(len(self.blocks))):
            for p in self.blocks[n].momenta:
                done = self._eliminate(frozen, constraint, n, self.ring.index[self.values[p]])
                if done is not None:
                    self.eliminated = p
                    letter = self.ring.index[self.values[p]]
                    return [self._through_base(f, constraint, letter) for f in done]
        raise NotRational("no momentum of the base point can be eliminated")

    def _eliminate(
        self, frozen: list[Any], constraint: Any, owner: int, letter: int
    ) -> list[Any] | None:
        parts = coefficients(constraint, letter, self.ring.context)
        degree = max(parts)
        if degree == 0 or set(parts) != {0, degree}:
            return None
        one = self.ring.context.constant(1)
        power = -(Ratio(parts[0], one) / Ratio(parts[degree], one))
        out = []
        for n, polynomial in enumerate(frozen):
            pieces = coefficients(polynomial, letter, self.ring.context)
            if n == owner or set(pieces) == {0}:
                out.append(polynomial)
                continue
            if any(e % degree for e in pieces):
                return None
            total = self.ring.number(0)
            for e, piece in pieces.items():
                total = total + Ratio(piece, one) * self.ring.power(power, e // degree)
            out.append(self.ring.reduce(total).numerator)
        return out

    def _through_base(self, polynomial: Any, constraint: Any, letter: int) -> Any:
        """The factor of a leaf's polynomial that holds the base point itself.

        Freezing gives every leaf at this energy through the frozen values; of
        two branches p = A ± B that split over the rationals only one is meant.
        """
        moving = [self.ring.index[c] for c in self.carriers.values()]
        factors = [f for f, _ in polynomial.factor()[1] if any(f.degrees()[n] for n in moving)]
        if len(factors) < 2:
            return polynomial
        for factor in factors:
            there = self.substitute(factor, self.frozen).numerator
            reduced = self._eliminate([there], constraint, -1, letter)
            if reduced is not None and reduced[0].is_zero():
                return factor
        raise NotRational("no factor of a leaf passes through the base point")

    def at_base(self) -> dict[Expr, Expr]:
        """What the letters of opaque generators stand for at the base point."""
        ring = self.ring
        numbers = {
            g: ring.expression(self.frozen[n])
            for n, g in enumerate(ring.items)
            if n in self.frozen and g.is_Symbol and g not in self.values
        }
        return {letter: g.xreplace(numbers) for g, letter in self.opaque.items()}

    def _own(self, n: int) -> frozenset[int]:
        return frozenset(k for k, g in enumerate(self.ring.items) if self._owner(g) == n)

    def split(self, polynomial: Any, left: frozenset[int]) -> dict[Exponents, Any]:
        """The polynomial as one in the generators ``left``: exponents to coefficient."""
        grouped: dict[Exponents, dict[Exponents, Any]] = {}
        for exponents, c in polynomial.to_dict().items():
            key = tuple(e if n in left else 0 for n, e in enumerate(exponents))
            rest = tuple(0 if n in left else e for n, e in enumerate(exponents))
            grouped.setdefault(key, {})[rest] = c
        return {k: self.ring.context.from_dict(v) for k, v in grouped.items()}

    def _primitive(self, polynomial: Any, left: frozenset[int]) -> Any:
        if polynomial.is_zero():
            raise NotRational("a leaf is empty at this base point")
        return divide(polynomial, common(list(self.split(polynomial, left).values())))

    def normed(self, polynomial: Any, n: int) -> tuple[dict[Exponents, Ratio], int]:
        """Slots of a leaf, normed so that its highest power of momentum does not vary."""
        own = self._own(n)
        moving = frozenset(self.ring.index[self.carriers[p]] for p in self.blocks[n].momenta)
        polynomial = self._primitive(self._primitive(polynomial, own), moving)
        for _ in range(3):
            slots = self.split(polynomial, own)
            top = max(sum(e[k] for k in moving) for e in slots)
            leading = [c for e, c in slots.items() if sum(e[k] for k in moving) == top]
            scale = common(leading)
            conjugate = self._conjugate(scale)
            if conjugate is None:
                break
            one = self.ring.context.constant(1)
            polynomial = self.ring.reduce(Ratio(polynomial * conjugate, one)).numerator
            polynomial = self._primitive(self._primitive(polynomial, own), moving)
        if any(uses(divide(c, scale), self.varying | self.fixed) for c in leading):
            raise NotRational("the highest power of momentum varies with the base point")
        if uses(scale, self.varying):
            raise NotRational("the norm of a leaf varies with the base point")
        one = self.ring.context.constant(1)
        highest = max(e for e in slots if sum(e[k] for k in moving) == top)
        if divide(slots[highest], scale).leading_coefficient() < 0:
            scale = -scale  # the sign of a leaf must not depend on the base point
        return {e: Ratio(c, one) / Ratio(scale, one) for e, c in slots.items()}, top

    def _conjugate(self, polynomial: Any) -> Any | None:
        """The polynomial with one square root of the base point negated; None without one."""
        degrees = polynomial.degrees()
        for n, degree, _ in self.ring.relations:
            if n in self.varying and degree == 2 and degrees[n]:
                parts = coefficients(polynomial, n, self.ring.context)
                zero = self.ring.context.constant(0)
                return parts.get(0, zero) - parts.get(1, zero) * self.ring.gens[n]
        return None


def _carrier(p: Symbol, generators: Sequence[Expr]) -> Expr:
    """The only generator that holds p; p itself when there are several."""
    holding = [g for g in generators if g.has(p)]
    return holding[0] if len(holding) == 1 and isinstance(holding[0], sp.exp) else p


def _has_number(g: Expr) -> bool:
    """Whether a generator may be given a rational value at the base point."""
    return isinstance(g, (Symbol, sp.sin, sp.cos)) or (
        isinstance(g, sp.exp) and not isinstance(g.args[0], sp.log)
    )

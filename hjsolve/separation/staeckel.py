"""Separated equations of a group of coordinates that only separate together.

Freezing all coordinates but those of block B at a base point (c, a) turns
K(q, p) = ε into an equation in q_B, p_B alone: the leaf of B through that
point.  This is right for every separable K, also where taking off one
coordinate at a time fails (ellipsoidal coordinates).

The frozen equations hold values at the base point instead of constants a
physicist would write.  Made polynomial and normed, their coefficients, stacked
over all blocks, run through an affine space as the base point varies: its
direction V has one dimension less than there are blocks.  The reduced row
echelon form of V does not know the base point, and gives the separation
constants; what does not vary, reduced modulo V, is the rest of the equation.
Solving the linear system for the constants gives the first integrals; for a
natural Hamiltonian that is the inverse of Stäckel's matrix (Stäckel 1891;
citation from memory).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import sympy as sp
from sympy import Add, Expr, Mul, Symbol

from hjsolve.algebra.generators import NotRational, Ratio, coefficients, divide
from hjsolve.algebra.hyperbolic import in_hyperbolic_functions
from hjsolve.algebra.linear import (
    Column,
    Exponents,
    Slot,
    common,
    echelon,
    lcm,
    negated,
    solve,
    subtract,
    touches,
    uses,
)
from hjsolve.separation.freezing import Block, Frozen

BASE_POINTS = 4
"""Base points tried before a group is given up; one may be singular by chance."""


@dataclass(frozen=True, slots=True)
class Leaf:
    """Σ_k parts[k]·carrier^k = 0 for a block of one, monic; ``equation`` = 0 for any block.

    The carrier is the momentum, or its exponential where H knows only that.
    """

    block: Block
    parts: dict[int, Expr]
    equation: Expr
    carrier: Expr


@dataclass(frozen=True, slots=True)
class Leaves:
    """All leaves of a group, and each constant's first integral in terms of ε and α.

    The leaves are those of K = ε where all of ``valid`` are ≥ 0 (a root in K
    was squared away).
    """

    leaves: tuple[Leaf, ...]
    integrals: tuple[Expr, ...]
    valid: tuple[Expr, ...]


def leaves(
    k: Expr,
    epsilon: Symbol,
    blocks: Sequence[Block],
    momenta: Sequence[Symbol],
    constants: Sequence[Symbol],
    offset: int = 0,
) -> Leaves | None:
    """The leaves of k = epsilon over ``blocks``; None where this method has no answer.

    ``momenta`` are the constant momenta of ignorable coordinates in k;
    ``constants`` are the names for the len(blocks) − 1 new constants;
    ``offset`` chooses another base point.
    """
    for other in range(offset, offset + BASE_POINTS):
        try:
            return _Group(k, epsilon, blocks, momenta, 3 * other).solve(constants)
        except (NotRational, ArithmeticError):
            continue
    return None


def frozen_leaves(
    k: Expr,
    epsilon: Symbol,
    blocks: Sequence[Block],
    momenta: Sequence[Symbol],
    constants: Sequence[Symbol],
) -> tuple[Leaves, tuple[str, ...]] | None:
    """The leaves with momenta at the base point for constants, and what each constant is.

    Right for every separable k, but no form that anybody would publish.
    """
    for other in range(BASE_POINTS):
        try:
            return _Group(k, epsilon, blocks, momenta, 3 * other).as_frozen(constants)
        except (NotRational, ArithmeticError):
            continue
    return None


class _Group(Frozen):
    """The constants of a group and the leaves written with them."""

    def as_frozen(self, names: Sequence[Symbol]) -> tuple[Leaves, tuple[str, ...]]:
        """The frozen equations as they are."""
        polynomials = self.leaf_polynomials()
        kept = [p for p in self.values if p != self.eliminated]
        put: dict[Expr, Expr] = {
            self.values[p]: name for p, name in zip(kept, names, strict=True)
        } | self.at_base()
        found = []
        for n, polynomial in enumerate(polynomials):
            carrier = self.carriers[self.blocks[n].momenta[0]]
            parts = {
                e: self.ring.polynomial(c).xreplace(put)
                for e, c in coefficients(
                    polynomial, self.ring.index[carrier], self.ring.context
                ).items()
            }
            whole = self.ring.polynomial(polynomial).xreplace(put)
            found.append(Leaf(self.blocks[n], parts, whole, carrier))
        meanings = tuple(f"value of {self.carriers[p]} at a fixed reference point" for p in kept)
        return Leaves(tuple(found), (), self.shown), meanings

    def solve(self, names: Sequence[Symbol]) -> Leaves:
        slots: dict[Slot, Ratio] = {}
        tops = []
        for n, polynomial in enumerate(self.leaf_polynomials()):
            normed, top = self.normed(polynomial, n)
            tops.append(top)
            slots |= {(n, e): value for e, value in normed.items()}
        order = sorted(slots, key=lambda s: (s[0], tuple(-e for e in s[1])))
        for over in (self.varying | self.fixed, self.varying):
            # first with ε and α among the monomials, then among the coefficients
            try:
                columns = self._columns(slots, over)
            except NotRational:
                continue
            moving = [c for m, c in columns.items() if touches(m, self.varying)]
            basis = echelon(moving, order)
            if len(basis) == len(self.blocks) - 1:
                rest = {m: c for m, c in columns.items() if not touches(m, self.varying)}
                return self._assemble(basis, rest, order, names)
        raise NotRational("the leaves do not vary in the right number of directions")

    def _columns(
        self, slots: dict[Slot, Ratio], letters: frozenset[int]
    ) -> dict[Exponents, Column]:
        """Σ monomial(letters)·column: the stacked coefficients sorted by what varies."""
        columns: dict[Exponents, Column] = {}
        for slot, value in slots.items():
            if uses(value.denominator, letters):
                raise NotRational("a coefficient is not polynomial in the constants")
            below = Ratio(self.ring.context.constant(1), value.denominator)
            for monomial, c in self.split(value.numerator, letters).items():
                entry = Ratio(c, self.ring.context.constant(1)) * below
                columns.setdefault(monomial, {})[slot] = entry
        return columns

    def _assemble(
        self,
        basis: list[tuple[Slot, Column]],
        rest: dict[Exponents, Column],
        order: list[Slot],
        names: Sequence[Symbol],
    ) -> Leaves:
        for pivot, vector in basis:
            for column in rest.values():
                if pivot in column:
                    subtract(column, vector, column[pivot])
        entered = {
            slot[0] for m, c in rest.items() if m[self.ring.index[self.epsilon]] for slot in c
        }
        energy = self._linear_energy(rest)
        vectors = [self._scaled(vector, energy, entered, order) for _, vector in basis]
        for column in rest.values():
            self._shorten(column, vectors, entered)
        leaves = tuple(self._leaf(n, vectors, rest, names) for n in range(len(self.blocks)))
        return Leaves(leaves, tuple(self._integrals(vectors, rest, energy)), self.shown)

    def _linear_energy(self, rest: dict[Exponents, Column]) -> Column | None:
        """The column of ε where ε enters to the first degree only, else None."""
        at = self.ring.index[self.epsilon]
        touching = [m for m in rest if m[at]]
        if len(touching) == 1 and sum(touching[0]) == touching[0][at] == 1:
            return rest[touching[0]]
        return None

    def _scaled(
        self, vector: Column, energy: Column | None, entered: set[int], order: list[Slot]
    ) -> Column:
        """The vector in the size and sign that the literature gives its constant.

        Where the constant and ε enter one block alike the constant is an
        energy; else the vector is primitive.  The sign makes a constant that
        is a sum of squares positive.
        """
        ordered = [s for s in order if s in vector]
        if energy is not None:
            for n in {s[0] for s in vector} & {s[0] for s in energy}:
                scale = _proportion(energy, vector, n)
                if scale is not None:
                    first = ordered[0][0]
                    same_sign = -scale if n != first else scale
                    return {s: v * same_sign for s, v in vector.items()}
        below = self.ring.context.constant(1)
        for value in vector.values():
            below = lcm(below, value.denominator)
        one = self.ring.context.constant(1)
        scaled = {s: v * Ratio(below, one) for s, v in vector.items()}
        above = common([v.numerator for v in scaled.values()])
        scaled = {s: Ratio(divide(v.numerator, above), v.denominator) for s, v in scaled.items()}
        last = [s for s in ordered if s[0] == ordered[-1][0]]
        first_slot = next((s for s in ordered if s[0] not in entered), last[0])
        positive = scaled[first_slot].numerator.leading_coefficient() > 0
        return negated(scaled) if positive else scaled

    def _shorten(self, column: Column, vectors: list[Column], entered: set[int]) -> None:
        """Move a part that does not vary by multiples of the constants, where that shortens it."""
        for _ in range(2):
            for vector in vectors:
                shifts = [column[s] / v for s, v in vector.items() if s in column]
                best = _cost(column, entered)
                for shift in shifts:
                    moved = dict(column)
                    subtract(moved, vector, shift)
                    if _cost(moved, entered) < best:
                        best = _cost(moved, entered)
                        column.clear()
                        column.update(moved)

    def _leaf(
        self,
        n: int,
        vectors: list[Column],
        rest: dict[Exponents, Column],
        names: Sequence[Symbol],
    ) -> Leaf:
        ring, block = self.ring, self.blocks[n]
        carrier = self.carriers[block.momenta[0]]
        sources = [(Mul(*self._powers(m)), c) for m, c in rest.items()]
        sources += list(zip(names, vectors, strict=True))
        whole = Add(*(letter * ring.expression(self._value(c, n)) for letter, c in sources))
        if len(block.momenta) > 1:
            return Leaf(block, {}, whole, carrier)
        momentum = ring.index[carrier]
        by_power = [(letter, self._by_power(c, n, momentum)) for letter, c in sources]
        top = max(e for _, powers in by_power for e in powers)
        norm = next(powers[top] for _, powers in by_power if top in powers)
        parts: dict[int, Expr] = {top: sp.S.One}
        for letter, powers in by_power:
            for e, value in powers.items():
                if e != top:
                    written = Add.make_args(self._written(value / norm))
                    parts[e] = parts.get(e, sp.S.Zero) + Add(*(letter * w for w in written))
        opened = {k: in_hyperbolic_functions(c) for k, c in parts.items()}
        return Leaf(block, opened, whole, carrier)

    def _by_power(self, column: Column, n: int, momentum: int) -> dict[int, Ratio]:
        """The part of a column in block n by powers of its momentum."""
        powers: dict[int, Ratio] = {}
        one = self.ring.context.constant(1)
        for (owner, exponents), entry in column.items():
            if owner == n:
                own = tuple(0 if k == momentum else e for k, e in enumerate(exponents))
                piece = entry * Ratio(self.ring.context.from_dict({own: 1}), one)
                e = int(exponents[momentum])
                powers[e] = powers[e] + piece if e in powers else piece
        return powers

    def _powers(self, monomial: Exponents) -> list[Expr]:
        return [g ** int(e) for g, e in zip(self.ring.items, monomial, strict=True) if e]

    # ------------------------------------------------------ first integrals

    def _integrals(
        self, vectors: list[Column], rest: dict[Exponents, Column], energy: Column | None
    ) -> list[Expr]:
        """The constants as functions of q, p (and of ε where it is not linear)."""
        unknown = [*vectors, *([energy] if energy is not None else [])]
        rows = []
        for n in range(len(self.blocks)):
            known = self.ring.number(0)
            for monomial, column in rest.items():
                if column is not energy:
                    known = known + self._value(column, n, monomial)
            rows.append([self._value(u, n) for u in unknown] + [-known])
        if energy is None:
            rows = rows[: len(vectors)] if len(vectors) else []
            rows = [[self._with_energy(v) for v in row] for row in rows]
        solved = solve(rows, len(unknown))
        return [self._written(v) for v in solved[: len(vectors)]]

    def _with_energy(self, value: Ratio) -> Ratio:
        at = {self.ring.index[self.epsilon]: self.k}
        return self.substitute(value.numerator, at) / self.substitute(value.denominator, at)

    def _value(self, column: Column, n: int, monomial: Exponents | None = None) -> Ratio:
        """Σ entry·slot over the slots of block n, times ``monomial``."""
        total = self.ring.number(0)
        one = self.ring.context.constant(1)
        for (owner, exponents), entry in column.items():
            if owner == n:
                piece = self.ring.context.from_dict({exponents: 1})
                total = total + entry * Ratio(piece, one)
        if monomial is not None:
            total = total * Ratio(self.ring.context.from_dict({monomial: 1}), one)
        return total

    def _written(self, value: Ratio) -> Expr:
        """A first integral term by term where its denominator is one term."""
        if len(value.denominator) == 1:
            below = self.ring.polynomial(value.denominator)
            above = value.numerator.to_dict().items()
            return Add(*(self.ring.term(e, c) / below for e, c in above))
        return self.ring.expression(value)


def _proportion(energy: Column, vector: Column, n: int) -> Ratio | None:
    """energy/vector on block n where the two are proportional there, else None."""
    slots = {s for s in vector if s[0] == n}
    if slots != {s for s in energy if s[0] == n}:
        return None
    ratios = [energy[s] / vector[s] for s in slots]
    return ratios[0] if all((r - ratios[0]).is_zero() for r in ratios) else None


def _cost(column: Column, entered: set[int]) -> int:
    """Terms in a column; those in an equation without ε count double."""
    return sum(
        (len(v.numerator) + len(v.denominator) - 1) * (1 if s[0] in entered else 2)
        for s, v in column.items()
    )

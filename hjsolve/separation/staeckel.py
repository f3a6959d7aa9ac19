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
from itertools import count
from typing import Any

import sympy as sp
from sympy import Add, Dummy, Expr, Mul, Symbol

from hjsolve.algebra.generators import Generators, NotRational, Ratio, coefficients
from hjsolve.separation.momentum import clear_radicals

BASE_POINTS = 4
"""Base points tried before a group is given up; one may be singular by chance."""

Exponents = tuple[int, ...]
Slot = tuple[int, Exponents]
Column = dict[Slot, Ratio]

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


class _Group:
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

    def _leaf_polynomials(self) -> list[Any]:
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
                    return done
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

    def _own(self, n: int) -> frozenset[int]:
        return frozenset(k for k, g in enumerate(self.ring.items) if self._owner(g) == n)

    def _split(self, polynomial: Any, left: frozenset[int]) -> dict[Exponents, Any]:
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
        return _over(polynomial, _common(list(self._split(polynomial, left).values())))

    def _normed(self, polynomial: Any, n: int) -> tuple[dict[Exponents, Ratio], int]:
        """Slots of a leaf, normed so that its highest power of momentum does not vary."""
        own = self._own(n)
        moving = frozenset(self.ring.index[self.carriers[p]] for p in self.blocks[n].momenta)
        polynomial = self._primitive(self._primitive(polynomial, own), moving)
        for _ in range(3):
            slots = self._split(polynomial, own)
            top = max(sum(e[k] for k in moving) for e in slots)
            leading = [c for e, c in slots.items() if sum(e[k] for k in moving) == top]
            scale = _common(leading)
            conjugate = self._conjugate(scale)
            if conjugate is None:
                break
            one = self.ring.context.constant(1)
            polynomial = self.ring.reduce(Ratio(polynomial * conjugate, one)).numerator
            polynomial = self._primitive(self._primitive(polynomial, own), moving)
        if any(_uses(_over(c, scale), self.varying | self.fixed) for c in leading):
            raise NotRational("the highest power of momentum varies with the base point")
        if _uses(scale, self.varying):
            raise NotRational("the norm of a leaf varies with the base point")
        one = self.ring.context.constant(1)
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

    # ----------------------------------------------------------- constants

    def solve(self, names: Sequence[Symbol]) -> Leaves:
        slots: dict[Slot, Ratio] = {}
        tops = []
        for n, polynomial in enumerate(self._leaf_polynomials()):
            normed, top = self._normed(polynomial, n)
            tops.append(top)
            slots |= {(n, e): value for e, value in normed.items()}
        order = sorted(slots, key=lambda s: (s[0], tuple(-e for e in s[1])))
        for over in (self.varying | self.fixed, self.varying):
            # first with ε and α among the monomials, then among the coefficients
            try:
                columns = self._columns(slots, over)
            except NotRational:
                continue
            moving = [c for m, c in columns.items() if _touches(m, self.varying)]
            basis = _echelon(moving, order)
            if len(basis) == len(self.blocks) - 1:
                rest = {m: c for m, c in columns.items() if not _touches(m, self.varying)}
                return self._assemble(basis, rest, order, names)
        raise NotRational("the leaves do not vary in the right number of directions")

    def _columns(
        self, slots: dict[Slot, Ratio], letters: frozenset[int]
    ) -> dict[Exponents, Column]:
        """Σ monomial(letters)·column: the stacked coefficients sorted by what varies."""
        columns: dict[Exponents, Column] = {}
        for slot, value in slots.items():
            if _uses(value.denominator, letters):
                raise NotRational("a coefficient is not polynomial in the constants")
            below = Ratio(self.ring.context.constant(1), value.denominator)
            for monomial, c in self._split(value.numerator, letters).items():
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
                    _subtract(column, vector, column[pivot])
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
            below = _lcm(below, value.denominator)
        one = self.ring.context.constant(1)
        scaled = {s: v * Ratio(below, one) for s, v in vector.items()}
        above = _common([v.numerator for v in scaled.values()])
        scaled = {s: Ratio(_over(v.numerator, above), v.denominator) for s, v in scaled.items()}
        last = [s for s in ordered if s[0] == ordered[-1][0]]
        first_slot = next((s for s in ordered if s[0] not in entered), last[0])
        positive = scaled[first_slot].numerator.leading_coefficient() > 0
        return _negated(scaled) if positive else scaled

    def _shorten(self, column: Column, vectors: list[Column], entered: set[int]) -> None:
        """Move a part that does not vary by multiples of the constants, where that shortens it."""
        for _ in range(2):
            for vector in vectors:
                shifts = [column[s] / v for s, v in vector.items() if s in column]
                best = _cost(column, entered)
                for shift in shifts:
                    moved = dict(column)
                    _subtract(moved, vector, shift)
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
                    parts[e] = parts.get(e, sp.S.Zero) + letter * self._written(value / norm)
        opened = {k: sp.expand_mul(c, deep=False) for k, c in parts.items()}
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
        solved = _solve(rows, len(unknown))
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


# ------------------------------------------------------- small linear algebra


def _carrier(p: Symbol, generators: Sequence[Expr]) -> Expr:
    """The only generator that holds p; p itself when there are several."""
    holding = [g for g in generators if g.has(p)]
    return holding[0] if len(holding) == 1 and isinstance(holding[0], sp.exp) else p


def _has_number(g: Expr) -> bool:
    """Whether a generator may be given a rational value at the base point."""
    return isinstance(g, (Symbol, sp.sin, sp.cos)) or (
        isinstance(g, sp.exp) and not isinstance(g.args[0], sp.log)
    )


def _uses(polynomial: Any, letters: frozenset[int]) -> bool:
    return any(polynomial.degrees()[n] for n in letters)


def _touches(monomial: Exponents, letters: frozenset[int]) -> bool:
    return any(monomial[n] for n in letters)


def _common(polynomials: list[Any]) -> Any:
    common = polynomials[0]
    for other in polynomials[1:]:
        common = common.gcd(other)
    return common


def _over(polynomial: Any, divisor: Any) -> Any:
    quotient, left = divmod(polynomial, divisor)
    if not left.is_zero():
        raise ArithmeticError("inexact division of polynomials")
    return quotient


def _lcm(a: Any, b: Any) -> Any:
    return _over(a * b, a.gcd(b))


def _subtract(column: Column, vector: Column, times: Ratio) -> None:
    """Column −= times·vector, in place."""
    for slot, value in vector.items():
        new = column[slot] - value * times if slot in column else -(value * times)
        if new.is_zero():
            column.pop(slot, None)
        else:
            column[slot] = new


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


def _negated(column: Column) -> Column:
    return {s: -v for s, v in column.items()}


def _echelon(columns: list[Column], order: list[Slot]) -> list[tuple[Slot, Column]]:
    """The reduced row echelon form of the space the columns span, pivots by ``order``."""
    basis: list[tuple[Slot, Column]] = []
    left = [dict(c) for c in columns]
    for slot in order:
        chosen = next((c for c in left if slot in c), None)
        if chosen is None:
            continue
        left = [c for c in left if c is not chosen]
        pivot = chosen[slot]
        vector = {s: v / pivot for s, v in chosen.items()}
        for other in (*left, *(c for _, c in basis)):
            if slot in other:
                _subtract(other, vector, other[slot])
        basis.append((slot, vector))
    return basis


def _solve(rows: list[list[Ratio]], unknowns: int) -> list[Ratio]:
    """Gauss's elimination; as many independent rows as unknowns, else NotRational."""
    left = [list(r) for r in rows]
    done: list[list[Ratio]] = []
    for k in range(unknowns):
        chosen = min(
            (r for r in left if not r[k].is_zero()),
            key=lambda r: sum(len(v.numerator) for v in r),
            default=None,
        )
        if chosen is None:
            raise NotRational("the constants do not follow from the leaves")
        left = [r for r in left if r is not chosen]
        pivot = chosen[k]
        row = [v / pivot for v in chosen]
        for others in (left, done):
            for n, other in enumerate(others):
                if not other[k].is_zero():
                    times = other[k]
                    others[n] = [a - times * b for a, b in zip(other, row, strict=True)]
        done.append(row)
    return [row[-1] for row in done]

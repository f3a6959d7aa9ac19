"""K(q, p) = ε taken apart into one equation a block.

From outside in: a function with an inverse is undone, what does not move is
brought to the other side, a sum over groups of coordinates gives each group an
energy of its own, a product gives each a factor.  What is left holds several
blocks that only separate together and goes to ``staeckel``.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field

import sympy as sp
from sympy import Add, Dummy, Expr, Mul, Pow, Rational, Symbol

from hjsolve.algebra.generators import Generators, NotRational
from hjsolve.algebra.identity import vanish
from hjsolve.algebra.isolate import INVERSES, forgotten, inverse_power
from hjsolve.records import Truth
from hjsolve.separation.freezing import Block
from hjsolve.separation.momentum import Solved, from_carrier, solve_for
from hjsolve.separation.staeckel import frozen_leaves, leaves

EXPAND_OPERATIONS = 4000
"""A larger expression is not multiplied out in search of a sum."""


@dataclass(frozen=True, slots=True)
class NewConstant:
    """A separation constant under a provisional letter, and its first integral."""

    symbol: Symbol
    meaning: str
    integral: Expr | None


@dataclass(slots=True)
class Pieces:
    """What came of taking K apart."""

    solved: dict[Block, Solved] = field(default_factory=dict)
    equations: dict[Block, Expr] = field(default_factory=dict)
    constants: list[NewConstant] = field(default_factory=list)
    missing: list[Block] = field(default_factory=list)
    valid: list[Expr] = field(default_factory=list)
    frozen: bool = False


def decompose(
    k: Expr,
    value: Expr,
    blocks: Sequence[Block],
    momenta: Sequence[Symbol],
    groups: Sequence[frozenset[Symbol]],
) -> Pieces:
    """Every block's own equation, with the constants that were needed.

    ``momenta``: letters for the momenta of ignorable coordinates in k.
    ``groups``: coordinates over which k is known to be a sum (with ``momenta``
    constant), a hint for sums written in disguise.
    """
    pieces = Pieces()
    _Decomposer(pieces, momenta).run(k, value, list(blocks), list(groups))
    return pieces


class _Decomposer:
    def __init__(self, pieces: Pieces, momenta: Sequence[Symbol]) -> None:
        self.pieces = pieces
        self.momenta = tuple(momenta)

    def run(
        self, k: Expr, value: Expr, blocks: list[Block], groups: list[frozenset[Symbol]]
    ) -> None:
        if len(blocks) == 1:
            self._leaf(k, value, blocks[0])
            return
        moving = frozenset().union(*(b.symbols for b in blocks))
        if isinstance(k, Add) and len(_grouped(k, Add, blocks)) == 1:
            k = _factored(k)
        k, value = _strip(k, value, moving)
        undone = _undone(k, value)
        if undone is not None:
            self.pieces.valid.extend(forgotten(k, value))
            self.run(*undone, blocks, [])
            return
        for parts, kind in self._splits(k, blocks, groups):
            self._distribute(parts, kind, value)
            return
        self._together(k, value, blocks)

    # --------------------------------------------------------------- sums

    def _splits(
        self, k: Expr, blocks: list[Block], groups: list[frozenset[Symbol]]
    ) -> list[tuple[list[tuple[list[Block], Expr]], str]]:
        """The first way found to write k as a sum or a product over groups."""
        merged = _merged_exponentials(k)
        for form in (k, merged):
            for kind in (Add, Mul):
                if isinstance(form, kind):
                    parts = _grouped(form, kind, blocks)
                    if len(parts) > 1:
                        return [(parts, "sum" if kind is Add else "product")]
        if k.count_ops() <= EXPAND_OPERATIONS:
            opened = _opened(k)
            if isinstance(opened, Add):
                parts = _grouped(opened, Add, blocks)
                if len(parts) > 1:
                    return [(parts, "sum")]
        if len(groups) > 1:
            parts = _by_freezing(k, blocks, groups)
            if parts:
                return [(parts, "sum")]
        return []

    def _distribute(self, parts: list[tuple[list[Block], Expr]], kind: str, value: Expr) -> None:
        for members, part in parts[:-1]:
            names = ", ".join(q.name for b in members for q in b.coordinates)
            letter = Dummy("e", real=True)
            what = "energy of the motion in" if kind == "sum" else "value of the factor in"
            moving = frozenset().union(*(b.symbols for b in members))
            if kind == "product":
                factor, inner = part.as_independent(*moving, as_Add=False)
                value, part = value / factor, inner
            self.pieces.constants.append(NewConstant(letter, f"{what} {names}", part))
            value = value - letter if kind == "sum" else value / letter
            self.run(part, letter, members, [])
        self.run(parts[-1][1], value, parts[-1][0], [])

    # ------------------------------------------------------------- leaves

    def _leaf(self, k: Expr, value: Expr, block: Block) -> None:
        self.pieces.equations[block] = k - value
        if len(block.momenta) == 1:
            solved = solve_for(k, value, block.momenta[0])
            if solved is not None:
                self.pieces.solved[block] = solved
            else:
                self.pieces.missing.append(block)

    def _together(self, k: Expr, value: Expr, blocks: list[Block]) -> None:
        epsilon = Dummy("epsilon", real=True)
        letters = [Dummy(f"b{n}", real=True) for n in range(len(blocks) - 1)]
        found = leaves(k, epsilon, blocks, self.momenta, letters)
        if found is None:
            raw = frozen_leaves(k, epsilon, blocks, self.momenta, letters)
            if raw is None:
                self.pieces.missing.extend(blocks)
                return
            found, meanings = raw
            self.pieces.frozen = True
            new = [NewConstant(a, m, None) for a, m in zip(letters, meanings, strict=True)]
        else:
            integrals = [i.xreplace({epsilon: k}) for i in found.integrals]
            new = [
                NewConstant(a, "separation constant", i)
                for a, i in zip(letters, integrals, strict=True)
            ]
        put = {epsilon: value}
        self.pieces.constants.extend(new)
        self.pieces.valid.extend(v.xreplace(put) for v in found.valid)
        for leaf in found.leaves:
            self.pieces.equations[leaf.block] = leaf.equation.xreplace(put)
            if len(leaf.block.momenta) == 1:
                parts = {n: c.xreplace(put) for n, c in leaf.parts.items()}
                solved = from_carrier(parts, leaf.carrier, leaf.block.momenta[0])
                if solved is None:
                    self.pieces.missing.append(leaf.block)
                else:
                    self.pieces.solved[leaf.block] = solved


# ---------------------------------------------------------------- the forms


def _strip(k: Expr, value: Expr, moving: frozenset[Symbol]) -> tuple[Expr, Expr]:
    """Terms and factors that do not move, brought to the other side."""
    while True:
        if isinstance(k, Add):
            rest, inner = k.as_independent(*moving, as_Add=True)
            if rest == 0:
                return k, value
            k, value = inner, value - rest
        elif isinstance(k, Mul):
            factor, inner = k.as_independent(*moving, as_Add=False)
            if factor == 1:
                return k, value
            k, value = inner, value / factor
        else:
            return k, value


def _undone(k: Expr, value: Expr) -> tuple[Expr, Expr] | None:
    """K = f(inner) = value as (inner, f⁻¹(value)), where that loses no branch."""
    if isinstance(k, Pow) and isinstance(k.exp, Rational):
        one = k.exp.p % 2 or k.base.is_nonnegative
        return (k.base, inverse_power(value, k.exp)) if one else None
    if isinstance(k, Mul) and all(isinstance(f, (Pow, sp.exp)) for f in k.args):
        merged = _merged_exponentials(k)
        if isinstance(merged, sp.exp):
            return merged.args[0], sp.log(value)
    inverse = INVERSES.get(type(k))
    if inverse is not None:
        return k.args[0], inverse(value)
    return None


def _merged_exponentials(k: Expr) -> Expr:
    """exp(a)·exp(b) as exp(a + b)."""
    if not isinstance(k, Mul):
        return k
    exponents = [f.args[0] for f in k.args if isinstance(f, sp.exp)]
    if len(exponents) < 2:
        return k
    others = [f for f in k.args if not isinstance(f, sp.exp)]
    return Mul(*others, sp.exp(Add(*exponents)))


def _opened(k: Expr) -> Expr:
    """K multiplied out, logarithms of products opened."""
    try:
        opened = sp.expand(k, log=True, force=False)
        if isinstance(opened, sp.log) or opened.has(sp.log):
            opened = sp.expand_log(opened, force=True).replace(sp.log, _log_of_size)
    except (RecursionError, MemoryError):
        return k
    return opened


def _log_of_size(u: Expr) -> Expr:
    """Log |u|: log(xy) = log|x| + log|y| also where both are negative."""
    return sp.log(u if u.is_positive else sp.Abs(u))


def _factored(k: Expr) -> Expr:
    """K as a product of factors over the integers, where it is a fraction of generators."""
    try:
        ring = Generators([k])
        value = ring.ratio(k)
    except (NotRational, ArithmeticError):
        return k
    factors = value.numerator.factor()[1]
    if len(factors) < 2:
        return k
    return ring.factored(value.numerator) / ring.factored(value.denominator)


def _grouped(k: Expr, kind: type, blocks: list[Block]) -> list[tuple[list[Block], Expr]]:
    """The arguments of a sum or product, gathered so that no two groups share a block."""
    groups: list[tuple[set[int], list[Expr]]] = []
    loose: list[Expr] = []
    for part in k.args:
        touched = {n for n, b in enumerate(blocks) if part.free_symbols & b.symbols}
        if not touched:
            loose.append(part)
            continue
        joined, parts = set(touched), [part]
        for group in [g for g in groups if g[0] & touched]:
            joined |= group[0]
            parts = group[1] + parts
            groups.remove(group)
        groups.append((joined, parts))
    groups.sort(key=lambda g: min(g[0]))
    if groups and loose:
        groups[-1][1].extend(loose)
    return [([blocks[n] for n in sorted(members)], kind(*parts)) for members, parts in groups]


def _by_freezing(
    k: Expr, blocks: list[Block], groups: list[frozenset[Symbol]]
) -> list[tuple[list[Block], Expr]]:
    """K as a sum over ``groups``, each part k with all others frozen; proved before use."""
    base: dict[Symbol, Expr] = {}
    for b in blocks:
        for q, p in zip(b.coordinates, b.momenta, strict=True):
            base |= {q: sp.S.One, p: sp.S.Zero}
    parts = []
    for names in groups:
        members = [b for b in blocks if set(b.coordinates) <= names]
        if not members:
            continue
        own = frozenset().union(*(b.symbols for b in members))
        parts.append((members, k.xreplace({s: v for s, v in base.items() if s not in own})))
    whole = k.xreplace(base)
    if len(parts) < 2 or not whole.is_finite or any(e.has(sp.nan, sp.zoo) for _, e in parts):
        return []
    parts[-1] = (parts[-1][0], parts[-1][1] - (len(parts) - 1) * whole)
    parts = [(members, sp.expand(e) if e.count_ops() < 400 else e) for members, e in parts]
    residue = k - Add(*(e for _, e in parts))
    return parts if vanish([residue])[0].truth is Truth.PROVED else []

"""Linear algebra over exact fractions, small and sparse.

SymPy's own elimination asks its simplifier whether a pivot is zero, which took
seven seconds on the three relations of a symmetric top; here it takes
milliseconds.
"""

from __future__ import annotations

from collections.abc import Collection, Sequence
from typing import Any

import sympy as sp
from sympy import Expr, Symbol

from hjsolve.algebra.generators import Generators, NotRational, Ratio, divide

Exponents = tuple[int, ...]
Slot = tuple[int, Exponents]
Column = dict[Slot, Ratio]
"""A column's entries by (which equation, exponents of its own generators)."""


def uses(polynomial: Any, letters: frozenset[int]) -> bool:
    """Whether a polynomial holds one of the generators ``letters``."""
    return any(polynomial.degrees()[n] for n in letters)


def touches(monomial: Exponents, letters: frozenset[int]) -> bool:
    """Whether a monomial holds one of the generators ``letters``."""
    return any(monomial[n] for n in letters)


def common(polynomials: list[Any]) -> Any:
    """The greatest common divisor of polynomials."""
    common = polynomials[0]
    for other in polynomials[1:]:
        common = common.gcd(other)
    return common


def lcm(a: Any, b: Any) -> Any:
    """The least common multiple of two polynomials."""
    return divide(a * b, a.gcd(b))


def subtract(column: Column, vector: Column, times: Ratio) -> None:
    """Column −= times·vector, in place."""
    for slot, value in vector.items():
        new = column[slot] - value * times if slot in column else -(value * times)
        if new.is_zero():
            column.pop(slot, None)
        else:
            column[slot] = new


def negated(column: Column) -> Column:
    """The column with the other sign."""
    return {s: -v for s, v in column.items()}


def echelon(columns: list[Column], order: list[Slot]) -> list[tuple[Slot, Column]]:
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
                subtract(other, vector, other[slot])
        basis.append((slot, vector))
    return basis


def solve(rows: list[list[Ratio]], unknowns: int) -> list[Ratio]:
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
            raise NotRational("fewer independent equations than unknowns")
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


def constant_relations(
    rows: Sequence[Sequence[Expr]], moving: Collection[Symbol]
) -> list[list[Expr]]:
    """A basis of the vectors c, free of ``moving``, with Σ_k c_k rows[i][k] = 0 identically.

    Raises:
        NotRational: an entry has no form as a fraction of generators.
    """
    entries = [e for row in rows for e in row]
    ring = Generators(entries)
    own = frozenset(n for n, g in enumerate(ring.items) if g.free_symbols & set(moving))
    equations: list[Column] = []
    for row in rows:
        ratios = [ring.ratio(e) for e in row]
        below = ratios[0].denominator
        for r in ratios[1:]:
            below = lcm(below, r.denominator)
        split: dict[Exponents, Column] = {}
        for k, r in enumerate(ratios):
            whole = ring.reduce(Ratio(r.numerator * divide(below, r.denominator), below * 0 + 1))
            for exponents, c in whole.numerator.to_dict().items():
                key = tuple(e if n in own else 0 for n, e in enumerate(exponents))
                rest = tuple(0 if n in own else e for n, e in enumerate(exponents))
                piece = Ratio(ring.context.from_dict({rest: c}), whole.denominator)
                column = split.setdefault(key, {})
                column[k, ()] = column[k, ()] + piece if (k, ()) in column else piece
        equations += [{s: v for s, v in c.items() if not v.is_zero()} for c in split.values()]
    count = len(rows[0])
    basis = echelon(equations, [(k, ()) for k in range(count)])
    pivots = {slot[0] for slot, _ in basis}
    found = []
    for free in (k for k in range(count) if k not in pivots):
        vector = [sp.S.One if k == free else sp.S.Zero for k in range(count)]
        for slot, reduced in basis:
            if (free, ()) in reduced:
                vector[slot[0]] = ring.expression(-reduced[free, ()])
        found.append(vector)
    return found

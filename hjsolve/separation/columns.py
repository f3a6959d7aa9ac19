"""Sparse columns of fractions: the little linear algebra that the constants need."""

from __future__ import annotations

from typing import Any

from hjsolve.algebra.generators import NotRational, Ratio, divide

Exponents = tuple[int, ...]
Slot = tuple[int, Exponents]
Column = dict[Slot, Ratio]
"""A column's entries by (block, exponents of the block's generators)."""


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


def proportion(energy: Column, vector: Column, n: int) -> Ratio | None:
    """energy/vector on block n where the two are proportional there, else None."""
    slots = {s for s in vector if s[0] == n}
    if slots != {s for s in energy if s[0] == n}:
        return None
    ratios = [energy[s] / vector[s] for s in slots]
    return ratios[0] if all((r - ratios[0]).is_zero() for r in ratios) else None


def cost(column: Column, entered: set[int]) -> int:
    """Terms in a column; those in an equation without ε count double."""
    return sum(
        (len(v.numerator) + len(v.denominator) - 1) * (1 if s[0] in entered else 2)
        for s, v in column.items()
    )


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

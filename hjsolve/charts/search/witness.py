"""An upper bound on the number of tensors: the rank of the conditions at real points.

Every real point gives the rows of d(K dV) = 0 as balls.  Pivots that exclude 0
prove a rank there, so at most unknowns − rank tensors exist for generic values
of the parameters: a specialisation never has the larger rank.  This does not
use what ``tensors`` does, neither its generators nor its arithmetic.
"""

from __future__ import annotations

from collections.abc import Collection, Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from itertools import combinations
from typing import Any

from flint import arb
from sympy import Expr, Rational, Symbol

from hjsolve.algebra.balls import (
    BallJet,
    BallWalk,
    Imprecise,
    NotSupported,
    OutsideDomain,
    precision,
)
from hjsolve.algebra.graph import Graph, TooLarge
from hjsolve.algebra.sampling import Range, points, stand_ins

BITS = 400
EXTRA = 12
"""Points tried beyond the number of unknowns."""

Point = tuple[tuple[str, Rational], ...]


@dataclass(frozen=True, slots=True)
class Witness:
    """A proved rank and the points that prove it; ``reason`` when there is none."""

    rank: int
    points: tuple[Point, ...]
    reason: str = ""


def witness(
    x: Sequence[Symbol],
    fields: Sequence[Sequence[Expr]],
    potential: Expr,
    enough: int,
    ranges: Mapping[Symbol, Range] | None = None,
    functions: Collection[str] = (),
) -> Witness:
    """The rank proved at real points; stops at ``enough``.

    ``fields`` are those of ``tensors``, n² entries an unknown.
    """
    n = len(x)
    try:
        graph = Graph([potential, *(e for M in fields for e in M)])
    except (TooLarge, TypeError) as error:
        return Witness(0, (), f"the potential has no graph: {error}")
    stand = stand_ins(graph, functions)
    symbols = {node.payload for node in graph.nodes if node.op == "symbol"} | set(x)
    index = {q: k for k, q in enumerate(x)}
    pairs = [(i, j) for i in range(n) for j in range(i, n)]
    basis: list[tuple[int, list[Any]]] = []
    used: list[Point] = []
    fixed: Mapping[Symbol, Fraction] = {}
    met, most = 0, len(fields) + EXTRA
    for point in points(symbols, ranges or {}, 6 * most, seed=41):
        at = {**point, **{s: v for s, v in fixed.items() if s not in index}}
        try:
            with precision(BITS):
                jets = BallWalk(graph, at, stand, index, pairs).run()
                grown = [_extend(basis, row) for row in _rows(n, len(fields), jets)]
        except (Imprecise, OutsideDomain):
            continue
        except NotSupported as error:
            return Witness(0, (), f"the function {error} has no ball evaluation here")
        fixed = at
        met += 1
        if any(grown):
            used.append(
                tuple((s.name, Rational(v.numerator, v.denominator)) for s, v in at.items())
            )
        if len(basis) >= enough or met > most:
            break
    if not met:
        return Witness(0, (), "no point was found at which the potential has a real value")
    return Witness(len(basis), tuple(used))


def _rows(n: int, count: int, jets: Sequence[BallJet]) -> list[list[Any]]:
    """The conditions of all pairs at one point: one ball an unknown."""
    zero = arb(0)
    first = [jets[0].first.get(k, zero) for k in range(n)]
    second = {
        (i, j): jets[0].second.get((min(i, j), max(i, j)), zero) for i in range(n) for j in range(n)
    }
    rows: list[list[Any]] = []
    for i, j in combinations(range(n), 2):
        row = []
        for unknown in range(count):
            M = jets[1 + unknown * n * n :]
            total = zero
            for m in range(n):
                slope = M[n * j + m].first.get(i, zero) - M[n * i + m].first.get(j, zero)
                total += slope * first[m]
                total += M[n * j + m].value * second[m, i] - M[n * i + m].value * second[m, j]
            row.append(total)
        rows.append(row)
    return rows


def _extend(basis: list[tuple[int, list[Any]]], row: list[Any]) -> bool:
    """Reduce a row and add it where a pivot excludes 0."""
    for pivot, known in basis:
        factor = row[pivot]
        row = [
            arb(0) if k == pivot else a - factor * b
            for k, (a, b) in enumerate(zip(row, known, strict=True))
        ]
    sizes = [(abs(v).lower(), k) for k, v in enumerate(row) if not v.contains(0)]
    if not sizes:
        return False
    _, pivot = max(sizes, key=lambda s: float(s[0]))
    basis.append((pivot, [v / row[pivot] for v in row]))
    return True

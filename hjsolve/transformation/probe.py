"""Does a branch hold at a point?  Values in balls, real branches only."""

from __future__ import annotations

from collections.abc import Collection, Iterator, Mapping, Sequence
from fractions import Fraction

import sympy as sp
from sympy import Expr, Symbol

from hjsolve.algebra.balls import BallWalk, Imprecise, NotSupported, OutsideDomain, precision
from hjsolve.algebra.graph import Graph, TooLarge
from hjsolve.algebra.sampling import Range, points, stand_ins
from hjsolve.records import Domain

POINTS = 60
Point = dict[Symbol, Fraction]


class Probe:
    """Expressions evaluated together: residues to be 0, conditions to be ≥ 0, values."""

    def __init__(
        self,
        residues: Sequence[Expr],
        conditions: Sequence[Expr],
        values: Sequence[Expr],
        functions: Collection[str],
    ) -> None:
        """Compile; a formula that is too large or has no balls makes every point undecided."""
        self._counts = (len(residues), len(conditions))
        self._graph: Graph | None = None
        try:
            self._graph = Graph([*residues, *conditions, *values])
            self._stand = stand_ins(self._graph, functions)
        except (TooLarge, TypeError):
            self._graph = None

    def at(self, point: Point) -> list[float] | None:
        """The values there, or None where the branch does not hold, or is not real."""
        if self._graph is None:
            return None
        try:
            with precision(192):
                found = [j.value for j in BallWalk(self._graph, point, self._stand).run()]
        except (Imprecise, OutsideDomain, NotSupported, KeyError):
            return None
        zeros, conditions = self._counts
        tiny = 1e-30
        for value in found[:zeros]:
            if not value.contains(0) or float(value.rad()) > tiny:
                return None
        if any(value < 0 for value in found[zeros : zeros + conditions]):
            return None
        return [float(value.mid()) for value in found[zeros + conditions :]]


def positive_points(
    symbols: Collection[Symbol], new: Collection[Symbol], ranges: Mapping[Symbol, Range]
) -> Iterator[Point]:
    """Points at which all ``new`` variables are positive."""
    wanted = {}
    for s in new:
        lower, upper = ranges.get(s, (sp.S.Zero, sp.oo))
        wanted[s] = (lower, upper) if lower >= 0 else (sp.S.Zero, sp.oo)
    return points(symbols, {**ranges, **wanted}, POINTS)


def inside(value: float, domain: Domain) -> bool:
    """Whether a value lies in a domain; an angle may have any value."""
    if domain.kind in ("line", "angle"):
        return True
    lower, upper = (float(end) if end.is_number else None for end in (domain.lower, domain.upper))
    return (lower is None or value > lower) and (upper is None or value < upper)

"""The tensors that go with a potential, and the proof that there are no others."""

from __future__ import annotations

from collections.abc import Collection, Mapping, Sequence
from dataclasses import dataclass

from sympy import Expr, Symbol

from hjsolve.algebra.sampling import Range
from hjsolve.charts.search.sampled import sampled
from hjsolve.charts.search.tensors import Conditions, TooHard, without_sizes
from hjsolve.charts.search.witness import Witness, witness


@dataclass(frozen=True, slots=True)
class Solved:
    """``basis`` are solutions, ``seen`` bounds their number; ``reason`` is "" when they meet."""

    basis: list[list[Expr]]
    seen: Witness
    reason: str


def solved(
    x: Sequence[Symbol],
    fields: Sequence[Sequence[Expr]],
    potential: Expr,
    ranges: Mapping[Symbol, Range] | None = None,
    functions: Collection[str] = (),
) -> Solved:
    """Solve d(K dV) = 0 for the combinations of ``fields`` by two ways that must meet.

    Collecting comes first; sampling modulo a prime where that is too hard, or
    where the radicals of the potential hide relations that collecting does not know.
    """
    why = ""
    basis: list[list[Expr]] = []
    try:
        basis = Conditions(tuple(x), fields, potential).solve()
    except TooHard as error:
        why = str(error)
    count = len(fields)
    seen = witness(x, fields, potential, count - len(basis), ranges, functions)
    if seen.reason or seen.rank == count - len(basis):
        return Solved(basis, seen, seen.reason)
    try:
        other = sampled(x, fields, without_sizes(potential))
    except TooHard as error:
        why = f"{why}; {error}" if why else str(error)
    else:
        if len(other) == count - seen.rank:
            return Solved(other, seen, "")
        basis = max(basis, other, key=len)
    gap = (
        f"{len(basis)} tensors were found, but the rank proved at real points ({seen.rank} of "
        f"{count}) leaves room for {count - seen.rank}"
    )
    if without_sizes(potential) != potential:
        gap += "; where an absolute value keeps one sign more may separate"
    return Solved(basis, seen, f"{gap}; {why}" if why else gap)

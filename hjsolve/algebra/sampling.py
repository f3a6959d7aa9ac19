"""Real points with rational coordinates at which formulas are tried.

A symbol's range is what its assumptions say, or the domain its caller names.
Points are reproducible (seeded), small in height, and vary in scale so that a
formula with a narrow domain is met somewhere.
"""

from __future__ import annotations

import random
from collections.abc import Collection, Iterable, Iterator, Mapping
from fractions import Fraction

from sympy import Expr, Symbol, oo

from hjsolve.algebra.balls import Ridges
from hjsolve.algebra.graph import Graph

Range = tuple[Expr, Expr]

DEGREE = 7
"""Degree of the polynomials that stand in for arbitrary functions."""


def points(
    symbols: Iterable[Symbol], ranges: Mapping[Symbol, Range], tries: int, seed: int = 0
) -> Iterator[dict[Symbol, Fraction]]:
    """``tries`` points, each a rational value for every symbol.

    A range whose ends are not numbers is read as the whole line.
    """
    rng = random.Random(0x5EED + seed)
    ordered = sorted(set(symbols), key=lambda s: s.name)
    for attempt in range(tries):
        scale = Fraction(1) if attempt < 4 else Fraction(2) ** rng.randint(-4, 3)
        yield {s: _value(s, ranges.get(s), rng, scale) for s in ordered}


def _value(symbol: Symbol, given: Range | None, rng: random.Random, scale: Fraction) -> Fraction:
    height = Fraction(rng.randint(1, 60), rng.choice((7, 11, 13, 17, 19, 23)))
    size = scale * height / 2
    if given is not None:
        lower, upper = given
        if lower.is_finite and upper.is_finite and (upper - lower).is_number:
            # a rational strictly inside, whatever irrational the ends are
            low, high = float(lower), float(upper)
            share = rng.uniform(0.08, 0.92)
            return Fraction(low + (high - low) * share).limit_denominator(97)
        if lower.is_finite and lower.is_number and upper is oo:
            return Fraction(float(lower)).limit_denominator(1000) + size
    if symbol.is_positive or symbol.is_nonnegative:
        return size
    if symbol.is_negative or symbol.is_nonpositive:
        return -size
    return size if rng.random() < 0.6 else -size


def stand_ins(graph: Graph, names: Collection[str], seed: int = 0) -> dict[str, Ridges]:
    """A generic polynomial for every arbitrary function ``names`` that the graph calls."""
    rng = random.Random(0xF00D + seed)
    arity = {n.payload[0]: len(n.args) for n in graph.nodes if n.op == "call"}
    found = {}
    for name in sorted(set(names) & set(arity)):
        ridges = 1 if arity[name] == 1 else 3
        directions = tuple(
            tuple(Fraction(rng.randint(1, 9) * rng.choice((-1, 1)), 5) for _ in range(arity[name]))
            if arity[name] > 1
            else (Fraction(1),)
            for _ in range(ridges)
        )
        coefficients = tuple(
            tuple(Fraction(rng.randint(1, 30), 10 * (k + 1)) for k in range(DEGREE + 1))
            for _ in range(ridges)
        )
        found[name] = Ridges(directions, coefficients)
    return found

"""Is an expression identically zero?  Proved, refuted or undecided; nothing else.

Zero is claimed when the expression vanishes at random points modulo a random
prime with free generators (see ``modular``), non-zero when a ball excludes 0
at a real point.  Neither rests on a simplifier.
"""

from __future__ import annotations

from collections.abc import Collection, Iterator, Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

from sympy import Expr, Symbol

from hjsolve.algebra.balls import BallWalk, Imprecise, NotSupported, OutsideDomain, Ridges
from hjsolve.algebra.graph import Graph, TooLarge
from hjsolve.algebra.modular import NoPoints, Walk
from hjsolve.algebra.sampling import Range, points, stand_ins
from hjsolve.records import Truth

PRECISIONS = (128, 512, 2048, 8192)
"""Bits tried in turn at one point before the next point is tried."""

PRIME = float(2**30)
"""A lower bound on the primes of ``modular``."""


@dataclass(frozen=True, slots=True)
class Finding:
    """What is known of ``expression = 0``.

    ``bound`` is the probability of a false zero (method "modular"), or a size
    below which the value lies at every point tried (method "balls").
    """

    truth: Truth
    method: str
    bound: float | None = None
    point: tuple[tuple[Symbol, Fraction], ...] = ()
    enclosure: tuple[float, float] | None = None


def degree(graph: Graph) -> float:
    """A bound on the degree, in the generators, of the fraction a graph computes."""
    degrees: list[float] = []
    for node in graph.nodes:
        below = [degrees[a] for a in node.args]
        match node.op:
            case "number" | "pi":
                degrees.append(0.0)
            case "add" | "mul":
                degrees.append(sum(below))
            case "power":
                degrees.append(below[0] * abs(node.payload[0]))
            case "exp" | "sin" | "cos":
                degrees.append(sum(2.0 * abs(c[0]) for c in node.payload))
            case _:
                degrees.append(1.0 + sum(below))
    return max((degrees[r] for r in graph.roots), default=0.0)


def chance(graph: Graph, factor: float, count: int) -> float:
    """The probability that a fraction of ``factor`` times the degree vanishes by chance."""
    return float(min(1.0, factor * (degree(graph) + 1) / PRIME) ** count)


def vanish(
    expressions: Sequence[Expr],
    ranges: Mapping[Symbol, Range] | None = None,
    functions: Collection[str] = (),
    tries: int = 24,
) -> list[Finding]:
    """A Finding for each expression.

    ``ranges`` limits where a symbol lives, ``functions`` names the arbitrary
    functions.  With two or more independent roots a modular zero is checked
    once more in balls, because the branches drawn might all differ from the
    real one.
    """
    try:
        graph = Graph(expressions)
    except (TooLarge, TypeError):
        return [Finding(Truth.UNDECIDED, "graph too large")] * len(expressions)
    formal: list[bool] = [False] * len(expressions)
    count = 0
    try:
        values, count = Walk(graph).values()
        formal = [bool((v == 0).all()) for v in values]
    except NoPoints:
        pass
    bound = chance(graph, 1.0, count) if count else 1.0
    findings = []
    for expression, zero in zip(expressions, formal, strict=True):
        if zero and bound < 1e-20:
            findings.append(Finding(Truth.PROVED, "modular", bound))
        else:
            findings.append(refute(expression, ranges or {}, functions, tries))
    return findings


def refute(
    expression: Expr,
    ranges: Mapping[Symbol, Range],
    functions: Collection[str] = (),
    tries: int = 24,
) -> Finding:
    """Look for a real point at which a ball excludes 0.

    REFUTED with the point; UNDECIDED with the largest radius when every ball
    contained 0, without a bound when no point of the domain was found.
    """
    graph = Graph([expression])
    stand = stand_ins(graph, functions)
    symbols = [n.payload for n in graph.nodes if n.op == "symbol"]
    largest: float | None = None
    for point in points(symbols, ranges, tries):
        value = enclose(graph, point, stand)
        if value is None:
            continue
        if not value.contains(0):
            return Finding(Truth.REFUTED, "balls", None, tuple(point.items()), middle(value))
        if float(value.rad()) < 1e-25:
            size = float(abs(value).upper())
            largest = size if largest is None else max(largest, size)
    return Finding(Truth.UNDECIDED, "balls", largest)


def enclose(
    graph: Graph, point: Mapping[Symbol, Fraction], functions: Mapping[str, Ridges]
) -> Any | None:
    """The ball of a graph's only root, or None where it has no real value."""
    last = None
    try:
        for jets in attempts(BallWalk(graph, point, functions)):
            last = jets[0].value
            if not last.contains(0):
                return last
    except NotSupported:
        return None
    return last


def attempts(walk: BallWalk) -> Iterator[list[Any]]:
    """The walk at rising precision, skipping what is too wide; empty outside the domain.

    Raises NotSupported where a function has no ball evaluation.
    """
    for bits in PRECISIONS:
        try:
            yield walk.run(bits)
        except Imprecise:
            continue
        except OutsideDomain:
            return


def middle(value: Any) -> tuple[float, float]:
    """(midpoint, radius) of a ball, the radius rounded up to cover the midpoint's rounding."""
    mid = float(value.mid())
    return mid, float(value.rad()) * 1.000001 + abs(mid) * 2.3e-16

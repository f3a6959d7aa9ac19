"""Is an expression identically zero?  Proved, refuted or undecided; nothing else.

Zero is claimed when the expression vanishes at random points modulo a random
prime with free generators (see ``modular``), non-zero when a ball excludes 0
at a real point.  Neither rests on a simplifier.
"""

from __future__ import annotations

from collections.abc import Callable, Collection, Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from itertools import chain
from typing import Any

from sympy import Expr, Pow, Symbol, false, true
from sympy.core.relational import Relational

from hjsolve.algebra.balls import (
    BallJet,
    BallWalk,
    Imprecise,
    NotSupported,
    OutsideDomain,
    Ridges,
    precision,
)
from hjsolve.algebra.crowd import likely
from hjsolve.algebra.graph import Graph, TooLarge
from hjsolve.algebra.modular import NoPoints, Walk
from hjsolve.algebra.named import Names
from hjsolve.algebra.roots import unify_roots
from hjsolve.algebra.sampling import Range, points, stand_ins
from hjsolve.records import Truth

PRECISIONS = (128, 512, 2048, 8192)
"""Bits tried in turn at one point before the next point is tried."""

SAFE_CHANCE = 1e-20
"""A modular zero with a larger chance of being accidental is not called proved."""

ENOUGH, REFEREES = 8, 2
"""Points at which balls must contain 0 before an expression that is not formally
zero is given up, and before a formal zero with dependent roots is believed."""

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
    one = min(1.0, factor * (degree(graph) + 1) / PRIME)
    return float(max(one**count, 1e-300))


def vanish(
    expressions: Sequence[Expr],
    ranges: Mapping[Symbol, Range] | None = None,
    functions: Collection[str] = (),
    tries: int = 24,
    conditions: Sequence[Relational] = (),
    positive: Collection[Expr] = (),
    names: Names | None = None,
) -> list[Finding]:
    """A Finding for each expression.

    ``ranges`` limits where a symbol lives, ``conditions`` which points count,
    ``functions`` names the arbitrary functions, ``positive`` holds expressions
    known to be positive there; ``names`` are symbols that depend on others, some
    of which a formal zero has in their stead.  With two or more roots a modular
    zero is checked once more in balls, because the branches drawn might all
    differ from the real one.
    """
    findings = []
    freed: dict[Symbol, Expr] = {}
    if names is not None and any(e != 0 for e in expressions):
        freed = names.eliminated(_under_roots(expressions))
    for expression in expressions:
        free = expression.xreplace(freed)
        roots = _roots(free)
        finding = _formal(free)
        if finding is None and (positive or roots):
            finding = _formal(unify_roots(free, positive))
        if finding is None or len(roots) > 1:
            enough = ENOUGH if finding is None else REFEREES
            seen = refute(expression, ranges or {}, functions, tries, conditions, enough, names)
            if finding is None or seen.truth is Truth.REFUTED:
                finding = seen
        findings.append(finding)
    return findings


def _formal(expression: Expr) -> Finding | None:
    """The proof that an expression is zero, or None."""
    try:
        graph = Graph([expression])
        values, count = Walk(graph).values()
    except (TooLarge, TypeError, NoPoints):
        return None
    bound = chance(graph, 1.0, count)
    if bool((values[0] == 0).all()) and bound < SAFE_CHANCE:
        return Finding(Truth.PROVED, "modular", bound)
    return None


def _under_roots(expressions: Sequence[Expr]) -> set[Symbol]:
    return {s for e in expressions for base in _roots(e) for s in base.free_symbols}


def _roots(expression: Expr) -> set[Expr]:
    return {p.base for p in expression.atoms(Pow) if p.exp.is_Rational and p.exp.q % 2 == 0}


def refute(
    expression: Expr,
    ranges: Mapping[Symbol, Range],
    functions: Collection[str] = (),
    tries: int = 24,
    conditions: Sequence[Relational] = (),
    enough: int = 8,
    names: Names | None = None,
    places: Iterable[Mapping[Symbol, Fraction]] = (),
) -> Finding:
    """Look for a real point at which a ball excludes 0.

    ``places`` are points that are looked at after the first ``tries``.

    REFUTED with the point; UNDECIDED with the largest radius when the balls
    contained 0 at ``enough`` points (or at all that were found), without a
    bound when no point of the domain was found.
    """
    if any(c == false for c in conditions):
        return Finding(Truth.UNDECIDED, "balls")
    try:
        graph = Graph([expression])
        sides = Graph([c.rhs - c.lhs for c in conditions if c != true])
    except (TooLarge, TypeError):
        return Finding(Truth.UNDECIDED, "graph too large")
    stand = stand_ins(graph, functions)
    symbols = {n.payload for g in (graph, sides) for n in g.nodes if n.op == "symbol"}
    if names is not None:
        symbols = (symbols - names.symbols) | names.letters
    largest: float | None = None
    met = 0
    offered = (p for p in places if symbols <= p.keys())
    where = names.where if names is not None else ()
    crowd = likely(symbols, ranges, conditions, where, 2 * tries) if conditions or where else ()
    for drawn in chain(points(symbols, ranges, tries), offered, crowd):
        point = drawn if names is None else names.at(drawn)
        if point is None or (conditions and not _meets(sides, point)):
            continue
        value = enclose(graph, point, stand)
        if value is None:
            continue
        if not value.contains(0):
            return Finding(Truth.REFUTED, "balls", None, tuple(drawn.items()), middle(value))
        size = 0.0 if value.is_zero() else max(float(abs(value).upper()), 1e-300)
        largest = size if largest is None else max(largest, size)
        met += 1
        if met >= enough:
            break
    return Finding(Truth.UNDECIDED, "balls", largest)


def _meets(sides: Graph, point: Mapping[Symbol, Any]) -> bool:
    """Whether rhs − lhs is positive for every condition (equality does not count)."""
    try:
        with precision(128):
            return all(jet.value > 0 for jet in BallWalk(sides, point, {}).run())
    except (Imprecise, OutsideDomain, NotSupported):
        return False


def enclose(
    graph: Graph, point: Mapping[Symbol, Any], functions: Mapping[str, Ridges]
) -> Any | None:
    """The ball of a graph's only root, or None where it has no real value."""
    last = None
    try:
        for last in attempts(BallWalk(graph, point, functions), lambda jets: jets[0].value):
            if not last.contains(0):
                return last
    except NotSupported:
        return None
    return last


def attempts(walk: BallWalk, value_of: Callable[[list[BallJet]], Any]) -> Iterator[Any]:
    """``value_of`` the walk's jets at rising precision; empty outside the domain.

    The value is formed at the precision of the walk: a sum that cancels would
    lose at the default what the walk has gained.

    Raises NotSupported where a function has no ball evaluation.
    """
    for bits in PRECISIONS:
        try:
            with precision(bits):
                yield value_of(walk.run())
        except Imprecise:
            continue
        except OutsideDomain:
            return


def middle(value: Any) -> tuple[float, float]:
    """(midpoint, radius) of a ball, the radius rounded up to cover the midpoint's rounding."""
    mid = float(value.mid())
    return mid, max(float(value.rad()) * 1.000001 + abs(mid) * 2.3e-16, 5e-324)

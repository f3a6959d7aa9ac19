"""Poisson brackets and independence of many functions, without writing them out.

The gradients come from one walk of a shared graph; the bracket of a pair is a
sum of products of their entries.  Writing the brackets as expressions first
would cost minutes for the quadratic integrals of ellipsoidal coordinates.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from itertools import combinations
from typing import Any

import numpy as np
from flint import arb_mat
from sympy import Expr, Symbol

from hjsolve.algebra.balls import BallJet, BallWalk, NotSupported
from hjsolve.algebra.graph import Graph, TooLarge
from hjsolve.algebra.identity import Finding, attempts, chance, middle
from hjsolve.algebra.jets import Jet, JetWalk
from hjsolve.algebra.modular import Array, NoPoints, square_roots
from hjsolve.algebra.sampling import Range, points, stand_ins
from hjsolve.records import Hamiltonian, Truth

Gradient = Callable[[int, int], Any]
"""(function, variable) to a derivative; function −1 is H."""


def brackets(
    h: Hamiltonian,
    functions: Sequence[Expr],
    ranges: Mapping[Symbol, Range],
    time_momentum: Symbol | None = None,
    tries: int = 24,
) -> tuple[list[Finding], list[Finding]]:
    """({F_a, F_b} = 0 for all pairs, dF/dt = 0 for each), as findings.

    With ``time_momentum`` the functions live on the extended phase space: time
    is one more coordinate, and H + p_t the Hamiltonian.
    """
    more = () if time_momentum is None else (time_momentum,)
    coordinates = (*h.coordinates, *((h.time,) if more else ()))
    variables = (*coordinates, *h.momenta, *more, *(() if more else (h.time,)))
    n = len(coordinates)
    whole = h.expression if time_momentum is None else h.expression + time_momentum
    commuting = [_bracket(a, b, n) for a, b in combinations(range(len(functions)), 2)]
    conserved = [_bracket(a, -1, n) if more else _rate(a, n) for a in range(len(functions))]
    try:
        graph = Graph([*functions, whole])
    except (TooLarge, TypeError):
        unknown = Finding(Truth.UNDECIDED, "graph too large")
        return [unknown] * len(commuting), [unknown] * len(conserved)
    formal, count = _formal(graph, variables, [*commuting, *conserved])
    bound = chance(graph, 8.0, count) if count else 1.0
    sure = bound < 1e-20 and square_roots(graph) < 2
    stand = stand_ins(graph, h.functions)
    found = []
    for zero, value_of in zip(formal, [*commuting, *conserved], strict=True):
        if zero and sure:
            found.append(Finding(Truth.PROVED, "modular", bound))
            continue
        seen = _in_balls(graph, variables, value_of, ranges, stand, 2 if zero else tries)
        if zero and bound < 1e-20 and seen.truth is Truth.UNDECIDED:
            seen = Finding(Truth.PROVED, "modular", bound)
        found.append(seen)
    return found[: len(commuting)], found[len(commuting) :]


def independent(
    h: Hamiltonian, functions: Sequence[Expr], ranges: Mapping[Symbol, Range], tries: int = 60
) -> Finding:
    """Is det ∂F/∂p identically zero?  REFUTED with a point where a ball excludes 0."""
    try:
        graph = Graph(functions)
    except (TooLarge, TypeError):
        return Finding(Truth.UNDECIDED, "graph too large")
    n = len(h.momenta)
    index = {p: k for k, p in enumerate(h.momenta)}
    symbols = [node.payload for node in graph.nodes if node.op == "symbol"]
    stand = stand_ins(graph, h.functions)

    def determinant(jets: Sequence[BallJet]) -> Any:
        zero = jets[0].value * 0
        return arb_mat([[j.first.get(k, zero) for k in range(n)] for j in jets]).det()

    for point in points(symbols, ranges, tries):
        try:
            for value in attempts(BallWalk(graph, point, stand, index), determinant):
                if not value.contains(0):
                    return Finding(
                        Truth.REFUTED, "balls", None, tuple(point.items()), middle(value)
                    )
        except NotSupported:
            break
    return Finding(Truth.UNDECIDED, "balls")


def _bracket(a: int, b: int, n: int) -> Callable[[Gradient], Any]:
    return lambda d: sum(
        (d(a, i) * d(b, n + i) - d(a, n + i) * d(b, i) for i in range(1, n)),
        d(a, 0) * d(b, n) - d(a, n) * d(b, 0),
    )


def _rate(a: int, n: int) -> Callable[[Gradient], Any]:
    with_h = _bracket(a, -1, n)
    return lambda d: with_h(d) + d(a, 2 * n)


def _formal(
    graph: Graph, variables: Sequence[Symbol], values: Sequence[Callable[[Gradient], Any]]
) -> tuple[list[bool], int]:
    try:
        walk = JetWalk(graph, variables)
        jets, count = walk.jets()
    except NoPoints:
        return [False] * len(values), 0
    p = walk.field.p
    dense = [_dense(j, len(variables)) for j in jets]
    # object arrays: a sum of products of two residues passes 63 bits
    formal = []
    for value_of in values:
        value = value_of(lambda f, k: dense[f][:, k].astype(object)) % p
        formal.append(bool((value == 0).all()))
    return formal, count


def _dense(jet: Jet, size: int) -> Array:
    gradient = np.zeros((jet.value.size, size), dtype=np.int64)
    if jet.support:
        gradient[:, np.array(jet.support)] = jet.gradient
    return gradient


def _in_balls(
    graph: Graph,
    variables: Sequence[Symbol],
    value_of: Callable[[Gradient], Any],
    ranges: Mapping[Symbol, Range],
    stand: Mapping[str, Any],
    tries: int,
) -> Finding:
    index = {v: k for k, v in enumerate(variables)}
    symbols = [node.payload for node in graph.nodes if node.op == "symbol"]
    largest: float | None = None
    for point in points(symbols, ranges, tries):
        walk = BallWalk(graph, point, stand, index)
        value = None
        try:
            for value in attempts(walk, lambda jets: value_of(_reader(jets))):
                if not value.contains(0):
                    return Finding(
                        Truth.REFUTED, "balls", None, tuple(point.items()), middle(value)
                    )
        except NotSupported:
            return Finding(Truth.UNDECIDED, "balls", None)
        if value is not None:
            size = float(abs(value).upper())
            largest = size if largest is None else max(largest, size)
    return Finding(Truth.UNDECIDED, "balls", largest)


def _reader(jets: Sequence[BallJet]) -> Gradient:
    zero = jets[0].value * 0
    return lambda f, k: jets[f].first.get(k, zero)

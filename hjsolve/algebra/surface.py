"""The part of a graph that residues suffice for, down to what exact fractions are needed for."""

from __future__ import annotations

import math
from collections.abc import Mapping
from fractions import Fraction

from sympy import Symbol

from hjsolve.algebra.graph import Graph, Node

OPAQUE = ("pi", "log", "asin", "atan", "atan2", "lambert", "call", "delta")
"""Operations whose values are letters that nothing is known of."""


def surface(graph: Graph, at: int, aliases: Mapping[Symbol, int]) -> list[int]:
    """Nodes that are met from ``at`` down without going into leaves, children first."""
    seen: set[int] = set()
    stack = [at]
    while stack:
        k = stack.pop()
        if k in seen:
            continue
        seen.add(k)
        node = graph.nodes[k]
        if node.op == "symbol" and node.payload in aliases:
            stack.append(aliases[node.payload])
        elif not is_leaf(node):
            stack.extend(node.args)
    return sorted(seen)


def is_leaf(node: Node) -> bool:
    """Whether the value of a node is formed from exact fractions, not from its parts' residues."""
    if node.op in ("sin", "cos", "exp", "abs", "sign", *OPAQUE):
        return True
    return node.op == "power" and bool(node.payload[1] != 1)


def units(graph: Graph) -> dict[tuple[str, int], Fraction]:
    """For every monomial of an angle or exponent, of what its coefficients are multiples."""
    found: dict[tuple[str, int], Fraction] = {}
    for node in graph.nodes:
        if node.op in ("sin", "cos", "exp"):
            kind = "exp" if node.op == "exp" else "turn"
            for coefficient, monomial in zip(node.payload, node.args[1:], strict=True):
                a, b = found.get((kind, monomial), Fraction(0)), Fraction(*coefficient)
                common = math.gcd(a.numerator * b.denominator, b.numerator * a.denominator)
                found[kind, monomial] = Fraction(common, a.denominator * b.denominator)
    return found

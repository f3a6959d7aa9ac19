"""Functions on phase space by power series in balls: gradients, brackets, dependence."""

from __future__ import annotations

import random
from collections.abc import Mapping
from typing import Any

import flint
from formula import Node, evaluate, parse
from sympy import Expr

Values = Mapping[str, Any]
TINY = flint.arb(10) ** -60


def tree_of(expression: Expr, functions: list[str]) -> Node:
    """A SymPy expression as a tree of the tests' own reader, by way of its text."""
    return parse(str(expression), functions)


def number(text: str, values: Values) -> Any:
    """The value of a formula at a point, exact or in a ball."""
    return evaluate(parse(text, []), dict(values), {})


def gradient(tree: Node, names: list[str], point: Values, functions: Any) -> list[flint.acb]:
    """The partial derivatives of a tree by ``names`` at a point."""
    rows = []
    for name in names:
        varied = {**point, name: flint.acb_series([flint.acb(point[name]), 1, 0])}
        series = evaluate(tree, varied, functions)
        rows.append(flint.acb(series[1]) if isinstance(series, flint.acb_series) else flint.acb(0))
    return rows


def bracket(f: list[flint.acb], g: list[flint.acb]) -> flint.acb:
    """The Poisson bracket of two gradients ordered q1, p1, q2, p2, …"""
    pairs = range(0, len(f), 2)
    return sum((f[i] * g[i + 1] - f[i + 1] * g[i] for i in pairs), flint.acb(0))


def rank_is(rows: list[list[flint.acb]], rank: int, seed: int = 3) -> bool:
    """Whether the rows span exactly ``rank`` dimensions, by random projections."""
    return _independent(rows, rank, seed) and (
        len(rows) == rank or not _independent(rows, rank + 1, seed)
    )


def _independent(rows: list[list[flint.acb]], size: int, seed: int) -> bool:
    rng = random.Random(seed)
    left = flint.acb_mat(size, len(rows), [rng.randint(-9, 9) for _ in range(size * len(rows))])
    wide = len(rows[0])
    right = flint.acb_mat(wide, size, [rng.randint(-9, 9) for _ in range(size * wide)])
    matrix = left * flint.acb_mat(len(rows), wide, [x for row in rows for x in row]) * right
    determinant = matrix.det()
    if abs(determinant) > TINY:
        return True
    assert abs(determinant) < TINY, "undecided rank"
    return False

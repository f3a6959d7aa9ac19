"""The tensors once more, from random points modulo a prime.

For potentials whose conditions have too many terms to be collected.  Every
point draws the parameters anew, so that only tensors free of them are found;
rational numbers are reconstructed from one prime and each tensor is then
checked at fresh points modulo another, which proves it (Schwartz 1980; from
memory).  That there are no more is for ``witness`` to say.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from itertools import combinations
from typing import Any

from sympy import Expr, Rational, Symbol

from hjsolve.algebra.graph import Graph, TooLarge
from hjsolve.algebra.identity import SAFE_CHANCE, chance
from hjsolve.algebra.jets import Jet, JetWalk
from hjsolve.algebra.modular import NoPoints
from hjsolve.charts.search.tensors import TooHard

HEIGHT = 1 << 12
"""Numerators and denominators beyond this are not believed from one 31-bit prime."""


def sampled(
    x: Sequence[Symbol], fields: Sequence[Sequence[Expr]], potential: Expr
) -> list[list[Expr]]:
    """A basis of the tensors that hold for all parameters; raises TooHard."""
    try:
        graph = Graph([potential, *(e for M in fields for e in M)])
        rows, p, _ = conditions(graph, x, len(fields))
        basis = [[_rational(v, p) for v in vector] for vector in kernel(rows, len(fields), p)]
        rows, q, bound = conditions(graph, x, len(fields))
    except (TooLarge, TypeError, NoPoints) as error:
        raise TooHard(f"no points modulo a prime: {error}") from error
    if bound > SAFE_CHANCE:
        raise TooHard("the points modulo a prime prove too little")
    for vector in basis:
        residues = [int(v.p) * pow(int(v.q), -1, q) % q for v in vector]
        if any(sum(a * b for a, b in zip(row, residues, strict=True)) % q for row in rows):
            raise TooHard("tensors with coefficients of great height, or of the parameters")
    return [list(vector) for vector in basis]


def conditions(graph: Graph, x: Sequence[Symbol], count: int) -> tuple[list[list[int]], int, float]:
    """(rows of d(K dV) = 0 modulo p, p, the chance that a wrong tensor passes them)."""
    n = len(x)
    rows: list[list[int]] = []
    p, least = 0, 1.0
    walk = JetWalk(graph, x)
    while len(rows) < 2 * count + 8:
        jets, size = walk.jets()
        if p and walk.field.p != p:
            rows = []
        p = walk.field.p
        least = chance(graph, 8.0, size)
        rows += _at_points(jets, n, count, size, p)
    return rows, p, least


def _at_points(jets: Sequence[Jet], n: int, count: int, size: int, p: int) -> list[list[int]]:
    found = []
    dense = [_dense(jet, n, size) for jet in jets]
    for at in range(size):
        gradient, hessian = dense[0][1][at], dense[0][2][at]
        for i, j in combinations(range(n), 2):
            row = []
            for unknown in range(count):
                M = dense[1 + unknown * n * n :]
                total = 0
                for m in range(n):
                    slope = M[n * j + m][1][at][i] - M[n * i + m][1][at][j]
                    total += slope * gradient[m]
                    total += M[n * j + m][0][at] * hessian[m][i]
                    total -= M[n * i + m][0][at] * hessian[m][j]
                row.append(total % p)
            found.append(row)
    return found


def _dense(jet: Jet, n: int, size: int) -> tuple[list[int], list[list[int]], list[list[list[int]]]]:
    """Values, gradients and second derivatives in all n coordinates, as integers."""
    place = {k: a for a, k in enumerate(jet.support)}
    value, g, h = jet.value.tolist(), jet.gradient.tolist(), jet.hessian.tolist()
    gradient = [[g[k][place[i]] if i in place else 0 for i in range(n)] for k in range(size)]
    hessian = [
        [
            [h[k][place[i]][place[j]] if i in place and j in place else 0 for j in range(n)]
            for i in range(n)
        ]
        for k in range(size)
    ]
    return value, gradient, hessian


def kernel(rows: list[list[int]], n: int, p: int) -> list[list[int]]:
    """A basis of the vectors of n residues that all rows annihilate."""
    fixed: dict[int, list[int]] = {}
    for row in rows:
        for column, known in fixed.items():
            if row[column]:
                factor = row[column]
                row = [(a - factor * b) % p for a, b in zip(row, known, strict=True)]
        head = next((k for k, v in enumerate(row) if v), None)
        if head is None:
            continue
        inverse = pow(row[head], -1, p)
        row = [v * inverse % p for v in row]
        for column, known in fixed.items():
            factor = known[head]
            fixed[column] = [(a - factor * b) % p for a, b in zip(known, row, strict=True)]
        fixed[head] = row
    basis = []
    for free in (c for c in range(n) if c not in fixed):
        vector = [0] * n
        vector[free] = 1
        for c, known in fixed.items():
            vector[c] = -known[free] % p
        basis.append(vector)
    return basis


def _rational(residue: int, p: int) -> Any:
    """The fraction of small height that a residue stands for (Wang's algorithm; from memory)."""
    a, b, s, t = p, residue % p, 0, 1
    while b > HEIGHT:
        quotient = a // b
        a, b, s, t = b, a - quotient * b, t, s - quotient * t
    if t == 0 or abs(t) > HEIGHT or math.gcd(b, abs(t)) != 1:
        raise TooHard("tensors with coefficients of great height, or of the parameters")
    return Rational(b, t)

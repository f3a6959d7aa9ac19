"""Which coordinate's phase can be solved for when: the block structure of ∂p/∂α.

A coordinate whose relation contains no other is solved by itself; those that
share their relations (Stäckel coupling) form a block.
"""

from __future__ import annotations

from itertools import permutations

import sympy as sp

from hjsolve.motion.numbers.start import Compiled
from hjsolve.records import Separation


def pattern(separation: Separation, compiled: list[Compiled]) -> list[list[bool]]:
    """Whether ∂p_i/∂α_k is not identically zero, (coordinates, constants)."""
    alphas = [c.symbol for c in separation.constants]
    rows = []
    for c in compiled:
        p = c.equation.drift + sp.Symbol("s") * c.equation.root
        rows.append([p.has(a) for a in alphas])
    return rows


def blocks(present: list[list[bool]]) -> list[tuple[list[int], list[int]]]:
    """(coordinates, constants) of each block, in the order in which they can be solved.

    ``present`` is square: as many constants as coordinates.  Block b involves
    only its own coordinates and those of blocks before it.
    """
    n = len(present)
    match = _matching(present)
    if match is None:
        return [(list(range(n)), list(range(n)))]
    needs = [{j for j in range(n) if j != i and present[j][match[i]]} for i in range(n)]
    reach = [{i} | needs[i] for i in range(n)]
    for _ in range(n):
        for i in range(n):
            for j in tuple(reach[i]):
                reach[i] |= reach[j]
    found: list[list[int]] = []
    for i in range(n):
        component = sorted(j for j in reach[i] if i in reach[j])
        if component not in found:
            found.append(component)
    found.sort(key=lambda component: len(reach[component[0]]))
    return [(component, [match[i] for i in component]) for component in found]


def _matching(present: list[list[bool]]) -> list[int] | None:
    """A constant of its own for every coordinate."""
    n = len(present)
    if n <= 6:
        for order in permutations(range(n)):
            if all(present[i][order[i]] for i in range(n)):
                return list(order)
        return None
    taken: dict[int, int] = {}

    def place(i: int, seen: set[int]) -> bool:
        for k in range(n):
            if present[i][k] and k not in seen:
                seen.add(k)
                if k not in taken or place(taken[k], seen):
                    taken[k] = i
                    return True
        return False

    if not all(place(i, set()) for i in range(n)):
        return None
    back = {i: k for k, i in taken.items()}
    return [back[i] for i in range(n)]

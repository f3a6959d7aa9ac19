"""Several equations, as many unknowns: isolate and substitute, depth first.

In this order, because each step keeps the formulas shorter than the next: an
equation with one unknown; equations linear in as many unknowns; a pair that
gives the sine and the cosine of one angle (x = r cos θ, y = r sin θ gives
r² = x² + y² and θ = atan2(y, x)); one unknown in terms of the others, put into
the rest.  Every answer must be put back by the caller.
"""

from __future__ import annotations

import time
from collections.abc import Sequence
from dataclasses import dataclass
from itertools import combinations, permutations

import sympy as sp
from sympy import Dummy, Expr, Symbol

from hjsolve.algebra.budget import limit
from hjsolve.algebra.generators import Generators, NotRational
from hjsolve.algebra.linear import solve as gauss
from hjsolve.errors import OutOfTime
from hjsolve.transformation.tidy import (
    as_fraction,
    certainly_positive,
    derivative,
    hyperbolic_letters,
    in_sines,
    length,
    tidied,
)
from hjsolve.transformation.univariate import Root, roots

NODES = 60
"""Substitutions tried for one system."""

WIDTH = 6
"""Ways of eliminating one unknown that are tried before a branch is given up."""

ANSWERS = 8

NO_VALUE = (sp.nan, sp.zoo, sp.oo, -sp.oo, sp.I)


@dataclass(frozen=True, slots=True)
class Answer:
    """Values of the unknowns, right where every one of ``conditions`` is ≥ 0."""

    values: dict[Symbol, Expr]
    conditions: tuple[Expr, ...] = ()


@dataclass(slots=True)
class _Search:
    stop: float
    nodes: int = NODES
    last_resorts: int = 0


def solve(
    equations: Sequence[Expr], unknowns: Sequence[Symbol], seconds: float, last_resorts: int = 0
) -> list[Answer]:
    """The answers found within ``seconds``, up to ANSWERS; empty where no way leads to any.

    ``last_resorts`` is how many single equations may be handed to SymPy's solver.
    """
    try:
        with limit(seconds):
            plain = [_without_atan2(e, unknowns) for e in equations]
            state = _Search(time.monotonic() + seconds, NODES, last_resorts)
            found = _search(plain, tuple(unknowns), state)
            return [a for a in found if not any(v.has(*NO_VALUE) for v in a.values.values())][
                :ANSWERS
            ]
    except (OutOfTime, RecursionError):
        return []


def _without_atan2(e: Expr, unknowns: Sequence[Symbol]) -> Expr:
    """k·atan2(y, x) + rest = 0 as y cos g = x sin g with g = −rest/k, which has other roots too."""
    found = [f for f in e.atoms(sp.atan2) if f.free_symbols & set(unknowns)]
    if len(found) != 1:
        return e
    letter = Dummy("g", real=True)
    lettered = e.xreplace({found[0]: letter})
    factor = derivative(lettered, letter)
    if letter in factor.free_symbols or factor == 0:
        return e
    y, x = found[0].args
    turn = -lettered.xreplace({letter: sp.S.Zero}) / factor
    return y * sp.cos(turn) - x * sp.sin(turn)


def _search(equations: list[Expr], unknowns: tuple[Symbol, ...], state: _Search) -> list[Answer]:
    if not unknowns:
        return [Answer({})]
    left = [e for e in equations if e.free_symbols & set(unknowns)]
    if len(left) < len(unknowns) or state.nodes <= 0:
        return []
    state.nodes -= 1
    if time.monotonic() > state.stop:
        raise OutOfTime("the equations took too long")  # SymPy may have swallowed the signal
    for way in (_single, _linear, _angles, _eliminate):
        found = way(left, unknowns, state)
        if found:
            return found
    return []


def _present(e: Expr, unknowns: Sequence[Symbol]) -> list[Symbol]:
    return [u for u in unknowns if u in e.free_symbols]


def _put(equations: Sequence[Expr], values: dict[Symbol, Expr]) -> list[Expr]:
    out = []
    for e in equations:
        if e.free_symbols & set(values):
            e = _shorter(e.xreplace(values))
        out.append(e)
    return out


def _shorter(e: Expr) -> Expr:
    """The numerator where that is short: a common factor may hide the unknown."""
    plain = in_sines(e)
    fraction = as_fraction(tidied(plain))
    if fraction is None:
        return e
    above = sp.fraction(fraction)[0]
    return above if length(above) <= 2 * length(e) + 20 else e


def _follow(
    root: Root, u: Symbol, rest: list[Expr], unknowns: tuple[Symbol, ...], state: _Search
) -> list[Answer]:
    """The answers with u = root, which may hold the other unknowns."""
    others = tuple(v for v in unknowns if v != u)
    found = []
    for tail in _search(_put(rest, {u: root.value}), others, state):
        value = tidied(root.value.xreplace(tail.values))
        conditions = (*(c.xreplace(tail.values) for c in root.conditions), *tail.conditions)
        found.append(Answer({u: value, **tail.values}, conditions))
    return found


def _single(left: list[Expr], unknowns: tuple[Symbol, ...], state: _Search) -> list[Answer]:
    for e in sorted(left, key=length):
        present = _present(e, unknowns)
        if len(present) == 1:
            rest = [x for x in left if x is not e]
            found: list[Answer] = []
            state.last_resorts -= 1
            for root in roots(e, present[0], last_resort=state.last_resorts >= 0):
                found += _follow(root, present[0], rest, unknowns, state)
            if found:
                return found
    return []


def _linear(left: list[Expr], unknowns: tuple[Symbol, ...], state: _Search) -> list[Answer]:
    """As many equations as unknowns in them, all linear with known coefficients."""
    rows = []
    for e in left:
        row = _linear_row(e, unknowns)
        if row is not None:
            rows.append((e, row))
    for size in range(2, min(len(rows), len(unknowns)) + 1):
        for chosen in combinations(rows, size):
            present = [u for u in unknowns if any(u in row for _, row in chosen)]
            if len(present) != size:
                continue
            values = _solved([row for _, row in chosen], present)
            if values is None:
                continue
            used = [e for e, _ in chosen]
            rest = _put([e for e in left if e not in used], values)
            others = tuple(v for v in unknowns if v not in values)
            tails = _search(rest, others, state)
            if tails:
                return [
                    Answer({**{u: tidied(v) for u, v in values.items()}, **t.values}, t.conditions)
                    for t in tails
                ]
    return []


def _linear_row(e: Expr, unknowns: tuple[Symbol, ...]) -> dict[Symbol, Expr] | None:
    """Coefficients by unknown, and the rest under the symbol "1"; None where not linear."""
    present = _present(e, unknowns)
    row: dict[Symbol, Expr] = {}
    rest = e
    for u in present:
        slope = derivative(e, u)
        if slope.free_symbols & set(unknowns):
            slope = tidied(slope)
            if slope.free_symbols & set(unknowns):
                return None
        row[u] = slope
        rest = rest.xreplace({u: sp.S.Zero})
    if rest.has(sp.nan, sp.zoo):
        return None
    row[_ONE] = rest
    return row


_ONE = Dummy("one")


def _solved(rows: list[dict[Symbol, Expr]], unknowns: list[Symbol]) -> dict[Symbol, Expr] | None:
    table = [[row.get(u, sp.S.Zero) for u in unknowns] + [-row[_ONE]] for row in rows]
    there, back = hyperbolic_letters([entry for line in table for entry in line])
    table = [[entry.xreplace(there) for entry in line] for line in table]
    try:
        ring = Generators([entry for line in table for entry in line])
        ratios = [[ring.reduce(ring.ratio(entry)) for entry in line] for line in table]
        solved = [ring.expression(ring.reduce(r)) for r in gauss(ratios, len(unknowns))]
    except (NotRational, ArithmeticError, KeyError, TypeError):
        return None
    return {u: v.xreplace(back) for u, v in zip(unknowns, solved, strict=True)}


def _angles(left: list[Expr], unknowns: tuple[Symbol, ...], state: _Search) -> list[Answer]:
    """Two equations that give the sine and the cosine of one angle."""
    plain = [in_sines(e) for e in left]
    turns = {f.args[0] for e in plain for f in e.atoms(sp.sin, sp.cos)}
    turns = {g for g in turns if len(_present(g, unknowns)) == 1}
    for g in sorted(turns, key=sp.default_sort_key):
        (u,) = _present(g, unknowns)
        s, c = Dummy("s", real=True), Dummy("c", real=True)
        letters = {sp.sin(g): s, sp.cos(g): c}
        lettered = [e.xreplace(letters) for e in plain]
        pure = [k for k, e in enumerate(lettered) if e.has(s, c) and u not in e.free_symbols]
        for first, second in permutations(pure, 2):
            for sine, cosine in _sine_and_cosine(lettered[first], lettered[second], s, c):
                rest = [e for k, e in enumerate(lettered) if k not in (first, second)]
                rest = _put(rest, {s: sine, c: cosine})
                if any(u in e.free_symbols for e in rest):
                    continue
                circle = _shorter(sine**2 + cosine**2 - 1)
                others = tuple(v for v in unknowns if v != u)
                found = []
                for tail in _search([circle, *rest], others, state):
                    y, x = (v.xreplace(tail.values) for v in (sine, cosine))
                    for turn in roots(g - angle(y, x), u):
                        values = {u: turn.value, **tail.values}
                        found.append(Answer(values, tail.conditions))
                if found:
                    return found
    return []


def _sine_and_cosine(first: Expr, second: Expr, s: Symbol, c: Symbol) -> list[tuple[Expr, Expr]]:
    """(sine, cosine) from two equations: one after the other, or both linear."""
    for a, b in ((s, c), (c, s)):
        if a in first.free_symbols and b not in first.free_symbols:
            pairs = []
            for one in roots(first, a):
                for other in roots(_shorter(second.xreplace({a: one.value})), b):
                    pairs.append((one.value, other.value))
            return pairs if a is s else [(y, x) for x, y in pairs]
    rows = [_linear_row(e, (s, c)) for e in (first, second)]
    if rows[0] is None or rows[1] is None:
        return []
    solved = _solved([rows[0], rows[1]], [s, c])
    return [] if solved is None else [(solved[s], solved[c])]


def angle(y: Expr, x: Expr) -> Expr:
    """atan2(y, x) with the positive common factors of y and x left out."""
    ratio = as_fraction(tidied(y / x))
    if ratio is None:
        return sp.atan2(y, x)
    above, below = sp.fraction(ratio)
    factor = tidied(y / above) if above != 0 else tidied(x / below)
    if certainly_positive(factor):
        return sp.atan2(above, below)
    if certainly_positive(-factor):
        return sp.atan2(-above, -below)
    return sp.atan2(tidied(y), tidied(x))


def _eliminate(left: list[Expr], unknowns: tuple[Symbol, ...], state: _Search) -> list[Answer]:
    """One unknown in terms of the others, put into the rest."""
    options = []
    for e in left:
        present = _present(e, unknowns)
        for u in present:
            linear = not derivative(e, u).has(u)
            options.append((not linear, len(present), length(e), e.count(u), u.name, e, u))
    options.sort(key=lambda o: o[:5])
    for *_, e, u in options[:WIDTH]:
        rest = [x for x in left if x is not e]
        found: list[Answer] = []
        for root in roots(e, u, depth=1):
            found += _follow(root, u, rest, unknowns, state)
        if found:
            return found
    return []

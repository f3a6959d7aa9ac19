"""The names an answer introduces, in numbers: roots of polynomials and abbreviations."""

from __future__ import annotations

from collections.abc import Collection, Mapping, Sequence
from fractions import Fraction
from itertools import combinations_with_replacement, pairwise
from typing import Any

import numpy as np
import sympy as sp
from flint import arb, ctx
from sympy import Expr, Symbol

from hjsolve.algebra.balls import BallWalk, Imprecise, OutsideDomain, precision
from hjsolve.algebra.graph import Graph
from hjsolve.records import Definition

MARGIN = 1e-5
"""Roots closer than this, relative to their size, are not told apart at a point."""

START_BITS = 96


class RootBall:
    """A real root of a polynomial at a point, as a ball at the working precision."""

    def __init__(self, coefficients: Graph, point: Mapping[Symbol, Any], start: float) -> None:
        self._walk = BallWalk(coefficients, point, {})
        self._start = start
        self._known: dict[int, Any] = {}

    def __float__(self) -> float:
        return self._start

    def __call__(self) -> Any:
        """The ball; raises Imprecise where Newton's method does not settle on a simple root."""
        bits = int(ctx.prec)
        if bits not in self._known:
            self._known[bits] = self._refined(bits)
        return self._known[bits]

    def _refined(self, bits: int) -> Any:
        try:
            ctx.prec = bits + 64
            c = [jet.value for jet in self._walk.run()]

            def value(x: Any) -> tuple[Any, Any]:
                p, slope = arb(0), arb(0)
                for a in reversed(c):
                    slope = slope * x + p
                    p = p * x + a
                return p, slope

            x = arb(self._start)
            for _ in range(12):
                p, slope = value(x)
                x = (x - p / slope).mid()
            radius = (abs(x) + arb(2) ** -60) * arb(2) ** (-bits - 16)
            left, right = value(x - radius)[0], value(x + radius)[0]
            if not left * right < 0:
                raise Imprecise
            if abs(float(x) - self._start) > MARGIN * (abs(self._start) + 1e-30):
                raise Imprecise
            return x + arb(0, 1) * radius
        finally:
            ctx.prec = bits


class DefinedBall:
    """A defined name at a point, as a ball at the working precision."""

    def __init__(self, definition: Graph, point: Mapping[Symbol, Any]) -> None:
        self._walk = BallWalk(definition, point, {})
        self._known: dict[int, Any] = {}

    def __float__(self) -> float:
        with precision(96):
            return float(self().mid())

    def __call__(self) -> Any:
        """The ball; raises Imprecise, OutsideDomain."""
        bits = int(ctx.prec)
        if bits not in self._known:
            self._known[bits] = self._walk.run()[0].value
        return self._known[bits]


class Names:
    """The names of an answer, to be valued at points; built once for many points."""

    def __init__(self, where: Sequence[Definition]) -> None:
        self.where = tuple(where)
        self.symbols = frozenset(d.symbol for d in where)
        self._graphs = [
            Graph([d.definition] if d.definition is not None else _coefficients(d)) for d in where
        ]
        self._eliminated: dict[frozenset[Symbol], dict[Symbol, Expr]] = {}

    @property
    def held(self) -> frozenset[Symbol]:
        """The names and their letters: what no other letter may stand for."""
        return self.symbols | self.letters

    @property
    def letters(self) -> frozenset[Symbol]:
        """The symbols besides the names that their values depend on."""
        found: set[Symbol] = set()
        for d in self.where:
            for e in (d.definition, d.root_of):
                found |= e.free_symbols if e is not None else set()
        return frozenset(found - self.symbols - {d.unknown for d in self.where})

    def at(self, point: Mapping[Symbol, Fraction]) -> dict[Symbol, Any] | None:
        """The point with a ball for each name; None where one has no real value there.

        None also where two roots are too close to be told apart, or where a
        name is free (a reference point): it then has no value of its own.
        """
        known: dict[Symbol, Any] = dict(point)
        roots: dict[Expr, list[float] | None] = {}
        try:
            for d, graph in zip(self.where, self._graphs, strict=True):
                if d.definition is not None:
                    known[d.symbol] = DefinedBall(graph, known)
                    float(known[d.symbol])
                elif d.root_of is not None and d.index is not None:
                    if d.root_of not in roots:
                        roots[d.root_of] = _real_roots(graph, known)
                    found = roots[d.root_of]
                    if found is None or len(found) < d.index:
                        return None
                    known[d.symbol] = RootBall(graph, known, found[d.index - 1])
                else:
                    return None
        except (Imprecise, OutsideDomain):
            return None
        return known

    def eliminated(self, kept: Collection[Symbol] = ()) -> dict[Symbol, Expr]:
        """Letters as rational functions of the roots: what makes an identity in both formal.

        The divided differences P(e_1), P[e_1, e_2], … of the polynomial that
        defines distinct roots vanish; each is solved for a letter that it holds
        linearly (Vieta's relations when all roots have names), not one of ``kept``
        where another will do.  Names with a definition are written out.
        """
        key = frozenset(kept) & self.letters
        if key not in self._eliminated:
            self._eliminated[key] = self._solved(key)
        return self._eliminated[key]

    def _solved(self, kept: frozenset[Symbol]) -> dict[Symbol, Expr]:
        put: dict[Symbol, Expr] = {}
        differences: dict[Expr, tuple[Expr, ...]] = {}
        for d in self.where:
            if d.root_of is None or d.unknown is None:
                continue
            p, at = differences.get(d.root_of, (d.root_of,)), d.symbol
            equation = p[-1].subs(d.unknown, at)
            quotient = sp.quo(sp.Poly(p[-1], d.unknown), sp.Poly(d.unknown - at, d.unknown))
            differences[d.root_of] = (*p, quotient.as_expr())
            last = (*kept, *self.symbols)
            found = _linear(sp.numer(sp.together(equation.xreplace(put))), last)
            if found is not None:
                letter, value = found
                put = {k: v.xreplace({letter: value}) for k, v in put.items()} | {letter: value}
        for d in self.where:
            if d.definition is not None:
                put[d.symbol] = d.definition.xreplace(put)
        return put


def divided_differences(
    definitions: Sequence[Definition],
) -> tuple[list[Expr], list[tuple[Symbol, Symbol]]]:
    """The relations of the named roots, and the pairs (smaller, larger) among them.

    P[e_1, …, e_k] = Σ_j c_j h_{j−k+1}(e_1, …, e_k) with the complete symmetric polynomials h.
    Raises ValueError for two names of one root.
    """
    families: dict[tuple[Expr, Symbol], list[Definition]] = {}
    for d in definitions:
        if d.root_of is not None and d.unknown is not None:
            families.setdefault((d.root_of, d.unknown), []).append(d)
    relations, order = [], []
    for (polynomial, unknown), members in families.items():
        members.sort(key=lambda d: d.index or 0)
        letters = [d.symbol for d in members]
        order += [(a, b) for i, a in enumerate(letters) for b in letters[i + 1 :]]
        c = sp.Poly(polynomial, unknown).all_coeffs()[::-1]
        if len({d.index for d in members} & set(range(1, len(c)))) < len(members):
            raise ValueError("two names for one root, or a root that there is not")
        for k in range(1, len(letters) + 1):
            relations.append(
                sum((x * _complete(letters[:k], j - k + 1) for j, x in enumerate(c)), sp.S.Zero)
            )
    return relations, order


def _complete(letters: Sequence[Symbol], degree: int) -> Expr:
    if degree < 0:
        return sp.S.Zero
    return sp.Add(*(sp.Mul(*c) for c in combinations_with_replacement(letters, degree)))


def _linear(equation: Expr, last: Sequence[Symbol]) -> tuple[Symbol, Expr] | None:
    """A letter that an equation holds linearly, and its shortest value; one of ``last`` if last."""
    found = []
    for letter in sorted(equation.free_symbols, key=lambda s: s.name):
        if equation.is_polynomial(letter) and sp.degree(equation, letter) == 1:
            b, a = (sp.Poly(equation, letter).coeff_monomial(letter**n) for n in (0, 1))
            found.append((letter, -b / a))
    return min(found, key=lambda f: (f[0] in last, f[1].count_ops()), default=None)


def _coefficients(d: Definition) -> list[Expr]:
    """Of the polynomial that defines a name, the lowest first; empty for a free name."""
    if d.root_of is None:
        return []
    return list(reversed(sp.Poly(d.root_of, d.unknown).all_coeffs()))


def _real_roots(coefficients: Graph, point: Mapping[Symbol, Any]) -> list[float] | None:
    """The real roots in ascending order; None where not all are well apart."""
    with precision(START_BITS):
        numbers = [float(j.value.mid()) for j in BallWalk(coefficients, point, {}).run()]
    found = np.roots(np.array(numbers[::-1]))
    if len(found) != len(numbers) - 1 or not np.all(np.isfinite(found)):
        return None
    near = MARGIN * (float(np.max(np.abs(found))) + 1e-300)
    reals = sorted(float(z.real) for z in found if abs(z.imag) < near / 100)
    if any(near / 100 <= abs(z.imag) < near for z in found):
        return None
    if any(b - a < near for a, b in pairwise(reals)):
        return None
    return reals

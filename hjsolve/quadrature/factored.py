"""A cubic or quartic with its real roots in order: explicit, or named.

A linear factor gives its root, a quadratic one its two by the square root; the
roots of an irreducible cubic or quartic are names, e_q_1 < e_q_2 < …, defined as
the real roots of that factor in ascending order.  Complex pairs b ± ia follow
from the real roots by Vieta; of two pairs that no factor separates by the
positive root of the resolvent (Euler 1770; from memory).
"""

from __future__ import annotations

import itertools
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
from sympy import Expr, Lt, S, Symbol, sqrt
from sympy.core.relational import Relational

from hjsolve.algebra.graph import Graph
from hjsolve.algebra.named import MARGIN, Names, RootBall
from hjsolve.quadrature import univariate as uv
from hjsolve.quadrature.dress import Dress
from hjsolve.quadrature.points import Floats, Sample, floats
from hjsolve.quadrature.ratios import Ratio, degree, factors
from hjsolve.quadrature.signs import Signs
from hjsolve.records import Definition

LONG = 8
"""A root of a quadratic factor with more operations gets a name."""


class Unclear(Exception):
    """A point lies too close to the border of a pattern."""


@dataclass(frozen=True)
class Mark:
    """A root or a pole: what it is called in a pattern, its expression, its value."""

    key: tuple[Any, ...]
    expression: Expr
    value: float


@dataclass(frozen=True)
class Pair:
    """A pair of complex roots ``real`` ± i ``imaginary``."""

    key: tuple[Any, ...]
    real: Expr
    square: Expr
    """The square of the imaginary part."""

    value: float
    """Of the real part."""


@dataclass(frozen=True)
class Layout:
    """The roots at one point, real ones in order; ``conditions`` of their being so."""

    reals: tuple[Mark, ...]
    pairs: tuple[Pair, ...]
    conditions: tuple[Relational, ...]
    names: tuple[Definition, ...]
    starts: tuple[tuple[Symbol, Graph, float], ...]
    """For each named root the coefficients of its polynomial and its value."""

    def balls(self, point: Mapping[Symbol, Any]) -> dict[Symbol, RootBall]:
        """The named roots at the point."""
        return {s: RootBall(c, point, value) for s, c, value in self.starts}

    @property
    def key(self) -> tuple[Any, ...]:
        """Equal for points of one pattern."""
        return (*(m.key for m in self.reals), *(p.key for p in self.pairs))


@dataclass(frozen=True)
class Factor:
    """An irreducible factor over the constants, coefficients lowest first, written."""

    coefficients: tuple[Expr, ...]

    @property
    def degree(self) -> int:
        """The degree in u."""
        return len(self.coefficients) - 1


@dataclass(frozen=True)
class Shape:
    """What a factor with a given number of real roots contributes, apart from their values."""

    reals: tuple[tuple[tuple[Any, ...], Expr], ...] = ()
    """Key and expression of each."""

    pairs: tuple[tuple[tuple[Any, ...], Expr, Expr], ...] = ()
    """Key, real part and square of the imaginary part of each."""

    conditions: tuple[Relational, ...] = ()
    names: tuple[Definition, ...] = ()
    polynomial: Graph | None = None
    """The coefficients of that of which the names are roots."""


class Factored:
    """The factors of P with what is needed to lay out its roots at a point.

    A root without closed form is defined as one of a polynomial in ``unknown``.
    """

    def __init__(
        self,
        radicand: Any,
        signs: Signs,
        dress: Dress,
        stem: str,
        unknown: Symbol,
        named: bool = True,
    ) -> None:
        ring, self.named = signs.ring, named
        self.stem, self.unknown = stem, unknown
        self.factors: list[Factor] = []
        for factor, _ in factors(radicand)[1]:
            if degree(factor) > 0:
                c = uv.from_flint(ring, factor)
                self.factors.append(Factor(tuple(_written(x, dress) for x in c)))
        self._graph = Graph([c for f in self.factors for c in f.coefficients])
        self._shapes: dict[tuple[int, int], Shape] = {}
        self._orders: dict[tuple[Expr, Expr], Relational] = {}

    def coefficients(self, columns: dict[Symbol, Floats]) -> Floats:
        """The coefficients of all factors, a row for each of the points."""
        found = floats(self._graph, columns)
        return np.array(found).reshape(len(found), len(next(iter(columns.values())))).T

    def layout(self, row: Floats) -> Layout:
        """The roots at a point from its ``coefficients``; raises Unclear near a border."""
        numbers = row.tolist()
        reals: list[Mark] = []
        pairs: list[Pair] = []
        conditions: list[Relational] = []
        names: list[Definition] = []
        starts: list[tuple[Symbol, Graph, float]] = []
        at = 0
        for i, f in enumerate(self.factors):
            c = numbers[at : at + f.degree + 1]
            at += f.degree + 1
            real = _real_roots(c, f.degree)
            shape = self._shape(i, len(real))
            reals += [Mark(k, e, x) for (k, e), x in zip(shape.reals, real, strict=True)]
            middles = [-c[1] / (2 * c[2])] if f.degree == 2 else [1.0, -1.0]
            pairs += [Pair(*p, x) for p, x in zip(shape.pairs, middles, strict=False)]
            conditions += shape.conditions
            names += shape.names
            if shape.polynomial is not None:
                roots = real or [_resolvent_root(c)]
                named = zip(shape.names, roots, strict=True)
                starts += [(d.symbol, shape.polynomial, x) for d, x in named]
        reals.sort(key=lambda m: m.value)
        for a, b in itertools.pairwise(reals):
            if b.value - a.value < MARGIN * (abs(a.value) + abs(b.value)):
                raise Unclear
            if a.key[0] != "named" or a.key[:2] != b.key[:2]:
                conditions.append(self._order(a.expression, b.expression))
        pairs.sort(key=lambda p: -p.value)
        if len(pairs) == 2:
            conditions.append(self._order(pairs[1].real, pairs[0].real))
        pairs_, order = tuple(pairs), tuple(conditions)
        return Layout(tuple(reals), pairs_, order, tuple(names), tuple(starts))

    def _order(self, a: Expr, b: Expr) -> Relational:
        if (a, b) not in self._orders:
            self._orders[a, b] = Lt(a, b)
        return self._orders[a, b]

    def _shape(self, i: int, count: int) -> Shape:
        """That of the i-th factor with so many real roots, worked out once; raises Unclear."""
        if (i, count) not in self._shapes:
            f = self.factors[i]
            if f.degree == 1:
                c = f.coefficients
                shape = Shape(((("line", i), -c[0] / c[1]),))
            elif f.degree == 2:
                shape = self._quadratic(i, f, count)
            elif not count and f.degree == 4:
                shape = self._resolved(i, f)
            else:
                shape = self._with_names(i, f, count)
            self._shapes[i, count] = shape
        return self._shapes[i, count]

    def _quadratic(self, i: int, f: Factor, count: int) -> Shape:
        c = f.coefficients
        disc = c[1] ** 2 - 4 * c[0] * c[2]
        middle = -c[1] / (2 * c[2])
        if not count:
            pair = ("quadratic", i), middle, -disc / (4 * c[2] ** 2)
            return Shape(pairs=(pair,), conditions=(Lt(c[1] ** 2, 4 * c[0] * c[2]),))
        half = sqrt(disc / c[2] ** 2) / 2
        reals, names = [], []
        for k, sign in enumerate((-1, 1), start=1):
            e = middle + sign * half
            if self.named and e.count_ops() > LONG:
                symbol = Symbol(f"{self.stem}_{'ab'[i % 2]}{k}", real=True)
                names.append(Definition(symbol, definition=e))
                e = symbol
            reals.append((("root", i, k), e))
        return Shape(tuple(reals), (), (Lt(4 * c[0] * c[2], c[1] ** 2),), tuple(names))

    def _with_names(self, i: int, f: Factor, count: int) -> Shape:
        """The real roots of a cubic or quartic by name, and a pair from them."""
        c = f.coefficients
        polynomial = sum((x * self.unknown**k for k, x in enumerate(c)), S.Zero)
        names = tuple(
            Definition(
                Symbol(f"{self.stem}_{k}", real=True),
                root_of=polynomial,
                unknown=self.unknown,
                index=k,
            )
            for k in range(1, count + 1)
        )
        reals = tuple((("named", i, k), d.symbol) for k, d in enumerate(names, start=1))
        graph = Graph(list(c))
        if count == f.degree:
            return Shape(reals, (), (), names, graph)
        if count != f.degree - 2:
            raise Unclear
        total, rest = self._rest(f, [d.symbol for d in names])
        pair = ("named", i), total / 2, rest - total**2 / 4
        return Shape(reals, (pair,), (Lt(total**2, 4 * rest),), names, graph)

    @staticmethod
    def _rest(f: Factor, roots: list[Symbol]) -> tuple[Expr, Expr]:
        """(sum, product) of the two roots that are not among ``roots``."""
        c = f.coefficients
        n = f.degree
        total = -c[n - 1] / c[n] - sum(roots, S.Zero)
        if n == 3:
            (e,) = roots
            return total, c[1] / c[3] - e * total
        e1, e2 = roots
        return total, c[2] / c[4] - e1 * e2 - (e1 + e2) * total

    def _resolved(self, i: int, f: Factor) -> Shape:
        """Two pairs from the largest root y = (half sum of a pair less the mean)²·4."""
        c0, c1, c2, c3, c4 = f.coefficients
        unknown = self.unknown
        h = c3 / (4 * c4)
        p = c2 / c4 - 6 * h**2
        q = c1 / c4 - 2 * h * c2 / c4 + 8 * h**3
        r = c0 / c4 - h * c1 / c4 + h**2 * c2 / c4 - 3 * h**4
        y = Symbol(f"{self.stem}_y", positive=True)
        resolvent = unknown**3 + 2 * p * unknown**2 + (p**2 - 4 * r) * unknown - q**2
        name = Definition(y, root_of=resolvent, unknown=unknown, index=3)
        s = sqrt(y)
        pairs, conditions = [], []
        for sign in (1, -1):
            # u² ∓ s u + t with t = (p + y ± q/s)/2 about the mean −h
            t = (p + y + sign * q / s) / 2
            conditions.append(Lt(y, 4 * t))
            pairs.append((("resolved", i, sign), sign * s / 2 - h, t - y / 4))
        graph = Graph([resolvent.coeff(unknown, k) for k in range(4)])
        return Shape((), tuple(pairs), tuple(conditions), (name,), graph)


def _real_roots(coefficients: list[float], degree: int) -> list[float]:
    """The real roots in order; raises Unclear where a root may be real or not."""
    found = np.roots(coefficients[::-1])
    if len(found) != degree or not np.all(np.isfinite(found)):
        raise Unclear
    scale = float(np.max(np.abs(found))) + 1e-300
    if any(1e-9 * scale <= abs(x.imag) < MARGIN * scale for x in found):
        raise Unclear
    return sorted(float(x.real) for x in found if abs(x.imag) < 1e-9 * scale)


def _written(value: Ratio, dress: Dress) -> Expr:
    return dress.ratio(value) if value else S.Zero


def _resolvent_root(numbers: list[float]) -> float:
    """(b₁ − b₂)², the root of the resolvent that two pairs b ± ia are written with."""
    middles = sorted(float(x.real) for x in np.roots(numbers[::-1]) if x.imag > 0)
    if middles[1] - middles[0] < MARGIN * (abs(middles[0]) + abs(middles[1])):
        raise Unclear
    return (middles[1] - middles[0]) ** 2


def with_names(points: Sample, where: tuple[Definition, ...]) -> Sample:
    """The points with the balls of the names that have a definition; raises Unclear."""
    names = Names([d for d in where if d.definition is not None])
    extras = []
    for i in range(points.values.shape[1]):
        point = names.at(points.exact(i))
        if point is None:
            raise Unclear
        extras.append({s: v for s, v in point.items() if s not in points.symbols})
    return Sample(points.symbols, points.values, tuple(extras))

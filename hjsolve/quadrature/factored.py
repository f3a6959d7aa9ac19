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

from hjsolve.algebra.balls import Imprecise, OutsideDomain
from hjsolve.algebra.graph import Graph
from hjsolve.algebra.named import MARGIN, DefinedBall, RootBall
from hjsolve.quadrature import univariate as uv
from hjsolve.quadrature.dress import Dress
from hjsolve.quadrature.points import Sample, floats
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
    starts: tuple[tuple[Symbol, tuple[Expr, ...], float], ...]
    """For each named root its polynomial and its value."""

    def balls(self, point: Mapping[Symbol, Any]) -> dict[Symbol, RootBall]:
        """The named roots at the point."""
        return {s: RootBall(Graph(list(c)), point, value) for s, c, value in self.starts}

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


class Factored:
    """The factors of P with what is needed to lay out its roots at a point."""

    def __init__(
        self, radicand: Any, signs: Signs, dress: Dress, stem: str, named: bool = True
    ) -> None:
        ring, self.named = signs.ring, named
        self.stem = stem
        self.factors: list[Factor] = []
        for factor, _ in factors(radicand)[1]:
            if degree(factor) > 0:
                c = uv.from_flint(ring, factor)
                self.factors.append(Factor(tuple(_written(x, dress) for x in c)))
        self._graph = Graph([c for f in self.factors for c in f.coefficients])

    def layout(self, point: Mapping[Symbol, float], unknown: Symbol) -> Layout:
        """The roots at a point; raises Unclear near a border."""
        values = {s: np.array([v]) for s, v in point.items()}
        numbers = [float(x[0]) for x in floats(self._graph, values)]
        reals: list[Mark] = []
        pairs: list[Pair] = []
        conditions: list[Relational] = []
        names: list[Definition] = []
        starts: list[tuple[Symbol, tuple[Expr, ...], float]] = []
        at = 0
        for i, f in enumerate(self.factors):
            c = numbers[at : at + f.degree + 1]
            at += f.degree + 1
            found = np.roots(np.array(c[::-1]))
            if len(found) != f.degree or not np.all(np.isfinite(found)):
                raise Unclear
            scale = float(np.max(np.abs(found))) + 1e-300
            real = sorted(float(x.real) for x in found if abs(x.imag) < 1e-9 * scale)
            if any(1e-9 * scale <= abs(x.imag) < MARGIN * scale for x in found):
                raise Unclear
            self._lay(i, f, real, unknown, reals, pairs, conditions, names, starts, c)
        reals.sort(key=lambda m: m.value)
        for a, b in itertools.pairwise(reals):
            if b.value - a.value < MARGIN * (abs(a.value) + abs(b.value)):
                raise Unclear
            if a.key[0] != "named" or a.key[:2] != b.key[:2]:
                conditions.append(Lt(a.expression, b.expression))
        pairs.sort(key=lambda p: -p.value)
        if len(pairs) == 2:
            conditions.append(Lt(pairs[1].real, pairs[0].real))
        pairs_, order = tuple(pairs), tuple(conditions)
        return Layout(tuple(reals), pairs_, order, tuple(names), tuple(starts))

    def _lay(
        self,
        i: int,
        f: Factor,
        real: list[float],
        unknown: Symbol,
        reals: list[Mark],
        pairs: list[Pair],
        conditions: list[Relational],
        names: list[Definition],
        starts: list[tuple[Symbol, tuple[Expr, ...], float]],
        numbers: list[float],
    ) -> None:
        c = f.coefficients
        if f.degree == 1:
            reals.append(Mark(("line", i), -c[0] / c[1], real[0]))
            return
        if f.degree == 2:
            disc = c[1] ** 2 - 4 * c[0] * c[2]
            if not real:
                conditions.append(Lt(c[1] ** 2, 4 * c[0] * c[2]))
                middle, square = -c[1] / (2 * c[2]), -disc / (4 * c[2] ** 2)
                pairs.append(Pair(("quadratic", i), middle, square, -numbers[1] / (2 * numbers[2])))
                return
            conditions.append(Lt(4 * c[0] * c[2], c[1] ** 2))
            middle, half = -c[1] / (2 * c[2]), sqrt(disc / c[2] ** 2) / 2
            for k, (sign, value) in enumerate(zip((-1, 1), real, strict=True), start=1):
                e = middle + sign * half
                if self.named and e.count_ops() > LONG:
                    symbol = Symbol(f"{self.stem}_{'ab'[i % 2]}{k}", real=True)
                    names.append(Definition(symbol, definition=e))
                    e = symbol
                reals.append(Mark(("root", i, k), e, value))
            return
        polynomial = sum((x * unknown**k for k, x in enumerate(c)), S.Zero)
        symbols = []
        for k, value in enumerate(real, start=1):
            symbol = Symbol(f"{self.stem}_{k}", real=True)
            starts.append((symbol, c, value))
            names.append(Definition(symbol, root_of=polynomial, unknown=unknown, index=k))
            symbols.append(symbol)
            reals.append(Mark(("named", i, k), symbol, value))
        if len(real) == f.degree - 2:
            total, rest = self._rest(f, symbols)
            conditions.append(Lt(total**2, 4 * rest))
            pairs.append(Pair(("named", i), total / 2, rest - total**2 / 4, 0.0))
        elif not real and f.degree == 4:
            self._resolved(i, f, unknown, pairs, conditions, names)
            starts.append(_resolvent_start(names[-1], numbers))
        elif len(real) != f.degree:
            raise Unclear

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

    def _resolved(
        self,
        i: int,
        f: Factor,
        unknown: Symbol,
        pairs: list[Pair],
        conditions: list[Relational],
        names: list[Definition],
    ) -> None:
        """Two pairs from the largest root y = (half sum of a pair less the mean)²·4."""
        c0, c1, c2, c3, c4 = f.coefficients
        h = c3 / (4 * c4)
        p = c2 / c4 - 6 * h**2
        q = c1 / c4 - 2 * h * c2 / c4 + 8 * h**3
        r = c0 / c4 - h * c1 / c4 + h**2 * c2 / c4 - 3 * h**4
        y = Symbol(f"{self.stem}_y", positive=True)
        resolvent = unknown**3 + 2 * p * unknown**2 + (p**2 - 4 * r) * unknown - q**2
        names.append(Definition(y, root_of=resolvent, unknown=unknown, index=3))
        s = sqrt(y)
        for sign in (1, -1):
            # u² ∓ s u + t with t = (p + y ± q/s)/2 about the mean −h
            t = (p + y + sign * q / s) / 2
            conditions.append(Lt(y, 4 * t))
            pairs.append(Pair(("resolved", i, sign), sign * s / 2 - h, t - y / 4, float(sign)))


def _written(value: Ratio, dress: Dress) -> Expr:
    return dress.ratio(value) if value else S.Zero


def _resolvent_start(
    name: Definition, numbers: list[float]
) -> tuple[Symbol, tuple[Expr, ...], float]:
    """The name with its polynomial and its value (b₁ − b₂)²."""
    assert name.root_of is not None
    assert name.unknown is not None
    found = np.roots(np.array(numbers[::-1]))
    middles = sorted(float(x.real) for x in found if x.imag > 0)
    if middles[1] - middles[0] < MARGIN * (abs(middles[0]) + abs(middles[1])):
        raise Unclear
    coefficients = tuple(name.root_of.coeff(name.unknown, k) for k in range(4))
    return name.symbol, coefficients, (middles[1] - middles[0]) ** 2


def with_names(points: Sample, where: tuple[Definition, ...]) -> Sample:
    """The points with the balls of the names that have a definition; raises Unclear."""
    extras = []
    for i in range(points.values.shape[1]):
        point = points.exact(i)
        try:
            for d in where:
                if d.definition is not None:
                    point[d.symbol] = ball = DefinedBall(Graph([d.definition]), point)
                    float(ball)
        except (Imprecise, OutsideDomain) as failure:
            raise Unclear from failure
        extras.append({s: v for s, v in point.items() if s not in points.symbols})
    return Sample(points.symbols, points.values, tuple(extras))

"""∫ Q √P du for any cubic or quartic P, by the pattern of its roots at sample points.

Points are drawn, the roots laid out at each, and every pattern that is met gets
its formula (see ``forms``), checked at the points of the pattern.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any

import numpy as np
from sympy import Add, Expr, Mul, S, Symbol
from sympy.core.relational import Relational

from hjsolve.algebra.balls import NotSupported
from hjsolve.algebra.graph import Graph, TooLarge
from hjsolve.errors import OutOfTime
from hjsolve.quadrature import check, quadratic
from hjsolve.quadrature import univariate as uv
from hjsolve.quadrature.dress import HALF, Dress
from hjsolve.quadrature.factored import Factored, Layout, Mark, Unclear, with_names
from hjsolve.quadrature.family import Outcome
from hjsolve.quadrature.forms import Form
from hjsolve.quadrature.points import Sample, crowd, floats
from hjsolve.quadrature.problem import Piece, Problem, Reading
from hjsolve.quadrature.ratios import GivenUp, degree
from hjsolve.quadrature.reduction import Reduction
from hjsolve.quadrature.regimes import Context, conditions, stem_of
from hjsolve.quadrature.signs import Assumption, Signs, Undetermined
from hjsolve.records import Definition, Formula

INFINITE = float("inf")

SEEDS = 4
"""Draws of points from which the patterns are read."""

CROWD = 150
"""Points of a draw that are looked at."""

FULL = 6
"""Points of a pattern kept for the check."""

PATTERNS, FEW = 6, 2
"""Patterns worked out, the most frequent first: two less for each pole, no less than FEW."""

LEAVES = 6
"""Regimes of signs of constants that are followed."""

NEEDED = 3
"""A pattern met at fewer points is left out, since it could not be checked."""


def cost(reduction: Reduction, signs: Signs) -> float:
    """Terms; ∞ where the degree is above four or a pole factor above two."""
    plain = quadratic.cost(reduction, signs)
    if plain < INFINITE:
        return plain
    if not 3 <= reduction.degree <= 4 or any(len(p.factor) > 3 for p in reduction.poles):
        return INFINITE
    named = 3.0 - 2.0 * (reduction.degree == 3)
    weights = sum(1 for w in reduction.weights if w)
    return named + weights + 2.0 * sum(len(p.factor) - 1 for p in reduction.poles)


def integrate(problem: Problem, readings: list[Reading]) -> Outcome | None:
    """The checked formulas of the cheapest reading that has any."""
    priced = [(r.cost(cost, 1.0), i, r) for i, r in enumerate(readings)]
    for _, _, reading in sorted((c, i, r) for c, i, r in priced if c < INFINITE)[:2]:
        found = _Patterns(problem, reading).formulas()
        if found:
            return Outcome(tuple(found), reading.pieces[0].kernel.expression)
    return None


@dataclass
class _Group:
    """The points of one pattern."""

    layout: Layout
    poles: tuple[Mark, ...]
    place: float
    met: int = 0
    columns: list[Any] = field(default_factory=list)
    extra: list[dict[Symbol, Any]] = field(default_factory=list)


class _Patterns:
    def __init__(self, problem: Problem, reading: Reading) -> None:
        self.problem, self.reading = problem, reading
        taken = {s.name for s in problem.integrand.free_symbols}
        name = "u"
        while name in taken:
            name += "_"
        self.unknown = Symbol(name, real=True)
        self.stem = stem_of(problem)

    def formulas(self) -> list[Formula]:
        """All that hold, over the regimes of signs and the patterns in each."""
        out: list[Formula] = []
        stack: list[tuple[Assumption, ...]] = [()]
        for _ in range(4 * LEAVES):
            if not stack or len(out) >= PATTERNS:
                break
            assumed = stack.pop()
            try:
                out += self._leaf(assumed)
            except Undetermined as question:
                where = self.reading.kernel.expression if degree(question.poly) > 0 else None
                for sign in (-question.first, question.first):
                    stack.append((*assumed, Assumption(question.poly, sign, where)))
        return out

    def _leaf(self, assumed: tuple[Assumption, ...]) -> list[Formula]:
        self.problem.left()
        pieces = self.reading.under(assumed)
        valid = conditions(self.reading, assumed)
        elliptic = [p for p in pieces if _is_elliptic(p.reduction)]
        if valid is None or len(elliptic) != 1:
            if valid is not None:
                raise GivenUp("two radicands of degree above two")
            return []
        (piece,) = elliptic
        signs = self.reading.signs(assumed, piece.kernel)
        dress = Dress(signs, piece.kernel)
        others: Expr = S.Zero
        for other in pieces:
            if other is not piece:
                inner = self.reading.signs(assumed, other.kernel)
                writer = Dress(inner, other.kernel)
                e = quadratic.formula(other, Context(inner, writer, False))
                others += writer.product((other.scale, HALF)) * e
        groups = self._groups(piece, dress, valid)
        out = []
        try:
            many = sum(len(p.factor) - 1 for p in piece.reduction.poles)
            for group in groups[: max(PATTERNS - 2 * many, FEW)]:
                formula = self._formula(piece, group, dress, others, valid)
                if formula is not None:
                    out.append(formula)
        except OutOfTime:
            if not out:
                raise
        return out

    # ------------------------------------------------------------- patterns

    def _groups(self, piece: Piece, dress: Dress, valid: tuple[Relational, ...]) -> list[_Group]:
        """Sample points sorted by pattern, bounded motion first."""
        problem = self.problem
        names = dress.signs, dress, self.stem, self.unknown
        factored = Factored(piece.radicand, *names)
        poles = Factored(_product(piece.reduction), *names, False)
        kernel = Graph([piece.kernel.expression])
        groups: dict[Any, _Group] = {}
        for seed in range(SEEDS):
            problem.left()
            try:
                q, domain = problem.variable, problem.domain
                drawn = crowd(problem.integrand, q, domain, valid, seed, CROWD, seed % 2)
            except (NotSupported, TooLarge, TypeError) as failure:
                raise GivenUp("the integrand cannot be evaluated for the check") from failure
            if drawn is None:
                break
            points, confirmed = drawn
            columns = dict(zip(points.symbols, points.values, strict=True))
            places = floats(kernel, columns)[0]
            rows = factored.coefficients(columns), poles.coefficients(columns)
            for i, u in enumerate(places):
                try:
                    layout, beside = factored.layout(rows[0][i]), poles.layout(rows[1][i])
                except Unclear:
                    continue
                if beside.pairs:
                    continue
                key = (layout.key, _places(layout, beside, float(u)))
                group = groups.setdefault(key, _Group(layout, beside.reals, float(u)))
                group.met += 1
                if len(group.columns) < FULL and confirmed(i):
                    group.columns.append((points.symbols, points.values[:, i]))
                    group.extra.append(layout.balls(points.exact(i)))
        kept = [g for g in groups.values() if len(g.columns) >= NEEDED]
        return sorted(kept, key=lambda g: (not _bounded(g), -g.met))

    def _formula(
        self,
        piece: Piece,
        group: _Group,
        dress: Dress,
        others: Expr,
        valid: tuple[Relational, ...],
    ) -> Formula | None:
        """The formula of a pattern where it can be formed and holds."""
        problem = self.problem
        at = {s: float(v) for s, v in zip(*group.columns[0], strict=True)}
        at |= {s: float(v) for s, v in group.extra[0].items()}
        form = Form(piece, group.layout, group.poles, group.place, dress, self.stem, at)
        normal = form.normal()
        if normal is None:
            return None
        expression, definitions = form.expression(normal)
        whole = Add(
            *(Mul(dress.product((piece.scale, HALF)), t) for t in Add.make_args(expression)),
            others,
        )
        names = (*group.layout.names, *definitions)
        explicit = tuple(d for d in names if d.definition is not None)
        needed = [
            *valid,
            *group.layout.conditions,
            *form.interval(),
        ]
        kept = tuple(dict.fromkeys(r for r in needed if r not in (S.true, S.false)))
        if S.false in needed:
            return None
        symbols = group.columns[0][0]
        points = Sample(
            symbols,
            np.array([column for _, column in group.columns]).T,
            tuple(group.extra),
        )
        try:
            points = with_names(points, explicit)
        except Unclear:
            return None
        if not check.holds(
            whole,
            problem.integrand,
            problem.variable,
            problem.domain,
            points,
            problem.deadline,
            kept,
        ):
            return None
        return Formula(whole, _used(names, whole, kept), kept)


def _is_elliptic(reduction: Reduction) -> bool:
    return reduction.degree > 2 and bool(any(reduction.weights) or reduction.poles)


def _product(reduction: Reduction) -> Any:
    """The numerator of the product of all pole factors."""
    ring = reduction.ring
    total = ring.one
    for pole in reduction.poles:
        total = total * uv.to_ratio(ring, pole.factor)
    return total.num


def _places(layout: Layout, poles: Layout, u: float) -> tuple[Any, ...]:
    """Where u lies among the roots, and which poles share its interval, on which side."""
    values = [m.value for m in layout.reals]

    quartic = len(values) + 2 * len(layout.pairs) == 4

    def component(x: float) -> int:
        below = sum(1 for v in values if v < x)
        return 0 if quartic and below == len(values) else below  # through ∞

    here = component(u)
    beside = tuple((m.value < u) if component(m.value) == here else None for m in poles.reals)
    return (sum(1 for v in values if v < u), beside)


def _bounded(group: _Group) -> bool:
    values = [m.value for m in group.layout.reals]
    return any(v < group.place for v in values) and any(v > group.place for v in values)


def _used(
    names: tuple[Definition, ...], whole: Expr, valid: tuple[Relational, ...]
) -> tuple[Definition, ...]:
    """The names that occur, with those they rest on."""
    wanted = set(whole.free_symbols).union(*(v.free_symbols for v in valid))
    for name in reversed(names):
        if name.symbol in wanted and name.definition is not None:
            wanted |= name.definition.free_symbols
    return tuple(n for n in names if n.symbol in wanted)

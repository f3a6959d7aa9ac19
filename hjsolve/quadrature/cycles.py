"""Complete integrals: the action of each coordinate and its derivatives over one cycle.

J(α) = (1/2π)∮p dq and ∂J/∂α_k = (1/2π)∮∂p/∂α_k dq, for a libration twice the
integral between the turning points (whatever of p has one branch only cancels),
for a rotation once over the turn.  The closed forms are the limits of the
antiderivatives (see ``whole``); each is compared, in balls, with a sum over the
cycle that knows no antiderivative, at points of the regime it is to hold in.
"""

from __future__ import annotations

import time
from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass, field, replace
from typing import Any, Literal

from flint import arb
from sympy import Add, Expr, Mul, S, Symbol
from sympy.core.relational import Relational

from hjsolve.algebra.balls import (
    BallWalk,
    Imprecise,
    NotSupported,
    OutsideDomain,
    exact,
    precision,
)
from hjsolve.algebra.budget import limit
from hjsolve.algebra.calculus import derivative, root_derivative
from hjsolve.algebra.cycle import (
    BITS,
    Conditions,
    Mean,
    NoCycle,
    Path,
    Point,
    constant,
    means,
    path,
)
from hjsolve.algebra.graph import Graph, TooLarge
from hjsolve.algebra.named import Names
from hjsolve.errors import OutOfTime
from hjsolve.quadrature.points import Order, crowd
from hjsolve.quadrature.whole import Unknown, cuts, mean, windows
from hjsolve.records import (
    Antiderivative,
    CompleteIntegral,
    Cycle,
    Domain,
    Formula,
    SeparatedEquation,
    Separation,
    Term,
)

Integrate = Callable[[Expr, Symbol, Domain], Antiderivative]
Kind = Literal["libration", "rotation"]

EACH_SECONDS, ALL_SECONDS = 3.0, 8.0
"""How long one coordinate may take, and all of them."""

SEEDS, CROWD = 4, 150
"""Draws of points, and points of a draw that are looked at."""

WANTED, ENOUGH = 4, 2
"""Cycles of a kind that are used, and the least number of them."""

MISSES = 6
"""Points of a regime without a cycle after which no more of them are tried."""

CLOSE = 1e-25
"""A closed form that differs by more than this from the sum over the cycle is wrong."""

FEW_BITS = 128
"""Precision at which points are sorted out."""

GRID = 8
"""Places of a cycle at which a condition on the coordinate is tried."""


def with_cycles(
    separation: Separation, integral: CompleteIntegral, integrate: Integrate
) -> CompleteIntegral:
    """The complete integral with the cycles of its terms, as many as time allows."""
    h = separation.hamiltonian
    domain = dict(zip(h.coordinates, h.domains, strict=True))
    constants = tuple(c.symbol for c in separation.constants)
    stop = time.monotonic() + ALL_SECONDS
    terms = []
    for term in integral.terms:
        place = domain[term.equation.coordinate]
        left = min(EACH_SECONDS, stop - time.monotonic())
        found = cycles(term, place, constants, integrate, left) if left > 0 else ()
        terms.append(replace(term, cycles=found))
    return replace(integral, terms=tuple(terms))


def cycles(
    term: Term,
    domain: Domain,
    constants: Sequence[Symbol],
    integrate: Integrate,
    seconds: float = EACH_SECONDS,
) -> tuple[Cycle, ...]:
    """One entry for each regime in which a cycle is met within ``seconds``."""
    e = term.equation
    if e.where:
        return ()
    found: list[Cycle] = []
    try:
        with limit(seconds):
            pairs = [_Pair(None, term.root, term.drift)]
            for alpha in constants:
                root = integrate(root_derivative(e.root, alpha), e.coordinate, domain)
                drift = integrate(derivative(e.drift, alpha), e.coordinate, domain)
                pairs.append(_Pair(alpha, root, drift))
            search = _Search(e, domain, pairs)
            with precision(BITS):
                for form in search.regimes():
                    found += search.cycles(form)
    except (OutOfTime, NotSupported, TooLarge, TypeError):
        pass  # what was found by then is kept
    return tuple(dict.fromkeys(found))


@dataclass(frozen=True)
class _Pair:
    """The two parts of p, or of its derivative by ``alpha``."""

    alpha: Symbol | None
    root: Antiderivative
    drift: Antiderivative


@dataclass
class _Met:
    """A cycle met at a point, with the numbers it is compared with."""

    point: dict[Symbol, Any]
    path: Path
    means: dict[Expr, Mean] = field(default_factory=dict)


class _Search:
    """The cycles of one coordinate."""

    def __init__(self, e: SeparatedEquation, domain: Domain, pairs: Sequence[_Pair]) -> None:
        self.e, self.q, self.domain, self.pairs = e, e.coordinate, domain, pairs
        self.squared, self.parts = Graph([e.root**2]), Graph([e.root**2, e.drift])

    def regimes(self) -> list[Formula]:
        """The forms of the momentum; of its first derivative that has some where it has none."""
        if self.e.root == 0:
            return [Formula(S.Zero)]
        for pair in self.pairs:
            if pair.root.integrand != 0 and pair.root.closed_forms:
                return [f for f in pair.root.closed_forms if not _boundary(f)]
        return []

    def cycles(self, regime: Formula) -> Iterator[Cycle]:
        """Those met in one regime, of either kind."""
        met = self._met(regime, (*regime.valid, *self.e.valid))
        kinds: tuple[Kind, ...] = ("libration", "rotation")
        for kind in kinds:
            of_kind = [m for m in met if m.path.kind == kind][:WANTED]
            if len(of_kind) >= ENOUGH:
                cycle = self._cycle(kind, of_kind, regime)
                if cycle is not None:
                    yield cycle

    # ------------------------------------------------------------- numbers

    def _met(self, form: Formula, valid: Sequence[Relational]) -> list[_Met]:
        """Cycles through points at which the form is to hold."""
        names = {d.symbol for d in form.where}
        plain = [v for v in valid if not v.free_symbols & names]
        named = Conditions([v for v in valid if v.free_symbols & names])
        called = Names(form.where)
        integrand = self.e.root + self.e.drift  # for the letters of both
        found: list[_Met] = []
        for seed in range(SEEDS if names else 1):
            drawn = crowd(integrand, self.q, self.domain, plain, seed, CROWD, seed % 2)
            if drawn is None:
                break
            sample, confirmed = drawn
            order = Order(sample)
            for i in order:
                if order.missed == MISSES or _enough(found):
                    return found
                try:
                    point = sample.exact(i)
                    if confirmed(i) and _holds(named, called, point):
                        along = self._path(point)
                        if all(map(all, self._held(self.e.valid, point, along))):
                            found.append(_Met(point, along))
                            order.keep(i)
                except NoCycle:
                    order.miss(i)
                except (OutsideDomain, Imprecise):
                    continue
        return found

    def _path(self, point: Point) -> Path:
        angle = self.domain.kind == "angle"
        if angle and not self._periodic(point):
            raise NoCycle
        if self.e.root == 0:
            if not angle:
                raise NoCycle
            return Path("rotation", arb(0), 2 * arb.pi())
        return path(self.squared, self.q, point, self.domain)

    def _periodic(self, point: Point) -> bool:
        """Whether the momentum is the same a turn later."""
        here = exact(point[self.q])
        there = {**point, self.q: constant(here + 2 * arb.pi())}
        now, later = (BallWalk(self.parts, p, {}).run() for p in (point, there))
        return all(
            abs(a.value - b.value) < CLOSE * (1 + abs(a.value))
            for a, b in zip(now, later, strict=True)
        )

    def _measured(self, met: Sequence[_Met], integrands: Sequence[Expr]) -> list[_Met]:
        """Those whose sums settle, with the means of the integrands."""
        graph = Graph(integrands)
        found = []
        for m in met:
            try:
                values = means(graph, self.q, m.point, m.path)
            except (NoCycle, OutsideDomain, Imprecise):
                continue
            m.means = dict(zip(integrands, values, strict=True))
            found.append(m)
        return found

    # ------------------------------------------------------------ formulas

    def _cycle(self, kind: Kind, met: Sequence[_Met], regime: Formula) -> Cycle | None:
        turning = kind == "rotation"
        wanted = [p.root.integrand for p in self.pairs]
        if turning:
            wanted += [p.drift.integrand for p in self.pairs]
        met = self._measured(met, [f for f in dict.fromkeys(wanted) if f != 0])
        if len(met) < ENOUGH:
            return None
        if not turning and any(m.means[self.e.root].value <= 0 for m in met):
            return None
        formulas = [self._formula(pair, turning, met, regime) for pair in self.pairs]
        if not turning:
            formulas = self._at_large(formulas, regime)
        if all(f is None for f in formulas):
            return None
        derivatives = tuple(
            (pair.alpha, f)
            for pair, f in zip(self.pairs[1:], formulas[1:], strict=True)
            if pair.alpha is not None
        )
        return Cycle(kind, formulas[0], derivatives)

    def _at_large(self, formulas: list[Formula | None], regime: Formula) -> list[Formula | None]:
        """Those that hold all over their regime, not only where the antiderivative did.

        A libration may leave the part of a circle on which an antiderivative holds; then
        that part is not among the conditions, and there may be another cycle outside.
        """
        first = next((f for f in formulas if f is not None), None)
        if first is None or all(v in first.valid for v in regime.valid if v.has(self.q)):
            return formulas
        met = [m for m in self._met(first, first.valid) if m.path.kind == "libration"]
        integrands = [p.root.integrand for p in self.pairs if p.root.integrand != 0]
        met = self._measured(met, integrands)
        if len(met) < ENOUGH:
            return [None for _ in formulas]
        return [
            f if f and all(_equal(f, m, p.root.integrand) for m in met) else None
            for p, f in zip(self.pairs, formulas, strict=True)
        ]

    def _formula(
        self, pair: _Pair, turning: bool, met: Sequence[_Met], regime: Formula
    ) -> Formula | None:
        """The mean of drift + sign·root, with the conditions of both and of the regime."""
        parts = [(self.e.sign, pair.root)] if turning else [(S.One, pair.root)]
        if turning:
            parts.append((S.One, pair.drift))
        total: list[Expr] = []
        kept = Formula(S.Zero, (), self.e.valid)
        for factor, anti in parts:
            part = self._part(anti, met)
            if part is None:
                return None
            total += [Mul(factor, t) for t in Add.make_args(part.expression)]
            where = tuple(dict.fromkeys((*kept.where, *part.where)))
            kept = Formula(S.Zero, where, tuple(dict.fromkeys((*kept.valid, *part.valid))))
        names = {d.symbol for d in regime.where}
        of_regime = [v for v in regime.valid if not v.free_symbols & {*names, self.q}]
        valid = tuple(dict.fromkeys((*of_regime, *kept.valid)))
        return Formula(Add(*total), kept.where, valid)

    def _part(self, anti: Antiderivative, met: Sequence[_Met]) -> Formula | None:
        """The mean of one integrand, compared with the sums over the cycles."""
        if anti.integrand == 0:
            return Formula(S.Zero)
        if not anti.integrand.has(self.q):
            return Formula(anti.integrand)
        for form in anti.closed_forms:
            if not _boundary(form):
                for part in self._limits(form, met):
                    if all(_equal(part, m, anti.integrand) for m in met):
                        return part
        return None

    def _limits(self, form: Formula, met: Sequence[_Met]) -> Iterator[Formula]:
        """What the limits of a form that holds at all the cycles may come to."""
        turning = met[0].path.kind == "rotation"
        try:
            called = Names(form.where)
            points = [p for p in (called.at(m.point) for m in met) if p is not None]
            if len(points) < len(met):
                return
            held = [self._held(form.valid, p, m.path) for p, m in zip(points, met, strict=True)]
        except (Imprecise, OutsideDomain, NotSupported, TooLarge):
            return
        if not all(any(all(place) for place in cycle) for cycle in held):
            return
        round_ = Path("rotation", arb(0), 2 * arb.pi())
        told = [self._held(form.valid, p, round_) for p in points if self.domain.kind == "angle"]
        everywhere = tuple(
            v
            for k, v in enumerate(form.valid)
            if not v.has(self.q) or (not turning and _all(held, k) and not (told and _all(told, k)))
        )
        for cut in cuts(form.valid, self.q, turning):
            try:
                spans = [windows(m.path, cut) for m in met]
                value = mean(form.expression, self.q, list(zip(points, spans, strict=True)))
            except (Unknown, Imprecise, OutsideDomain, NotSupported, TooLarge, ValueError):
                continue
            yield Formula(value, form.where, everywhere)

    def _held(self, valid: Sequence[Relational], point: Point, along: Path) -> list[list[bool]]:
        """Which conditions hold at places of the cycle."""
        conditions = Conditions(valid)
        turn = 2 * arb.pi()
        found = []
        for k in range(GRID):
            at = along.lower + (along.upper - along.lower) * (2 * k + 1) / (2 * GRID)
            if self.domain.kind == "angle":
                at = at - turn * (at / turn).floor()
            found.append(conditions.hold({**point, self.q: constant(at)}))
        return found


def _holds(named: Conditions, called: Names, point: Point) -> bool:
    """Whether the conditions on names hold: few bits will do to find it."""
    with precision(FEW_BITS):
        known = called.at(point)
        return known is not None and all(named.hold(known))


def _all(cycles: Sequence[Sequence[Sequence[bool]]], k: int) -> bool:
    """Whether a condition holds at all places of all cycles."""
    return all(place[k] for cycle in cycles for place in cycle)


def _enough(found: Sequence[_Met]) -> bool:
    """Whether every kind of cycle that was met was met often enough."""
    kinds = [m.path.kind for m in found]
    return bool(found) and all(kinds.count(kind) >= WANTED for kind in set(kinds))


def _equal(formula: Formula, met: _Met, integrand: Expr) -> bool:
    """Whether the formula is the mean of the integrand at a cycle."""
    if integrand == 0:
        return formula.expression == 0
    try:
        point = Names(formula.where).at(met.point)
        if point is None:
            return False
        value = BallWalk(Graph([formula.expression]), point, {}).run()[0].value
    except (Imprecise, OutsideDomain, NotSupported):
        return False
    want = met.means[integrand]
    return bool(abs(value - want.value) < CLOSE * want.size)


def _boundary(form: Formula) -> bool:
    """Whether a form is for the boundary between two regimes."""
    return any(v.rel_op.endswith("=") for v in form.valid)

"""From an antiderivative to the mean over a cycle: its limits at the ends.

An antiderivative is continuous between two turning points, so the integral is
the difference of its limits there.  Each term is c·f(q), and what f does at an
end is read off in balls next to it, at a few points of the regime: asin, acos,
atan come to multiples of π/2, the amplitude of F, E, Π comes to multiples of
π/2, at which they are as many times the complete K, E, Π (DLMF 19.2.8; 19.2.10
for the quasi-period), and everything else has to have the same limit at both
ends.  Nothing here is a proof: what comes out is compared with a quadrature.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass
from typing import Any

import sympy as sp
from flint import arb
from sympy import (
    Add,
    Expr,
    Mul,
    Rational,
    S,
    Symbol,
    elliptic_e,
    elliptic_f,
    elliptic_k,
    elliptic_pi,
)
from sympy.core.relational import Relational

from hjsolve.algebra.balls import BallWalk, Imprecise, NotSupported, OutsideDomain
from hjsolve.algebra.cycle import BITS, Path, Point, constant
from hjsolve.algebra.graph import Graph, TooLarge

CIRCULAR = (sp.asin, sp.acos, sp.atan, sp.acot)
ELLIPTIC = (elliptic_f, elliptic_e, elliptic_pi)

NEAR = arb(2) ** (-BITS // 3)
"""How close to an end, in units of the interval: a root of it is 1e-22."""

SAME = 1e-12
"""What is called equal next to the ends; a wrong guess fails the comparison that follows."""


class Unknown(Exception):
    """A term has a limit that is not known here."""


@dataclass(frozen=True)
class Window:
    """The part of a cycle over which a formula is taken.

    ``places`` are where it is looked at, with the sign with which it counts;
    ``factor`` makes the mean of its difference over π.  ``quarters`` are the
    quarter turns of a part of a circle, 0 between turning points.
    """

    places: tuple[tuple[Any, int], ...]
    factor: Rational
    quarters: int = 0


Cut = tuple[Expr | None, Expr | None]
"""The numbers between which a formula is taken, where it does not hold on the whole cycle."""


def cuts(valid: Sequence[Relational], q: Symbol, turning: bool) -> list[Cut]:
    """Where a form may have to be cut that does not hold on the whole cycle.

    The part on which it holds, repeated, makes the whole where the motion is
    symmetric; round a circle the form may still do beyond.
    """
    upper = [v.gts for v in valid if v.lts == q and v.gts.is_number]
    lower = [v.lts for v in valid if v.gts == q and v.lts.is_number]
    whole: Cut = (None, None)
    if turning:
        return [*((None, u) for u in upper), whole]
    return [whole, *((None, u) for u in upper), *((low, None) for low in lower)]


def windows(path: Path, cut: Cut = (None, None)) -> Window:
    """The whole cycle, or the part within ``cut`` as many times as makes the whole.

    Between turning points a cut at one number halves the way.  A turn is looked at
    in quarters, at whose ends antiderivatives jump.  Raises Unknown.
    """
    lower, upper = cut
    if path.kind == "libration":
        step = (path.upper - path.lower) * NEAR
        low = path.lower if lower is None else _number(lower)
        high = path.upper if upper is None else _number(upper)
        if (lower is not None and not path.lower < low) or (
            upper is not None and not high < path.upper
        ):
            raise Unknown
        times = 1 if cut == (None, None) else 2
        return Window(((low + step, -1), (high - step, 1)), Rational(times))
    quarters = 4 if upper is None else round(float(2 * upper / sp.pi))
    if quarters not in (1, 2, 4):
        raise Unknown
    quarter, step = arb.pi() / 2, arb(1) * NEAR
    places = [(n * quarter + step, -1) for n in range(quarters)]
    places += [((n + 1) * quarter - step, 1) for n in range(quarters)]
    return Window(tuple(places), Rational(2, quarters), quarters)


def _number(e: Expr) -> Any:
    return BallWalk(Graph([e]), {}, {}).run()[0].value


class Difference:
    """F(upper) − F(lower) of one formula in exact symbols; raises Unknown."""

    def __init__(self, q: Symbol, places: Sequence[tuple[Point, Window]]) -> None:
        """``places`` has the points of the regime, each with its window."""
        self._q = q
        self._seen: list[tuple[Point, Window]] = list(places)
        self._rest: list[Expr] = []

    def of(self, formula: Expr) -> Expr:
        """The difference."""
        total = self._term(formula)
        if self._rest:
            total += self._same(Add(*self._rest), formula)
        return total

    def _term(self, e: Expr) -> Expr:
        if isinstance(e, Add):
            return Add(*(self._term(part) for part in e.args))
        constant_part, varying = e.as_independent(self._q, as_Add=False)
        if isinstance(varying, Add):
            return Add(*(self._term(Mul(constant_part, part)) for part in varying.args))
        if isinstance(varying, CIRCULAR):
            turns = self._multiple(varying, self._total)
            return constant_part * turns * sp.pi / 2
        if isinstance(varying, ELLIPTIC):
            complete, phi = _complete(varying)
            return Mul(constant_part, self._multiple(phi, self._jumps), complete)
        if e.has(self._q):
            self._rest.append(e)
        return S.Zero

    def _values(self, e: Expr) -> Iterator[list[tuple[Any, int]]]:
        """The expression at the places of each point."""
        graph = Graph([e])
        for point, window in self._seen:
            found = []
            for at, sign in window.places:
                try:
                    jets = BallWalk(graph, {**point, self._q: constant(at)}, {}).run()
                except (Imprecise, OutsideDomain, NotSupported, TooLarge) as failure:
                    raise Unknown from failure
                found.append((jets[0].value, sign))
            yield found

    def _multiple(self, e: Expr, count: Callable[[list[tuple[Any, int]]], int]) -> Expr:
        """The multiple of π/2 by which ``e`` grows, the same at all points."""
        found = {count(values) for values in self._values(e)}
        if len(found) > 1:
            raise Unknown
        return Rational(found.pop())

    @staticmethod
    def _total(values: list[tuple[Any, int]]) -> int:
        return _whole(sum((sign * v for v, sign in values), arb(0)))

    @staticmethod
    def _jumps(values: list[tuple[Any, int]]) -> int:
        """The same where only multiples of π/2 at the ends count: F is not linear in φ."""
        falls = [v for v, sign in values if sign < 0]
        rises = [v for v, sign in values if sign > 0]
        ends = [(falls[0], -1), (rises[-1], 1)]
        for before, after in zip(rises, falls[1:], strict=False):
            if not abs(after - before) < SAME:
                ends += [(before, 1), (after, -1)]
        return sum(sign * _whole(v) for v, sign in ends)

    def _same(self, rest: Expr, formula: Expr) -> Expr:
        """The difference of what has no name: 0, or on a turn what its ends show."""
        differences = [sum((s * v for v, s in values), arb(0)) for values in self._values(rest)]
        scales = [max(float(abs(v).mid()) for v, _ in values) for values in self._values(formula)]
        if all(abs(d) < SAME * (n + 1e-300) for d, n in zip(differences, scales, strict=True)):
            return S.Zero
        q, quarters = self._q, self._seen[0][1].quarters
        if not quarters:
            raise Unknown
        shown = rest.xreplace({q: quarters * sp.pi / 2}) - rest.xreplace({q: S.Zero})
        graph = Graph([shown])
        for (point, _), d, n in zip(self._seen, differences, scales, strict=True):
            value = BallWalk(graph, point, {}).run()[0].value
            if not abs(value - d) < SAME * (n + 1e-300):
                raise Unknown
        return shown


def _whole(value: Any) -> int:
    """value/(π/2), a whole number; raises Unknown."""
    turns = 2 * value / arb.pi()
    nearest = round(float(turns.mid()))
    if not abs(turns - nearest) < SAME:
        raise Unknown
    return nearest


def _complete(e: Expr) -> tuple[Expr, Expr]:
    """(the complete integral, the amplitude) of F(φ, m), E(φ, m), Π(n, φ, m)."""
    if isinstance(e, elliptic_f):
        return elliptic_k(e.args[1], evaluate=False), e.args[0]
    if isinstance(e, elliptic_e) and len(e.args) == 2:
        return elliptic_e(e.args[1], evaluate=False), e.args[0]
    if isinstance(e, elliptic_pi) and len(e.args) == 3:
        return elliptic_pi(e.args[0], e.args[2], evaluate=False), e.args[1]
    raise Unknown


def mean(formula: Expr, q: Symbol, places: Sequence[tuple[Point, Window]]) -> Expr:
    """(1/π)∫ between the turning points, (1/2π)∫ over a turn; raises Unknown."""
    difference = Difference(q, places).of(formula)
    factor = places[0][1].factor
    return Add(*(Mul(factor, term, 1 / sp.pi) for term in Add.make_args(difference)))

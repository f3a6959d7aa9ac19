"""The antiderivative of one piece for one pattern of the roots of P.

All roots real: one Möbius map u → sin²φ takes the ends of the interval of
motion to 0 and 1 (the tables of Byrd & Friedman 230–258 in one formula).  Two
real roots e, f and a pair b ± ia: tan²(φ/2) = (A_f/A_e)|u − e|/|u − f| with
A_x² = (b − x)² + a² (239–260), written by cos φ, which exists at both ends.
Two pairs: φ = arctan((u − b)/a) + arctan g₁, one branch for the whole line
(267).  From memory; every formula is checked.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from sympy import Expr, Lt, S, Symbol, acos, asin, atan, sqrt
from sympy.core.relational import Relational

from hjsolve.algebra.graph import Graph
from hjsolve.quadrature import univariate as uv
from hjsolve.quadrature.dress import HALF, Dress
from hjsolve.quadrature.factored import Layout, Mark, Pair
from hjsolve.quadrature.legendre import Normal, Sum
from hjsolve.quadrature.points import floats
from hjsolve.quadrature.problem import Piece
from hjsolve.records import Definition

NAMED = {"m": 6, "n": 6, "k": 2, "t": 2, "c": 8}
"""Operations of a constant above which it gets a name instead of being repeated.

The constants k and t of a Legendre integral occur in many places, m and n in few;
c are coefficients that several functions share.
"""

SHORT = 5
"""Operations up to which the imaginary part of a root gets no name."""


def _value(mark: Mark) -> float:
    return mark.value


@dataclass
class Form:
    """One piece under one pattern."""

    piece: Piece
    layout: Layout
    poles: tuple[Mark, ...]
    place: float
    dress: Dress
    stem: str
    at: dict[Symbol, float]

    def __post_init__(self) -> None:
        self.u = self.dress.u
        p = self.piece.reduction.radicand
        self.degree = len(p) - 1
        self.lead = self.dress.ratio(p[-1])
        values = [m.value for m in self.layout.reals]
        self.count = sum(1 for v in values if v < self.place)
        self.definitions: list[Definition] = []

    def interval(self) -> list[Relational]:
        """The conditions on u and on the poles: in which order they lie with the roots."""
        low, high = self._ends()
        chain: list[tuple[Mark | None, Mark | None]] = []
        near = [m for m in self.poles if self._within(m.value)]
        below = max((m for m in near if m.value < self.place), key=_value, default=None)
        above = min((m for m in near if m.value > self.place), key=_value, default=None)
        chain += [(low, m) for m in near if m.value < self.place]
        chain += [(m, high) for m in near if m.value > self.place]
        for m in self.poles:
            if m not in near and not self._hidden(m):
                chain += self._outside(m)
        out = [Lt(a.expression, b.expression) for a, b in chain if a is not None and b is not None]
        if (low := below or low) is not None:
            out.append(Lt(low.expression, self.u))
        if (high := above or high) is not None:
            out.append(Lt(self.u, high.expression))
        return out

    def _hidden(self, mark: Mark) -> bool:
        """Whether P is negative at a pole whatever the constants are."""
        reduction, signs = self.piece.reduction, self.dress.signs
        for pole in reduction.poles:
            if len(pole.factor) != 2:
                continue
            at = self.dress.ratio(-pole.factor[0]) if pole.factor[0] else S.Zero
            if at == mark.expression:
                here = uv.value(reduction.radicand, -pole.factor[0])
                return bool(here) and signs.maybe(here) == -1
        return False

    def _outside(self, mark: Mark) -> list[tuple[Mark | None, Mark | None]]:
        """Between which roots a pole lies that is not in the interval of motion."""
        reals = self.layout.reals
        below = [m for m in reals if m.value < mark.value]
        above = [m for m in reals if m.value > mark.value]
        return [
            (below[-1] if below else None, mark),
            (mark, above[0] if above else None),
        ]

    def _ends(self) -> tuple[Mark | None, Mark | None]:
        reals = self.layout.reals
        low = reals[self.count - 1] if self.count else None
        high = reals[self.count] if self.count < len(reals) else None
        return low, high

    def _within(self, value: float) -> bool:
        low, high = self._ends()
        return (low is None or low.value < value) and (high is None or value < high.value)

    def normal(self) -> Normal | None:
        """The normal form of the pattern, with a name for a long m."""
        found = self._plain()
        return found and replace(found, m=self._short("m", found.m))

    def _plain(self) -> Normal | None:
        reals, pairs = len(self.layout.reals), len(self.layout.pairs)
        if not pairs and reals == self.degree:
            return self._all_real()
        if pairs == 1 and reals == self.degree - 2:
            return self._one_pair()
        if pairs == 2:
            return self._two_pairs()
        return None

    def expression(self, normal: Normal) -> tuple[Expr, list[Definition]]:
        """The antiderivative without its scale, and the names it introduces."""
        reduction, dress = self.piece.reduction, self.dress
        total: Expr = S.Zero
        root = dress.root(self.piece.radicand)
        if self.piece.written is not None:
            root = dress.product((self.piece.scale, -HALF)) * sqrt(self.piece.written)
        if reduction.algebraic:
            total += dress.product((reduction.algebraic, 1), times=(root,))
        whole = Sum(normal, self._short)
        whole.powers([dress.ratio(w) if w else S.Zero for w in reduction.weights])
        for pole in reduction.poles:
            n0, n1 = [dress.ratio(c) if c else S.Zero for c in pole.numerator] + [S.Zero] * (
                2 - len(pole.numerator)
            )
            if len(pole.factor) == 2:
                at = dress.ratio(-pole.factor[0]) if pole.factor[0] else S.Zero
                whole.pole(n0, at, self._inside(at))
                continue
            b, c = (dress.ratio(x) if x else S.Zero for x in (pole.factor[1], pole.factor[0]))
            half = sqrt((b / 2) ** 2 - c)
            for sign in (1, -1):
                at = sign * half - b / 2
                whole.pole((n0 + n1 * at) / (2 * sign * half), at, self._inside(at))
        return total + whole.expression(), self.definitions

    def _inside(self, at: Expr) -> bool | None:
        """Whether a pole lies where φ is real: in the interval of motion, through ∞ or not."""
        values = {s: np.array([v]) for s, v in self.at.items()}
        place = float(floats(Graph([at]), values or {self.dress.u: np.ones(1)})[0][0])
        mark = min(self.poles, key=lambda m: abs(m.value - place))
        if len(self.layout.pairs) == 2:
            return True
        if not self.layout.pairs:
            return self._crossed(mark.value)
        if self._outer() and self.degree == 4:
            ends = self.layout.reals
            return mark.value < ends[0].value or mark.value > ends[-1].value
        return self._within(mark.value)

    def _outer(self) -> bool:
        """Whether the component of u goes through ∞."""
        return self.count in (0, len(self.layout.reals))

    def _name(self, tail: str, value: Expr, positive: bool = True) -> Symbol:
        known = next((d for d in self.definitions if d.definition == value), None)
        if known is not None:
            return known.symbol
        symbol = Symbol(f"{self.stem}_{tail}", positive=True if positive else None, real=True)
        self.definitions.append(Definition(symbol, definition=value))
        return symbol

    def _short(self, stem: str, value: Expr) -> Expr:
        """A long constant by a name: n1, n2, … or k1, k2, …."""
        if value.count_ops() <= NAMED[stem] or value.is_Symbol:
            return value
        count = sum(1 for d in self.definitions if d.symbol.name.startswith(f"{self.stem}_{stem}"))
        return self._name(f"{stem}{count + 1}", value, positive=False)

    # ---------------------------------------------------------- all real

    def _corners(self) -> tuple[list[Mark | None], bool]:
        """(i, j, k, l) and whether i is the lower end; ∞ is None."""
        ring: list[Mark | None] = list(self.layout.reals)
        place = self.count - 1
        if self.degree == 3:
            ring.append(None)
            place = place if self.count else 3
        elif not self.count:
            place = 3
        lower = [ring[(place + s) % 4] for s in range(4)]
        upper = [ring[(place + 1 - s) % 4] for s in range(4)]
        for corners, is_lower in ((upper, False), (lower, True)):
            if corners[3] is None and not self._between(corners[0]):
                return corners, is_lower
        low, high = self._ends()
        if lower[0] is None or (low is None and self.degree == 4):
            return upper, False
        if upper[0] is None or (high is None and self.degree == 4):
            return lower, True
        return (upper, False) if self._between(lower[0]) else (lower, True)

    def _between(self, base: Mark | None) -> bool:
        """Whether a pole lies between u and a finite base."""
        if base is None:
            return True
        a, b = sorted((base.value, self.place))
        return any(a < m.value < b for m in self.poles)

    def _crossed(self, value: float) -> bool:
        base = self._corners()[0][0]
        if base is None:
            return False
        a, b = sorted((base.value, self.place))
        return a < value < b

    def _all_real(self) -> Normal:
        (i, j, k, last), lower = self._corners()
        u = self.u

        def gap(a: Mark | None, b: Mark | None) -> Expr:
            """|a − b|, 1 where one is ∞."""
            if a is None or b is None:
                return S.One
            return a.expression - b.expression if a.value > b.value else b.expression - a.expression

        def off(a: Mark | None) -> Expr:
            """|u − a|, 1 for ∞."""
            if a is None:
                return S.One
            return u - a.expression if self.place > a.value else a.expression - u

        m = gap(j, i) * gap(k, last) / (gap(j, last) * gap(k, i))
        sine = gap(j, last) * off(i) / (gap(j, i) * off(last))
        cosine = gap(i, last) * off(j) / (gap(j, i) * off(last))
        delta = gap(i, last) * off(k) / (gap(i, k) * off(last))
        side = 1 if lower else -1
        size = self._lead_sign() * self.lead
        weight = 2 * side / sqrt(size * gap(j, last) * gap(k, i))
        return Normal(
            asin(sqrt(sine)),
            m,
            weight,
            "square",
            self._moebius(i, j, last),
            sqrt(sine),
            sqrt(cosine),
            sqrt(delta),
        )

    @staticmethod
    def _moebius(
        i: Mark | None, j: Mark | None, last: Mark | None
    ) -> tuple[Expr, Expr, Expr, Expr]:
        """U = (A + Bz)/(C + Dz) for z = sin²φ."""
        if last is None:
            assert i is not None
            assert j is not None
            return i.expression, j.expression - i.expression, S.One, S.Zero
        if j is None:
            assert i is not None
            return i.expression, -last.expression, S.One, S.NegativeOne
        if i is None:
            return j.expression - last.expression, last.expression, S.Zero, S.One
        a, b = j.expression - last.expression, j.expression - i.expression
        return a * i.expression, -b * last.expression, a, -b

    def _lead_sign(self) -> int:
        """The sign of the leading coefficient, from P > 0 at u."""
        above = len(self.layout.reals) - self.count
        return -1 if above % 2 else 1

    # ---------------------------------------------------------- one pair

    def _one_pair(self) -> Normal:
        (pair,) = self.layout.pairs
        reals = self.layout.reals
        b, a2 = self._named(pair, "")
        a2 = self._positive("sq", a2)
        outer = self._outer()
        if self.degree == 3:
            e: Mark = reals[0]
            f = None
        elif outer:
            e, f = (reals[1], reals[0]) if self.count == 2 else (reals[0], reals[1])
        else:
            e, f = reals[0], reals[1]
        x = e.expression
        u = self.u
        a_e = self._name("d1", sqrt((b - x) ** 2 + a2))
        size = self._lead_sign() * self.lead
        near = u - x if self.place > e.value else x - u
        quadratic_ = sqrt((u - b) ** 2 + a2)
        if f is None:
            side = 1 if self.place > e.value else -1
            phi = 2 * atan(sqrt(near / a_e))
            below = a_e + near
            return Normal(
                phi,
                (a_e + side * (b - x)) / (2 * a_e),
                side / sqrt(size * a_e),
                "cosine",
                (x + side * a_e, x - side * a_e, S.One, S.One),
                2 * sqrt(a_e * near),
                a_e - near,
                quadratic_,
                below,
            )
        y = f.expression
        a_f = self._name("d2", sqrt((b - y) ** 2 + a2))
        far = u - y if self.place > f.value else y - u
        span = y - x if f.value > e.value else x - y
        below = a_e * far + a_f * near
        square = self._name("d", a_e * a_f)
        mean = sqrt(square)
        side = 1 if self.place > e.value else -1
        turn = -1 if outer else 1
        m = ((a_e + a_f) ** 2 - span**2) if outer else (span**2 - (a_e - a_f) ** 2)
        return Normal(
            acos((a_e * far - a_f * near) / below),
            m / (4 * square),
            side / (sqrt(size) * mean),
            "cosine",
            (
                a_f * x + turn * a_e * y,
                a_f * x - turn * a_e * y,
                a_f + turn * a_e,
                a_f - turn * a_e,
            ),
            2 * mean * sqrt(near * far),
            a_e * far - a_f * near,
            span * quadratic_,
            below,
            outer,
        )

    def _named(self, pair: Pair, tail: str) -> tuple[Expr, Expr]:
        """(b, a²) of a pair, b as a name where it is long."""
        b, a2 = pair.real, pair.square
        if b.count_ops() > 3:
            symbol = Symbol(f"{self.stem}_re{tail}", real=True)
            self.definitions.append(Definition(symbol, definition=b))
            a2 = a2.xreplace({2 * b: 2 * symbol})
            b = symbol
        return b, a2

    def _positive(self, tail: str, value: Expr) -> Expr:
        """A positive constant, by a name where it is long."""
        return value if value.count_ops() <= SHORT else self._name(tail, value)

    # --------------------------------------------------------- two pairs

    def _two_pairs(self) -> Normal:
        first, second = self.layout.pairs
        b1, a1 = self._named(first, "1")
        b2, a2 = self._named(second, "2")
        a1, a2 = self._positive("im1", sqrt(a1)), self._positive("im2", sqrt(a2))
        u = self.u
        more = self._name("d1", sqrt((b1 - b2) ** 2 + (a1 + a2) ** 2))
        less = self._name("d2", sqrt((b1 - b2) ** 2 + (a1 - a2) ** 2))
        shift = self._name(
            "g", sqrt((4 * a1**2 - (more - less) ** 2) / ((more + less) ** 2 - 4 * a1**2))
        )
        m = 4 * more * less / (more + less) ** 2
        y = (u - b1) / a1
        sine, cosine = y - shift, 1 + shift * y
        below = sqrt((1 + y**2) * (1 + shift**2))
        return Normal(
            atan(y) - atan(shift),
            m,
            2 / ((more + less) * sqrt(self.lead)),
            "tangent",
            (b1 + a1 * shift, a1 - b1 * shift, S.One, -shift),
            sine,
            cosine,
            sqrt(below**2 - m * sine**2),
            below,
        )

"""One quadrature as every family sees it: the integrand in its best kernels.

A ``Reading`` is the integrand in one kernel, as pieces Q √P du each reduced to
basic integrals.  A family says what a piece costs it; the readings come back in
the order of that cost, so that the substitution with the fewest final terms wins.
"""

from __future__ import annotations

import time
from collections.abc import Callable
from dataclasses import dataclass, field, replace
from math import gcd
from typing import Any

from sympy import Expr, Pow, Rational, S, Symbol, oo, pi
from sympy.core.relational import Relational

from hjsolve.errors import OutOfTime
from hjsolve.quadrature.kernel import Kernel
from hjsolve.quadrature.kernels import candidates, further
from hjsolve.quadrature.radicals import Reader
from hjsolve.quadrature.ratios import GivenUp, Ratio, Ring, degree, factors, opaque
from hjsolve.quadrature.reduction import Reduction, reduce
from hjsolve.quadrature.signs import Assumption, Signs
from hjsolve.records import Domain

SIZE_LIMIT = 3_000
"""An integrand with more subexpressions is given up before anything walks through it."""


HALF_TURN = 2.0
"""The cost of a kernel that an angle runs out of before it has turned once."""


@dataclass(frozen=True)
class Piece:
    """√scale · ∫ Q √P du in ``kernel``, reduced; ``scale`` is a positive constant.

    ``written`` is scale·P as the integrand writes it, where it does.
    """

    kernel: Kernel
    scale: Any
    radicand: Any
    reduction: Reduction
    written: Expr | None = None


@dataclass
class Problem:
    """∫ integrand d(variable) over a domain, to be done before ``deadline``.

    ``integrand`` has its constant factors taken out.
    """

    integrand: Expr
    variable: Symbol
    domain: Domain
    deadline: float
    _readings: list[Reading] | None = field(default=None, repr=False)
    _further: list[Reading] | None = field(default=None, repr=False)
    _why: str = ""

    def left(self) -> float:
        """Seconds left; raises OutOfTime when there are none."""
        left = self.deadline - time.monotonic()
        if left <= 0:
            raise OutOfTime("quadrature ran out of its time")
        return left

    def readings(self) -> list[Reading]:
        """The integrand in every kernel that takes it; raises GivenUp when none does."""
        if self._readings is None:
            self._readings = []
            try:
                self._collect()
            except GivenUp as reason:
                self._why = self._why or str(reason)
        if not self._readings:
            raise GivenUp(self._why or "no substitution makes the integrand algebraic")
        return self._readings

    def further_readings(self) -> list[Reading]:
        """Those in the kernels that are of use to elliptic integrals only."""
        if self._further is None:
            found: dict[Expr, None] = {}
            _constants(self.integrand, self.variable, found)
            self._further = []
            try:
                for kernel in further(self.integrand, self.variable, self.domain):
                    self.left()
                    self._further.append(Reading(self, kernel, dict(found)))
            except GivenUp:
                pass
        return self._further

    def _collect(self) -> None:
        found: dict[Expr, None] = {}
        _constants(self.integrand, self.variable, found)
        assert self._readings is not None
        for kernel in candidates(self.integrand, self.variable, self.domain):
            self.left()
            try:
                self._readings.append(Reading(self, kernel, dict(found)))
            except GivenUp as reason:
                self._why = self._why or str(reason)


class Reading:
    """The integrand in one kernel.

    ``pieces`` rest on no guessed sign when ``exact``; otherwise they are only
    good for comparing costs, and ``under`` gives those of a regime.
    """

    def __init__(self, problem: Problem, kernel: Kernel, constants: dict[Expr, None]) -> None:
        self.problem, self.kernel = problem, kernel
        for c in (*kernel.constants, *kernel.span):
            if c.is_finite is not False:
                opaque(c, constants)
        self.ring = Ring(list(constants), problem.deadline)
        signs = self.signs(guess=True)
        self.pieces = self._pieces(signs)
        self.exact = not signs.guessed

    def signs(
        self, assumed: tuple[Assumption, ...] = (), kernel: Kernel | None = None, **how: bool
    ) -> Signs:
        """The signs known in a regime, for u of ``kernel``."""
        k = kernel or self.kernel
        return Signs(self.ring, k.expression, k.span, assumed, **how)

    def under(self, assumed: tuple[Assumption, ...]) -> tuple[Piece, ...]:
        """The pieces in a regime; raises Undetermined."""
        return self.pieces if self.exact else self._pieces(self.signs(assumed))

    def _pieces(self, signs: Signs) -> tuple[Piece, ...]:
        reader = Reader(self.problem.variable, signs, self.kernel.leaf)
        total = reader.value(self.problem.integrand) * self.kernel.slope(signs)
        self.originals = reader.originals
        pieces = []
        for key, q in total.terms.items():
            kernel, q, p = _deflated(self.kernel, q, key.poly)
            scale, p = _pulled(signs, p)
            written = self.originals.get(key)
            pieces.append(Piece(kernel, scale, p, reduce(self.ring, q, p), written))
        return tuple(pieces)

    def cost(
        self, piece_cost: Callable[[Reduction, Signs], float], restricted: float = 10.0
    ) -> float:
        """The sum of a family's costs over the pieces.

        A kernel that holds on a part of the domain only, or whose roots have a
        sign nobody knows, comes after all that need neither; ``restricted`` is
        added for each end of such a part, and HALF_TURN for a part of an angle
        that is less than a whole turn.
        """
        total = restricted * len(self.kernel.restriction) + (0.0 if self.exact else 5.0)
        total += HALF_TURN * self._within_a_turn()
        for piece in self.pieces:
            signs = self.signs(kernel=piece.kernel, guess=True)
            total += piece_cost(piece.reduction, signs)
        return total

    def _within_a_turn(self) -> bool:
        """Whether the kernel is restricted to less than a whole turn of an angle."""
        restriction, q = self.kernel.restriction, self.problem.variable
        if self.problem.domain.kind != "angle" or not restriction:
            return False
        ends = [side / (other / q) for r in restriction for side, other in _sides(r, q)]
        return len(ends) == 2 and bool(abs(ends[1] - ends[0]) < 2 * pi)


def _sides(relation: Relational, q: Symbol) -> list[tuple[Expr, Expr]]:
    """(the number, the multiple of q) of a bound on q."""
    pairs = ((relation.lhs, relation.rhs), (relation.rhs, relation.lhs))
    return [(a, b) for a, b in pairs if a.is_number and (b / q).is_number]


def _pulled(signs: Signs, radicand: Any) -> tuple[Any, Any]:
    """(c, P) with radicand = c·P and c a constant known to be positive."""
    content, found = factors(radicand)
    scale = signs.ring.context.constant(abs(content))
    for factor, times in found:
        if degree(factor) <= 0 and signs.factor(factor) is not None:
            sign = signs.factor(factor)
            scale = scale * (factor if sign == 1 else -factor) ** times
    return scale, radicand / scale


def _deflated(kernel: Kernel, q: Ratio, radicand: Any) -> tuple[Kernel, Ratio, Any]:
    """Replace u by u^k where Q √P du = f(u^k) u^(k−1) du; no sign enters."""
    above, below = _exponents(q.num), _exponents(q.den)
    k = abs(above[0] - below[0] + 1)
    for exponents in (above, below):
        for e in exponents:
            k = gcd(k, e - exponents[0])
    for e in _exponents(radicand):
        k = gcd(k, e)
    if k < 2 or (degree(radicand) < 1 and len(below) == 1):
        return kernel, q, radicand
    ring, a, b = q.ring, above[0], below[0]
    value = Ratio(ring, _shrink(q.num, a, k), _shrink(q.den, b, k))
    value = value * ring.u ** ((a - b + 1 - k) // k) * ring.number(k).inverse()
    lower, upper = kernel.span
    if k % 2 == 0 and not lower.is_nonnegative:
        lower, upper = S.Zero, oo
    span = (lower**k if lower.is_finite else lower, upper**k if upper.is_finite else upper)
    partner = kernel.partner if k == 2 else None
    deflated = replace(
        kernel,
        expression=kernel.expression**k,
        span=span,
        partner=replace(partner, power=1) if partner else None,
        shifts=(),
    )
    return deflated, value, _shrink(radicand, 0, k)


def _exponents(poly: Any) -> list[int]:
    return sorted({int(e[0]) for e in poly.monoms()})


def _shrink(poly: Any, offset: int, k: int) -> Any:
    terms = {((e[0] - offset) // k, *e[1:]): c for e, c in poly.to_dict().items()}
    return poly.context().from_dict(terms)


def size(expression: Expr) -> int:
    """Subexpressions counted as often as they occur, each looked at once.

    Everything below walks the tree, and a graph of a thousand nodes can be a
    tree of millions.
    """
    known: dict[Expr, int] = {}
    stack = [(expression, False)]
    while stack:
        e, ready = stack.pop()
        if e in known:
            continue
        if ready:
            known[e] = 1 + sum(known[a] for a in e.args)
        else:
            stack.append((e, True))
            stack.extend((a, False) for a in e.args)
    return known[expression]


def _constants(integrand: Expr, variable: Symbol, found: dict[Expr, None]) -> None:
    """The generators of the constant parts of the integrand."""
    if not integrand.has(variable):
        opaque(integrand, found)
        return
    for part in integrand.args:
        if part.has(variable) or not (integrand.is_Pow and isinstance(part, Rational)):
            _constants(part, variable, found)


def rooted(integrand: Expr, variable: Symbol) -> bool:
    """Whether a root of a function of the variable occurs, other than of itself."""
    return any(
        power.base.has(variable) and power.exp.is_Rational and power.exp.q > 1
        for power in integrand.atoms(Pow)
        if power.base != variable
    )

"""Values and derivatives of a graph at one real point, in ball arithmetic.

Every number is an interval that contains the true value, whatever rounding did
(Johansson, IEEE Trans. Comput. 66 (2017) 1281; citation from memory).  A ball
that does not contain 0 is a proof that the expression is not identically 0.
"""

from __future__ import annotations

from collections.abc import Callable, Collection, Iterator, Mapping
from contextlib import contextmanager
from dataclasses import dataclass, field
from fractions import Fraction
from typing import Any

from flint import arb, ctx, fmpq
from sympy import Symbol

from hjsolve.algebra import elliptic
from hjsolve.algebra.graph import Graph

Pair = tuple[int, int]


class OutsideDomain(Exception):
    """The expression has no real value at the point."""


class Imprecise(Exception):
    """The balls are too wide to tell; more bits may do."""


class NotSupported(Exception):
    """A function is met that has no ball evaluation here."""


@dataclass(slots=True)
class BallJet:
    """A value, with the first and the wanted second derivatives that are not 0."""

    value: Any
    first: dict[int, Any] = field(default_factory=dict)
    second: dict[Pair, Any] = field(default_factory=dict)


@dataclass(frozen=True, slots=True)
class Ridges:
    """Σ_k c_k(x·w_k): a function that stands in for an arbitrary one.

    ``directions`` are the w_k, ``coefficients`` the polynomials c_k from the
    constant term up; all derivatives of all orders below the degree are generic.
    """

    directions: tuple[tuple[Fraction, ...], ...]
    coefficients: tuple[tuple[Fraction, ...], ...]

    def derivative(self, orders: tuple[int, ...], arguments: list[Any]) -> Any:
        """The partial derivative of these orders at ``arguments`` (balls)."""
        total = arb(0)
        for direction, coefficients in zip(self.directions, self.coefficients, strict=True):
            along = sum((exact(w) * x for w, x in zip(direction, arguments, strict=True)), arb(0))
            weight = Fraction(1)
            for w, times in zip(direction, orders, strict=True):
                weight *= w**times
            polynomial = list(coefficients)
            for _ in range(sum(orders)):
                polynomial = [k * c for k, c in enumerate(polynomial)][1:]
            value = arb(0)
            for c in reversed(polynomial):
                value = value * along + exact(c)
            total += exact(weight) * value
        return total


def exact(number: Fraction) -> Any:
    """A rational number as a ball at the current precision."""
    return arb(fmpq(number.numerator, number.denominator))


@contextmanager
def precision(bits: int) -> Iterator[None]:
    """Work at ``bits`` inside the block."""
    before = ctx.prec
    ctx.prec = bits
    try:
        yield
    finally:
        ctx.prec = before


class BallWalk:
    """One evaluation of a graph; raises OutsideDomain, Imprecise, NotSupported.

    A coordinate of ``point`` that is no rational number is a function without
    arguments that gives a ball at the working precision.
    """

    def __init__(
        self,
        graph: Graph,
        point: Mapping[Symbol, Fraction | Callable[[], Any]],
        functions: Mapping[str, Ridges],
        variables: Mapping[Symbol, int] | None = None,
        pairs: Collection[Pair] = (),
    ) -> None:
        self.graph = graph
        self.point = point
        self.functions = functions
        self.variables = variables or {}
        self.pairs = {(min(a, b), max(a, b)) for a, b in pairs}

    def run(self) -> list[BallJet]:
        """The jets of the graph's roots at the working precision."""
        out: list[BallJet] = []
        try:
            for node in self.graph.nodes:
                jet = self._node(node.op, node.payload, [out[a] for a in node.args])
                if not jet.value.is_finite():
                    raise Imprecise
                out.append(jet)
        except (ZeroDivisionError, elliptic.NotReal) as error:
            raise OutsideDomain from error
        except elliptic.Wide as error:
            raise Imprecise from error
        return [out[r] for r in self.graph.roots]

    def _node(self, op: str, payload: Any, children: list[BallJet]) -> BallJet:
        match op:
            case "number":
                return BallJet(arb(fmpq(*payload)))
            case "pi":
                return BallJet(arb.pi())
            case "symbol":
                at = self.point[payload]
                jet = BallJet(at() if callable(at) else exact(at))
                if payload in self.variables:
                    jet.first[self.variables[payload]] = arb(1)
                return jet
            case "add":
                return self._sum(children)
            case "mul":
                product = children[0]
                for child in children[1:]:
                    product = self._product(product, child)
                return product
            case "atan2" | "call":
                return self._several(op, payload, children)
            case "delta":
                radicand, u, m = children
                f, first, second = _power_slopes(radicand.value, 1, 2)
                sign = elliptic.delta_sign(u.value, m.value)
                return self._chain(radicand, sign * f, sign * first, sign * second)
            case _:
                return self._chain(children[0], *self._slopes(op, payload, children[0]))

    def _sum(self, children: list[BallJet]) -> BallJet:
        total = BallJet(children[0].value, dict(children[0].first), dict(children[0].second))
        for child in children[1:]:
            total.value = total.value + child.value
            for k, d in child.first.items():
                total.first[k] = total.first[k] + d if k in total.first else d
            for pair, d in child.second.items():
                total.second[pair] = total.second[pair] + d if pair in total.second else d
        return total

    def _product(self, a: BallJet, b: BallJet) -> BallJet:
        out = BallJet(a.value * b.value)
        for one, other in ((a, b), (b, a)):
            for k, d in one.first.items():
                out.first[k] = out.first.get(k, 0) + d * other.value
            for pair, d in one.second.items():
                out.second[pair] = out.second.get(pair, 0) + d * other.value
        if a.first and b.first:
            for i, j in self.pairs:
                for x, y in ((i, j), (j, i)):
                    if x in a.first and y in b.first:
                        cross = a.first[x] * b.first[y]
                        out.second[i, j] = out.second.get((i, j), 0) + cross
        return out

    def _chain(self, u: BallJet, value: Any, first: Any, second: Any) -> BallJet:
        out = BallJet(value)
        if not u.first:
            return out
        out.first = {k: first * d for k, d in u.first.items()}
        out.second = {pair: first * d for pair, d in u.second.items()}
        for i, j in self.pairs:
            if i in u.first and j in u.first:
                out.second[i, j] = out.second.get((i, j), 0) + second * u.first[i] * u.first[j]
        return out

    def _slopes(self, op: str, payload: Any, jet: BallJet) -> tuple[Any, Any, Any]:
        """f, f′, f″ of a function of one argument."""
        u = jet.value
        match op:
            case "power":
                return _power_slopes(u, *payload)
            case "exp":
                f = u.exp()
                return f, f, f
            case "log":
                _need_positive(u)
                inverse = 1 / u
                return u.log(), inverse, -inverse * inverse
            case "sin":
                s, c = u.sin_cos()
                return s, c, -s
            case "cos":
                s, c = u.sin_cos()
                return c, -s, -c
            case "asin":
                square = 1 - u * u
                _need_positive(square)
                first = 1 / square.sqrt()
                return u.asin(), first, u * first / square
            case "atan":
                inverse = 1 / (1 + u * u)
                return u.atan(), inverse, -2 * u * inverse * inverse
            case "lambert":
                f = u.lambertw()
                if not f.is_finite() or (1 + f).contains(0) or u.contains(0):
                    raise OutsideDomain
                first = f / (u * (1 + f))
                return f, first, -first * first * (f + 2) / (1 + f)
            case "abs" | "sign":
                if u.contains(0):
                    raise Imprecise
                s = arb(1) if u > 0 else arb(-1)
                return (s * u, s, arb(0)) if op == "abs" else (s, arb(0), arb(0))
        raise NotSupported(op)

    def _several(self, op: str, payload: Any, children: list[BallJet]) -> BallJet:
        """A function of several arguments, by the chain rule."""
        args = [c.value for c in children]
        n = len(args)
        if op == "atan2":
            y, x = args
            square = x * x + y * y
            if square.contains(0) or (y.contains(0) and not x > 0):
                raise Imprecise
            value = arb.atan2(y, x)
            cross, difference = -2 * x * y / square**2, (y * y - x * x) / square**2
            first = [x / square, -y / square]
            second = [[cross, difference], [difference, -cross]]
        else:
            name, orders = payload
            if name not in self.functions:
                return self._special(name, orders, children)
            stand_in = self.functions[name]
            unit = [tuple(int(k == i) for k in range(n)) for i in range(n)]
            value = stand_in.derivative(orders, args)
            first = [stand_in.derivative(_add(orders, e), args) for e in unit]
            second = [
                [stand_in.derivative(_add(_add(orders, e), d), args) for d in unit] for e in unit
            ]
        return self._composed(value, children, first, second)

    def _special(self, name: str, orders: tuple[int, ...], children: list[BallJet]) -> BallJet:
        """An elliptic function, with the derivatives its arguments need."""
        if any(orders) or not elliptic.known(name):
            raise NotSupported(name)
        args = [c.value for c in children]
        n = len(args)

        if name == "jacobi_am" and children[1].first and not args[1] < 1:
            raise NotSupported("the derivative of am by m where m is not below 1")

        def slope(*by: int) -> Any:
            if not all(children[k].first for k in by) or (len(by) == 2 and not self.pairs):
                return arb(0)
            letters, graph = elliptic.partial(name, n, by)
            at = {x: lambda a=a: a for x, a in zip(letters, args, strict=True)}
            return BallWalk(graph, at, {}).run()[0].value

        first = [slope(i) for i in range(n)]
        second = [[slope(min(i, j), max(i, j)) for j in range(n)] for i in range(n)]
        return self._composed(elliptic.value(name, args), children, first, second)

    def _composed(
        self, value: Any, children: list[BallJet], first: list[Any], second: list[list[Any]]
    ) -> BallJet:
        out = BallJet(value)
        for i, a in enumerate(children):
            for k, d in a.first.items():
                out.first[k] = out.first.get(k, 0) + first[i] * d
            for pair, d in a.second.items():
                out.second[pair] = out.second.get(pair, 0) + first[i] * d
            for j, b in enumerate(children):
                for x, y in self.pairs:
                    if x in a.first and y in b.first:
                        cross = second[i][j] * a.first[x] * b.first[y]
                        out.second[x, y] = out.second.get((x, y), 0) + cross
        return out


def _add(a: tuple[int, ...], b: tuple[int, ...]) -> tuple[int, ...]:
    return tuple(x + y for x, y in zip(a, b, strict=True))


def _need_positive(u: Any) -> None:
    if u < 0 or u == 0:
        raise OutsideDomain
    if not u > 0:
        raise Imprecise


def _power_slopes(u: Any, numerator: int, denominator: int) -> tuple[Any, Any, Any]:
    """u^(numerator/denominator) with two derivatives; real branch, u > 0 for roots."""
    if denominator == 1:
        n = numerator
        if n >= 2:
            lower = u ** (n - 2)
            first = lower * u
            return first * u, n * first, n * (n - 1) * lower
        if u.contains(0):
            raise OutsideDomain if u == 0 else Imprecise
        f = u**n
        return f, n * f / u, n * (n - 1) * f / (u * u)
    _need_positive(u)
    exponent = fmpq(numerator, denominator)
    f = u.root(denominator) ** numerator if denominator < 64 else (u.log() * exponent).exp()
    first = arb(exponent) * f / u
    return f, first, arb(exponent - 1) * first / u

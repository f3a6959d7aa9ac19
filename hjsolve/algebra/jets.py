"""Gradients and second derivatives of a graph at random points modulo a prime."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import cast

import numpy as np
from sympy import Symbol

from hjsolve.algebra.graph import Graph
from hjsolve.algebra.modular import POINTS, Array, Walk, key_of


@dataclass(slots=True)
class Jet:
    """Value (K,), gradient (K, s) and second derivatives (K, s, s) in ``support``."""

    support: tuple[int, ...]
    value: Array
    gradient: Array
    hessian: Array


class JetWalk(Walk):
    """One evaluation of a graph with jets in ``variables``, K points, modulo p."""

    def __init__(self, graph: Graph, variables: Sequence[Symbol]) -> None:
        super().__init__(graph)
        self.index = {v: k for k, v in enumerate(variables)}

    def jets(self) -> tuple[list[Jet], int]:
        """The jets of the graph's roots, and the number of points; raises NoPoints."""
        at = self.points()
        size = next((v.size for v in at.values()), POINTS)
        walked = self._walk(at, size)
        return [walked[r] for r in self.graph.roots], size

    def _walk(self, values: dict[Symbol, Array], size: int) -> list[Jet]:
        out: list[Jet] = []
        for node in self.graph.nodes:
            children = [out[a] for a in node.args]
            out.append(self._jet(node.op, node.payload, children, values, size))
        return out

    def _jet(
        self,
        op: str,
        payload: object,
        children: list[Jet],
        values: dict[Symbol, Array],
        size: int,
    ) -> Jet:
        p = self.field.p
        if op == "add":
            return self._sum(children, size)
        if op == "mul":
            product = children[0]
            for child in children[1:]:
                product = self._product(product, child)
            return product
        value = self.evaluate(op, payload, [c.value for c in children], values, size)
        if op == "symbol" and payload in self.index:
            jet = _constant(value)
            jet.support = (self.index[payload],)
            jet.gradient = np.ones((size, 1), dtype=np.int64)
            jet.hessian = np.zeros((size, 1, 1), dtype=np.int64)
            return jet
        inner = [children[0]] if op in ("exp", "log", "sin", "cos", "delta") else children
        if not any(c.support for c in inner):
            return _constant(value)
        if op in ("call", "atan2"):
            first, second = self._partials(op, payload, inner, value)
            return self._composed(inner, value, first, second)
        if op in ("sin", "cos"):
            cosine, sine, _ = self.turn(payload, [c.value for c in children[1:]])  # type: ignore[arg-type]
            first1 = cosine if op == "sin" else (p - sine) % p
            second1 = (p - value) % p
        else:
            first1, second1 = self._slopes(op, payload, inner[0].value, value)
        u = inner[0]
        outer = u.gradient[:, :, None] * u.gradient[:, None, :] % p
        return Jet(
            u.support,
            value,
            first1[:, None] * u.gradient % p,
            (first1[:, None, None] * u.hessian + second1[:, None, None] * outer % p) % p,
        )

    def _slopes(self, op: str, payload: object, u: Array, f: Array) -> tuple[Array, Array]:
        """f′(u), f″(u) for a function of one argument with value f."""
        field, p = self.field, self.field.p
        match op:
            case "power":
                n = field.rational(*payload)  # type: ignore[misc]
                if payload[1] == 1 and payload[0] >= 2:  # type: ignore[index]
                    lower = field.power(u, payload[0] - 2)  # type: ignore[index]
                    return n * (lower * u % p) % p, n * (n - 1) % p * lower % p
                inverse = field.inverse(u)
                first = n * f % p * inverse % p
                return first, (n - 1) % p * first % p * inverse % p
            case "exp":
                return f, f
            case "log":
                inverse = field.inverse(u)
                return inverse, (p - inverse * inverse % p) % p
            case "asin":
                square = (1 - u * u) % p
                root = self.root_power(square, 1, 2)
                first = field.inverse(root)
                return first, u * first % p * field.inverse(square) % p
            case "atan":
                inverse = field.inverse((1 + u * u) % p)
                return inverse, (p - 2 * u * inverse % p * inverse % p) % p
            case "lambert":  # W e^W = u, so W' = W/(u (1 + W))
                below = field.inverse((1 + f) % p)
                first = f * field.inverse(u) % p * below % p
                second = first * first % p * ((f + 2) % p) % p * below % p
                return first, (p - second) % p
            case "delta":  # f² = u
                first = field.inverse(2 * f % p)
                return first, (p - first * field.inverse(2 * u % p) % p) % p
            case "abs":
                return self.sign(u), np.zeros_like(u)
            case _:  # sign
                return np.zeros_like(u), np.zeros_like(u)

    def _partials(
        self, op: str, payload: object, children: list[Jet], value: Array
    ) -> tuple[list[Array], list[list[Array]]]:
        """First and second partial derivatives of a function of several arguments."""
        field, p = self.field, self.field.p
        args = [c.value for c in children]
        if op == "atan2":
            y, x = args
            r = field.inverse((x * x + y * y) % p)
            r2 = r * r % p
            xy = 2 * x * y % p * r2 % p
            difference = (y * y - x * x) % p * r2 % p
            return (
                [x * r % p, (p - y * r % p) % p],
                [[(p - xy) % p, difference], [difference, xy]],
            )
        name, orders = cast("tuple[str, tuple[int, ...]]", payload)
        first, second = [], []
        for i in range(len(args)):
            raised = _raised(orders, i)
            first.append(field.hashed(key_of((name, raised)), *args))
            second.append(
                [field.hashed(key_of((name, _raised(raised, j))), *args) for j in range(len(args))]
            )
        return first, second

    def _composed(
        self, children: list[Jet], value: Array, first: list[Array], second: list[list[Array]]
    ) -> Jet:
        p = self.field.p
        support = tuple(sorted(set().union(*(c.support for c in children))))
        full = [_spread(c, support) for c in children]
        gradient = np.zeros((value.size, len(support)), dtype=np.int64)
        hessian = np.zeros((value.size, len(support), len(support)), dtype=np.int64)
        for i, a in enumerate(full):
            gradient = (gradient + first[i][:, None] * a.gradient) % p
            hessian = (hessian + first[i][:, None, None] * a.hessian) % p
            for j, b in enumerate(full):
                outer = a.gradient[:, :, None] * b.gradient[:, None, :] % p
                hessian = (hessian + second[i][j][:, None, None] * outer) % p
        return Jet(support, value, gradient, hessian)

    def _sum(self, children: list[Jet], size: int) -> Jet:
        p = self.field.p
        support = tuple(sorted(set().union(*(c.support for c in children))))
        s = len(support)
        total = Jet(
            support,
            np.zeros(size, dtype=np.int64),
            np.zeros((size, s), dtype=np.int64),
            np.zeros((size, s, s), dtype=np.int64),
        )
        for child in children:
            total.value = (total.value + child.value) % p
            if child.support == support:
                total.gradient = (total.gradient + child.gradient) % p
                total.hessian = (total.hessian + child.hessian) % p
            elif child.support:
                at = np.array([support.index(k) for k in child.support])
                total.gradient[:, at] = (total.gradient[:, at] + child.gradient) % p
                block = np.ix_(np.arange(size), at, at)
                total.hessian[block] = (total.hessian[block] + child.hessian) % p
        return total

    def _product(self, a: Jet, b: Jet) -> Jet:
        p = self.field.p
        value = a.value * b.value % p
        for one, other in ((a, b), (b, a)):
            if not one.support:
                k = one.value
                return Jet(
                    other.support,
                    value,
                    other.gradient * k[:, None] % p,
                    other.hessian * k[:, None, None] % p,
                )
        support = tuple(sorted({*a.support, *b.support}))
        a, b = _spread(a, support), _spread(b, support)
        av, bv = a.value[:, None], b.value[:, None]
        gradient = (av * b.gradient % p + bv * a.gradient) % p
        outer = a.gradient[:, :, None] * b.gradient[:, None, :] % p
        hessian = (
            av[:, :, None] * b.hessian % p
            + bv[:, :, None] * a.hessian % p
            + outer
            + outer.transpose(0, 2, 1)
        ) % p
        return Jet(support, value, gradient, hessian)


def _constant(value: Array) -> Jet:
    size = value.size
    return Jet(
        (), value, np.zeros((size, 0), dtype=np.int64), np.zeros((size, 0, 0), dtype=np.int64)
    )


def _spread(jet: Jet, support: tuple[int, ...]) -> Jet:
    if jet.support == support:
        return jet
    size, s = jet.value.size, len(support)
    at = np.array([support.index(k) for k in jet.support], dtype=np.int64)
    gradient = np.zeros((size, s), dtype=np.int64)
    hessian = np.zeros((size, s, s), dtype=np.int64)
    if jet.support:
        gradient[:, at] = jet.gradient
        hessian[np.ix_(np.arange(size), at, at)] = jet.hessian
    return Jet(support, jet.value, gradient, hessian)


def _raised(orders: tuple[int, ...], i: int) -> tuple[int, ...]:
    return (*orders[:i], orders[i] + 1, *orders[i + 1 :])

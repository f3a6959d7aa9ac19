"""Expressions as a list of operations, run on balls, complex balls or NumPy arrays.

The part that does not depend on the running variables is evaluated once; what
is left costs about a microsecond an operation in balls.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np
from flint import arb, fmpq
from sympy import Expr, Symbol

from hjsolve.algebra.graph import Graph, TooLarge
from hjsolve.errors import InputError

KNOWN = frozenset(
    (
        *("number", "pi", "symbol", "add", "mul", "power", "exp", "log"),
        *("sin", "cos", "asin", "atan", "atan2", "abs", "sign"),
    )
)
"""Operations that have an evaluation here."""


def cannot(detail: str, code: str = "not-in-numbers", pointer: str = "") -> InputError:
    """The refusal of something that this room has no numbers for."""
    return InputError(detail, code=code, pointer=pointer)


class Tape:
    """Several expressions, compiled once; ``fixed`` gives the symbols that stay.

    Args:
        expressions: what is wanted, in this order.
        running: the symbols whose values come with every run.

    Raises:
        InputError: a function is met that has no evaluation here, or the
            formula is too large.
    """

    def __init__(self, expressions: Sequence[Expr], running: Sequence[Symbol]) -> None:
        try:
            graph = Graph(expressions)
        except (TooLarge, TypeError) as error:
            raise cannot(f"the formula has no numerical evaluation: {error}") from error
        unknown = {node.op for node in graph.nodes} - KNOWN
        if unknown:
            raise cannot(f"no numerical evaluation is known for {', '.join(sorted(unknown))}")
        self.nodes = graph.nodes
        self.roots = graph.roots
        self.running = tuple(running)
        moving: list[bool] = []
        for node in self.nodes:
            own = node.op == "symbol" and node.payload in self.running
            moving.append(own or any(moving[a] for a in node.args))
        self.moving = moving
        self.later = [i for i, m in enumerate(moving) if m and self.nodes[i].op != "symbol"]
        self.slots = [
            next((i for i, n in enumerate(self.nodes) if n.op == "symbol" and n.payload == s), None)
            for s in self.running
        ]

    def fix(self, values: Mapping[Symbol, Any]) -> Fixed:
        """The tape with numbers (balls) for all symbols but the running ones.

        Raises:
            InputError: a symbol has no number.
        """
        out: list[Any] = [None] * len(self.nodes)
        for i, node in enumerate(self.nodes):
            if self.moving[i]:
                continue
            if node.op == "symbol":
                if node.payload not in values:
                    raise cannot(f"no number was given for {node.payload}", "missing")
                out[i] = values[node.payload]
            else:
                out[i] = ball_operation(node.op, node.payload, [out[a] for a in node.args])
        return Fixed(self, out)


class Fixed:
    """A tape whose constants have their numbers."""

    def __init__(self, tape: Tape, constants: list[Any]) -> None:
        self.tape = tape
        self.constants = constants
        nodes = tape.nodes
        self.program = [(i, nodes[i].op, nodes[i].payload, nodes[i].args) for i in tape.later]
        self._floats: list[Any] | None = None

    def balls(self, *at: Any) -> list[Any]:
        """The values at a point of balls (real or complex); nan where there is none."""
        out = list(self.constants)
        for slot, value in zip(self.tape.slots, at, strict=True):
            if slot is not None:
                out[slot] = value
        for i, op, payload, args in self.program:
            if op == "mul":
                value = out[args[0]]
                for a in args[1:]:
                    value = value * out[a]
                out[i] = value
            elif op == "add":
                value = out[args[0]]
                for a in args[1:]:
                    value = value + out[a]
                out[i] = value
            else:
                out[i] = ball_operation(op, payload, [out[a] for a in args])
        return [out[r] for r in self.tape.roots]

    def floats(self, *at: Any) -> list[Any]:
        """The values at NumPy arrays (or floats), in double precision."""
        if self._floats is None:
            self._floats = [None if c is None else float(c.mid()) for c in self.constants]
        out = list(self._floats)
        for slot, value in zip(self.tape.slots, at, strict=True):
            if slot is not None:
                out[slot] = value
        for i, op, payload, args in self.program:
            out[i] = _float_operation(op, payload, [out[a] for a in args])
        return [out[r] for r in self.tape.roots]


def ball_operation(op: str, payload: Any, args: list[Any]) -> Any:
    """One operation on balls; a ball that is not finite where it has no value."""
    match op:
        case "number":
            return arb(fmpq(*payload))
        case "pi":
            return arb.pi()
        case "add":
            return sum(args[1:], args[0])
        case "mul":
            value = args[0]
            for a in args[1:]:
                value = value * a
            return value
        case "power":
            return _ball_power(args[0], *payload)
        case "exp":
            return args[0].exp()
        case "log":
            return args[0].log()
        case "sin":
            return args[0].sin()
        case "cos":
            return args[0].cos()
        case "asin":
            return args[0].asin()
        case "atan":
            return args[0].atan()
        case "atan2":
            return arb.atan2(args[0], args[1])
        case "abs":
            return abs(args[0])
        case "sign":
            u = args[0]
            return arb(1) if u > 0 else arb(-1) if u < 0 else arb(0, 1)
    raise cannot(f"no numerical evaluation is known for {op}")


def _ball_power(u: Any, numerator: int, denominator: int) -> Any:
    try:
        if denominator == 1:
            return _whole_power(u, numerator)
        if denominator == 2:
            return _whole_power(u.sqrt(), numerator)
        return (u.log() * arb(fmpq(numerator, denominator))).exp()
    except ZeroDivisionError:
        return u * arb.nan()


def _whole_power(u: Any, n: int) -> Any:
    """u**n, by squaring where the library's power has no value: for a ball about 0."""
    if not u.contains(0):
        return u**n
    if n < 0:
        return 1 / _whole_power(u, -n)
    value, square = arb(1), u
    while n:
        if n & 1:
            value = value * square
        n >>= 1
        if n:
            square = square * square
    return value


def _float_operation(op: str, payload: Any, args: list[Any]) -> Any:
    match op:
        case "add":
            return sum(args[1:], args[0])
        case "mul":
            value = args[0]
            for a in args[1:]:
                value = value * a
            return value
        case "power":
            numerator, denominator = payload
            if denominator == 1:
                return args[0] ** float(numerator) if numerator < 0 else args[0] ** numerator
            if denominator == 2 and numerator == 1:
                return np.sqrt(args[0])
            return args[0] ** (numerator / denominator)
        case "atan2":
            return np.arctan2(args[0], args[1])
        case "asin" | "atan":
            return {"asin": np.arcsin, "atan": np.arctan}[op](args[0])
        case _:
            return getattr(np, op)(args[0])

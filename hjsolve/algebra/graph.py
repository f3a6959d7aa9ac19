"""An expression as a flat list of operations that every evaluator walks once.

Shared subexpressions are one node, so a formula whose tree has half a million
operations but whose graph has two thousand costs two thousand.  The reduction
to few operations is exact: hyperbolic functions go through ``exp``, ``tan``
through ``sin`` and ``cos``, a symbolic power through ``exp`` and ``log``.

An argument of ``exp``, ``sin``, ``cos`` is kept as a rational combination of
monomials, because the modular evaluator needs exp(a + b) = exp(a) exp(b) to
hold between values it draws at random.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import sympy as sp
from sympy import Add, Expr, Mul, Pow, Rational, Symbol

from hjsolve.algebra.functions import jacobi_am, jacobi_cn, jacobi_dn, jacobi_sn

NODE_LIMIT = 60_000
"""A graph larger than this is not evaluated; the caller says so."""

EXPAND_LIMIT = 150
"""An argument of exp, sin, cos with more operations is not multiplied out."""


ANGLE_LIMIT = 4
"""Multiples of an inverse circular function above this keep their angle."""


class TooLarge(Exception):
    """The graph passes NODE_LIMIT."""


@dataclass(frozen=True, slots=True)
class Node:
    """One operation.

    ``op`` is one of ``number pi symbol add mul power exp log sin cos asin atan
    atan2 lambert abs sign delta call``.  ``delta`` is dn(u, m) with arguments
    1 − m sn², u, m: a root of the first on a branch of its own, since dn changes
    its sign where m > 1.  ``args`` are positions in the graph.  ``payload``:
    the number, the symbol, the rational exponent, the rational coefficients of
    the monomials (exp, sin, cos: args are the argument as a whole, then the
    monomials) or of the factors (log: likewise), or (name, derivative orders) of a called function.
    """

    op: str
    args: tuple[int, ...]
    payload: Any = None


class Graph:
    """Expressions compiled into one list of nodes, children before parents."""

    def __init__(self, expressions: Sequence[Expr]) -> None:
        """Compile; raises TooLarge."""
        self.nodes: list[Node] = []
        self._position: dict[Any, int] = {}
        self._known: dict[Node, int] = {}
        self.roots = tuple(self.add(e) for e in expressions)

    def add(self, expression: Expr) -> int:
        """The position of ``expression``, compiled with its parts when new."""
        stack: list[tuple[Expr, bool]] = [(expression, False)]
        while stack:
            current, ready = stack.pop()
            if current in self._position:
                continue
            parts = _parts(current)
            if ready or not parts:
                self._position[current] = self._make(current, parts)
            else:
                stack.append((current, True))
                stack.extend((part, False) for part in parts if part not in self._position)
        return self._position[expression]

    def _node(self, op: str, args: tuple[int, ...] = (), payload: Any = None) -> int:
        node = Node(op, args, payload)
        found = self._known.get(node)
        if found is None:
            if len(self.nodes) >= NODE_LIMIT:
                raise TooLarge
            found = self._known[node] = len(self.nodes)
            self.nodes.append(node)
        return found

    def _make(self, e: Expr, parts: tuple[Expr, ...]) -> int:
        at = tuple(self._position[p] for p in parts)
        if isinstance(e, Rational):
            return self._node("number", (), (int(e.p), int(e.q)))
        if isinstance(e, Symbol):
            return self._node("symbol", (), e)
        if e is sp.pi:
            return self._node("pi")
        if isinstance(e, Add):
            return self._node("add", at)
        if isinstance(e, Mul):
            return self._node("mul", at)
        if isinstance(e, Pow) and isinstance(e.exp, Rational):
            return self._node("power", at, (int(e.exp.p), int(e.exp.q)))
        if _opened(e) is not None:
            return at[0]
        if isinstance(e, (sp.exp, sp.sin, sp.cos)):
            coefficients = tuple((int(c.p), int(c.q)) for c, _ in combination(e.args[0]))
            return self._node(type(e).__name__, at, coefficients)
        if isinstance(e, sp.log):
            exponents = tuple((int(c.p), int(c.q)) for c, _ in factors(e.args[0]))
            return self._node("log", at, exponents)
        simple = _SIMPLE.get(type(e))
        if simple is not None:
            return self._node(simple, at)
        if isinstance(e, jacobi_dn):
            return self._node("delta", at)
        other = rewritten(e)
        if other is not None:
            return at[0]
        name, orders, _ = _call(e)
        return self._node("call", at, (name, orders))


_SIMPLE = {
    sp.LambertW: "lambert",
    sp.asin: "asin",
    sp.atan: "atan",
    sp.atan2: "atan2",
    sp.Abs: "abs",
    sp.sign: "sign",
}


def rewritten(e: Expr) -> Expr | None:
    """``e`` through the few operations a graph knows, or None if it stays."""
    if e is sp.E:
        return sp.exp(sp.S.One, evaluate=False)
    if isinstance(e, Pow):
        plain, rest = e.exp.as_coeff_Add(rational=True)
        power = sp.exp(rest * sp.log(e.base), evaluate=False)
        return power if plain == 0 else Mul(e.base**plain, power, evaluate=False)
    u: Any = e.args[0] if e.args else None
    match e:
        case jacobi_sn():
            return sp.sin(jacobi_am(*e.args))
        case jacobi_cn():
            return sp.cos(jacobi_am(*e.args))
        case sp.tan():
            return sp.sin(u) / sp.cos(u)
        case sp.cot():
            return sp.cos(u) / sp.sin(u)
        case sp.sec():
            return 1 / sp.cos(u)
        case sp.csc():
            return 1 / sp.sin(u)
        case sp.sinh():
            return (sp.exp(u) - sp.exp(-u)) / 2
        case sp.cosh():
            return (sp.exp(u) + sp.exp(-u)) / 2
        case sp.tanh():
            return (sp.exp(2 * u) - 1) / (sp.exp(2 * u) + 1)
        case sp.coth():
            return (sp.exp(2 * u) + 1) / (sp.exp(2 * u) - 1)
        case sp.sech():
            return 2 / (sp.exp(u) + sp.exp(-u))
        case sp.csch():
            return 2 / (sp.exp(u) - sp.exp(-u))
        case sp.acos():
            return sp.pi / 2 - sp.asin(u)
        case sp.acot():
            return sp.atan(1 / u)
        case sp.asinh():
            return sp.log(u + sp.sqrt(u**2 + 1))
        case sp.acosh():
            return sp.log(u + sp.sqrt(u**2 - 1))
        case sp.atanh():
            return (sp.log(1 + u) - sp.log(1 - u)) / 2
    return None


def _opened(e: Expr) -> Expr | None:
    """|uv| as |u||v|; sin, cos of n·asin x and the like, n a small integer, without the angle."""
    if isinstance(e, (sp.Abs, sp.sign)) and isinstance(e.args[0], Mul):
        return Mul(*(e.func(factor) for factor in e.args[0].args))
    if not isinstance(e, (sp.sin, sp.cos)):
        return None
    times, inner = e.args[0].as_coeff_Mul(rational=True)
    if not isinstance(inner, (sp.asin, sp.acos, sp.atan)):
        return None
    if not times.is_Integer or not 2 <= abs(times) <= ANGLE_LIMIT:
        return None
    u = sp.Dummy()
    return sp.expand_trig(e.func(times * u)).xreplace(
        {sp.sin(u): sp.sin(inner), sp.cos(u): sp.cos(inner)}
    )


def _parts(e: Expr) -> tuple[Expr, ...]:
    """The expressions that must be compiled before ``e``."""
    if isinstance(e, (Rational, Symbol)) or e is sp.pi:
        return ()
    if isinstance(e, (Add, Mul)):
        return tuple(e.args)
    if isinstance(e, Pow) and isinstance(e.exp, Rational):
        return (e.base,)
    opened = _opened(e)
    if opened is not None:
        return (opened,)
    if isinstance(e, (sp.exp, sp.sin, sp.cos)):
        return (e.args[0], *(m for _, m in combination(e.args[0])))
    if isinstance(e, sp.log):
        return (e.args[0], *(f for _, f in factors(e.args[0])))
    if type(e) in _SIMPLE:
        return tuple(e.args)
    if isinstance(e, jacobi_dn):
        u, m = e.args
        return (1 - m * sp.sin(jacobi_am(u, m)) ** 2, u, m)
    other = rewritten(e)
    if other is not None:
        return (other,)
    return _call(e)[2]


def _call(e: Expr) -> tuple[str, tuple[int, ...], tuple[Expr, ...]]:
    """(name, derivative orders, arguments) of an applied function or its derivative."""
    if isinstance(e, sp.Subs):
        name, orders, inner = _call(e.expr)
        swap = dict(zip(e.variables, e.point, strict=True))
        return name, orders, tuple(a.xreplace(swap) for a in inner)
    if isinstance(e, sp.Derivative):
        inner = e.expr
        name, orders, arguments = _call(inner)
        counted = list(orders)
        for symbol, count in e.variable_count:
            if symbol not in arguments:
                raise TypeError("a derivative that was left over has no place in a graph")
            counted[arguments.index(symbol)] += int(count)
        return name, tuple(counted), arguments
    if not isinstance(e, sp.Function):
        raise TypeError(f"an expression of kind {type(e).__name__} has no place in a graph")
    return type(e).__name__, (0,) * len(e.args), tuple(e.args)


def combination(argument: Expr) -> tuple[tuple[Rational, Expr], ...]:
    """``argument`` as a sum of rational multiples of monomials."""
    opens = isinstance(argument, (Mul, Pow, Add)) and argument.count_ops() <= EXPAND_LIMIT
    if opens and _small_powers(argument):
        argument = argument.expand(power_base=False, power_exp=False, log=False, basic=False)
    terms = []
    for term in Add.make_args(argument):
        coefficient, monomial = term.as_coeff_Mul(rational=True)
        if isinstance(coefficient, Rational):
            terms.append((coefficient, monomial))
        else:
            terms.append((sp.S.One, term))
    return tuple(terms)


def factors(argument: Expr) -> tuple[tuple[Rational, Expr], ...]:
    """``argument`` as a product of rational powers; small integers as powers of primes."""
    found: list[tuple[Rational, Expr]] = []
    for factor in Mul.make_args(argument):
        base, exponent = factor.as_base_exp()
        if not isinstance(exponent, Rational):
            base, exponent = factor, sp.S.One
        if isinstance(base, Rational) and 0 < base.p < 10**6 and base.q < 10**6:
            for prime, times in sp.factorrat(base).items():
                found.append((exponent * times, sp.Integer(prime)))
        else:
            found.append((exponent, base))
    return tuple(found)


def _small_powers(e: Expr) -> bool:
    return all(
        not isinstance(p.exp, sp.Integer) or abs(int(p.exp)) <= 4
        for p in e.atoms(Pow)
        if isinstance(p.base, Add)
    )

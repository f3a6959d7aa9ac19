"""Formulas as infix text, in the grammar that ``reading`` accepts.

What a request cannot hold is written as a function of a word of its own, in
answers alone:

* ``integral(f, x, a, b)``, a definite integral left as it stands;
* ``derivative(V(x), x, x)``, the second derivative of an arbitrary function;
* ``at(derivative(V(u), u), u, x**2)``, such a derivative at a point.

The walk keeps its own stack, so that no depth of nesting overflows.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import TypeAlias

from sympy import (
    Add,
    Derivative,
    Expr,
    Function,
    Integral,
    LambertW,
    Mul,
    Pow,
    Rational,
    S,
    Subs,
    Symbol,
)
from sympy.core.relational import Relational

SUM, PRODUCT, SIGN, POWER, ATOM = range(5)
"""How tightly a piece of text binds, loosest first."""

MOST_SORTED = 60
"""Longer sums and products keep SymPy's own order: sorting them by degree is not linear."""

_NAMES = {"Abs": "abs", "LambertW": "lambert_w", "re": "re", "im": "im"}


@dataclass(frozen=True, slots=True)
class _Power:
    """base**exponent, kept apart so that SymPy does not evaluate it again."""

    base: Expr
    exponent: Expr


_Item: TypeAlias = "Expr | _Power"
_Piece: TypeAlias = tuple[str, int]


@dataclass(frozen=True, slots=True)
class _Plan:
    """How to write an expression once its parts are written."""

    kind: str
    parts: tuple[_Item, ...]
    signs: tuple[bool, ...] = ()
    head: str = ""
    negative: bool = False
    numerator: int = 0


def write_infix(formula: Expr | Relational) -> str:
    """The text of an expression, equation or inequality.

    Equations are written ``lhs = rhs``; of the inequalities only ``<`` and
    ``<=`` are used, with the sides exchanged where needed.
    """
    if isinstance(formula, Relational):
        left, right, sign = formula.lhs, formula.rhs, formula.rel_op
        if sign in (">", ">="):
            left, right, sign = right, left, sign.replace(">", "<")
        sign = {"==": "=", "!=": "!="}.get(sign, sign)
        return f"{write_infix(left)} {sign} {write_infix(right)}"
    if formula is S.true or formula is S.false:
        return "true" if formula is S.true else "false"
    pending: list[_Item | _Plan] = [formula]
    done: list[_Piece] = []
    while pending:
        item = pending.pop()
        if isinstance(item, _Plan):
            count = len(item.parts)
            pieces = done[len(done) - count :]
            del done[len(done) - count :]
            done.append(_join(item, pieces))
            continue
        planned = _plan(item)
        if isinstance(planned, _Plan):
            pending.append(planned)
            pending.extend(reversed(planned.parts))
        else:
            done.append(planned)
    return done.pop()[0]


def _plan(item: _Item) -> _Plan | _Piece:
    if isinstance(item, _Power):
        return _power(item.base, item.exponent)
    if isinstance(item, Symbol):
        return item.name, ATOM
    if isinstance(item, Rational):
        return _rational(item)
    if item is S.Pi:
        return "pi", ATOM
    if item is S.Exp1:
        return "exp(1)", ATOM
    if item is S.ImaginaryUnit:
        return "sqrt(-1)", ATOM
    if item in (S.Infinity, S.NegativeInfinity):
        return ("infinity", ATOM) if item is S.Infinity else ("-infinity", SIGN)
    if isinstance(item, Add):
        return _sum(item)
    if isinstance(item, Mul):
        return _product(item)
    if isinstance(item, Pow):
        return _power(item.base, item.exp)
    if isinstance(item, Integral):
        return _call(
            "integral", (item.function, *(part for limit in item.limits for part in limit))
        )
    if isinstance(item, Derivative):
        return _call("derivative", (item.expr, *item.variables))
    if isinstance(item, Subs):
        pairs = zip(item.variables, item.point, strict=True)
        return _call("at", (item.expr, *(part for pair in pairs for part in pair)))
    if isinstance(item, Function):
        name = item.func.__name__
        if isinstance(item, LambertW) and len(item.args) == 2:
            name = "lambert_w_branch"
        return _call(_NAMES.get(name, name), item.args)
    if item.args:
        return _call(item.func.__name__.lower(), item.args)
    return str(item), ATOM


def _call(name: str, arguments: Sequence[Expr]) -> _Plan:
    return _Plan("call", tuple(arguments), head=name)


def _rational(number: Rational) -> _Piece:
    if number.q == 1:
        return str(number.p), ATOM if number.p >= 0 else SIGN
    return f"{number.p}/{number.q}", PRODUCT


def _sum(total: Add) -> _Plan:
    few = len(total.args) <= MOST_SORTED
    terms = list(total.as_ordered_terms()) if few else list(total.args)
    signs = [_is_negative(term) for term in terms]
    first = next((place for place, minus in enumerate(signs) if not minus), 0)
    if signs[0] and first:
        # A leading minus reads worse than a term moved to the front.
        terms.insert(0, terms.pop(first))
        signs.insert(0, signs.pop(first))
    return _Plan("sum", tuple(terms), tuple(signs))


def _is_negative(term: Expr) -> bool:
    if isinstance(term, Mul):
        return bool(term.args[0].is_Rational and term.args[0].is_negative)
    return bool(term.is_Rational and term.is_negative)


def _product(product: Mul) -> _Plan:
    numerator: list[_Item] = []
    denominator: list[_Item] = []
    coefficient = Rational(1)
    few = len(product.args) <= MOST_SORTED
    for factor in product.as_ordered_factors() if few else product.args:
        if factor.is_Rational:
            coefficient *= factor
        elif isinstance(factor, Pow) and factor.exp.is_Rational and factor.exp.is_negative:
            power = -factor.exp
            denominator.append(factor.base if power is S.One else _Power(factor.base, power))
        else:
            numerator.append(factor)
    if abs(coefficient.p) != 1 or not numerator:
        numerator.insert(0, Rational(abs(coefficient.p)))
    if coefficient.q != 1:
        denominator.insert(0, Rational(coefficient.q))
    return _Plan(
        "product",
        (*numerator, *denominator),
        negative=bool(coefficient.p < 0),
        numerator=len(numerator),
    )


def _power(base: Expr, exponent: Expr) -> _Plan:
    if exponent is S.Half:
        return _Plan("call", (base,), head="sqrt")
    if base is S.Exp1:
        return _Plan("call", (exponent,), head="exp")
    if exponent.is_Rational and exponent.is_negative:
        inner: _Item = base if exponent is S.NegativeOne else _Power(base, -exponent)
        return _Plan("product", (S.One, inner), numerator=1)
    return _Plan("power", (base, exponent))


def _bracketed(piece: _Piece, least: int) -> str:
    text, binds = piece
    return text if binds >= least else f"({text})"


def _join(plan: _Plan, pieces: list[_Piece]) -> _Piece:
    if plan.kind == "call":
        return f"{plan.head}({', '.join(text for text, _ in pieces)})", ATOM
    if plan.kind == "power":
        return f"{_bracketed(pieces[0], ATOM)}**{_bracketed(pieces[1], ATOM)}", POWER
    if plan.kind == "sum":
        return _join_sum(plan, pieces)
    above = "*".join(
        _bracketed(piece, PRODUCT if place == 0 else POWER)
        for place, piece in enumerate(pieces[: plan.numerator])
    )
    below = pieces[plan.numerator :]
    text = above
    if len(below) == 1:
        text += f"/{_bracketed(below[0], POWER)}"
    elif below:
        text += f"/({'*'.join(_bracketed(piece, POWER) for piece in below)})"
    return (f"-{text}", SIGN) if plan.negative else (text, PRODUCT)


def _join_sum(plan: _Plan, pieces: list[_Piece]) -> _Piece:
    words: list[str] = []
    for place, ((text, binds), minus) in enumerate(zip(pieces, plan.signs, strict=True)):
        if minus and text.startswith("-"):
            words.append(f"- {text[1:]}" if place else text)
            continue
        shown = text if binds > SUM else f"({text})"
        words.append(f"+ {shown}" if place else shown)
    return " ".join(words), SUM

"""Derivatives of formulas with |u| and sign(u) in them, away from their kinks."""

from __future__ import annotations

from collections.abc import Mapping

import sympy as sp
from sympy import Expr, Symbol
from sympy.core.function import AppliedUndef


def derivative(expression: Expr, x: Symbol) -> Expr:
    """∂expression/∂x where sign(u) is taken as constant.

    SymPy's derivative of sign(u) is 2δ(u)u′, which is 0 wherever the formula
    is used and would only end up in answers.
    """
    return sp.diff(expression, x).replace(sp.DiracDelta, lambda *_: sp.S.Zero)


def root_derivative(root: Expr, x: Symbol) -> Expr:
    """∂root/∂x, through the square of the root where that is at hand."""
    if isinstance(root, sp.Pow) and root.exp == sp.Rational(1, 2):
        return derivative(root.base, x) / (2 * root)
    return derivative(root, x)


def put_in(expression: Expr, values: Mapping[Symbol, Expr]) -> Expr:
    """The expression with values for symbols, also where it differentiates by one of them."""
    letters, places = {}, {}
    for d in expression.atoms(sp.Derivative):
        moved = [x for x in d.free_symbols if x in values]
        if moved:
            letters[d] = sp.Dummy()
            places[letters[d]] = sp.Subs(d, moved, [values[x] for x in moved])
    return expression.xreplace(letters).xreplace(dict(values)).xreplace(places)


def is_formula(expression: Expr) -> bool:
    """Whether an answer may hold this: no cases, infinities or derivatives left over."""
    if expression.has(*_UNFINISHED):
        return False
    return all(isinstance(d.expr, AppliedUndef) for d in expression.atoms(sp.Derivative))


_UNFINISHED = (
    sp.nan,
    sp.zoo,
    sp.oo,
    sp.S.NegativeInfinity,
    sp.I,
    sp.AccumBounds,
    sp.Piecewise,
    sp.DiracDelta,
    sp.Subs,
)

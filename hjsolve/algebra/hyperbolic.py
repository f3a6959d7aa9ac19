"""Sums of exponentials back in hyperbolic functions."""

from __future__ import annotations

import sympy as sp
from sympy import Add, Expr, Mul


def in_hyperbolic_functions(expression: Expr) -> Expr:
    """A e^u + b e^−u as (a + b) cosh u + (a − b) sinh u, where both stand in a sum.

    Generators know cosh and sinh as exponentials; who wrote cosh wants it back.
    """
    plain: list[Expr] = []
    found: dict[Expr, Expr] = {}
    for term in Add.make_args(expression):
        powers = [f for f in Mul.make_args(term) if isinstance(f, sp.exp)]
        if len(powers) != 1:
            plain.append(term)
            continue
        argument = powers[0].args[0]
        found[argument] = found.get(argument, sp.S.Zero) + term / powers[0]
    for u in [u for u in found if not u.could_extract_minus_sign() and -u in found]:
        a, b = found.pop(u), found.pop(-u)
        plain += [sp.expand_mul(a + b) * sp.cosh(u), sp.expand_mul(a - b) * sp.sinh(u)]
    return Add(*plain, *(c * sp.exp(u) for u, c in found.items()))

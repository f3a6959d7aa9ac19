"""The functions of the grammar and the SymPy classes they become.

Elliptic integrals take the parameter m = k² (DLMF 19.2.8, 22.2), as SymPy's
own do, so that no argument is converted.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import sympy
from sympy import Expr

from hjsolve.algebra import functions as own


@dataclass(frozen=True, slots=True)
class Known:
    """A function of the grammar: its SymPy class and how many arguments it takes."""

    make: Callable[..., Expr]
    arity: tuple[int, ...]


def _known() -> dict[str, Known]:
    table: dict[str, Known] = {}
    for name in [
        "sqrt",
        "exp",
        "log",
        "sin",
        "cos",
        "tan",
        "cot",
        "sec",
        "csc",
        "asin",
        "acos",
        "atan",
        "sinh",
        "cosh",
        "tanh",
        "asinh",
        "acosh",
        "atanh",
        "sign",
    ]:
        table[name] = Known(getattr(sympy, name), (1,))
    table["abs"] = Known(sympy.Abs, (1,))
    table["atan2"] = Known(sympy.atan2, (2,))
    table["lambert_w"] = Known(sympy.LambertW, (1,))
    table["elliptic_k"] = Known(sympy.elliptic_k, (1,))
    table["elliptic_f"] = Known(sympy.elliptic_f, (2,))
    table["elliptic_e"] = Known(sympy.elliptic_e, (1, 2))
    table["elliptic_pi"] = Known(sympy.elliptic_pi, (2, 3))
    for name, arity in (
        ("jacobi_sn", 2),
        ("jacobi_cn", 2),
        ("jacobi_dn", 2),
        ("jacobi_am", 2),
        ("carlson_rf", 3),
        ("carlson_rc", 2),
        ("carlson_rd", 3),
        ("carlson_rj", 4),
        ("weierstrass_p", 3),
    ):
        table[name] = Known(getattr(own, name), (arity,))
    return table


FUNCTIONS: dict[str, Known] = _known()

ANSWER_ONLY = frozenset({"integral", "derivative", "at"})
"""Words that stand before a bracket in answers alone; no declared function may take them."""

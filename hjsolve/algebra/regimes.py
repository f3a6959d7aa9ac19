"""What the conditions of a regime say of single letters."""

from __future__ import annotations

from collections.abc import Collection, Sequence

import sympy as sp
from sympy import Dummy, Expr, Symbol
from sympy.core.relational import Relational

from hjsolve.records import Domain


def boundary_values(valid: Sequence[Relational]) -> dict[Symbol, Expr]:
    """The values that letters have on a boundary: a ≤ b together with b ≤ a."""
    pairs = list(dict.fromkeys((v.lhs, v.rhs) for v in valid if v not in (sp.true, sp.false)))
    found: dict[Symbol, Expr] = {}
    for low, high in pairs:
        if (high, low) in pairs:
            letter, value = (low, high) if low.is_Symbol and not low.is_positive else (high, low)
            if letter.is_Symbol and not value.has(letter):
                found[letter] = value
    return found


def regime(
    valid: Sequence[Relational], keep: Collection[Symbol] = ()
) -> tuple[dict[Symbol, Expr], list[Relational]]:
    """What a regime says of single symbols but those to ``keep``, and the conditions left.

    A symbol with a sign becomes a letter with that sign, one on a boundary the
    value it has there.  A condition that fails is kept, as false.
    """
    failed = [v for v in valid if v == sp.false]
    valid = [v for v in valid if v not in (sp.true, sp.false)]
    put: dict[Symbol, Expr] = dict(boundary_values(valid))
    for v in valid:
        if v.lhs in keep or v.rhs in keep or v.lhs in put or v.rhs in put:
            continue
        if v.lhs == 0 and v.rhs.is_Symbol and not v.rhs.is_positive:
            put[v.rhs] = Dummy(v.rhs.name, positive=True)
        elif v.rhs == 0 and v.lhs.is_Symbol and not v.lhs.is_negative:
            put[v.lhs] = -Dummy(v.lhs.name, positive=True)
    left = failed + [_put(v, put) for v in valid]
    return put, [v for v in left if v != sp.true]


def _put(relation: Relational, put: dict[Symbol, Expr]) -> Relational:
    """The relation with values put in; false where one of its sides has none."""
    try:
        return relation.xreplace(put)
    except TypeError:  # SymPy refuses to compare nan
        return sp.false


def has_value(e: Expr) -> Relational:
    """A condition that holds wherever a formula has a real value.

    The square of a path, in which its root is gone, may have one where it has not.
    """
    return sp.Lt(0, 2 + sp.atan(e), evaluate=False)


def inside(domain: Domain, path: Expr) -> list[Relational]:
    """That a coordinate's path stays in its domain; an angle runs on."""
    if domain.kind == "angle":
        return []
    found = []
    if domain.lower.is_finite:
        found.append(sp.Lt(domain.lower, path, evaluate=False))
    if domain.upper.is_finite:
        found.append(sp.Lt(path, domain.upper, evaluate=False))
    return found

"""Square roots of perfect squares, opened: √(v²) = |v|."""

from __future__ import annotations

from collections.abc import Collection

import sympy as sp
from sympy import Expr, Pow, Rational

from hjsolve.algebra.generators import Generators, NotRational

OPERATIONS = 400
"""A radicand with more operations is left as it stands."""


def open_squares(expression: Expr) -> Expr:
    """The expression with every √u replaced by |v| where u = v² as a fraction of generators.

    An exact identity for real arguments, and it uncouples what only looks
    coupled: √(((ξ² − η²)/2)² + ξ²η²) is (ξ² + η²)/2.
    """
    for p in reversed(_half_powers(expression)):
        root = _root(p.base) if p.base.is_Add else None
        if root is not None:
            expression = expression.xreplace({p: sp.Abs(root) ** p.exp.p})
    return expression


def unify_roots(expression: Expr, positive: Collection[Expr] = ()) -> Expr:
    """The expression with every square root brought to a square-free radicand.

    √(u/v) becomes √(uv)/|v|, squares come out as absolute values, factors that
    are positive get a root of their own: by assumption, or because the
    expression is real only where they are, a root of theirs standing in it.
    So roots of which one is a rational multiple of others become the same
    generators, and their branches are no longer drawn independently.
    ``positive`` are expressions the caller knows to be positive where he looks.
    """
    factored = {p: _factored(p.base) for p in _half_powers(expression)}
    known = {
        sole for factors in factored.values() if factors for sole in [_sole(factors)] if sole
    } | set(positive)
    put = {
        p: _unified(factors, known, positive) ** p.exp.p
        for p, factors in factored.items()
        if factors
    }
    expression = expression.xreplace(put)
    sizes = {sp.Abs(f): f for f in positive} | {sp.Abs(-f): f for f in positive}
    for factors in filter(None, factored.values()):
        sign, odd = _odd(factors)
        if len(odd) == 2 and not any(f in known or -f in known for f in odd):
            # a root of f·g shows |f||g| = ±f·g
            sizes.setdefault(sp.Abs(odd[0]), sign * odd[0] * odd[1] / sp.Abs(odd[1]))
    return expression.xreplace(sizes)


def _odd(factors: list[tuple[Expr, int]]) -> tuple[int, list[Expr]]:
    """(sign, the factors of odd power that are not numbers and not positive)."""
    sign = 1
    odd = []
    for factor, times in factors:
        if factor.is_Integer:
            sign *= -1 if factor < 0 and times % 2 else 1
        elif times % 2 and not factor.is_positive:
            odd.append(factor)
    return sign, odd


def _sole(factors: list[tuple[Expr, int]]) -> Expr | None:
    """The expression that a root shows not to be negative."""
    sign, odd = _odd(factors)
    return sign * odd[0] if len(odd) == 1 else None


def _half_powers(expression: Expr) -> list[Pow]:
    found = [p for p in expression.atoms(Pow) if isinstance(p.exp, Rational) and p.exp.q == 2]
    return sorted(found, key=lambda e: -e.count_ops())


def _factored(base: Expr) -> list[tuple[Expr, int]] | None:
    """Base as a product of integer powers over the integers; None where it is too large."""
    if base.count_ops() > OPERATIONS:
        return None
    try:
        ring = Generators([base])
        value = ring.reduce(ring.ratio(base))
        found = []
        for polynomial, side in ((value.numerator, 1), (value.denominator, -1)):
            content, factors = polynomial.factor()
            found.append((sp.Integer(int(content)), side))
            found += [(ring.polynomial(g), side * int(times)) for g, times in factors]
    except (NotRational, ArithmeticError):
        return None
    return found


def _unified(factors: list[tuple[Expr, int]], known: set[Expr], positive: Collection[Expr]) -> Expr:
    sign, odd = _odd(factors)
    outside: Expr = sp.S.One
    for factor, times in factors:
        size = factor if factor in known else -factor if -factor in known else sp.Abs(factor)
        outside *= size ** (times // 2)
        if times % 2 and factor not in odd:
            outside *= sp.sqrt(sp.Abs(factor))
    if len(odd) > 1 or any(f in positive for f in odd):
        for factor in list(odd):
            for part, turn in ((factor, 1), (-factor, -1)):
                if part in known:
                    outside *= sp.sqrt(sp.expand(part))
                    odd.remove(factor)
                    sign *= turn
                    break
    return outside * sp.sqrt(sp.expand(sign * sp.Mul(*odd)))


def _root(base: Expr) -> Expr | None:
    """V with v² = base, or None."""
    factors = _factored(base)
    if factors is None or any(times % 2 for f, times in factors if not f.is_Integer):
        return None
    root: Expr = sp.S.One
    for factor, times in factors:
        root *= sp.sqrt(factor) ** times if factor.is_Integer else factor ** (times // 2)
    return root if root.is_real else None

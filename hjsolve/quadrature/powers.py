"""Kernels for algebraic integrands: roots of q, and roots inside of roots."""

from __future__ import annotations

from collections.abc import Iterator
from math import lcm

import sympy as sp
from sympy import Expr, Integer, Lt, Pow, Rational, S, Symbol, oo

from hjsolve.quadrature.kernel import Kernel, Partner, rational
from hjsolve.quadrature.radicals import Radicals, square_root
from hjsolve.quadrature.ratios import GivenUp
from hjsolve.quadrature.signs import Signs
from hjsolve.records import Domain


def powers(integrand: Expr, q: Symbol, domain: Domain) -> Iterator[Kernel]:
    """Yield u = q^(1/n), and u = √(A q² + B), √(A q + B) for roots inside of roots."""
    roots, nested, n = _root_structure(integrand, q)
    if not nested:
        yield _power(q, n, domain)
    elif n == 1 and len(nested) == 1:
        inner = sp.Poly(nested[0], q)
        if inner.degree() == 1:
            yield _inner_linear(q, nested[0], *inner.all_coeffs())
        elif inner.degree() == 2 and inner.nth(1) == 0:
            yield _inner_quadratic(q, nested[0], inner.nth(2), inner.nth(0), domain)
    if not nested and n == 1 and len(roots) == 2:
        for radicand in roots:
            if radicand.is_polynomial(q) and sp.degree(radicand, q) == 1:
                yield _inner_linear(q, radicand, *sp.Poly(radicand, q).all_coeffs())


def _root_structure(integrand: Expr, q: Symbol) -> tuple[list[Expr], list[Expr], int]:
    """(radicands of outer square roots, radicands inside of others, n for q^(1/n))."""
    outer: dict[Expr, None] = {}
    inner: dict[Expr, None] = {}
    n = 1
    stack: list[tuple[Expr, bool]] = [(integrand, False)]
    while stack:
        e, below = stack.pop()
        if not e.has(q):
            continue
        if isinstance(e, Pow) and isinstance(e.exp, Rational):
            if e.base == q:
                n = lcm(n, int(e.exp.q))
                continue
            if e.exp.q == 2:
                (inner if below else outer)[e.base] = None
            elif e.exp.q != 1:
                raise GivenUp(f"a root of order {e.exp.q}")
            stack.append((e.base, below or e.exp.q == 2))
        else:
            stack.extend((a, below) for a in e.args)
    if n > 12:
        raise GivenUp(f"a power of {q} with denominator {n}")
    nested = [r for r in inner if r.is_polynomial(q)]
    if len(nested) != len(inner):
        raise GivenUp("roots nested deeper than twice")
    return list(outer), nested, n


def _power(q: Symbol, n: int, domain: Domain) -> Kernel:
    def leaf(e: Expr, signs: Signs) -> Radicals | None:
        if e == q:
            return rational(signs, signs.ring.u**n)
        if isinstance(e, Pow) and e.base == q and isinstance(e.exp, Rational):
            return rational(signs, signs.ring.u ** int(e.exp * n))
        return None

    def slope(signs: Signs) -> Radicals:
        return rational(signs, signs.ring.number(n) * signs.ring.u ** (n - 1))

    if n == 1:
        lower = S.Zero if q.is_positive and not domain.lower.is_nonnegative else domain.lower
        return Kernel(q, (lower, domain.upper), leaf, slope)
    limits = () if domain.lower.is_nonnegative or q.is_positive else (Lt(0, q),)
    lower = domain.lower if domain.lower.is_nonnegative else S.Zero
    share = Rational(1, n)
    upper = oo if domain.upper is oo else domain.upper**share
    return Kernel(q**share, (lower**share, upper), leaf, slope, limits)


def square(integrand: Expr, q: Symbol, domain: Domain) -> Iterator[Kernel]:
    """Yield u = q² for an integrand that is even in q: the roots of a sextic become a quartic's."""
    if integrand.xreplace({q: -q}) != integrand:
        return

    def odd(signs: Signs) -> Radicals:
        return square_root(signs, signs.ring.u)

    def leaf(e: Expr, signs: Signs) -> Radicals | None:
        if e == q:
            return odd(signs)
        if isinstance(e, Pow) and e.base == q and isinstance(e.exp, Integer) and e.exp % 2 == 0:
            return rational(signs, signs.ring.u ** (int(e.exp) // 2))
        return None

    def slope(signs: Signs) -> Radicals:
        return rational(signs, signs.ring.number(2).inverse()) * odd(signs).inverse()

    limits = () if domain.lower.is_nonnegative or q.is_positive else (Lt(0, q),)
    yield Kernel(q**2, (S.Zero, oo), leaf, slope, limits)


def _inner_linear(q: Symbol, radicand: Expr, a: Expr, b: Expr) -> Kernel:
    u = sp.sqrt(radicand)

    def leaf(e: Expr, signs: Signs) -> Radicals | None:
        ring = signs.ring
        if e == q:
            return rational(signs, (ring.u**2 - ring.constant(b)) / ring.constant(a))
        return None

    def slope(signs: Signs) -> Radicals:
        return rational(signs, signs.ring.number(2) * signs.ring.u / signs.ring.constant(a))

    return Kernel(u, (S.Zero, oo), leaf, slope, (), (a, b))


def _inner_quadratic(q: Symbol, radicand: Expr, a: Expr, b: Expr, domain: Domain) -> Kernel:
    """Give u = √(a q² + b); the odd powers of q are roots, positive on the half-line."""

    def coordinate(signs: Signs) -> Radicals:
        ring = signs.ring
        return square_root(signs, (ring.u**2 - ring.constant(b)) / ring.constant(a))

    def leaf(e: Expr, signs: Signs) -> Radicals | None:
        ring = signs.ring
        if e == q:
            return coordinate(signs)
        if isinstance(e, Pow) and e.base == q and isinstance(e.exp, Integer) and e.exp % 2 == 0:
            square = (ring.u**2 - ring.constant(b)) / ring.constant(a)
            return rational(signs, square ** (int(e.exp) // 2))
        return None

    def slope(signs: Signs) -> Radicals:
        ring = signs.ring
        ratio = ring.u / ring.constant(a)
        return rational(signs, ratio) * coordinate(signs).inverse()

    limits = () if domain.lower.is_nonnegative or q.is_positive else (Lt(0, q),)
    span: tuple[Expr, Expr] = (S.Zero, oo)
    if a.is_positive and b.is_positive:
        root = sp.sqrt(b)
        span = (root if not isinstance(root, Pow) or root.exp != S.Half else S.Zero, oo)
    return Kernel(sp.sqrt(radicand), span, leaf, slope, limits, (a, b), Partner(q, b, a))

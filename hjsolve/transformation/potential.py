"""A function from its differential: Σ a_k dz_k, integrated one variable after another."""

from __future__ import annotations

import time
from collections.abc import Callable, Collection, Mapping, Sequence
from itertools import islice, permutations

import sympy as sp
from sympy import Expr, Rational, Symbol
from sympy.integrals.manualintegrate import manualintegrate

from hjsolve.algebra.budget import limit
from hjsolve.algebra.identity import vanish
from hjsolve.algebra.sampling import Range
from hjsolve.errors import OutOfTime
from hjsolve.records import Antiderivative, Domain, Truth
from hjsolve.transformation.tidy import derivative, in_grammar, in_sines, length, tidied

Integrate = Callable[[Expr, Symbol, Domain], Antiderivative]

ORDERS = 6
SECONDS = 0.7
"""For one antiderivative by one method."""

BASE = (sp.S.Zero, sp.S.One, Rational(1, 2), sp.S(2))
"""Where a variable that has been integrated over is held while the next one is."""


def potential(
    differential: Mapping[Symbol, Expr],
    domains: Mapping[Symbol, Domain],
    ranges: Mapping[Symbol, Range],
    functions: Collection[str],
    integrate: Integrate,
) -> Expr | None:
    """F with ∂F/∂z = differential[z] for every z, checked by differentiation; None if not found."""
    short = {z: tidied(a) for z, a in differential.items()}
    ordered = sorted(short, key=lambda z: (not _simple(short[z], z), length(short[z]), z.name))
    for order in islice(permutations(ordered), ORDERS):
        found = _along(short, order, domains, integrate)
        if found is None:
            continue
        found = in_grammar(tidied(found))
        findings = vanish([derivative(found, z) - a for z, a in short.items()], ranges, functions)
        if all(f.truth is not Truth.REFUTED for f in findings):
            return found
    return None


def _simple(a: Expr, z: Symbol) -> bool:
    return bool(a.is_polynomial(z))


def _along(
    differential: Mapping[Symbol, Expr],
    order: Sequence[Symbol],
    domains: Mapping[Symbol, Domain],
    integrate: Integrate,
) -> Expr | None:
    total: Expr = sp.S.Zero
    done: list[Symbol] = []
    for z in order:
        rest = _free_of(differential[z] - derivative(total, z), done)
        if rest is None:
            return None
        part = antiderivative(rest, z, domains.get(z, Domain()), integrate)
        if part is None:
            return None
        total += part
        done.append(z)
    return total


def _free_of(rest: Expr, done: Sequence[Symbol]) -> Expr | None:
    """The rest, which does not depend on ``done``, written without them."""
    rest = tidied(rest)
    for z in done:
        if z not in rest.free_symbols:
            continue
        for base in BASE:
            at = rest.xreplace({z: base})
            if at.is_finite is not False and not at.has(sp.nan, sp.zoo, sp.I):
                rest = tidied(at)
                break
        else:
            return None
    return rest


def antiderivative(a: Expr, z: Symbol, domain: Domain, integrate: Integrate) -> Expr | None:
    """∫ a dz, or None; whatever is returned is checked by the caller."""
    if z not in a.free_symbols:
        return a * z
    total: Expr = sp.S.Zero
    expanded = sp.expand(a) if length(a) < 150 else a
    terms = sp.Add.make_args(expanded)
    if len(terms) > 12:
        terms = (a,)
    for term in terms:
        part = _term(term, z, domain, integrate)
        if part is None:
            return _whole(a, z, domain, integrate) if len(terms) > 1 else None
        total += part
    return total


def _term(a: Expr, z: Symbol, domain: Domain, integrate: Integrate) -> Expr | None:
    factor, rest = a.as_independent(z, as_Add=False)
    base, power = rest.as_base_exp()
    if base == z and not power.has(z):
        return (
            factor * sp.log(sp.Abs(z)) if power == -1 else factor * z ** (power + 1) / (power + 1)
        )
    found = _whole(rest, z, domain, integrate)
    return None if found is None else factor * found


def _whole(a: Expr, z: Symbol, domain: Domain, integrate: Integrate) -> Expr | None:
    by_hand = _attempt(lambda: manualintegrate(a, z))
    if by_hand is None:
        plain = in_sines(a)
        by_hand = _attempt(lambda: manualintegrate(plain, z)) if plain != a else None
    if by_hand is not None:
        return by_hand
    found = integrate(a, z, domain)
    if found.closed_forms and not found.closed_forms[0].where:
        return found.closed_forms[0].expression
    return _attempt(lambda: sp.integrate(a, z))


def _attempt(method: Callable[[], Expr]) -> Expr | None:
    began = time.monotonic()
    try:
        with limit(SECONDS):
            found = method()
    except OutOfTime:
        if time.monotonic() - began < 0.95 * SECONDS:
            raise  # the caller's limit
        return None
    except Exception:  # whatever SymPy raises, there is no integral to be had from it
        return None
    return None if found.has(sp.Integral, sp.Piecewise, sp.I, sp.nan, sp.zoo) else found

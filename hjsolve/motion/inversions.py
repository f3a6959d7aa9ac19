"""From F(q) = τ to q(τ): the kinds of form that have an inverse.

To add one: write a function that returns the candidates for q(τ), and add a
line to INVERSIONS with its source and an example; the tests run over the
registry.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import sympy as sp
from sympy import Expr, Symbol
from sympy.core.relational import Relational

from hjsolve.algebra.identity import refute
from hjsolve.algebra.isolate import isolate
from hjsolve.records import Domain, Truth

Invert = Callable[[Expr, Symbol, Symbol], tuple[Expr, ...]]


@dataclass(frozen=True, slots=True)
class Inversion:
    """A kind of inversion: the candidates q(τ) for F(q) = τ, the likelier first."""

    name: str
    source: str
    invert: Invert
    examples: tuple[tuple[str, str], ...]


def _linear(form: Expr, q: Symbol, tau: Symbol) -> tuple[Expr, ...]:
    rate = sp.diff(form, q)
    if rate.has(q) or rate == 0:
        return ()
    return ((tau - form.subs(q, 0)) / rate,)


def _single(form: Expr, q: Symbol, tau: Symbol) -> tuple[Expr, ...]:
    found = isolate(form, tau, q)
    if found is None:
        return ()
    candidates = _about(found.centre, found.half)
    return (
        tuple(sp.expand(c.replace(sp.acos, _through_asin)) for c in candidates)
        if (found.centre.has(sp.pi))
        else candidates
    )


def _through_asin(v: Expr) -> Expr:
    return sp.pi / 2 - sp.asin(v)


def _root_of_quadratic(form: Expr, q: Symbol, tau: Symbol) -> tuple[Expr, ...]:
    """c·√(a q² + b q + d) + e = τ."""
    rest, root = form.as_independent(q, as_Add=True)
    factor, root = root.as_independent(q, as_Add=False)
    if not (isinstance(root, sp.Pow) and root.exp == sp.Rational(1, 2)):
        return ()
    if not root.base.is_polynomial(q) or sp.degree(root.base, q) != 2:
        return ()
    d, b, a = (sp.Poly(root.base, q).coeff_monomial(q**k) for k in range(3))
    inside = b**2 - 4 * a * (d - ((tau - rest) / factor) ** 2)
    return _about(-b / (2 * a), sp.sqrt(sp.expand(inside / (4 * a**2))))


def _about(centre: Expr, half: Expr) -> tuple[Expr, ...]:
    return (centre,) if half == 0 else (centre + half, centre - half)


INVERSIONS = (
    Inversion("linear", "elementary algebra", _linear, (("q/a", "a*tau"),)),
    Inversion(
        "single-occurrence",
        "inverse circular, hyperbolic and exponential functions, DLMF 4.23, 4.37 (from memory)",
        _single,
        (
            ("asin(q/a)/w", "a*sin(tau*w)"),
            ("log(q)", "exp(tau)"),
            ("asin(2*sin(q))", "asin(sin(tau)/2)"),
        ),
    ),
    Inversion(
        "root-of-a-quadratic",
        "the quadratic formula",
        _root_of_quadratic,
        (("sqrt(q**2 + 2*q - 3)", "-1 + sqrt(4 + tau**2)"),),
    ),
)


def invert(
    form: Expr, q: Symbol, tau: Symbol, domain: Domain, valid: Sequence[Relational]
) -> Expr | None:
    """q(τ) from form(q) = τ, or None where no kind of inversion applies.

    A candidate is put back into the form; where that contradicts τ near τ = 0
    inside the regime, it belongs to another branch.
    """
    for inversion in INVERSIONS:
        candidates = inversion.invert(form, q, tau)
        for candidate in candidates:
            if len(candidates) == 1 or _returns(form, q, tau, candidate, domain, valid):
                return candidate
    return None


def _returns(
    form: Expr, q: Symbol, tau: Symbol, path: Expr, domain: Domain, valid: Sequence[Relational]
) -> bool:
    """Whether form(path) = τ at points of the regime near τ = 0, in balls."""
    conditions = [v.xreplace({q: path}) for v in valid]
    if domain.lower.is_number and domain.lower.is_finite:
        conditions.append(sp.Lt(domain.lower, path, evaluate=False))
    residue = form.xreplace({q: path}) - tau
    for side in (sp.S.One, sp.S.NegativeOne):
        ends = sorted((side / 50, side / 5))
        found = refute(residue, {tau: (ends[0], ends[1])}, (), 40, conditions)
        if found.truth is Truth.UNDECIDED and found.bound is not None:
            return True
    return False

"""From F(q) = τ to q(τ): the kinds of form that have an inverse.

To add one: write a function that returns q as a function of τ or None, and
add a line to INVERSIONS with its source and an example; the tests run over the
registry.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import sympy as sp
from sympy import Expr, Symbol

from hjsolve.algebra.isolate import isolate
from hjsolve.records import Domain

Invert = Callable[[Expr, Symbol, Symbol, Domain], Expr | None]


@dataclass(frozen=True, slots=True)
class Inversion:
    """A kind of inversion: F(q) = τ, tried in the order of the registry."""

    name: str
    source: str
    invert: Invert
    examples: tuple[tuple[str, str], ...]


def _linear(form: Expr, q: Symbol, tau: Symbol, _domain: Domain) -> Expr | None:
    rate = sp.diff(form, q)
    if rate.has(q) or rate == 0:
        return None
    return (tau - form.subs(q, 0)) / rate


def _single(form: Expr, q: Symbol, tau: Symbol, domain: Domain) -> Expr | None:
    """Q stands once; on a half-line or polar angle the positive root is the one."""
    found = isolate(form, tau, q)
    if found is None:
        return None
    if found.half == 0:
        return found.centre
    positive = found.half if found.centre == 0 else None
    return positive if domain.kind in ("half-line", "polar-angle") else None


INVERSIONS = (
    Inversion("linear", "elementary algebra", _linear, (("q/a", "a*tau"),)),
    Inversion(
        "single-occurrence",
        "inverse circular, hyperbolic and exponential functions, DLMF 4.23, 4.37 (from memory)",
        _single,
        (("asin(q/a)/w", "a*sin(tau*w)"), ("log(q)", "exp(tau)")),
    ),
)


def invert(form: Expr, q: Symbol, tau: Symbol, domain: Domain) -> Expr | None:
    """q(τ) from form(q) = τ, or None where no kind of inversion applies."""
    for inversion in INVERSIONS:
        found = inversion.invert(form, q, tau, domain)
        if found is not None:
            return found
    return None

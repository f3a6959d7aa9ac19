"""The flow of a generator G: an infinitesimal transformation, to first order and exactly.

dz/ds = [z, G] for every variable z, so z(s) = Σ sⁿ/n! Dⁿz with D = [·, G] (Lie
series).  It is summed where, for some function w of z, the series ends, or
D²w = κ Dw, or D²w = δ w with κ, δ constant along the flow: polynomials,
exponentials, circular and hyperbolic functions of s.  The sum is put back into
the differential equation by the caller.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import sympy as sp
from sympy import Expr, Symbol

from hjsolve.records import Frame
from hjsolve.transformation.symplectic import bracket
from hjsolve.transformation.tidy import certainly_positive, derivative, tidied

TERMS = 8
"""A Lie series that has not ended by then is not followed further."""


@dataclass(frozen=True, slots=True)
class Substitute:
    """A function w of one variable, and its inverse."""

    of: Callable[[Expr], Expr]
    back: Callable[[Expr], Expr]


SUBSTITUTES = (
    Substitute(lambda z: z, lambda w: w),
    Substitute(lambda z: 1 / z, lambda w: 1 / w),
    Substitute(sp.log, sp.exp),
    Substitute(sp.exp, sp.log),
    Substitute(lambda z: sp.exp(-z), lambda w: -sp.log(w)),
)


def first_order(generator: Expr, frame: Frame, s: Symbol) -> dict[Symbol, Expr]:
    """Z + s[z, G]: the transformation up to terms of order s²."""
    return {z: z + s * tidied(bracket(z, generator, frame)) for z in frame.variables}


def flow(generator: Expr, frame: Frame, s: Symbol) -> dict[Symbol, Expr] | None:
    """Every variable after the parameter s as a function of where it was; None if not summed."""
    found = {}
    for z in frame.variables:
        moved = _moved(z, generator, frame, s)
        if moved is None:
            return None
        found[z] = moved
    return found


def equations(moved: dict[Symbol, Expr], generator: Expr, frame: Frame, s: Symbol) -> list[Expr]:
    """dz/ds − [z, G] along the flow, and z(0) − z: zero when the sum is right."""
    rates = {z: bracket(z, generator, frame).xreplace(moved) for z in frame.variables}
    left = [derivative(moved[z], s) - rates[z] for z in frame.variables]
    return left + [moved[z].xreplace({s: sp.S.Zero}) - z for z in frame.variables]


def _moved(z: Symbol, generator: Expr, frame: Frame, s: Symbol) -> Expr | None:
    for way in SUBSTITUTES:
        w = way.of(z)
        total = _sum(w, generator, frame, s)
        if total is not None:
            return tidied(way.back(total))
    return None


def _sum(w: Expr, generator: Expr, frame: Frame, s: Symbol) -> Expr | None:
    def d(e: Expr) -> Expr:
        return tidied(bracket(e, generator, frame))

    one = d(w)
    two = d(one)
    if one != 0 and two != 0:
        kappa = tidied(two / one)
        if d(kappa) == 0:
            return tidied(w + one * (sp.exp(kappa * s) - 1) / kappa)
        delta = tidied(two / w)
        if d(delta) == 0:
            return _oscillating(w, one, delta, s)
    total, term = w, one
    for n in range(1, TERMS):
        if term == 0:
            return total
        total += s**n / sp.factorial(n) * term
        term = d(term)
    return None


def _oscillating(w: Expr, one: Expr, delta: Expr, s: Symbol) -> Expr | None:
    """W cosh(√δ s) + Dw sinh(√δ s)/√δ, in real form where the sign of δ is known."""
    if certainly_positive(-delta):
        rate = tidied(sp.sqrt(-delta))
        return w * sp.cos(rate * s) + one * sp.sin(rate * s) / rate
    if certainly_positive(delta):
        rate = tidied(sp.sqrt(delta))
        return w * sp.cosh(rate * s) + one * sp.sinh(rate * s) / rate
    return None

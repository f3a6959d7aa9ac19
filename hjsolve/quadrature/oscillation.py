"""∫ Σ c qⁿ e^{aq} cos(ωq + φ) dq: drives, damped or not.

SymPy 1.14's rules leave the damped drive e^{−γt} cos ωt as a Piecewise, so the
four lines of algebra are done here: products of sines and cosines become sums,
then by parts, with G = e^{aq}(a cos + ω sin)/(a² + ω²),

    ∫ qⁿ e^{aq} cos = qⁿ G − n ∫ qⁿ⁻¹ G.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import sympy as sp
from sympy import Add, Expr, Integer, Mul, Pow, S, Symbol, pi

TERM_LIMIT = 40
"""More terms than this after multiplying out are given up."""

POWER_LIMIT = 8
"""Higher powers of q or of a cosine are given up."""


@dataclass(frozen=True)
class Term:
    """coefficient · q^power · e^{rate q} · cos(frequency q + phase)."""

    coefficient: Expr
    power: int = 0
    rate: Expr = S.Zero
    frequency: Expr = S.Zero
    phase: Expr = S.Zero


def oscillating(integrand: Expr, q: Symbol) -> Expr | None:
    """The antiderivative, or None for an integrand of another kind."""
    expanded = sp.expand(integrand, power_base=False, trig=False, complex=False, log=False)
    total: list[Expr] = []
    for part in Add.make_args(expanded):
        terms = _terms(part, q)
        if terms is None or len(total) + len(terms) > TERM_LIMIT:
            return None
        total += [_integral(t, q) for t in terms]
    return Add(*total)


def _terms(product: Expr, q: Symbol) -> list[Term] | None:
    """A product as a sum of terms."""
    terms = [Term(S.One)]
    for factor in Mul.make_args(product):
        base, n = factor, 1
        if isinstance(factor, Pow) and isinstance(factor.exp, Integer) and factor.has(q):
            base, n = factor.base, int(factor.exp)
        choices = _factor(base, n, q)
        if choices is None:
            return None
        for options in choices:
            terms = [product for t in terms for o in options for product in _times(t, o)]
            if len(terms) > TERM_LIMIT:
                return None
    return terms


def _factor(base: Expr, n: int, q: Symbol) -> list[list[Term]] | None:
    """A factor base^n as factors, each a sum of terms."""
    if not base.has(q):
        return [[Term(base**n)]]
    if not 0 < n <= POWER_LIMIT and not isinstance(base, sp.exp):
        return None
    if base == q:
        return [[Term(S.One, n)]]
    if not isinstance(base, (sp.exp, sp.cos, sp.sin, sp.cosh, sp.sinh)):
        return None
    argument = sp.expand(base.args[0])
    rate = argument.coeff(q, 1)
    rest = sp.expand(argument - rate * q)
    if rest.has(q):
        return None
    if isinstance(base, sp.exp):
        return [[Term(sp.exp(n * rest), 0, n * rate)]]
    if isinstance(base, (sp.cosh, sp.sinh)):
        sign = 1 if isinstance(base, sp.cosh) else -1
        up, down = Term(sp.exp(rest) / 2, 0, rate), Term(sign * sp.exp(-rest) / 2, 0, -rate)
        return [[up, down]] * n
    phase = rest if isinstance(base, sp.cos) else rest - pi / 2
    return [[Term(S.One, 0, S.Zero, rate, phase)]] * n


def _times(a: Term, b: Term) -> list[Term]:
    """The product; cos A cos B = (cos(A − B) + cos(A + B))/2."""
    both = Term(a.coefficient * b.coefficient, a.power + b.power, a.rate + b.rate)
    if a.frequency == 0 or b.frequency == 0:
        still, moving = (a, b) if a.frequency == 0 else (b, a)
        c = both.coefficient * sp.cos(still.phase)
        return [replace(both, coefficient=c, frequency=moving.frequency, phase=moving.phase)]
    half = replace(both, coefficient=both.coefficient / 2)
    return [
        replace(half, frequency=a.frequency + s * b.frequency, phase=a.phase + s * b.phase)
        for s in (-1, 1)
    ]


def _integral(t: Term, q: Symbol) -> Expr:
    """∫ of one term by parts."""
    if t.coefficient == 0:
        return S.Zero
    if t.frequency == 0 and t.rate == 0:
        return t.coefficient * sp.cos(t.phase) * q ** (t.power + 1) / (t.power + 1)
    square = t.rate**2 + t.frequency**2
    angle = t.frequency * q + t.phase
    if t.frequency == 0:
        wave = sp.cos(t.phase) / t.rate
    else:
        wave = (t.rate * sp.cos(angle) + t.frequency * sp.sin(angle)) / square
    total = t.coefficient * q**t.power * sp.exp(t.rate * q) * wave
    if t.power:
        lower = replace(t, power=t.power - 1, coefficient=-t.power * t.coefficient / square)
        total += _integral(replace(lower, coefficient=lower.coefficient * t.rate), q)
        if t.frequency != 0:
            turned = replace(
                lower, coefficient=lower.coefficient * t.frequency, phase=t.phase - pi / 2
            )
            total += _integral(turned, q)
    return total

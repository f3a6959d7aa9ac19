"""∫ Q √P du for an even quartic P = p₄u⁴ + p₂u² + p₀: Legendre forms with explicit roots.

Even parts of Q go to F, E, Π in one of the substitutions of Byrd & Friedman
210–225 (from memory), by the signs of the roots v₁ < v₂ of p₄v² + p₂v + p₀ in
v = u²; odd parts are elementary in v.

    p₄ < 0, v₁ < 0 < v₂           u = √v₂ cn      0 < v₁ < v₂, p₄ < 0   u = √v₂ dn
    p₄ > 0, v₁ < 0 < v₂           u = √v₂/cn      0 < v₁ < v₂, u² < v₁  u = √v₁ sn
    v₁ < v₂ < 0                   u = √−v₂ sn/cn  0 < v₁ < v₂ < u²      u = √v₂/sn
    v complex                     u² = d²(1 − cn)/(1 + cn)
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import sympy as sp
from sympy import Expr, S, Symbol, acos, asin, atan, oo, pi, sqrt

from hjsolve.quadrature import quadratic
from hjsolve.quadrature import univariate as uv
from hjsolve.quadrature.dress import HALF, Dress
from hjsolve.quadrature.legendre import Normal, Sum
from hjsolve.quadrature.problem import Piece
from hjsolve.quadrature.ratios import GivenUp, Ratio, degree, factors
from hjsolve.quadrature.reduction import Pole, Reduction
from hjsolve.quadrature.regimes import Context
from hjsolve.quadrature.signs import Signs
from hjsolve.records import Definition

INFINITE = float("inf")

LONG = 2
"""A discriminant with more terms is not written out in every place: its roots get names."""


def is_even(reduction: Reduction) -> bool:
    """Whether P is an even quartic."""
    p = reduction.radicand
    return len(p) == 5 and not p[1] and not p[3]


def cost(reduction: Reduction, signs: Signs) -> float:
    """As the elementary one; the sine amplitude is preferred to the others."""
    plain = quadratic.cost(reduction, signs)
    if plain < INFINITE or not is_even(reduction):
        return plain
    if any(len(pole.factor) > 3 for pole in reduction.poles):
        return INFINITE
    first = 0.5 if signs.maybe(reduction.radicand[4]) != 1 else 0.0
    if isinstance(signs.kernel, (sp.tan, sp.cot)):
        first += 2.0  # the amplitude would jump with the kernel
    return 1.0 + first + sum(1 for w in reduction.weights if w) + 2.0 * len(reduction.poles)


def terms(reduction: Reduction) -> int:
    """How many terms the antiderivative has."""
    if reduction.degree <= 2:
        return quadratic.terms(reduction)
    weights = [w for w in reduction.weights if w]
    many = len(reduction.weights) > 1 and bool(weights)
    return int(bool(reduction.algebraic)) + (2 if many else len(weights)) + len(reduction.poles)


def formula(piece: Piece, context: Context) -> Expr:
    """The antiderivative of one piece without its scale; raises Undetermined, GivenUp."""
    reduction, dress = piece.reduction, context.dress
    if reduction.degree <= 2 or not (any(reduction.weights) or reduction.poles):
        return quadratic.formula(piece, context)
    if not is_even(reduction):
        raise GivenUp("the radicand is no even quartic")
    root = dress.root(piece.radicand)
    if piece.written is not None:
        root = dress.product((piece.scale, -HALF)) * sqrt(piece.written)
    total: Expr = S.Zero
    if reduction.algebraic:
        total += dress.product((reduction.algebraic, 1), times=(root,))
    even, odd = _parities(reduction)
    if odd is not None:
        total += _elementary(piece, odd, context)
    if even.constant or even.square or even.poles:
        normal = _normal(reduction, root, context)
        whole = Sum(normal)
        whole.powers([dress.ratio(even.constant), dress.ratio(even.square)])
        for residue, gamma in even.poles:
            inside = normal.kind == "cosine" and context.signs.of(gamma) > 0
            whole.pole(dress.ratio(residue), dress.ratio(gamma), inside)
        total += whole.expression()
    return total


# ------------------------------------------------------------------- parity


@dataclass(frozen=True)
class _Even:
    """constant·J_0 + square·J_2 + Σ residue ∫du/((u² − γ)√P)."""

    constant: Ratio
    square: Ratio
    poles: tuple[tuple[Ratio, Ratio], ...]


def _parities(reduction: Reduction) -> tuple[_Even, Reduction | None]:
    """The even part, and the odd one as a reduction in v = u²."""
    ring, p = reduction.ring, reduction.radicand
    w = [*reduction.weights, ring.zero, ring.zero, ring.zero]
    half = ring.number(2).inverse()
    even: dict[int, tuple[Ratio, Ratio]] = {}
    odd: list[Pole] = []
    for k, pole in enumerate(_paired(reduction)):
        if len(pole.factor) != 3 or pole.factor[1]:
            raise GivenUp("the poles do not come in pairs ±c")
        gamma = -pole.factor[0]
        n0, n1 = [*pole.numerator, ring.zero, ring.zero][:2]
        if n0:
            if not gamma:
                raise GivenUp("a double pole is left at 0")
            even[k] = (n0, gamma)
        if n1:
            odd.append(Pole([-gamma, ring.one], [n1 * half]))
    weights = uv.trim([w[1] * half])
    rest = None
    if weights or odd:
        rest = Reduction(ring, [p[0], p[2], p[4]], ring.zero, weights, tuple(odd))
    return _Even(w[0], w[2], tuple(even.values())), rest


def _paired(reduction: Reduction) -> tuple[Pole, ...]:
    """The poles over factors u² − γ."""
    ring = reduction.ring
    rest, out = list(reduction.poles), []
    while rest:
        pole = rest.pop(0)
        if len(pole.factor) != 2:
            out.append(pole)
            continue
        c = -pole.factor[0]
        mirror = [c, ring.one]
        twin = next((o for o in rest if len(o.factor) == 2 and not (o.factor[0] - c)), None)
        numerator = uv.multiply(pole.numerator, mirror)
        if twin is not None and c:
            rest.remove(twin)
            numerator = uv.add(numerator, uv.multiply(twin.numerator, pole.factor))
        out.append(Pole(uv.multiply(pole.factor, mirror), numerator))
    return tuple(out)


def _elementary(piece: Piece, odd: Reduction, context: Context) -> Expr:
    """The odd part, in v = u²."""
    lower, upper = piece.kernel.span
    if lower.is_nonnegative:
        ends = [e**2 if e.is_finite else e for e in (lower, upper)]
    else:
        ends = [S.Zero, oo]
    kernel = replace(
        piece.kernel,
        expression=piece.kernel.expression**2,
        span=(ends[0], ends[1]),
        partner=None,
        shifts=(),
    )
    signs = Signs(context.signs.ring, kernel.expression, kernel.span)
    for key, sign in context.signs.assumed.items():
        if degree(key.poly) <= 0:
            signs.assumed[key] = sign
    radicand = uv.to_ratio(odd.ring, odd.radicand)
    ring = odd.ring
    inner = Piece(kernel, ring.one, radicand.num, odd)
    scale = Dress(signs, kernel).product((ring.polynomial(radicand.den), HALF))
    if not radicand.den.is_one():
        odd = Reduction(
            ring,
            [c * ring.polynomial(radicand.den) for c in odd.radicand],
            odd.algebraic,
            odd.weights,
            odd.poles,
        )
        inner = Piece(kernel, ring.one, radicand.num, odd)
    return scale * quadratic.formula(inner, Context(signs, Dress(signs, kernel), False))


# ------------------------------------------------------------- normal forms


@dataclass(frozen=True)
class _Roots:
    """|v₁|, |v₂| and v₂ − v₁ for v₁ < v₂, written."""

    first: Expr
    second: Expr
    gap: Expr


def _normal(reduction: Reduction, root: Expr, context: Context) -> Normal:
    signs, dress, p = context.signs, context.dress, reduction.radicand
    lead = signs.of(p[4], first=-1)
    split = _split(reduction, context)
    size = dress.product((p[4], 1)) if lead > 0 else dress.ratio(-p[4])
    if lead < 0:
        if signs.of(p[0]) > 0:
            return _cn(_roots(reduction, split, -1, 1, context), size, context)
        return _dn(_roots(reduction, split, 1, 1, context), size, context)
    if signs.of(p[0]) < 0:
        return _nc(_roots(reduction, split, -1, 1, context), size, context)
    ring = reduction.ring
    if split is None and signs.of(p[2] * p[2] - ring.number(4) * p[0] * p[4]) < 0:
        return _complex(reduction, size, root, context)
    if signs.of(p[2], first=-1) > 0:
        return _sc(_roots(reduction, split, -1, -1, context), size, context)
    roots = _roots(reduction, split, 1, 1, context)
    middle = ring.u * ring.u * p[4] * ring.number(2) + p[2]
    if _inside(split, signs) or signs.of(middle, first=-1) < 0:
        return _sn(roots, size, context)
    return _ns(roots, size, context)


def _inside(split: tuple[Ratio, ...] | None, signs: Signs) -> bool:
    """Whether u² stays below a root because its range ends there."""
    if split is None or not signs.span[1].is_finite:
        return False
    try:
        end = signs.ring.constant(signs.span[1]) ** 2
    except GivenUp:
        return False
    return any(not (v - end) for v in split)


def _split(reduction: Reduction, context: Context) -> tuple[Ratio, Ratio] | None:
    """The roots in v where they are rational, in ascending order.

    Supposes the sign of p₀ that follows from the existence of an interval of
    motion; the motion with its turning points inside of the range comes first.
    """
    ring, p, signs = reduction.ring, reduction.radicand, context.signs
    _, found = factors(uv.to_ratio(ring, [p[0], p[2], p[4]]).num)
    lines = [uv.from_flint(ring, f) for f, _ in found if degree(f) == 1]
    lead = signs.maybe(p[4])
    if lead == -1 and (not p[2] or signs.maybe(p[2]) == -1):
        signs.suppose(p[0], 1)
    if len(lines) != 2:
        return None
    a, b = (-line[0] / line[1] for line in lines)
    if lead == -1 and -1 in (signs.maybe(a), signs.maybe(b)):
        signs.suppose(p[0], 1)
        return (a, b) if signs.maybe(a) == -1 else (b, a)
    if lead == 1 and _inside((a, b), signs):
        signs.suppose(p[0], 1)
        signs.suppose(p[2], -1)
    last = 1 if _inside((b,), signs) else -1 if _inside((a,), signs) else 1
    return (a, b) if signs.of(b - a, first=last) > 0 else (b, a)


def _roots(
    reduction: Reduction,
    split: tuple[Ratio, Ratio] | None,
    low: int,
    high: int,
    context: Context,
) -> _Roots:
    """The roots written as positive numbers; ``low``, ``high`` are their signs."""
    signs, dress, p, ring = context.signs, context.dress, reduction.radicand, reduction.ring
    if split is not None:
        for v, sign in zip(split, (low, high), strict=True):
            signs.suppose(v, sign)
        first, second = (
            dress.ratio(v if s > 0 else -v) for v, s in zip(split, (low, high), strict=True)
        )
        return _Roots(first, second, dress.ratio(split[1] - split[0]))
    lead = signs.of(p[4])
    side = ring.number(lead)
    disc = p[2] * p[2] - ring.number(4) * p[0] * p[4]
    signs.suppose(disc, 1)
    if not p[2]:
        ratio = dress.product((p[0] / p[4], HALF))
        return _Roots(ratio, ratio, 2 * ratio)
    width = dress.product((disc, HALF))
    middle, twice = dress.ratio(-p[2] * side), dress.ratio(p[4] * side * ring.number(2))
    if len(disc.num) <= LONG:
        return _Roots(
            low * (middle - width) / twice, high * (middle + width) / twice, 2 * width / twice
        )
    first, second = (Symbol(f"{context.stem}_{k}", positive=True) for k in (1, 2))
    context.names.append(Definition(first, definition=low * (middle - width) / twice))
    context.names.append(Definition(second, definition=high * (middle + width) / twice))
    return _Roots(first, second, high * second - low * first)


def _over(context: Context, a: Expr) -> tuple[Expr, Expr]:
    """(u, u/a)."""
    t = context.dress.u
    return t, t / a


def arcsine(kernel: Expr, a: Expr) -> Expr:
    """asin(u/a), continuing sin(angle) past its range where a = 1."""
    if a == 1 and isinstance(kernel, sp.sin):
        return kernel.args[0]
    if a == 1 and isinstance(kernel, sp.cos):
        return pi / 2 - kernel.args[0]
    return asin(kernel / a)


def arccosine(kernel: Expr, a: Expr) -> Expr:
    """acos(u/a), continuing cos(angle) past its range where a = 1."""
    if a == 1 and isinstance(kernel, (sp.sin, sp.cos)):
        return kernel.args[0] if isinstance(kernel, sp.cos) else pi / 2 - kernel.args[0]
    return acos(kernel / a)


def _cn(r: _Roots, size: Expr, context: Context) -> Normal:
    a = sqrt(r.second)
    t, over = _over(context, a)
    return Normal(
        arccosine(t, a),
        _quotient(r.second, r.gap),
        -1 / sqrt(_product(size, r.gap)),
        "square",
        (r.second, -r.second, S.One, S.Zero),
        sqrt(1 - t**2 / r.second),
        over,
        sqrt((r.first + t**2) / r.gap),
    )


def _dn(r: _Roots, size: Expr, context: Context) -> Normal:
    t = context.dress.u
    side = context.signs.of(context.signs.ring.u)
    return Normal(
        asin(sqrt((r.second - t**2) / r.gap)),
        _quotient(r.gap, r.second),
        -side / sqrt(_product(size, r.second)),
        "square",
        (r.second, -r.gap, S.One, S.Zero),
        sqrt((r.second - t**2) / r.gap),
        sqrt((t**2 - r.first) / r.gap),
        side * t / sqrt(r.second),
    )


def _sn(r: _Roots, size: Expr, context: Context) -> Normal:
    a = sqrt(r.first)
    t, over = _over(context, a)
    return Normal(
        arcsine(t, a),
        _quotient(r.first, r.second),
        1 / sqrt(_product(size, r.second)),
        "square",
        (S.Zero, r.first, S.One, S.Zero),
        over,
        sqrt(1 - t**2 / r.first),
        sqrt(1 - t**2 / r.second),
    )


def _ns(r: _Roots, size: Expr, context: Context) -> Normal:
    t = context.dress.u
    b = sqrt(r.second)
    return Normal(
        asin(b / t),
        _quotient(r.first, r.second),
        -1 / sqrt(_product(size, r.second)),
        "square",
        (r.second, S.Zero, S.Zero, S.One),
        b / t,
        sqrt(1 - r.second / t**2),
        sqrt(1 - r.first / t**2),
    )


def _nc(r: _Roots, size: Expr, context: Context) -> Normal:
    t = context.dress.u
    a = sqrt(r.second)
    return Normal(
        acos(a / t),
        _quotient(r.first, r.gap),
        1 / sqrt(_product(size, r.gap)),
        "square",
        (r.second, S.Zero, S.One, S.NegativeOne),
        sqrt(1 - r.second / t**2),
        a / t,
        sqrt(r.second * (1 + r.first / t**2) / r.gap),
    )


def _sc(r: _Roots, size: Expr, context: Context) -> Normal:
    a = sqrt(r.second)
    t, over = _over(context, a)
    below = sqrt(t**2 + r.second)
    return Normal(
        atan(over),
        _quotient(r.gap, r.first),
        1 / sqrt(_product(size, r.first)),
        "square",
        (S.Zero, r.second, S.One, S.NegativeOne),
        t / below,
        a / below,
        a * sqrt(t**2 + r.first) / (sqrt(r.first) * below),
    )


def _complex(reduction: Reduction, size: Expr, root: Expr, context: Context) -> Normal:
    dress, p = context.dress, reduction.radicand
    t = dress.u
    square = dress.product((p[0] / p[4], HALF))
    mean = dress.product((p[0] * p[4], HALF))
    d = sqrt(square)
    return Normal(
        2 * atan(t / d),
        S.Half - dress.ratio(p[2]) / (4 * mean),
        1 / (2 * sqrt(mean)),
        "cosine",
        (square, -square, S.One, S.One),
        2 * t * d / (square + t**2),
        (square - t**2) / (square + t**2),
        root / sqrt(size) / (square + t**2),
    )


def _quotient(above: Expr, below: Expr) -> Expr:
    """above/below in lowest terms."""
    ratio = above / below
    return sp.cancel(ratio) if _plain(ratio) else ratio


def _product(a: Expr, b: Expr) -> Expr:
    return sp.cancel(a * b) if _plain(a * b) else a * b


def _plain(e: Expr) -> bool:
    return not any(p.exp.is_Rational and p.exp.q != 1 for p in e.atoms(sp.Pow))

"""∫ Q √P du with P of degree 0, 1 or 2: elementary, real and continuous.

With P = p₂u² + p₁u + p₀, Δ = p₁² − 4p₀p₂, J_0 = ∫du/√P and
J_{−1}(c) = ∫du/((u − c)√P), the standard integrals (Gradshteyn & Ryzhik 2.261,
2.266; Byrd & Friedman's reduction; from memory) in these forms:

* p₂ < 0: an arcsine, continuous between the turning points;
* p₂ > 0: a logarithm of the absolute value, or asinh/acosh where J_0 stands
  alone, so that u occurs once and the relation inverts;
* J_{−1}(c) is J_0 in v = 1/(u − c) with P(c)v² + P′(c)v + p₂;
* for even P and poles ±√γ, s = u/√P turns the integrand into
  ds/(P(γ)s² − γ) and u du into dy/(y² − P(γ)) with y = √P: real forms for real
  and imaginary poles alike;
* for a pair of complex poles D and general P the two degenerate members of the
  pencil P − τD = σ(u − μ)² do the same (Goursat's method; from memory).
"""

from __future__ import annotations

from sympy import Abs, Expr, S, acosh, asin, asinh, atan, atanh, log, sqrt

from hjsolve.quadrature import univariate as uv
from hjsolve.quadrature.dress import HALF
from hjsolve.quadrature.problem import Piece
from hjsolve.quadrature.ratios import GivenUp, Ratio, degree, factors
from hjsolve.quadrature.reduction import Pole, Reduction
from hjsolve.quadrature.regimes import Context
from hjsolve.quadrature.signs import Signs

INFINITE = float("inf")


def terms(reduction: Reduction) -> int:
    """How many terms the antiderivative has."""
    count = int(bool(reduction.algebraic)) + int(any(reduction.weights))
    for pole in paired(reduction):
        count += 1 if len(pole.factor) == 2 else sum(1 for c in pole.numerator if c)
    return count


def cost(reduction: Reduction, signs: Signs) -> float:
    """Terms, a little more for those in which the variable occurs twice; ∞ if not elementary."""
    d = reduction.degree
    if d > 2 and (any(reduction.weights) or reduction.poles):
        return INFINITE
    total = float(bool(reduction.algebraic)) + float(any(reduction.weights))
    for pole in paired(reduction):
        if len(pole.factor) > 3:
            return INFINITE
        if len(pole.factor) == 2:
            total += 1.0
            continue
        if d == 1 or (d == 2 and not _tractable(reduction, pole, signs)):
            return INFINITE
        total += (1.0 if d == 0 else 1.25) * sum(1 for c in pole.numerator if c)
    return total


def _tractable(reduction: Reduction, pole: Pole, signs: Signs) -> bool:
    if _even(reduction.radicand) and not pole.factor[1]:
        return True
    return signs.maybe(_discriminant(pole.factor)) == -1


def _even(p: uv.Poly) -> bool:
    return len(p) == 3 and not p[1]


def _discriminant(p: uv.Poly) -> Ratio:
    return p[1] * p[1] - p[0] * p[2] * p[0].ring.number(4)


def paired(reduction: Reduction) -> tuple[Pole, ...]:
    """The poles, with those at c and −c of an even quadratic P joined."""
    if not _even(reduction.radicand):
        return reduction.poles
    rest, out = list(reduction.poles), []
    while rest:
        pole = rest.pop(0)
        twin = next(
            (
                o
                for o in rest
                if len(pole.factor) == 2 == len(o.factor) and not (pole.factor[0] + o.factor[0])
            ),
            None,
        )
        if twin is None:
            out.append(pole)
            continue
        rest.remove(twin)
        numerator = uv.add(
            uv.multiply(pole.numerator, twin.factor), uv.multiply(twin.numerator, pole.factor)
        )
        out.append(Pole(uv.multiply(pole.factor, twin.factor), numerator))
    return tuple(out)


def formula(piece: Piece, context: Context) -> Expr:
    """The antiderivative of one piece without its scale; raises Undetermined, GivenUp."""
    reduction, dress = piece.reduction, context.dress
    _suppose_allowed(reduction, context.signs)
    root = dress.root(piece.radicand)
    if piece.written is not None:
        root = dress.product((piece.scale, -HALF)) * sqrt(piece.written)
    total: Expr = S.Zero
    if reduction.algebraic:
        total += dress.product((reduction.algebraic, 1), times=(root,))
    if reduction.degree == 0:
        for pole in reduction.poles:
            total += _rational_pole(pole, context) / root
        return total
    if any(reduction.weights):
        if reduction.degree > 2:
            raise GivenUp("the radicand is of degree above two")
        total += _j0(reduction, root, context)
    for pole in paired(reduction):
        if reduction.degree == 1:
            total += _linear_radicand(reduction, pole, root, context)
        elif len(pole.factor) == 2:
            total += _simple_pole(reduction, pole, root, context)
        elif _even(reduction.radicand) and not pole.factor[1]:
            total += _even_pair(reduction, pole, root, context)
        else:
            total += _complex_pair(reduction, pole, root, context)
    return total


def _suppose_allowed(reduction: Reduction, signs: Signs) -> None:
    """What follows from P > 0 somewhere in the range of u.

    A single coefficient that can make P positive is positive (for a positive u
    or an even power); a quadratic that is negative at both ends of the range
    opens downwards.
    """
    p, (lower, upper) = reduction.radicand, signs.span
    one_sided = lower.is_nonnegative or not any(p[1::2])
    hopeful = [c for c in p if c and signs.maybe(c) != -1]
    if one_sided and len(hopeful) == 1:
        signs.suppose(hopeful[0], 1)
    if len(p) == 3 and lower.is_finite and upper.is_finite:
        ends = [uv.value(p, reduction.ring.constant(end)) for end in (lower, upper)]
        if all(e and signs.maybe(e) == -1 for e in ends):
            signs.suppose(p[2], -1)


def _j0(reduction: Reduction, root: Expr, context: Context) -> Expr:
    """The term w₀ J_0."""
    signs, dress, ring = context.signs, context.dress, reduction.ring
    p, w = reduction.radicand, reduction.weights[0]
    disc = _discriminant(p)
    line = uv.to_ratio(ring, uv.derivative(p))
    sign = signs.of(p[2], first=-1)
    if sign < 0:
        signs.suppose(disc, 1)
        part = -asin(dress.product((line, 1), (disc, -HALF)))
    elif not disc:
        side = signs.of(line)
        part = side * log(side * dress.ratio(line))
    else:
        part = _increasing(disc, line, p[2], root, context)
    return dress.product((w, 1), (p[2], -HALF), times=(part,))


def _increasing(disc: Ratio, line: Ratio, lead: Ratio, root: Expr, context: Context) -> Expr:
    """√lead·J_0 for a positive leading coefficient: asinh, acosh or a logarithm."""
    signs, dress = context.signs, context.dress
    known = signs.maybe(disc)
    side = signs.maybe(line)
    if context.only or known == -1 or (known == 1 and side is not None):
        if signs.of(disc, first=1) < 0:
            return asinh(dress.product((line, 1), (disc, -HALF)))
        side = signs.of(line, first=1)
        return side * acosh(side * dress.product((line, 1), (disc, -HALF)))
    inside = dress.product((line * line.ring.number(2).inverse(), 1), (lead, -HALF)) + root
    return log(inside) if side == 1 else log(Abs(inside))


def _simple_pole(reduction: Reduction, pole: Pole, root: Expr, context: Context) -> Expr:
    """The term n J_{−1}(c) for a rational c."""
    signs, dress, ring = context.signs, context.dress, reduction.ring
    p, n, c = reduction.radicand, pole.numerator[0], -pole.factor[0]
    here, slope = uv.value(p, c), uv.value(uv.derivative(p), c)
    disc, distance = _discriminant(p), ring.u - c
    sign = signs.of(here, first=-1)

    def weighted(part: Expr) -> Expr:
        return dress.product((n, 1), (here, -HALF), times=(part,))

    line = slope * distance + here * ring.number(2)
    if sign < 0:
        signs.suppose(disc, 1)
        side = signs.maybe(distance)
        if side is None:
            ratio = dress.product((line, 1), (here, -HALF)) / (2 * root)
            return weighted(atan(ratio))
        return weighted(side * asin(_in_inverse(slope, here, c, disc, context)))
    over = line / distance
    if context.only and disc:
        side = signs.of(distance)
        if signs.of(disc, first=1) < 0:
            return weighted(-side * asinh(_in_inverse(slope, here, c, disc, context)))
        branch = signs.of(over)
        argument = branch * _in_inverse(slope, here, c, disc, context)
        return weighted(-side * branch * acosh(argument))
    half = ring.number(2).inverse()
    inside = (dress.product((line * half, 1), (here, -HALF)) + root) / dress.ratio(distance)
    positive = signs.maybe(line) == 1 and signs.maybe(distance) == 1
    return weighted(-log(inside) if positive else -log(Abs(inside)))


def _in_inverse(slope: Ratio, here: Ratio, c: Ratio, disc: Ratio, context: Context) -> Expr:
    """(P′(c) + 2P(c)/(u − c))/√|Δ| with u once and the common factor in front."""
    dress, ring = context.dress, c.ring
    twice = here * ring.number(2)
    common = Ratio(ring, slope.num.gcd(twice.num), slope.den.gcd(twice.den)) if slope else twice
    bracket = dress.ratio(slope / common) + dress.product((twice / common, 1), (ring.u - c, -1))
    return dress.product((common, 1), (disc, -HALF)) * bracket


def _linear_radicand(reduction: Reduction, pole: Pole, root: Expr, context: Context) -> Expr:
    """The term n J_{−1}(c) for P of degree one: 2n∫dy/(y² − P(c)) with y = √P."""
    if len(pole.factor) != 2:
        raise GivenUp("a quadratic pole beside a linear radicand")
    p, c = reduction.radicand, -pole.factor[0]
    twice = pole.numerator[0] * reduction.ring.number(2)
    return _over_root(twice, uv.value(p, c), p[1], reduction.ring.u - c, root, context)


def _over_root(
    n: Ratio, here: Ratio, slope: Ratio, distance: Ratio, root: Expr, context: Context
) -> Expr:
    """The term n∫dy/(y² − P(c)), y = √P, where P − P(c) = slope·distance.

    For P(c) > 0 this is −n/√P(c) · log((√P + √P(c))/√|distance|): the artanh of
    √P/√P(c) is the same but loses all digits near the pole.
    """
    signs, dress = context.signs, context.dress
    sign = signs.of(here, first=-1)

    def weighted(part: Expr) -> Expr:
        return dress.product((n, 1), (here, -HALF), times=(part,))

    at_pole = dress.product((here, HALF))
    if sign < 0:
        return weighted(atan(root / at_pole))
    above = signs.maybe(slope * distance)
    if above is not None and context.only:
        inverse = dress.product((here, HALF), (slope * distance, -HALF))
        return weighted(-asinh(inverse) if above > 0 else -acosh(inverse))
    if signs.maybe(distance) is None:
        return weighted(-log((root + at_pole) ** 2 / Abs(dress.ratio(distance))) / 2)
    return weighted(-log((root + at_pole) / dress.product((distance, HALF))))


def _even_pair(reduction: Reduction, pole: Pole, root: Expr, context: Context) -> Expr:
    """∫(n₁u + n₀)/((u² − γ)√P) du for P = p₂u² + p₀."""
    signs, dress, ring = context.signs, context.dress, reduction.ring
    p, gamma = reduction.radicand, -pole.factor[0]
    here = p[0] + p[2] * gamma
    n0 = pole.numerator[0]
    n1 = pole.numerator[1] if len(pole.numerator) > 1 else ring.zero
    excess = ring.u * ring.u - gamma
    total: Expr = S.Zero
    if n1:
        total += _over_root(n1, here, p[2], excess, root, context)
    if not n0:
        return total
    inner = signs.of(gamma)
    sign = signs.of(here, first=-inner)
    weight = sign * dress.product((n0, 1), (here, -HALF), (gamma, -HALF))
    slope = dress.product((here, HALF), (gamma, -HALF)) * dress.u / root
    if sign != inner:
        return total + weight * atan(slope)
    beyond = signs.maybe(p[0] * excess * ring.number(sign))
    if beyond is not None:
        return total - weight * atanh(1 / slope if beyond > 0 else slope)
    above = dress.product((here, HALF)) * dress.u
    below = dress.product((gamma, HALF)) * root
    return total + weight / 2 * log(Abs((above - below) / (above + below)))


def _complex_pair(reduction: Reduction, pole: Pole, root: Expr, context: Context) -> Expr:
    """∫(n₁u + n₀)/(D√P) du for D = u² + bu + d without real roots.

    With u = −b/2 + e w, D = e²(w² + 1) and P = P₂w² + P₁w + P₀; the degenerate
    members of the pencil P − τ(w² + 1) have τ = (P₀ + P₂ ± T)/2,
    T = √(δ² + P₁²), δ = P₀ − P₂, and the integral of (N₁w + N₀)/((w² + 1)√P) is

        Σ_± (N₀(T ± δ) ± N₁P₁)/(T √(2(T ± δ))) · f_±(((T ± δ)w ∓ P₁)/(√(2(T ± δ)) √P))

    with f_+ = arctan and f_− = artanh (of the inverse for Δ > 0).
    """
    signs, dress, ring = context.signs, context.dress, reduction.ring
    p, (d, b, _) = reduction.radicand, pole.factor
    if signs.of(_discriminant(pole.factor), first=-1) > 0:
        raise GivenUp("irrational real poles")
    half = ring.number(2).inverse()
    middle, width = -b * half, d - b * b * half * half
    e = dress.product((width, HALF))
    delta_, slope = uv.value(p, middle) - p[2] * width, p[1] - b * p[2]
    common = _positive_part(ring.polynomial(delta_.num.gcd(slope.num)), signs)
    delta_, slope = delta_ / common, slope / common
    n1 = pole.numerator[1] if len(pole.numerator) > 1 else ring.zero
    n0 = pole.numerator[0] + n1 * middle
    square = delta_ * delta_ + width * slope * slope
    signs.suppose(square, 1)
    t, scale = dress.product((square, HALF)), dress.product((common, HALF))
    delta, p1 = dress.ratio(delta_), dress.ratio(slope) * e
    w = dress.ratio(ring.u - middle) / e
    factor = Ratio(ring, n0.num.gcd(n1.num), n0.den.gcd(n1.den))
    both = (dress.ratio(n0 / factor) / e, dress.ratio(n1 / factor))
    front = dress.product((factor, 1), (common, -HALF))
    disc = signs.maybe(_discriminant(p))
    total: Expr = S.Zero
    for sign in (1, -1):
        size = t + sign * delta
        weight = front * (both[0] * size + sign * both[1] * p1) / (t * sqrt(2 * size))
        x = scale * (size * w - sign * p1) / (sqrt(2 * size) * root)
        if sign > 0:
            part = atan(x)
        elif disc is None:
            part = log(Abs((1 + x) / (1 - x))) / 2
        else:
            part = atanh(1 / x) if disc > 0 else atanh(x)
        total += weight * part
    return total


def _positive_part(value: Ratio, signs: Signs) -> Ratio:
    """The product of the factors of a polynomial that are constants of known sign."""
    ring = value.ring
    content, found = factors(value.num)
    part = ring.number(abs(content))
    for factor, times in found:
        sign = signs.factor(factor)
        if sign is not None and degree(factor) <= 0:
            part = part * (ring.polynomial(factor) * ring.number(sign)) ** times
    return part


def _rational_pole(pole: Pole, context: Context) -> Expr:
    """∫N/D du for D of degree one or two."""
    signs, dress, ring = context.signs, context.dress, pole.numerator[0].ring
    whole = uv.to_ratio(ring, pole.factor)
    if len(pole.factor) == 2:
        return dress.ratio(pole.numerator[0]) * _logarithm(whole, context)
    if len(pole.factor) > 3:
        raise GivenUp("a pole factor of degree above two")
    n0 = pole.numerator[0]
    n1 = pole.numerator[1] if len(pole.numerator) > 1 else ring.zero
    half = ring.number(2).inverse()
    total: Expr = dress.ratio(n1 * half) * _logarithm(whole, context)
    rest = n0 - n1 * pole.factor[1] * half
    if not rest:
        return total
    disc = _discriminant(pole.factor)
    line = uv.to_ratio(ring, uv.derivative(pole.factor))
    if signs.of(disc, first=-1) < 0:
        twice = rest * ring.number(2)
        return total + dress.product((twice, 1), (disc, -HALF)) * atan(
            dress.product((line, 1), (disc, -HALF))
        )
    width = dress.product((disc, HALF))
    at = dress.ratio(line)
    return total + dress.product((rest, 1), (disc, -HALF)) * log(Abs((at - width) / (at + width)))


def _logarithm(value: Ratio, context: Context) -> Expr:
    """log|value| up to a constant."""
    dress, ring = context.dress, value.ring
    primitive = ring.polynomial(value.num)
    sign = context.signs.maybe(primitive)
    e = dress.polynomial(value.num if sign != -1 else -value.num)
    return log(e) if sign is not None else log(Abs(e))

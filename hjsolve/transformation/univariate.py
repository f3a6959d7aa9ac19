"""One equation, one unknown: every root that has a closed form.

The unknown is isolated where it occurs once.  Else the equation is brought to a
polynomial of generators and factored; each factor is solved for the one
generator that holds the unknown (degree up to 2, or a pure power), for an angle
where sine and cosine occur, or after squaring where a root occurs beside it.  A
root that squaring or an even power has brought in is dropped by the caller, who
puts every root back.
"""

from __future__ import annotations

import time
from dataclasses import dataclass

import sympy as sp
from sympy import Expr, Pow, Rational, Symbol

from hjsolve.algebra.budget import limit
from hjsolve.algebra.generators import Generators, NotRational, coefficients
from hjsolve.algebra.isolate import inverse_power, isolate
from hjsolve.errors import OutOfTime
from hjsolve.transformation.tidy import certainly_positive, in_grammar, in_sines, length, tidied

LAST_RESORT_SECONDS = 0.5
LAST_RESORT_OPERATIONS = 40
DEPTH = 3
"""Roots squared away one after another."""


@dataclass(frozen=True, slots=True)
class Root:
    """A root, right where every one of ``conditions`` is ≥ 0."""

    value: Expr
    conditions: tuple[Expr, ...] = ()


def roots(
    equation: Expr, u: Symbol, depth: int = 0, *, last_resort: bool = False
) -> tuple[Root, ...]:
    """The roots u of equation = 0, or none where no way leads to a closed form."""
    if not equation.has(u):
        return ()
    found = _isolated(equation, sp.S.Zero, u)
    if not found:
        found = _by_factors(in_sines(equation), u, depth)
    if not found and last_resort:
        found = _last_resort(equation, u)
    kept: dict[Expr, Root] = {}
    for root in found:
        value = tidied(root.value)
        bad = value.has(sp.nan, sp.zoo, sp.oo, -sp.oo, sp.I) or value.has(u)
        wrong_sign = u.is_positive and (value.is_negative or certainly_positive(-value))
        if not bad and not wrong_sign:
            kept.setdefault(value, Root(value, root.conditions))
    return tuple(kept.values())


def _isolated(form: Expr, value: Expr, u: Symbol) -> tuple[Root, ...]:
    """The roots of form = value where u occurs once."""
    if form == u:
        return (Root(value),)
    found = isolate(form, value, u)
    if found is None:
        form = in_sines(form)
        found = isolate(form, value, u)
    if found is None:
        return ()
    centre, half, valid = found.centre, found.half, found.valid
    if half == 0:
        return (Root(in_grammar(centre), valid),)
    if centre.has(sp.pi):
        both = [_through_asin(centre + s * half) for s in (1, -1)]
        return tuple(Root(sp.expand(v), valid) for v in reversed(both))
    half = without_bars(tidied(half))
    return (Root(centre + half, valid), Root(centre - half, valid))


def _through_asin(e: Expr) -> Expr:
    return e.replace(sp.acos, lambda v: sp.pi / 2 - sp.asin(v))


def without_bars(half: Expr) -> Expr:
    """±half with |v| replaced by v where it is a factor: the two signs stay the same pair."""
    factors = []
    for factor in sp.Mul.make_args(half):
        base, power = factor.as_base_exp()
        bare = isinstance(base, sp.Abs) and power.is_Rational and power.q % 2
        factors.append(base.args[0] ** power if bare else factor)
    return sp.Mul(*factors)


def _by_factors(equation: Expr, u: Symbol, depth: int) -> tuple[Root, ...]:
    if length(equation) > 450:
        return ()
    try:
        ring = Generators([equation])
        numerator = ring.reduce(ring.ratio(equation)).numerator
        _, factors = numerator.factor()
    except (NotRational, ArithmeticError, KeyError, TypeError):
        return ()
    found: list[Root] = []
    for factor, _ in factors:
        degrees = factor.degrees()
        own = [k for k, g in enumerate(ring.items) if degrees[k] and g.has(u)]
        if own:
            found += _of_factor(ring, factor, own, u, depth)
    return tuple(found)


def _of_factor(
    ring: Generators, factor: object, own: list[int], u: Symbol, depth: int
) -> list[Root]:
    if len(own) == 1:
        kernel = ring.items[own[0]]
        values = polynomial_roots(_parts(ring, factor, own[0]))
        return [r for v in values for r in _isolated(kernel, v, u)]
    kernels = [ring.items[k] for k in own]
    if len(own) == 2 and {type(k) for k in kernels} == {sp.sin, sp.cos}:
        sine = own[0] if isinstance(kernels[0], sp.sin) else own[1]
        cosine = own[0] if sine == own[1] else own[1]
        if kernels[0].args == kernels[1].args:
            return _angle(ring, factor, (sine, cosine), u)
    if depth < DEPTH:
        for k in own:
            root = ring.items[k]
            if isinstance(root, Pow) and root.exp == Rational(1, 2):
                parts = _parts(ring, factor, k)
                if set(parts) <= {0, 1}:
                    a, b = parts.get(0, sp.S.Zero), parts[1]
                    square = roots(sp.expand(a**2 - b**2 * root.base), u, depth + 1)
                    side = -a * b
                    return [
                        Root(r.value, (*r.conditions, side.xreplace({u: r.value}))) for r in square
                    ]
    return []


def _parts(ring: Generators, factor: object, k: int) -> dict[int, Expr]:
    parts = coefficients(factor, k, ring.context)
    return {e: ring.polynomial(part) for e, part in parts.items()}


def polynomial_roots(parts: dict[int, Expr]) -> tuple[Expr, ...]:
    """The real roots of Σ parts[n] xⁿ of degree up to 2, in x, or in a power of it."""
    exponents = [e for e in parts if e]
    common = sp.igcd(*exponents) if len(exponents) > 1 else exponents[0]
    reduced = {e // common: c for e, c in parts.items()}
    degree = max(reduced)
    zero = sp.S.Zero
    if degree == 1:
        below: tuple[Expr, ...] = (-reduced.get(0, zero) / reduced[1],)
    elif degree == 2:
        a, b, c = reduced[2], reduced.get(1, zero), reduced.get(0, zero)
        inside = tidied(sp.expand(b**2 - 4 * a * c))
        half = without_bars(tidied(sp.sqrt(inside)))
        below = ((-b + half) / (2 * a), (-b - half) / (2 * a))
    else:
        return ()
    if common == 1:
        return below
    found: list[Expr] = []
    for value in below:
        root = inverse_power(tidied(value), Rational(common))
        if common % 2:
            found.append(root)
        else:
            root = without_bars(tidied(root))
            found += [root, -root]
    return tuple(found)


def _angle(ring: Generators, factor: object, own: tuple[int, int], u: Symbol) -> list[Root]:
    """A polynomial in the sine and cosine of one angle."""
    sine, cosine = own
    argument = ring.items[sine].args[0]
    terms: dict[tuple[int, int], Expr] = {}
    for e_sine, part in coefficients(factor, sine, ring.context).items():
        for e_cosine, rest in coefficients(part, cosine, ring.context).items():
            terms[e_sine, e_cosine] = ring.polynomial(rest)
    angles: list[Expr] = []
    if len({a + b for a, b in terms}) == 1:
        tangents = polynomial_roots({a: c for (a, _), c in terms.items()})
        angles = [sp.atan(tidied(v)) for v in tangents]
    elif set(terms) <= {(1, 0), (0, 1), (0, 0)}:
        a, b, d = (terms.get(k, sp.S.Zero) for k in ((1, 0), (0, 1), (0, 0)))
        apart = sp.acos(-d / sp.sqrt(a**2 + b**2))
        angles = [sp.atan2(a, b) + apart, sp.atan2(a, b) - apart]
    return [r for v in angles for r in _isolated(argument, v, u)]


def _last_resort(equation: Expr, u: Symbol) -> tuple[Root, ...]:
    """SymPy's solver, on a short equation and a short leash; its roots are checked like ours."""
    if equation.count_ops() > LAST_RESORT_OPERATIONS:
        return ()
    began = time.monotonic()
    try:
        with limit(LAST_RESORT_SECONDS):
            found = sp.solve(equation, u)
    except OutOfTime:
        if time.monotonic() - began < 0.95 * LAST_RESORT_SECONDS:
            raise  # the caller's limit
        return ()
    except Exception:  # whatever SymPy raises, there is no root to be had from it
        return ()
    short = [v for v in found if isinstance(v, Expr) and v.count_ops() <= 60]
    return tuple(Root(v) for v in short if not v.has(sp.I, sp.Piecewise, sp.RootOf))[:4]

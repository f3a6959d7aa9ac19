"""Kernels u(q): substitutions that make the integrand algebraic.

Only kernels that are injective where they are used, because the signs of the
auxiliary roots (sin θ for u = cos θ) must not change: a kernel that is injective
on a part of the domain only carries the inequalities of that part, and they go
into ``valid`` (Bioche's rules, with domains).
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass
from math import gcd, lcm

import sympy as sp
from sympy import Add, Expr, Integer, Lt, Mul, Pow, Rational, S, Symbol, oo, pi
from sympy.core.relational import Relational

from hjsolve.quadrature.radicals import Radicals, square_root
from hjsolve.quadrature.ratios import GivenUp, Ratio
from hjsolve.quadrature.signs import Signs
from hjsolve.records import Domain

Leaf = Callable[[Expr, Signs], Radicals | None]

CIRCULAR = (sp.sin, sp.cos, sp.tan, sp.cot, sp.sec, sp.csc)
HYPERBOLIC = (sp.sinh, sp.cosh, sp.tanh, sp.coth, sp.sech, sp.csch)


@dataclass(frozen=True)
class Partner:
    """u^power = constant + factor·w² for another function w of q, named ``function``."""

    function: Expr
    constant: Expr
    factor: Expr
    power: int = 2


@dataclass(frozen=True)
class Kernel:
    """u = ``expression`` with values in ``span``.

    ``leaf`` rewrites what depends on q, ``slope`` gives dq/du.  ``constants``
    must be generators of the ring.  ``partner`` is a function of q in which
    polynomials in u may be shorter.
    """

    expression: Expr
    span: tuple[Expr, Expr]
    leaf: Leaf
    slope: Callable[[Signs], Radicals]
    restriction: tuple[Relational, ...] = ()
    constants: tuple[Expr, ...] = ()
    partner: Partner | None = None


def candidates(integrand: Expr, variable: Symbol, domain: Domain) -> Iterator[Kernel]:
    """The kernels worth trying, most natural first; raises GivenUp when there is none."""
    outside, functions = _shape(integrand, variable)
    if not functions:
        yield from _powers(integrand, variable, domain)
        return
    if outside:
        raise GivenUp(f"{variable} occurs both inside and outside of transcendental functions")
    base, multiples = _common_argument([f.args[0] for f in functions], variable)
    kinds = {type(f) for f in functions}
    if kinds <= set(CIRCULAR):
        yield from _circular(base, multiples, variable, domain)
    elif kinds <= {sp.exp, *HYPERBOLIC}:
        if kinds == {sp.exp}:
            yield _exponential(base, multiples, variable, domain)
        else:
            yield from _hyperbolic(base, multiples, variable, domain)
            yield _exponential(base, multiples, variable, domain)
    else:
        raise GivenUp("circular and exponential functions, or others, are mixed")


def _shape(integrand: Expr, q: Symbol) -> tuple[bool, list[Expr]]:
    """(does q occur outside of functions, the functions of q)."""
    outside, functions, stack, seen = False, {}, [integrand], set()
    while stack:
        e = stack.pop()
        if e in seen or not e.has(q):
            continue
        seen.add(e)
        if e == q:
            outside = True
        elif isinstance(e, (Add, Mul)):
            stack.extend(e.args)
        elif isinstance(e, Pow) and isinstance(e.exp, Rational):
            stack.append(e.base)
        elif isinstance(e, (sp.exp, *CIRCULAR, *HYPERBOLIC)):
            functions[e] = None
        else:
            raise GivenUp(f"{type(e).__name__} of {q} is outside of the kernels known here")
    return outside, sorted(functions, key=sp.default_sort_key)


def _common_argument(arguments: list[Expr], q: Symbol) -> tuple[Expr, dict[Expr, int]]:
    """A base linear in q of which every argument is an integer multiple."""
    expanded = {a: sp.expand(a) for a in arguments}
    first = expanded[arguments[0]]
    rates = {a: sp.diff(x, q) for a, x in expanded.items()}
    ratios = {a: sp.cancel(r / rates[arguments[0]]) for a, r in rates.items()}
    if any(r.has(q) for r in rates.values()) or not all(
        isinstance(r, Rational) and r != 0 for r in ratios.values()
    ):
        raise GivenUp(f"the arguments are no commensurate linear functions of {q}")
    share = Rational(
        gcd(*(int(r.p) for r in ratios.values())), lcm(*(int(r.q) for r in ratios.values()))
    )
    base = first * share
    multiples = {a: int(r / share) for a, r in ratios.items()}
    if any(sp.expand(expanded[a] - n * base) != 0 for a, n in multiples.items()):
        raise GivenUp(f"the arguments are shifted against each other in {q}")
    if len(arguments) == 1:
        base = arguments[0]
    if base.could_extract_minus_sign() and all(n < 0 for n in multiples.values()):
        base, multiples = -base, {a: -n for a, n in multiples.items()}
    return base, multiples


def _constant(signs: Signs, e: Expr) -> Radicals:
    return Radicals.rational(signs, signs.ring.constant(e))


def _rational(signs: Signs, ratio: Ratio) -> Radicals:
    return Radicals.rational(signs, ratio)


# ------------------------------------------------------------------- powers


def _powers(integrand: Expr, q: Symbol, domain: Domain) -> Iterator[Kernel]:
    """u = q^(1/n), and u = √(A q² + B), √(A q + B) for roots inside of roots."""
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
            return _rational(signs, signs.ring.u**n)
        if isinstance(e, Pow) and e.base == q and isinstance(e.exp, Rational):
            return _rational(signs, signs.ring.u ** int(e.exp * n))
        return None

    def slope(signs: Signs) -> Radicals:
        return _rational(signs, signs.ring.number(n) * signs.ring.u ** (n - 1))

    if n == 1:
        lower = S.Zero if q.is_positive and not domain.lower.is_nonnegative else domain.lower
        return Kernel(q, (lower, domain.upper), leaf, slope)
    limits = () if domain.lower.is_nonnegative or q.is_positive else (Lt(0, q),)
    lower = domain.lower if domain.lower.is_nonnegative else S.Zero
    share = Rational(1, n)
    upper = oo if domain.upper is oo else domain.upper**share
    return Kernel(q**share, (lower**share, upper), leaf, slope, limits)


def _inner_linear(q: Symbol, radicand: Expr, a: Expr, b: Expr) -> Kernel:
    u = sp.sqrt(radicand)

    def leaf(e: Expr, signs: Signs) -> Radicals | None:
        ring = signs.ring
        if e == q:
            return _rational(signs, (ring.u**2 - ring.constant(b)) / ring.constant(a))
        return None

    def slope(signs: Signs) -> Radicals:
        return _rational(signs, signs.ring.number(2) * signs.ring.u / signs.ring.constant(a))

    return Kernel(u, (S.Zero, oo), leaf, slope, (), (a, b))


def _inner_quadratic(q: Symbol, radicand: Expr, a: Expr, b: Expr, domain: Domain) -> Kernel:
    """u = √(a q² + b); the odd powers of q are roots, positive on the half-line."""

    def coordinate(signs: Signs) -> Radicals:
        ring = signs.ring
        return square_root(signs, (ring.u**2 - ring.constant(b)) / ring.constant(a))

    def leaf(e: Expr, signs: Signs) -> Radicals | None:
        ring = signs.ring
        if e == q:
            return coordinate(signs)
        if isinstance(e, Pow) and e.base == q and isinstance(e.exp, Integer) and e.exp % 2 == 0:
            square = (ring.u**2 - ring.constant(b)) / ring.constant(a)
            return _rational(signs, square ** (int(e.exp) // 2))
        return None

    def slope(signs: Signs) -> Radicals:
        ring = signs.ring
        ratio = ring.u / ring.constant(a)
        return _rational(signs, ratio) * coordinate(signs).inverse()

    limits = () if domain.lower.is_nonnegative or q.is_positive else (Lt(0, q),)
    span: tuple[Expr, Expr] = (S.Zero, oo)
    if a.is_positive and b.is_positive:
        root = sp.sqrt(b)
        span = (root if not isinstance(root, Pow) or root.exp != S.Half else S.Zero, oo)
    return Kernel(sp.sqrt(radicand), span, leaf, slope, limits, (a, b), Partner(q, b, a))


# ----------------------------------------------------------------- circular


def _circular(
    base: Expr, multiples: dict[Expr, int], q: Symbol, domain: Domain
) -> Iterator[Kernel]:
    """cos, sin, tan, cot of ``base``, those injective on the domain first."""
    rate = sp.diff(base, q)
    low, high = _image(base, q, domain)
    half_turn, right = (S.Zero, pi), (-pi / 2, pi / 2)
    kernels = [
        _circle_kernel(name, base, rate, multiples, (low, high), allowed)
        for name, allowed in (
            ("cos", half_turn), ("cot", half_turn), ("sin", right), ("tan", right)
        )
    ]
    if domain.kind != "polar-angle":
        kernels = kernels[2:] + kernels[:2]
    yield from sorted(kernels, key=lambda k: len(k.restriction))


def _image(base: Expr, q: Symbol, domain: Domain) -> tuple[Expr, Expr]:
    """The interval through which a linear function of q runs."""
    ends = []
    rate = sp.diff(base, q)
    for end in (domain.lower, domain.upper):
        ends.append(sp.simplify(base.subs(q, end)) if end.is_finite else end * sp.sign(rate))
    low, high = ends
    if rate.is_negative:
        low, high = high, low
    return low, high


def _circle_kernel(
    name: str,
    base: Expr,
    rate: Expr,
    multiples: dict[Expr, int],
    image: tuple[Expr, Expr],
    allowed: tuple[Expr, Expr],
) -> Kernel:
    function = {"cos": sp.cos, "sin": sp.sin, "tan": sp.tan, "cot": sp.cot}[name]
    inside = all(x.is_number and x.is_finite for x in image) and (
        image[0] >= allowed[0] and image[1] <= allowed[1]
    )
    lower, upper = image if inside else allowed
    limits = () if inside else (Lt(lower, base), Lt(base, upper))
    ends = [_end(function, lower, +1), _end(function, upper, -1)]
    span = (ends[0], ends[1]) if name in ("sin", "tan") else (ends[1], ends[0])

    def pair(signs: Signs) -> tuple[Radicals, Radicals]:
        """(cos, sin) of the base."""
        ring = signs.ring
        u = _rational(signs, ring.u)
        if name in ("cos", "sin"):
            other = square_root(signs, ring.one - ring.u**2)
            return (u, other) if name == "cos" else (other, u)
        other = square_root(signs, ring.one / (ring.one + ring.u**2))
        return (other, u * other) if name == "tan" else (u * other, other)

    def leaf(e: Expr, signs: Signs) -> Radicals | None:
        if not isinstance(e, CIRCULAR) or e.args[0] not in multiples:
            return None
        c, s = _multiple(*pair(signs), multiples[e.args[0]], -1)
        return _of_pair(type(e), c, s)

    def slope(signs: Signs) -> Radicals:
        ring = signs.ring
        c, s = pair(signs)
        inverse = _rational(signs, ring.one / ring.constant(rate))
        minus = _rational(signs, ring.number(-1))
        match name:
            case "cos":
                return inverse * minus * s.inverse()
            case "sin":
                return inverse * c.inverse()
            case "tan":
                return inverse * c * c
            case _:
                return inverse * minus * s * s

    partner = {
        "cos": Partner(sp.sin(base), S.One, -S.One),
        "sin": Partner(sp.cos(base), S.One, -S.One),
    }.get(name)
    return Kernel(function(base), span, leaf, slope, limits, (rate,), partner)


def _end(function: Callable[[Expr], Expr], at: Expr, side: int) -> Expr:
    value = function(at)
    if value is sp.zoo or not value.is_finite:
        return side * (oo if function is sp.cot else -oo)
    return value


def _of_pair(kind: type, c: Radicals, s: Radicals) -> Radicals:
    """A circular or hyperbolic function from the pair (cos, sin) or (cosh, sinh)."""
    match kind.__name__:
        case "cos" | "cosh":
            return c
        case "sin" | "sinh":
            return s
        case "tan" | "tanh":
            return s * c.inverse()
        case "cot" | "coth":
            return c * s.inverse()
        case "sec" | "sech":
            return c.inverse()
        case _:
            return s.inverse()


def _multiple(c: Radicals, s: Radicals, n: int, square: int) -> tuple[Radicals, Radicals]:
    """(c, s) of the n-fold argument; ``square`` is -1 for circular, +1 for hyperbolic."""
    if abs(n) > 12:
        raise GivenUp("a high multiple of the angle")
    signs = c.signs
    sign = _rational(signs, signs.ring.number(square))
    cn, sn = c, s
    for _ in range(abs(n) - 1):
        cn, sn = cn * c + sign * sn * s, sn * c + cn * s
    return cn, sn if n > 0 else sn * _rational(signs, signs.ring.number(-1))


# ------------------------------------------- exponential and hyperbolic


def _exponential(base: Expr, multiples: dict[Expr, int], q: Symbol, domain: Domain) -> Kernel:
    rate = sp.diff(base, q)

    def leaf(e: Expr, signs: Signs) -> Radicals | None:
        if not isinstance(e, (sp.exp, *HYPERBOLIC)) or e.args[0] not in multiples:
            return None
        ring, n = signs.ring, multiples[e.args[0]]
        if isinstance(e, sp.exp):
            return _rational(signs, ring.u**n)
        up, down, half = ring.u**n, ring.u ** (-n), ring.number(2).inverse()
        return _of_pair(
            type(e), _rational(signs, (up + down) * half), _rational(signs, (up - down) * half)
        )

    def slope(signs: Signs) -> Radicals:
        return _rational(signs, (signs.ring.u * signs.ring.constant(rate)).inverse())

    span: tuple[Expr, Expr] = (S.Zero, oo)
    if domain.lower == 0 and base.subs(q, 0) == 0:
        if rate.is_positive:
            span = (S.One, oo)
        elif rate.is_negative:
            span = (S.Zero, S.One)
    return Kernel(sp.exp(base), span, leaf, slope, (), (rate,))


def _hyperbolic(
    base: Expr, multiples: dict[Expr, int], q: Symbol, domain: Domain
) -> Iterator[Kernel]:
    """sinh, tanh on the whole line, cosh where the argument is positive."""
    rate = sp.diff(base, q)
    low, _high = _image(base, q, domain)
    positive = low == 0
    for name in ("sinh", "tanh", "cosh"):
        yield _hyperbola_kernel(name, base, rate, multiples, positive)


def _hyperbola_kernel(
    name: str, base: Expr, rate: Expr, multiples: dict[Expr, int], positive: bool
) -> Kernel:
    function = {"sinh": sp.sinh, "tanh": sp.tanh, "cosh": sp.cosh}[name]

    def pair(signs: Signs) -> tuple[Radicals, Radicals]:
        """(cosh, sinh) of the base."""
        ring = signs.ring
        u = _rational(signs, ring.u)
        if name == "sinh":
            return square_root(signs, ring.one + ring.u**2), u
        if name == "cosh":
            return u, square_root(signs, ring.u**2 - ring.one)
        c = square_root(signs, ring.one / (ring.one - ring.u**2))
        return c, u * c

    def leaf(e: Expr, signs: Signs) -> Radicals | None:
        if not isinstance(e, (sp.exp, *HYPERBOLIC)) or e.args[0] not in multiples:
            return None
        c, s = _multiple(*pair(signs), multiples[e.args[0]], +1)
        return c + s if isinstance(e, sp.exp) else _of_pair(type(e), c, s)

    def slope(signs: Signs) -> Radicals:
        ring = signs.ring
        c, s = pair(signs)
        inverse = _rational(signs, ring.one / ring.constant(rate))
        if name == "sinh":
            return inverse * c.inverse()
        return inverse * (c * c if name == "tanh" else s.inverse())

    spans: dict[str, tuple[Expr, Expr]] = {
        "sinh": (S.Zero if positive else -oo, oo),
        "tanh": (S.Zero if positive else -S.One, S.One),
        "cosh": (S.One, oo),
    }
    limits = (Lt(0, base),) if name == "cosh" and not positive else ()
    partner = {
        "sinh": Partner(sp.cosh(base), -S.One, S.One),
        "cosh": Partner(sp.sinh(base), S.One, S.One),
        "tanh": Partner(1 / sp.cosh(base), S.One, -S.One),
    }[name]
    return Kernel(function(base), spans[name], leaf, slope, limits, (rate,), partner)

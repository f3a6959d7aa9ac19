"""Short forms of exact expressions; whatever is done here is an identity.

Nothing is decided here: a form that is not found is only a longer formula.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from functools import lru_cache

import sympy as sp
from sympy import Expr, Pow, Symbol

from hjsolve.algebra.generators import Generators, NotRational
from hjsolve.algebra.roots import open_squares

OPERATIONS = 600
"""A longer expression is left as it stands."""

FUNCTIONS = (sp.log, sp.asin, sp.acos, sp.atan, sp.atan2, sp.Abs, sp.asinh, sp.acosh, sp.atanh)
"""Functions whose arguments are put in short form first."""


@lru_cache(maxsize=1 << 12)
def tidied(expression: Expr) -> Expr:
    """The shortest of the forms tried: as it stands, one fraction, factored, term by term."""
    if expression.is_Atom:
        return expression
    inner = _inside(expression)
    forms = [expression, inner, *_fractions(inner)]
    best = min(forms, key=length)
    terms = sp.Add.make_args(sp.expand_mul(best)) if length(best) < 90 else ()
    if 1 < len(terms) <= 6:
        whole = sp.Add(*(min([t, *_fractions(t)], key=length) for t in terms))
        best = min(best, whole, key=length)
    return best


@lru_cache(maxsize=1 << 15)
def length(expression: Expr) -> int:
    """How long a formula is to a reader: its nodes, absolute values dearer.

    SymPy's ``count_ops`` took four tenths of the time of a whole inversion.
    """
    if expression.is_Rational:
        return 1 + int(expression.q != 1)
    return 1 + 2 * isinstance(expression, sp.Abs) + sum(map(length, expression.args))


def as_fraction(expression: Expr) -> Expr | None:
    """One fraction of generators in lowest terms, None where there is none of moderate size."""
    return next(iter(_fractions(expression, factored=False)), None)


def _fractions(expression: Expr, *, factored: bool = True) -> list[Expr]:
    """The expression as one fraction: as it is, and with numerator and denominator factored."""
    if expression.is_Atom or length(expression) > OPERATIONS:
        return []
    if expression.has(sp.sinh, sp.cosh, sp.tanh) and not expression.has(sp.exp):
        return _hyperbolic_fractions(expression, factored=factored)
    try:
        ring = Generators([expression])
        value = ring.reduce(ring.ratio(expression))
        found = [ring.expression(value)]
        if factored and len(value.numerator) > 1:
            found.append(ring.factored(value.numerator) / ring.factored(value.denominator))
    except (NotRational, ArithmeticError, KeyError, TypeError, RecursionError):
        return []
    if factored:
        found = [_in_cosines(e) for e in found]
        found += [e for e in map(in_tangents, found) if e not in found]
    return found


def _hyperbolic_fractions(expression: Expr, *, factored: bool) -> list[Expr]:
    there, back = hyperbolic_letters([expression])
    found = _fractions(expression.xreplace(there), factored=factored)
    return [e.xreplace(back) for e in found]


def hyperbolic_letters(
    expressions: Sequence[Expr],
) -> tuple[dict[Expr, Expr], dict[Expr, Expr]]:
    """A letter for sinh u, with cosh u = √(1 + sinh² u), and the way back.

    A fraction in these is shorter than one in exp u, which the generators would take.
    """
    there: dict[Expr, Expr] = {}
    back: dict[Expr, Expr] = {}
    hyperbolic = (sp.sinh, sp.cosh, sp.tanh)
    arguments = {f.args[0] for e in expressions for f in e.atoms(*hyperbolic)}
    if not any(e.has(sp.exp) for e in expressions):
        for n, u in enumerate(sorted(arguments, key=sp.default_sort_key)):
            s = sp.Dummy(f"s{n}", real=True)
            root = sp.sqrt(1 + s**2)
            there |= {sp.sinh(u): s, sp.cosh(u): root, sp.tanh(u): s / root}
            back |= {root: sp.cosh(u), 1 + s**2: sp.cosh(u) ** 2, s: sp.sinh(u)}
    return there, back


def _in_cosines(e: Expr) -> Expr:
    """(sin u − 1)(sin u + 1) = −cos² u."""
    return e.replace(lambda x: isinstance(x, sp.Mul) and x.has(sp.sin), _cosines)


def _cosines(product: Expr) -> Expr:
    powers = dict(f.as_base_exp() for f in product.args)
    for base in list(powers):
        if not (isinstance(base, sp.Add) and len(base.args) == 2 and base.has(sp.sin)):
            continue
        s = base - 1
        if not isinstance(s, sp.sin):
            continue
        low = s - 1
        if low in powers or -low in powers:
            other = low if low in powers else -low
            sign = -1 if other == low else 1
            times = powers[base]
            if times == powers[other] and times.is_Integer:
                rest = sp.Mul(*(b**x for b, x in powers.items() if b not in (base, other)))
                return rest * (sign * sp.cos(s.args[0]) ** 2) ** times
    return product


def in_tangents(e: Expr) -> Expr:
    """sinⁿ u/cosⁿ u = tanⁿ u."""
    return e.replace(lambda x: isinstance(x, sp.Mul) and x.has(sp.cos), _tangents)


def _tangents(product: Expr) -> Expr:
    powers = dict(f.as_base_exp() for f in product.args)
    for base, times in list(powers.items()):
        if not (isinstance(base, sp.sin) and times.is_Integer):
            continue
        c = sp.cos(base.args[0])
        other = powers.get(c, sp.S.Zero)
        if other.is_Integer and times * other < 0:
            n = min(abs(times), abs(other)) * sp.sign(times)
            powers[base] = times - n
            powers[c] = other + n
            turned = sp.tan(base.args[0]) ** n if n > 0 else sp.cot(base.args[0]) ** -n
            return sp.Mul(turned, *(b**x for b, x in powers.items()))
    return product


def _inside(expression: Expr) -> Expr:
    """Radicands and arguments of inverse functions in short form, squares under roots opened."""
    put = {}
    for part in expression.atoms(Pow, *FUNCTIONS):
        if isinstance(part, Pow):
            if part.exp.is_Rational and part.exp.q != 1 and not part.base.is_Atom:
                put[part] = _root(tidied(part.base), part.exp)
        elif not all(a.is_Atom for a in part.args):
            put[part] = part.func(*(tidied(a) for a in part.args))
    changed = {old: new for old, new in put.items() if old != new}
    if changed:
        expression = expression.xreplace(changed)
    return without_signs(open_squares(_areas(expression)))


def _areas(e: Expr) -> Expr:
    """asinh(sinh g) = g, exp(n asinh u) = (u + √(u² + 1))ⁿ, and the like, for real arguments."""
    if not e.has(sp.asinh, sp.acosh, sp.atanh):
        return e
    for inverse, function in ((sp.asinh, sp.sinh), (sp.atanh, sp.tanh)):
        e = e.replace(
            lambda x, f=inverse, g=function: isinstance(x, f) and isinstance(x.args[0], g),
            lambda x: x.args[0].args[0],
        )
    return e.replace(sp.exp, _exponential)


def _exponential(exponent: Expr) -> Expr:
    whole: Expr = sp.S.One
    rest: Expr = sp.S.Zero
    for term in sp.Add.make_args(exponent):
        times, f = term.as_coeff_Mul()
        u = f.args[0] if f.args else f
        root = None
        if isinstance(f, sp.asinh):
            root = sp.sqrt(u**2 + 1)
        elif isinstance(f, sp.acosh):
            root = sp.sqrt(u - 1) * sp.sqrt(u + 1)
        if root is not None and times.is_Integer:
            # exp(−asinh u) as √(u² + 1) − u: a denominator would hide what cancels
            down = root - u if isinstance(f, sp.asinh) else u - root
            whole *= (u + root) ** times if times > 0 else down**-times
        else:
            rest += term
    return whole * sp.exp(rest)


def _root(base: Expr, power: Expr) -> Expr:
    """base**power with the content of the base apart, and √(1/u) = 1/√u where it is real."""
    content, primitive = base.as_content_primitive()
    inner, turned = primitive.as_base_exp()
    if turned.is_Integer and turned.is_negative and turned % 2:
        return Pow(content, power) * Pow(inner, turned * power)
    return Pow(content, power) * Pow(primitive, power)


def without_signs(e: Expr) -> Expr:
    """sign(u)|u|ⁿ = uⁿ for odd n, sign(u)² = 1, |u|² = u², wherever u ≠ 0."""
    if not e.has(sp.Abs, sp.sign):
        return e
    apart = _folded(sp.expand_mul(e)) if e.has(sp.sign) and length(e) < 120 else e
    return min(_folded(e), apart, key=length)


def _folded(e: Expr) -> Expr:
    e = e.replace(sp.sign, _sign)
    e = e.replace(lambda x: isinstance(x, Pow) and isinstance(x.base, (sp.Abs, sp.sign)), _even)
    return e.replace(lambda x: isinstance(x, sp.Mul) and x.has(sp.Abs, sp.sign), _signed)


def _sign(u: Expr) -> Expr:
    odd = isinstance(u, Pow) and u.exp.is_Integer and u.exp % 2
    return sp.sign(u.base if odd else u)


def _even(power: Expr) -> Expr:
    u, n = power.base.args[0], power.exp
    if n.is_Integer and isinstance(power.base, sp.sign):
        return sp.S.One if n % 2 == 0 else power.base
    return u**n if n.is_Integer and n % 2 == 0 else power


def _signed(product: Expr) -> Expr:
    powers = dict(f.as_base_exp() for f in product.args)
    for base, times in list(powers.items()):
        if not (isinstance(base, sp.Abs) and times.is_Integer and times % 2):
            continue
        u = base.args[0]
        sign = sp.sign(u)
        turns = powers.get(sign)
        if turns is not None and turns.is_Integer and turns % 2:
            rest = sp.Mul(*(b**x for b, x in powers.items() if b not in (base, sign)))
            return rest * u**times
        if powers.get(u) == -times:
            rest = sp.Mul(*(b**x for b, x in powers.items() if b not in (base, u)))
            return rest * sign
    return product


def in_sines(expression: Expr) -> Expr:
    """``tan cot sec csc`` through ``sin`` and ``cos``."""
    rules: tuple[tuple[type, Callable[[Expr], Expr]], ...] = (
        (sp.tan, lambda u: sp.sin(u) / sp.cos(u)),
        (sp.cot, lambda u: sp.cos(u) / sp.sin(u)),
        (sp.sec, lambda u: 1 / sp.cos(u)),
        (sp.csc, lambda u: 1 / sp.sin(u)),
    )
    for kind, rule in rules:
        if expression.has(kind):
            expression = expression.replace(kind, rule)
    return expression


def in_grammar(expression: Expr) -> Expr:
    """Functions the wire does not have, through those it has."""
    rules: tuple[tuple[type, Callable[[Expr], Expr]], ...] = (
        (sp.acot, lambda u: sp.atan(1 / u)),
        (sp.coth, lambda u: sp.cosh(u) / sp.sinh(u)),
        (sp.sech, lambda u: 1 / sp.cosh(u)),
        (sp.csch, lambda u: 1 / sp.sinh(u)),
        (sp.acoth, lambda u: sp.atanh(1 / u)),
        (sp.asec, lambda u: sp.acos(1 / u)),
        (sp.acsc, lambda u: sp.asin(1 / u)),
    )
    for kind, rule in rules:
        if expression.has(kind):
            expression = expression.replace(kind, rule)
    return expression


def certainly_positive(e: Expr) -> bool:
    """Whether e is positive wherever it is real and not 0, as its form shows."""
    if e.is_positive or isinstance(e, sp.exp):
        return True
    if isinstance(e, sp.Mul):
        return all(certainly_positive(a) for a in e.args)
    if isinstance(e, sp.Add):
        return all(certainly_positive(a) for a in e.args)
    if isinstance(e, Pow):
        if e.exp.is_Rational and (e.exp.q % 2 == 0 or e.exp.p % 2 == 0):
            return True
        return certainly_positive(e.base)
    return isinstance(e, (sp.Abs, sp.cosh, sp.acos)) or bool(e.is_nonnegative)


def derivative(e: Expr, *along: Symbol) -> Expr:
    """∂e/∂v, one v after another, with signs held: |u|′ = sign(u) u′, right wherever u ≠ 0.

    SymPy's own derivative of |u| is a formal one of re(u) when it does not see
    that u is real.
    """
    held: dict[Expr, Symbol] = {}

    def sign_of(u: Expr) -> Symbol:
        return held.setdefault(u, sp.Dummy("s", real=True))

    if e.has(sp.Abs, sp.sign):
        e = e.replace(sp.Abs, lambda u: u * sign_of(u)).replace(sp.sign, sign_of)
    out = sp.diff(e, *along)
    while out.free_symbols & set(held.values()):
        out = out.xreplace({s: sp.sign(u) for u, s in held.items()})
    return out


def determinant(rows: Sequence[Sequence[Expr]]) -> Expr:
    """Leibniz's sum, products with a zero left out; nothing is expanded or simplified."""
    if len(rows) == 1:
        return rows[0][0]
    total: Expr = sp.S.Zero
    for k, entry in enumerate(rows[0]):
        if entry != 0:
            minor = [[*row[:k], *row[k + 1 :]] for row in rows[1:]]
            total += (-1) ** k * entry * determinant(minor)
    return total

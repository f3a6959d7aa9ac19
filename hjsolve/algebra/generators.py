"""Expressions as exact rational functions of generators.

A generator is a symbol, sin(m/D) with its cos, exp(m/D), a root u^(1/b), a
symbolic power, or any function the program knows nothing more about.  The
relations s² + c² = 1 and R^b = u are used to keep the degree in c below 2 and
in R below b, so that equal expressions of one coordinate get equal fractions.

The arithmetic is python-flint's integer polynomials.  A fraction is kept in
lowest terms by a gcd whose divisions are checked: an inexact division would
lose a remainder without a word.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import sympy as sp
from flint import fmpz_mpoly_ctx
from sympy import Add, Expr, Mul, Pow, Rational, Symbol

from hjsolve.algebra.graph import combination, rewritten

TERM_LIMIT = 6000
"""A polynomial with more terms is not formed."""


class NotRational(Exception):
    """The expression has no manageable form as a fraction of generators."""


@dataclass(frozen=True, slots=True)
class Ratio:
    """numerator/denominator in lowest terms."""

    numerator: Any
    denominator: Any

    def __add__(self, other: Ratio) -> Ratio:
        if self.denominator == other.denominator:
            return lowest(self.numerator + other.numerator, self.denominator)
        return lowest(
            self.numerator * other.denominator + other.numerator * self.denominator,
            self.denominator * other.denominator,
        )

    def __neg__(self) -> Ratio:
        return Ratio(-self.numerator, self.denominator)

    def __sub__(self, other: Ratio) -> Ratio:
        return self + (-other)

    def __mul__(self, other: Ratio) -> Ratio:
        return lowest(self.numerator * other.numerator, self.denominator * other.denominator)

    def __truediv__(self, other: Ratio) -> Ratio:
        if other.numerator.is_zero():
            raise NotRational("division by zero")
        return lowest(self.numerator * other.denominator, self.denominator * other.numerator)

    def is_zero(self) -> bool:
        """Whether the numerator is the zero polynomial."""
        return bool(self.numerator.is_zero())


def divide(a: Any, b: Any) -> Any:
    """a/b for polynomials, where b divides a; raises ArithmeticError otherwise."""
    quotient, rest = divmod(a, b)
    if not rest.is_zero():
        raise ArithmeticError("inexact division of polynomials")
    return quotient


def lowest(numerator: Any, denominator: Any) -> Ratio:
    """A fraction in lowest terms with a positive leading coefficient below."""
    if len(numerator) > TERM_LIMIT or len(denominator) > TERM_LIMIT:
        raise NotRational("too many terms")
    if numerator.is_zero():
        return Ratio(numerator, denominator * 0 + 1)
    if not denominator.is_constant() or abs(denominator.leading_coefficient()) != 1:
        common = numerator.gcd(denominator)
        if not common.is_one():
            numerator, denominator = divide(numerator, common), divide(denominator, common)
    if denominator.leading_coefficient() < 0:
        numerator, denominator = -numerator, -denominator
    return Ratio(numerator, denominator)


class Generators:
    """A polynomial ring for a set of expressions, with the way in and out."""

    def __init__(self, expressions: Sequence[Expr], extra: Sequence[Symbol] = ()) -> None:
        """Find the generators of ``expressions``; ``extra`` symbols come first."""
        self._expressions = expressions
        self._common: dict[tuple[str, Expr], Rational] = {}
        self._roots: dict[Expr, int] = {}
        self.items: list[Expr] = list(extra)
        for expression in expressions:
            self._scan(expression)
        for (kind, monomial), unit in self._common.items():
            self._add_family(kind, monomial, unit)
        for base, degree in self._roots.items():
            self._want(Pow(base, Rational(1, degree)))
        self.index = {g: k for k, g in enumerate(self.items)}
        self.context = fmpz_mpoly_ctx.get([f"g{k}" for k in range(len(self.items))], "lex")
        self.gens = self.context.gens()
        self._known: dict[Expr, Ratio] = {}
        self.relations = self._find_relations()

    # ---------------------------------------------------------------- scan

    def _want(self, generator: Expr) -> None:
        if generator not in self.items:
            self.items.append(generator)

    def _scan(self, e: Expr) -> None:
        if isinstance(e, Rational):
            return
        if isinstance(e, (Add, Mul)):
            for a in e.args:
                self._scan(a)
        elif isinstance(e, Pow) and isinstance(e.exp, Rational):
            self._scan(e.base)
            if e.exp.q != 1:
                self._roots[e.base] = math.lcm(self._roots.get(e.base, 1), e.exp.q)
        elif isinstance(e, (sp.exp, sp.sin, sp.cos)) or e is sp.E:
            argument = sp.S.One if e is sp.E else e.args[0]
            kind = "exp" if isinstance(e, sp.exp) or e is sp.E else "turn"
            for coefficient, monomial in combination(argument):
                self._share((kind, monomial), coefficient)
        elif isinstance(e, Pow):
            plain, rest = e.exp.as_coeff_Add(rational=True)
            self._scan(e.base**plain)
            for coefficient, monomial in combination(rest):
                self._share(("exp", monomial * sp.log(e.base)), coefficient)
        else:
            other = rewritten(e) if not isinstance(e, Symbol) and _plain(e) else None
            if other is not None:
                self._scan(other)
            else:
                self._want(e)

    def _share(self, key: tuple[str, Expr], coefficient: Rational) -> None:
        """Keep the largest number of which all coefficients of a monomial are multiples."""
        a, b = self._common.get(key, sp.S.Zero), coefficient
        common = math.gcd(int(a.p * b.q), int(b.p * a.q))
        self._common[key] = Rational(common, int(a.q * b.q))

    def _add_family(self, kind: str, monomial: Expr, unit: Rational) -> None:
        if kind == "exp":
            self._want(exponential(monomial * unit))
        else:
            self._want(sp.sin(monomial * unit))
            self._want(sp.cos(monomial * unit))

    def _find_relations(self) -> list[tuple[int, int, Ratio]]:
        """(generator, degree, what its power of that degree equals)."""
        found: list[tuple[int, int, Ratio]] = []
        one = self.number(1)
        for k, g in enumerate(self.items):
            if isinstance(g, sp.cos):
                # keep the one that occurs in odd powers: reduced by the other's square,
                # cosh² − cos² would no longer show its factor cosh + cos
                kept = self.index[sp.sin(g.args[0])]
                k, kept = (kept, k) if self._is_even(self.items[kept], g) else (k, kept)
                square = Ratio(self.gens[kept] ** 2, one.denominator)
                found.append((k, 2, one - square))
            elif isinstance(g, Pow) and isinstance(g.exp, Rational) and g.exp.p == 1:
                found.append((k, int(g.exp.q), self.ratio(g.base)))
        return found

    def _is_even(self, s: Expr, c: Expr) -> bool:
        """Whether s enters in even powers only and c does not."""
        even = [all(e.xreplace({g: -g}) == e for e in self._expressions) for g in (s, c)]
        return even == [True, False]

    # ------------------------------------------------------------- way in

    def number(self, value: Any) -> Ratio:
        """A rational number as a fraction."""
        rational = Rational(value)
        unit = self.context.constant(1)
        return Ratio(unit * int(rational.p), unit * int(rational.q))

    def generator(self, g: Expr) -> Ratio:
        """A generator as a fraction."""
        return Ratio(self.gens[self.index[g]], self.context.constant(1))

    def ratio(self, e: Expr) -> Ratio:
        """``e`` as a fraction; raises NotRational."""
        known = self._known.get(e)
        if known is None:
            known = self._known[e] = self._ratio(e)
        return known

    def _ratio(self, e: Expr) -> Ratio:
        if isinstance(e, Rational):
            return self.number(e)
        if e in self.index:
            return self.generator(e)
        if isinstance(e, Add):
            total = self.ratio(e.args[0])
            for a in e.args[1:]:
                total = total + self.ratio(a)
            return total
        if isinstance(e, Mul):
            product = self.ratio(e.args[0])
            for a in e.args[1:]:
                product = self.reduce(product * self.ratio(a))
            return product
        if isinstance(e, Pow) and isinstance(e.exp, Rational):
            if e.exp.q == 1:
                return self.reduce(self.power(self.ratio(e.base), int(e.exp)))
            degree = self._roots[e.base]
            root = self.generator(Pow(e.base, Rational(1, degree)))
            return self.reduce(self.power(root, int(e.exp * degree)))
        if isinstance(e, sp.exp) or e is sp.E:
            return self._exponential(combination(sp.S.One if e is sp.E else e.args[0]))
        if isinstance(e, (sp.sin, sp.cos)):
            c, s = self._turned(e.args[0])
            return s if isinstance(e, sp.sin) else c
        if isinstance(e, Pow):
            plain, rest = e.exp.as_coeff_Add(rational=True)
            log = sp.log(e.base)
            terms = tuple((c, m * log) for c, m in combination(rest))
            return self.ratio(e.base**plain) * self._exponential(terms)
        other = rewritten(e)
        if other is None:
            raise NotRational(str(e))
        return self.ratio(other)

    def power(self, base: Ratio, exponent: int) -> Ratio:
        """base**exponent, refused when it would have too many terms."""
        if exponent < 0:
            return self.number(1) / self.power(base, -exponent)
        for polynomial in (base.numerator, base.denominator):
            terms = len(polynomial)
            if terms > 1 and math.comb(min(terms + exponent, 400), min(terms, exponent)) > 10**5:
                raise NotRational("a power with too many terms")
        return Ratio(base.numerator**exponent, base.denominator**exponent)

    def _exponential(self, terms: Sequence[tuple[Rational, Expr]]) -> Ratio:
        product = self.number(1)
        for coefficient, monomial in terms:
            unit = self._common[("exp", monomial)]
            free = self.generator(exponential(monomial * unit))
            product = product * self.power(free, int(coefficient / unit))
        return product

    def _turned(self, argument: Expr) -> tuple[Ratio, Ratio]:
        """(cos, sin) of a sum of multiples, by the addition formulas."""
        cosine, sine = self.number(1), self.number(0)
        for coefficient, monomial in combination(argument):
            unit = self._common[("turn", monomial)]
            c1, s1 = (self.ratio(f(monomial * unit)) for f in (sp.cos, sp.sin))
            times = int(coefficient / unit)
            if abs(times) > 40:
                raise NotRational("a multiple angle of high order")
            s1 = s1 if times >= 0 else -s1
            for _ in range(abs(times)):
                cosine, sine = (
                    self.reduce(cosine * c1 - sine * s1),
                    self.reduce(sine * c1 + cosine * s1),
                )
        return cosine, sine

    def reduce(self, value: Ratio) -> Ratio:
        """``value`` with the relations used, above and below the line."""
        for k, degree, power in self.relations if hasattr(self, "relations") else ():
            above = self._reduced(value.numerator, k, degree, power)
            below = self._reduced(value.denominator, k, degree, power)
            if above is not None or below is not None:
                one = self.number(1)
                value = (above or Ratio(value.numerator, one.numerator)) / (
                    below or Ratio(value.denominator, one.numerator)
                )
        return value

    def _reduced(self, polynomial: Any, k: int, degree: int, power: Ratio) -> Ratio | None:
        """The polynomial with g_k**degree replaced, or None when it has no such power."""
        if polynomial.degrees()[k] < degree:
            return None
        parts = coefficients(polynomial, k, self.context)
        total = self.number(0)
        g = self.generator(self.items[k])
        for exponent, part in parts.items():
            times, left = divmod(exponent, degree)
            piece = Ratio(part, self.context.constant(1)) * self.power(g, left)
            total = total + piece * self.power(power, times)
        return total

    # ------------------------------------------------------------ way out

    def polynomial(self, polynomial: Any) -> Expr:
        """A polynomial as an expression."""
        return Add(*(self.term(e, c) for e, c in polynomial.to_dict().items()))

    def term(self, exponents: Sequence[int], coefficient: Any) -> Expr:
        """One term as an expression."""
        powers = (g ** int(e) for g, e in zip(self.items, exponents, strict=True) if e)
        return Mul(sp.Integer(int(coefficient)), *powers)

    def expression(self, value: Ratio) -> Expr:
        """A fraction as an expression, the denominator factored."""
        if value.denominator.is_constant():
            return self.polynomial(value.numerator) / int(value.denominator.leading_coefficient())
        return self.factored(value.numerator) / self.factored(value.denominator)

    def factored(self, polynomial: Any) -> Expr:
        """A polynomial as a product of its factors over the integers."""
        if len(polynomial) == 1:
            return self.polynomial(polynomial)
        content, parts = polynomial.factor()
        powers = {self.polynomial(f): int(m) for f, m in parts}
        for c in [g for g in self.items if isinstance(g, sp.cos)]:
            both = min(powers.get(c - 1, 0), powers.get(c + 1, 0))
            if both:  # (c − 1)(c + 1) = −s²
                powers[c - 1] -= both
                powers[c + 1] -= both
                powers[sp.sin(c.args[0])] = powers.get(sp.sin(c.args[0]), 0) + 2 * both
                content = content * (-1) ** both
        return Mul(sp.Integer(int(content)), *(f**m for f, m in powers.items()))


def coefficients(polynomial: Any, k: int, context: Any) -> dict[int, Any]:
    """The polynomial as one in generator k: exponent to coefficient."""
    parts: dict[int, dict[tuple[int, ...], Any]] = {}
    for exponents, c in polynomial.to_dict().items():
        rest = (*exponents[:k], 0, *exponents[k + 1 :])
        parts.setdefault(int(exponents[k]), {})[rest] = c
    return {e: context.from_dict(d) for e, d in parts.items()}


def exponential(argument: Expr) -> Expr:
    """exp(argument), as a power of u where the argument is a multiple of log(u)."""
    for factor in Mul.make_args(argument):
        if isinstance(factor, sp.log):
            return Pow(factor.args[0], argument / factor)
    return sp.exp(argument)


def _plain(e: Expr) -> bool:
    """Whether ``e`` is a function that the graph rewrites through exp, sin and cos."""
    return isinstance(
        e,
        (sp.tan, sp.cot, sp.sec, sp.csc, sp.sinh, sp.cosh, sp.tanh, sp.coth, sp.sech, sp.csch),
    )

"""Carry a Cartesian Hamiltonian into a chart."""

from __future__ import annotations

from dataclasses import dataclass, field, replace
from typing import Any

from sympy import (
    Abs,
    Add,
    Dummy,
    Expr,
    Function,
    Mul,
    Pow,
    Rational,
    S,
    Symbol,
    cos,
    cosh,
    sin,
    sinh,
    sqrt,
)

from hjsolve.algebra.generators import Generators, NotRational, Ratio
from hjsolve.charts.space import space
from hjsolve.records import Chart, Geometry, Hamiltonian, Parameter

OPERATIONS = 3000
"""A term with more operations is left as the substitution made it."""


def in_chart(hamiltonian: Hamiltonian, chart: Chart) -> Hamiltonian:
    """The Hamiltonian ½ Σ w p_i²/h_i² + V in the coordinates of a chart.

    The chart's free letters become parameters.

    Raises:
        NotNatural: the Hamiltonian is not given in Cartesian coordinates.
    """
    given = space(hamiltonian)
    kinetic = Add(
        *(chart.weight * p**2 / (2 * s) for p, s in zip(chart.momenta, chart.squares, strict=True))
    )
    # first the motion alone, so that what is round about the chart's centre shows it
    own = {s for s, _ in chart.place}
    potential = straight(given.potential.xreplace(dict(chart.frame)), own)
    put = dict(chart.place)
    settle = Settle(chart)
    terms = Add.make_args(potential)
    smooth = [t for t in terms if t.is_polynomial(*own)]
    # term by term: over one denominator −k/r + F·r·cos θ would lose its shape; the
    # polynomial part as a whole is tried too: r² is a sum of three terms
    whole = settle(Add(*smooth).xreplace(put))
    parts = Add(*(settle(t.xreplace(put)) for t in smooth)) if len(smooth) < 8 else whole
    rest = (settle(t.xreplace(put)) for t in terms if t not in smooth)
    potential = Add(min(whole, parts, key=lambda e: e.count_ops()), *rest)
    return Hamiltonian(
        expression=kinetic + potential,
        coordinates=chart.coordinates,
        momenta=chart.momenta,
        domains=chart.domains,
        parameters=hamiltonian.parameters
        + tuple(Parameter(s, "positive" if s.is_positive else "real") for s in chart.free),
        numbers=hamiltonian.numbers,
        functions=hamiltonian.functions,
        time=hamiltonian.time,
    )


ANGLES = ("theta_0", "phi_0", "psi_0")
"""The names of free angles; underscores follow where a problem has such a name."""


def upright(chart: Chart) -> Chart:
    """The member of a family whose free angles are 0, for working in it.

    Free points and lengths stay letters: at 0 a family of elliptic systems
    would degenerate to the polar one.
    """
    put: dict[Expr, Expr] = {s: S.Zero for s in chart.free if s.name.rstrip("_") in ANGLES}
    if not put:
        return chart

    def fixed(value: Geometry) -> Geometry:
        return tuple(map(fixed, value)) if isinstance(value, tuple) else value.subs(put)

    def pairs(values: tuple[tuple[Symbol, Expr], ...]) -> tuple[tuple[Symbol, Expr], ...]:
        return tuple((s, e.subs(put)) for s, e in values)

    return replace(
        chart,
        geometry=tuple((name, fixed(value)) for name, value in chart.geometry),
        free=tuple(s for s in chart.free if s not in put),
        transformation=pairs(chart.transformation),
        frame=pairs(chart.frame),
        place=pairs(chart.place),
        squares=tuple(e.subs(put) for e in chart.squares),
        positive=tuple(e.subs(put) for e in chart.positive),
        blocks=tuple(map(upright, chart.blocks)),
    )


def straight(e: Expr, own: set[Symbol]) -> Expr:
    """The formula with its polynomial parts in normal form."""
    if not e.free_symbols & own or e.is_Symbol:
        return e
    if e.is_polynomial(*own) and e.count_ops() <= OPERATIONS:
        return _polynomial(e)
    parts = [straight(a, own) for a in e.args]
    if isinstance(e, Add):
        smooth = [p for p in parts if p.is_polynomial(*own)]
        return Add(_polynomial(Add(*smooth)), *(p for p in parts if p not in smooth))
    return e.func(*parts)


def _polynomial(e: Expr) -> Expr:
    """A sum of monomials in the generators, which shares a factor where that is shorter."""
    try:
        ring = Generators([e])
        value = ring.reduce(ring.ratio(e))
        below = ring.factored(value.denominator)
        return min(
            ring.polynomial(value.numerator) / below,
            ring.factored(value.numerator) / below,
            key=lambda f: f.count_ops(),
        )
    except (NotRational, ArithmeticError):
        return e


@dataclass
class Settle:
    """Rewrites formulas of a chart: radicals opened by what is positive there.

    cos q, sin q, cosh q and sinh q of a coordinate are letters with their one
    relation, so that cosh²μ − cos²ν shows its factors.
    """

    chart: Chart
    letters: dict[Expr, Symbol] = field(default_factory=dict)
    pairs: list[tuple[Symbol, Symbol, int]] = field(default_factory=list)
    positive: set[Expr] = field(default_factory=set)

    def __post_init__(self) -> None:
        """Make the letters of the chart's coordinates."""
        for q in self.chart.coordinates:
            even, odd = Dummy(f"cos{q}", real=True), Dummy(f"sin{q}", real=True)
            self.letters |= {cos(q): even, sin(q): odd}
            self.pairs.append((odd, even, 1))
            even, odd = Dummy(f"cosh{q}", positive=True), Dummy(f"sinh{q}", real=True)
            self.letters |= {cosh(q): even, sinh(q): odd}
            if any(e.has(sinh(q) ** 2) for e in self.chart.positive):
                self.pairs.append((even, odd, 0))
            else:
                self.pairs.append((odd, even, -1))
        for e in self.chart.positive:
            self.positive.add(self._primitive(e.xreplace(self.letters)))
        self.back = {v: k for k, v in self.letters.items()}

    def _primitive(self, e: Expr) -> Expr:
        ring = Generators([e])
        value = ring.ratio(e).numerator
        return ring.polynomial(value)

    def __call__(self, e: Expr) -> Expr:
        """The formula settled; equal to ``e`` all over the chart's domain."""
        if not e.free_symbols & set(self.chart.coordinates):
            return e
        if isinstance(e, Add):
            return self._factored(Add(*map(self, e.args)))
        if isinstance(e, Mul):
            return self._factored(Mul(*map(self, e.args)))
        if isinstance(e, Pow) and isinstance(e.exp, Rational):
            base = self(e.base)
            if e.exp.q == 2:
                return self._root(base) ** e.exp.p
            return self._factored(base**e.exp)
        if isinstance(e, Abs):
            return self._root(self(e.args[0]) ** 2)
        if isinstance(e, (Pow, Function)):
            return e.func(*map(self, e.args))
        return e

    def _ring(self, e: Expr) -> tuple[Generators, Ratio]:
        written = e.xreplace(self.letters)
        ring = Generators([written], extra=tuple(self.back))
        for gone, kept, kind in self.pairs:
            one, square = ring.number(1), ring.power(ring.generator(kept), 2)
            value = one - square if kind == 1 else square + one if kind == 0 else square - one
            ring.relations.append((ring.index[gone], 2, value))
        return ring, ring.reduce(ring.ratio(written))

    def _factored(self, e: Expr) -> Expr:
        try:
            ring, value = self._ring(e)
            if value.denominator.is_constant() and len(value.numerator) > 40:
                return e
            factors = self._factors(ring, value)
        except (NotRational, ArithmeticError):
            return e
        return Mul(*(f**k for f, k in factors)).xreplace(self.back)

    def _factors(self, ring: Generators, value: Ratio) -> list[tuple[Expr, int]]:
        """The fraction as a product of integer powers."""
        powers: dict[Expr, int] = {}
        number = S.One
        for polynomial, side in ((value.numerator, 1), (value.denominator, -1)):
            content, parts = polynomial.factor()
            number *= Rational(int(content)) ** side
            for part, k in parts:
                f = ring.polynomial(part)
                if -f in self.positive:
                    f, number = -f, number * (-1) ** int(k)
                powers[f] = powers.get(f, 0) + side * int(k)
        for gone, kept, kind in self.pairs:
            number *= _join(powers, gone, kept, kind)
        return [(number, 1), *((f, k) for f, k in powers.items() if k)]

    def _root(self, base: Expr) -> Expr:
        """√base, with what is positive taken out of it."""
        try:
            ring, value = self._ring(base)
            factors = self._factors(ring, value)
        except (NotRational, ArithmeticError):
            return sqrt(base)
        outside, inside = S.One, S.One
        for f, k in factors:
            if isinstance(f, Rational):
                inside *= f**k
                continue
            known = f in self.positive or f.xreplace(self.back).is_positive or self._odd(f)
            outside *= (f if known else Abs(f)) ** (k // 2)
            inside *= f ** (k % 2)
        return (outside * sqrt(inside)).xreplace(self.back)

    def _odd(self, f: Any) -> bool:
        """Whether a letter stands for a function that is positive on the domain."""
        return f in self.back and self.letters[self.back[f]] in self.positive


def _join(powers: dict[Expr, int], gone: Symbol, kept: Symbol, kind: int) -> int:
    """Put (1 − c)(1 + c) = s² back together; the sign that this takes out."""
    if kind == 0:
        for k in (powers.pop(kept**2 + 1, 0),):
            if k:
                powers[gone] = powers.get(gone, 0) + 2 * k
        return 1
    a, b = powers.get(kept - 1, 0), powers.get(kept + 1, 0)
    both = min(a, b) if a > 0 else max(a, b) if a < 0 and b < 0 else 0
    if both > 0 or both < 0:
        powers[kept - 1], powers[kept + 1] = a - both, b - both
        powers[gone] = powers.get(gone, 0) + 2 * both
        return int((-1) ** (both % 2)) if kind == 1 else 1
    return 1

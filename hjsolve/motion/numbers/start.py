"""From a separation, numbers and a start state to one numeric equation a coordinate.

Everything is in balls: the start state and the parameters are taken exactly as
they are written, so the constants α are known to the working precision.
"""

from __future__ import annotations

import math
import re
from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction
from functools import lru_cache
from typing import Any

import sympy as sp
from flint import arb
from sympy import Expr, Symbol

from hjsolve.algebra.balls import exact
from hjsolve.algebra.generators import Generators, NotRational
from hjsolve.errors import InputError
from hjsolve.motion.numbers.tape import Fixed, Tape, cannot
from hjsolve.records import SeparatedEquation, Separation

BITS = 256
"""Working precision: amplitudes of 1e-16 leave 44 digits of a radicand of their square."""

GROWING = (sp.exp, sp.sinh, sp.cosh, sp.tanh, sp.coth)
"""Functions for which a common denominator would outgrow every ball."""

Number = int | float | str | Fraction

_WRITTEN = re.compile(
    r"[+-]?(\d{1,400}(\.\d{0,400})?|\.\d{1,400})([eE][+-]?\d{1,3})?|[+-]?\d{1,400}/\d{1,400}"
)
"""A number as text; the bounds keep one short word from becoming a gigabyte of digits."""


@dataclass(frozen=True, slots=True)
class Compiled:
    """One separated equation p = A + σ S^(1/order), as tapes.

    ``sides`` gives N, N′, D and D′ (S = N/D in lowest terms, so that neither has
    poles where S is rational in the coordinate's functions); ``pieces`` gives S, A,
    then ∂S/∂α_k and ∂A/∂α_k for every k; ``second`` S″ and N″.  ``constant`` says
    that p does not depend on q.
    """

    equation: SeparatedEquation
    order: int
    constant: bool
    sides: Tape
    pieces: Tape
    second: Tape
    drifting: bool
    periodic: bool
    growing: bool


@dataclass(frozen=True, slots=True)
class Program:
    """A separation compiled for numbers; ``integrals`` gives the constants."""

    separation: Separation
    equations: tuple[Compiled, ...]
    integrals: Tape
    clock: tuple[Expr, ...]
    """∂/∂α_k of −∂S/∂t, the rate of the right-hand side of the k-th relation."""


@dataclass(slots=True)
class Coordinate:
    """One coordinate with its numbers; ``sign`` is the branch of the start, 0 at p = A."""

    name: str
    compiled: Compiled
    sides: Fixed
    pieces: Fixed
    second: Fixed
    q: Any
    p: Any
    sign: int
    lower: Any
    upper: Any
    angle: bool

    def side(self, x: Any) -> tuple[Any, Any, Any, Any]:
        """Y and Y′ on a ball, with D and D′; Y has the sign of the radicand.

        Y is ±N where D keeps its sign on the ball, else N·D.
        """
        n, slope, d, its = self.sides.balls(x)
        if n.contains(0) and not x.is_exact() and (d > 0 or d < 0):
            # second order about the middle, where the ball of N is too wide to tell
            middle = x.mid()
            away = x - middle
            value, steep, *_ = self.sides.balls(middle)
            curved = self.second.balls(x)[1] * away
            n, slope = value + (steep + curved / 2) * away, steep + curved
        if d > 0:
            return n, slope, d, its
        if d < 0:
            return -n, -slope, d, its
        return n * d, slope * d + n * its, d, its


@dataclass(slots=True)
class Setting:
    """A start state with all that is known of it in numbers."""

    program: Program
    values: dict[Symbol, Any]
    alphas: list[Any]
    coordinates: list[Coordinate]
    time: Fraction
    start: dict[str, Fraction]


@lru_cache(maxsize=64)
def compiled(separation: Separation) -> Program:
    """Compile a separation.

    Raises:
        InputError: it is not complete, or a formula in it has no numbers.
    """
    verdict = separation.verdict
    if verdict.separability != "complete" or separation.time_momentum is None:
        raise cannot(
            f"the motion in numbers needs complete separation; this one is {verdict.separability}"
        )
    if len(separation.equations) != len(separation.hamiltonian.coordinates):
        raise cannot("a separated equation has no formula for its momentum")
    if any(c.first_integral is None for c in separation.constants):
        raise cannot("a constant of the motion has no formula on phase space")
    if separation.hamiltonian.functions:
        raise cannot("the problem has arbitrary functions; numbers need formulas")
    alphas = [c.symbol for c in separation.constants]
    h = separation.hamiltonian
    moving = [*h.coordinates, *h.momenta, h.time]
    return Program(
        separation,
        tuple(_compile(e, alphas) for e in separation.equations),
        Tape([c.first_integral for c in separation.constants], moving),
        tuple(-sp.diff(separation.time_momentum, a) for a in alphas),
    )


def _compile(equation: SeparatedEquation, alphas: list[Symbol]) -> Compiled:
    if equation.where:
        raise cannot(
            f"the momentum of {equation.coordinate} is a root of a polynomial of higher degree; "
            "its several branches have no numbers in this version"
        )
    q = equation.coordinate
    order = _order(equation.root)
    radicand = equation.squared
    if radicand is None or order != 2:
        radicand = equation.root**order
    drift = equation.drift
    growing = any(f.has(q) for f in radicand.atoms(*GROWING)) or any(
        f.exp.has(q) for f in radicand.atoms(sp.Pow)
    )
    numerator, denominator = (radicand, sp.S.One) if growing else _fraction(radicand)
    sides = [numerator, sp.diff(numerator, q), denominator, sp.diff(denominator, q)]
    pieces = [radicand, drift]
    pieces += [sp.diff(radicand, a) for a in alphas] + [sp.diff(drift, a) for a in alphas]
    return Compiled(
        equation,
        order,
        not (radicand.has(q) or drift.has(q)),
        Tape(sides, [q]),
        Tape(pieces, [q]),
        Tape([_smooth(sp.diff(e, q, 2)) for e in (radicand, numerator)], [q]),
        drift.has(q),
        (radicand.has(q) or drift.has(q)) and _periodic(radicand, q) and _periodic(drift, q),
        growing,
    )


def _smooth(e: Expr) -> Expr:
    """A derivative without what stands at a kink alone."""
    return e.replace(sp.DiracDelta, lambda *_: sp.S.Zero)


def _order(root: Expr) -> int:
    order = 2
    for factor in sp.Mul.make_args(root):
        if isinstance(factor, sp.Pow) and isinstance(factor.exp, sp.Rational):
            order = math.lcm(order, int(factor.exp.q))
    return order


def _fraction(radicand: Expr) -> tuple[Expr, Expr]:
    """Numerator and denominator in lowest terms, as far as the generators see them."""
    try:
        ring = Generators([radicand])
        value = ring.reduce(ring.ratio(radicand))
        return ring.polynomial(value.numerator), ring.factored(value.denominator)
    except (NotRational, ArithmeticError):
        return radicand, sp.S.One


def _periodic(e: Expr, q: Symbol) -> bool:
    """Whether q occurs only within sines and cosines of whole multiples of it."""
    inner = {f: sp.Dummy() for f in e.atoms(sp.sin, sp.cos, sp.tan, sp.cot) if f.has(q)}
    whole = all(
        (f.args[0].coeff(q)).is_Integer and not (f.args[0] - f.args[0].coeff(q) * q).has(q)
        for f in inner
    )
    return whole and not e.xreplace(inner).has(q)


def rational(value: Number, pointer: str) -> Fraction:
    """A number as it is written: 0.1 is 1/10.

    Raises:
        InputError: it is no finite number.
    """
    try:
        if isinstance(value, bool):
            raise ValueError
        if isinstance(value, float):
            value = repr(value)
        if isinstance(value, str) and not _WRITTEN.fullmatch(value):
            raise ValueError
        return Fraction(value)
    except (ValueError, TypeError, ZeroDivisionError, OverflowError):
        raise InputError(
            f"{str(value)[:60]!r} is no number",
            pointer=pointer,
            expected='a number or an exact string such as "3/7"',
            code="bad-number",
        ) from None


def set_up(
    separation: Separation, values: Mapping[str, Number], start: Mapping[str, Number]
) -> Setting:
    """The numbers of a start state.  Call it, and use what it gives, at ``BITS`` bits.

    Args:
        separation: of the problem; must be complete.
        values: a number for every parameter left as a letter.
        start: a number for every coordinate and momentum; ``time`` may be among them.

    Raises:
        InputError: a number is missing or out of its domain, or the separation
            gives none.
    """
    program = compiled(separation)
    h = separation.hamiltonian
    numbers = {
        parameter.symbol: exact(value) for parameter, value in _values(separation, values).items()
    }
    needed = [s.name for s in (*h.coordinates, *h.momenta)]
    time_names = {"time", h.time.name} - set(needed)
    for name in start:
        if name not in needed and name not in time_names:
            raise InputError(
                f"{name!r} is neither a coordinate nor a momentum",
                pointer=f"/start/{name}",
                expected=", ".join([*needed, "time"]),
                code="unknown-name",
            )
    state = {}
    for name in needed:
        if name not in start:
            raise InputError(
                f"the start state has no {name}",
                pointer="/start",
                expected=", ".join(needed),
                code="missing",
            )
        state[name] = rational(start[name], f"/start/{name}")
    clock = [rational(start[n], f"/start/{n}") for n in sorted(time_names) if n in start]
    time = clock[0] if clock else Fraction(0)
    point = [exact(state[n]) for n in needed]
    alphas = program.integrals.fix(numbers).balls(*point, exact(time))
    if not all(a.is_finite() for a in alphas):
        raise InputError(
            "the constants of the motion have no value at the start state",
            pointer="/start",
            code="outside-domain",
        )
    numbers |= {c.symbol: a for c, a in zip(separation.constants, alphas, strict=True)}
    coordinates = [
        _coordinate(separation, k, program.equations[k], numbers, state)
        for k in range(len(h.coordinates))
    ]
    return Setting(program, numbers, alphas, coordinates, time, state)


def _values(separation: Separation, values: Mapping[str, Number]) -> dict[Any, Fraction]:
    h = separation.hamiltonian
    letters = {p.symbol.name: p for p in h.parameters}
    for name in values:
        if name not in letters:
            raise InputError(
                f"{name!r} is no parameter of the problem that was left as a letter",
                pointer=f"/values/{name}",
                expected=", ".join(letters) or "no values",
                code="unknown-name",
            )
    found = {}
    for name, parameter in letters.items():
        if name not in values:
            if parameter.symbol not in h.expression.free_symbols:
                continue
            raise InputError(
                f"the parameter {name} has no number",
                pointer="/values",
                expected=f"a number for {name}",
                code="missing",
            )
        value = rational(values[name], f"/values/{name}")
        wrong = {
            "positive": value <= 0,
            "negative": value >= 0,
            "nonzero": value == 0,
            "real": False,
        }[parameter.sign]
        if wrong:
            raise InputError(
                f"{name} was declared {parameter.sign}, and {value} is not",
                pointer=f"/values/{name}",
                code="outside-domain",
            )
        found[parameter] = value
    return found


def _coordinate(
    separation: Separation,
    k: int,
    compiled_equation: Compiled,
    numbers: dict[Symbol, Any],
    state: dict[str, Fraction],
) -> Coordinate:
    h = separation.hamiltonian
    symbol, domain = h.coordinates[k], h.domains[k]
    q, p = exact(state[symbol.name]), exact(state[h.momenta[k].name])
    angle = domain.kind == "angle" or (domain.kind == "line" and compiled_equation.periodic)
    lower = upper = None
    if not angle:
        ends = Tape([e for e in (domain.lower, domain.upper) if e.is_finite], [])
        found = ends.fix(numbers).balls()
        lower = found.pop(0) if domain.lower.is_finite else None
        upper = found.pop(0) if domain.upper.is_finite else None
        if (lower is not None and not q > lower) or (upper is not None and not q < upper):
            raise InputError(
                f"{symbol} = {state[symbol.name]} is not inside its domain",
                pointer=f"/start/{symbol}",
                expected=f"a number between {domain.lower} and {domain.upper}",
                code="outside-domain",
            )
    pieces = compiled_equation.pieces.fix(numbers)
    drift = pieces.balls(q)[1]
    if not drift.is_finite():
        raise InputError(
            f"the equation of {symbol} has no value at the start",
            pointer=f"/start/{symbol}",
            code="outside-domain",
        )
    gap = p - drift
    return Coordinate(
        symbol.name,
        compiled_equation,
        compiled_equation.sides.fix(numbers),
        pieces,
        compiled_equation.second.fix(numbers),
        q,
        p,
        1 if gap > 0 else -1 if gap < 0 else 0,
        lower,
        upper,
        angle,
    )


def as_ball(value: arb | float) -> Any:
    """A number as a ball."""
    return value if isinstance(value, arb) else arb(value)

"""Reading the suites of integrals, and comparing closed forms with mpmath's quadrature.

Parameters and intervals are drawn at random, in the regime a form is for and such that the
integrand stays real: a branch that jumps inside of the allowed interval fails.
"""

from __future__ import annotations

import json
import random
from collections.abc import Callable, Iterator
from dataclasses import dataclass, replace
from functools import cached_property, partial
from typing import Any

import mpmath
import sympy as sp
from facts import HERE

from hjsolve.algebra.calculus import root_derivative
from hjsolve.records import Definition, Domain, Formula, SeparatedEquation

DIGITS = 30
"""Digits to which a form and the quadrature must agree."""

DRAWS = 40_000
"""Tries for a point of a regime before a comparison gives up."""

SETS = 5
"""Parameter sets a regime."""

PARTS = 6
"""Parts of an interval for the quadrature: near a separatrix the integrand is peaked."""


@dataclass(frozen=True)
class Case:
    """An entry of the suite, read."""

    integrand: sp.Expr
    variable: sp.Symbol
    domain: Domain
    symbols: dict[str, sp.Symbol]

    def parse(self, text: str) -> sp.Expr:
        """A formula or inequality of the suite."""
        return sp.sympify(text, locals=self.symbols)


def listed(name: str) -> list[dict[str, Any]]:
    """The entries of ``integrals`` or ``systems``."""
    suite: list[dict[str, Any]] = json.loads((HERE / f"{name}.json").read_text("utf-8"))[name]
    return suite


def by_name(entry: dict[str, Any]) -> str:
    """The name of an entry in the name of its test."""
    return entry["system"].replace(" ", "-").replace(",", "")


def read(entry: dict[str, Any]) -> Case:
    """The entry with its symbols: positive or negative where it says so, else real."""
    reserved = {n: sp.Symbol(n) for n in ("gamma", "S", "E", "I", "N", "Q", "O", "beta")}
    free = sp.sympify(entry["integrand"], locals=reserved).free_symbols
    names = {s.name for s in free} | {entry["variable"], *entry["positive"]}
    signs = dict.fromkeys(names, "real") | dict.fromkeys(entry.get("negative", ()), "negative")
    signs |= dict.fromkeys(entry["positive"], "positive")
    symbols = {n: sp.Symbol(n, **{signs[n]: True}) for n in sorted(names)}
    ends = [sp.sympify(entry["domain"][k], locals=symbols) for k in ("lower", "upper")]
    return Case(
        sp.sympify(entry["integrand"], locals=symbols),
        symbols[entry["variable"]],
        Domain(entry["domain"]["kind"], *ends),
        symbols,
    )


def quadratures(entry: dict[str, Any]) -> dict[str, Case]:
    """The integrals of a system: W, ∂W/∂α for every constant, and the drift where there is one.

    They are formed from p = drift + σ√squared as the room of the motion forms them.
    """
    whole = read({**entry, "integrand": entry["squared"]})
    q = whole.variable
    momentum, sign = sp.Symbol(f"p_{q}", real=True), sp.Symbol(f"sigma_{q}", real=True)
    drift = whole.parse(entry.get("drift", "0"))
    equation = SeparatedEquation(q, momentum, sign, drift, sp.sqrt(whole.integrand), None)
    integrands = {"W": equation.root}
    if drift != 0:
        integrands["drift"] = drift
    for name in entry["families"]:
        if name in whole.symbols:
            integrands[name] = root_derivative(equation.root, whole.symbols[name])
    return {what: replace(whole, integrand=e) for what, e in integrands.items()}


def operations(formula: Formula) -> tuple[int, int]:
    """Operations of a form and its definitions, written out and with equal parts counted once."""
    written = [formula.expression]
    written += [d.root_of if d.definition is None else d.definition for d in formula.where]
    shared, rest = sp.cse(written, order="none")
    once = [e for _, e in shared] + list(rest)
    return sum(e.count_ops() for e in written), sum(e.count_ops() for e in once)


@dataclass(frozen=True)
class Numbers:
    """A regime turned into functions of (the other symbols, the variable)."""

    case: Case
    formula: Formula
    others: tuple[sp.Symbol, ...]
    equal: tuple[tuple[sp.Symbol, sp.Expr], ...]

    @cached_property
    def _ends(self) -> list[Callable[..., Any] | None]:
        domain = self.case.domain
        return [self.function(e) if e.is_finite else None for e in (domain.lower, domain.upper)]

    @classmethod
    def of(cls, case: Case, formula: Formula) -> Numbers:
        equal = [
            (relation.lhs, relation.rhs)
            for relation in formula.valid
            if relation.lhs.is_Symbol
            and relation.rel_op == "<="
            and sp.Le(relation.rhs, relation.lhs) in formula.valid
        ]
        others = tuple(s for s in case.symbols.values() if s != case.variable)
        return cls(case, formula, others, tuple(equal))

    def function(self, expression: sp.Expr) -> Callable[..., Any]:
        """The expression as a function of (the other symbols, the variable)."""
        reduced = sp.sympify(expression).subs(dict(self.equal))
        wanted = reduced.free_symbols
        names = [d for d in self.formula.where if d.symbol in self._needed(wanted)]
        arguments = (*self.others, *(d.symbol for d in names))
        call = sp.lambdify((arguments, self.case.variable), reduced, modules="mpmath")
        if not names:
            return call
        steps = [self._step(d, arguments[: len(self.others) + k]) for k, d in enumerate(names)]

        def named(values: tuple[Any, ...], at: Any) -> Any:
            known = tuple(values)
            for step in steps:
                known = (*known, step(known))
            return call(known, at)

        return named

    def _needed(self, wanted: set[sp.Symbol]) -> set[sp.Symbol]:
        found = set(wanted)
        for d in reversed(self.formula.where):
            if d.symbol in found:
                found |= (d.root_of if d.definition is None else d.definition).free_symbols
        return found

    def _step(self, d: Definition, known: tuple[sp.Symbol, ...]) -> Callable[..., Any]:
        """The value of a name from those before it."""
        if d.definition is not None:
            return sp.lambdify((known,), d.definition, modules="mpmath")
        assert d.root_of is not None
        coefficients = sp.lambdify(
            (known,), sp.Poly(d.root_of, d.unknown).all_coeffs(), modules="mpmath"
        )

        def root(values: tuple[Any, ...]) -> Any:
            numbers = coefficients(values)
            found = mpmath.polyroots(numbers, maxsteps=400, extraprec=300)
            scale = max(abs(z) for z in found)
            tiny = scale * mpmath.mpf(10) ** (-mpmath.mp.dps // 2)
            reals = sorted(z.real for z in found if abs(mpmath.im(z)) < tiny)
            return reals[d.index - 1]

        return root

    def ends(self, values: tuple[Any, ...]) -> list[Any]:
        """The ends of the domain, None where infinite."""
        return [end and end(values, 0) for end in self._ends]

    def points(self, rng: random.Random) -> Iterator[tuple[float, tuple[float, ...]]]:
        """Points of the regime at which the integrand is real."""
        integrand = self.function(self.case.integrand)
        strict = [r for r in self.formula.valid if r.rel_op == "<"]
        sides = [self.function(r.rhs - r.lhs) for r in strict]
        sides += [self.function(1 + d.symbol**2) for d in self.formula.where]
        with mpmath.workdps(15):
            for _ in range(DRAWS):
                values = tuple(draw(s, rng) for s in self.others)
                low, high = self.ends(values)
                q = draw_between(low, high, self.case.variable, rng)
                try:
                    if real(integrand(values, q)) is None:
                        continue
                    if all(side(values, q) > 0 for side in sides):
                        yield q, values
                except (ZeroDivisionError, OverflowError, ValueError, TypeError, IndexError):
                    continue


def draw(symbol: sp.Symbol, rng: random.Random) -> mpmath.mpf:
    size = mpmath.mpf(round(mpmath.exp(rng.uniform(-1.2, 1.2)) * 2**20)) / 2**20
    if symbol.is_negative:
        return -size
    return size if symbol.is_positive or rng.random() < 0.5 else -size


def draw_between(low: Any, high: Any, q: sp.Symbol, rng: random.Random) -> mpmath.mpf:
    if low is not None and high is not None:
        return low + (high - low) * mpmath.mpf(rng.uniform(0.03, 0.97))
    size = mpmath.exp(rng.uniform(-1.5, 1.5))
    if low is not None:
        return low + size
    return size if q.is_positive or rng.random() < 0.5 else -size


def real(value: Any) -> Any | None:
    """A finite real number, or None."""
    z = mpmath.mpmathify(value)
    if isinstance(z, mpmath.mpc):
        if abs(z.imag) > 0:
            return None
        z = z.real
    return z if mpmath.isfinite(z) else None


def interval(
    numbers: Numbers, q: Any, values: tuple[Any, ...], rng: random.Random, pole: str = "1"
) -> tuple[Any, Any] | None:
    """An interval from q on in the regime, with a real integrand and one sign of ``pole``."""
    integrand = numbers.function(numbers.case.integrand)
    strict = [r for r in numbers.formula.valid if r.rel_op == "<" and r.has(numbers.case.variable)]
    sides = [numbers.function(r.rhs - r.lhs) for r in strict]
    factor = numbers.function(numbers.case.parse(pole))
    low, high = numbers.ends(values)
    length = (abs(q) + 1) * rng.choice((-2, 2))
    for _ in range(30):
        grid = [q + length * k / 64 for k in range(65)]
        try:
            if (
                (low is None or grid[-1] > low)
                and (
                    (high is None or grid[-1] < high)
                    and factor(values, q) * factor(values, grid[-1]) > 0
                )
                and all(real(integrand(values, x)) is not None for x in grid)
                and all(side(values, x) > 0 for side in sides for x in grid)
            ):
                return (q, grid[-1])
        except (ZeroDivisionError, OverflowError, TypeError, IndexError):
            pass
        length *= 0.75
    return None


def compare(case: Case, formula: Formula, seed: str, pole: str = "1") -> None:
    """Definite integrals by the form and by mpmath at SETS parameter sets of the regime."""
    rng = random.Random(seed)
    numbers = Numbers.of(case, formula)
    integrand = numbers.function(case.integrand)
    antiderivative = numbers.function(formula.expression)
    done = 0
    for q, values in numbers.points(rng):
        ends = interval(numbers, q, values, rng, pole)
        if ends is None:
            continue
        with mpmath.workdps(2 * DIGITS):
            got = antiderivative(values, ends[1]) - antiderivative(values, ends[0])
        with mpmath.workdps(DIGITS + 15):
            grid = mpmath.linspace(*ends, PARTS + 1)
            want = mpmath.quad(partial(integrand, values), grid, maxdegree=9)
            assert abs(mpmath.im(got)) < mpmath.mpf(10) ** -DIGITS * (1 + abs(got))
            error = abs(got - want)
            assert error < mpmath.mpf(10) ** -DIGITS * (1 + abs(want)), (formula, q, values)
        done += 1
        if done == SETS:
            return
    raise AssertionError(f"{done} of {SETS} parameter sets found where {formula.valid}")

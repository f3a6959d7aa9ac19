"""Coordinates whose q(t) stays implicit, by a parameter of their own.

A combination Σ_k c_k β_k of the Jacobi relations that holds neither time nor any
other coordinate reads ∫ g₁ dq₁/p₁ + ∫ g₂ dq₂/p₂ = B.  With dλ = g₁ dq₁/p₁ =
−g₂ dq₂/p₂ each coordinate is a function of λ alone (for the Kerr metric Mino's
time, Phys. Rev. D 67 (2003) 084027; for Kepler's problem the polar angle; from
memory).  A coordinate for which there is no such combination has the parameter
that makes its quadrature the integral of the first kind, dλ = du/√P(u): for
Kepler's problem the eccentric anomaly.  Time is then a quadrature over λ.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from contextlib import suppress
from dataclasses import dataclass, replace
from itertools import product

import sympy as sp
from sympy import Add, Dummy, Expr, Integral, Mul, Symbol

from hjsolve.algebra.budget import limit
from hjsolve.algebra.calculus import derivative, is_formula
from hjsolve.algebra.generators import NotRational
from hjsolve.algebra.isolate import isolate
from hjsolve.algebra.linear import constant_relations
from hjsolve.algebra.regimes import boundary_values
from hjsolve.errors import OutOfTime
from hjsolve.motion.paths import Along, Integrate, Path, along, paths, square, turns
from hjsolve.records import (
    Definition,
    Formula,
    Motion,
    Parametrisation,
    SeparatedEquation,
    Separation,
)

MOST, COUPLED = 4, 2
"""Regimes given, of one coordinate and of several coupled ones; bounded motion comes first."""


def by_parameter(
    separation: Separation, motion: Motion, integrate: Integrate, seconds: float = 9.0
) -> Motion:
    """The motion with the coordinates that stayed implicit by a parameter, where one was found.

    What was found in ``seconds`` is kept.
    """
    explicit = {q for q, formula in motion.coordinates if formula is not None}
    equations = [e for e in separation.equations if e.root != 0]
    left = [e for e in equations if e.coordinate not in explicit]
    time = separation.time_momentum
    if not left or time is None or time.has(separation.hamiltonian.time):
        return motion
    betas = {
        c.symbol: r.constant for c, r in zip(separation.constants, motion.relations, strict=True)
    }
    room = _Parameter(separation, left, betas, integrate)
    found: list[Parametrisation] = []
    with suppress(OutOfTime), limit(seconds):
        for choice in room.choices():
            for given in room.regimes(choice):
                found.append(given)
    return replace(motion, parametrisations=tuple(found[:MOST]))


@dataclass(frozen=True, slots=True)
class _Choice:
    """g_i of each coordinate, and B, what their integrals add up to."""

    speeds: tuple[Expr, ...]
    total: Expr
    says: str


class _Parameter:
    def __init__(
        self,
        separation: Separation,
        equations: Sequence[SeparatedEquation],
        betas: dict[Symbol, Symbol],
        integrate: Integrate,
    ) -> None:
        self.s, self.h = separation, separation.hamiltonian
        self.equations = tuple(equations)
        self.betas = betas
        self.integrate = integrate
        self.alphas = [c.symbol for c in separation.constants]
        self.domain = dict(zip(self.h.coordinates, self.h.domains, strict=True))
        self.taken = {n for n in self.h.names} | {s.name for s in (*self.alphas, *betas.values())}
        self.parameter = self._name("lambda")

    def _name(self, name: str) -> Symbol:
        while name in self.taken:
            name += "_"
        return Symbol(name, real=True)

    # ------------------------------------------------------------ the choice

    def choices(self) -> Iterator[_Choice]:
        """The parameters that may do: common ones, then that of a single coordinate."""
        yield from self._common()
        if len(self.equations) == 1:
            yield from self._own(self.equations[0])

    def _common(self) -> Iterator[_Choice]:
        """From combinations of the relations without time and the other coordinates."""
        mine = {e.coordinate for e in self.equations}
        alone = len(mine) == 1
        rows = [[derivative(self.s.time_momentum or sp.S.Zero, a) for a in self.alphas]]
        for e in self.s.equations:
            if e.coordinate not in mine:
                # an ignorable coordinate may be the parameter of a single other one
                if alone and e.root == 0 and e.drift in self.alphas:
                    continue
                rows += [r for r in self._rows(e) if any(x != 0 for x in r)]
        try:
            candidates = constant_relations(rows, self.h.coordinates)
        except NotRational:
            return
        for weights in candidates:
            speeds = []
            for e in self.equations:
                drift, above = self._rows(e)
                if Add(*map(Mul, weights, drift)) != 0:
                    break
                speeds.append(sp.factor_terms(sp.cancel(Add(*map(Mul, weights, above)) / 2)))
            if len(speeds) < len(self.equations) or any(g == 0 for g in speeds):
                continue
            total = Add(*(c * self.betas[a] for c, a in zip(weights, self.alphas, strict=True)))
            if alone or speeds[0].could_extract_minus_sign():
                speeds, total = [-g for g in speeds], -total
            yield _Choice(tuple(speeds), total, self._told(weights))

    def _told(self, weights: Sequence[Expr]) -> str:
        names = ", ".join(e.coordinate.name for e in self.equations)
        used = {a for c, a in zip(weights, self.alphas, strict=True) if c != 0}
        followed = [e.coordinate.name for e in self.s.equations if e.root == 0 and e.drift in used]
        if followed:
            return f"orbit: {names} as a function of {' and '.join(followed)}"
        return f"common parameter of {names}: time has dropped out"

    def _rows(self, e: SeparatedEquation) -> tuple[list[Expr], list[Expr]]:
        """∂drift/∂α and ∂(root²)/∂α."""
        return (
            [derivative(e.drift, a) for a in self.alphas],
            [derivative(square(e.root), a) for a in self.alphas],
        )

    def _own(self, e: SeparatedEquation) -> Iterator[_Choice]:
        """Dλ = du/√P(u) for the substitution u of the quadrature of the momentum."""
        u = self.integrate(e.root, e.coordinate, self.domain[e.coordinate]).substitution
        speed = u and first_kind(square(e.root), u, e.coordinate)
        if speed:
            says = f"parameter of {e.coordinate.name} in which its quadrature is of the first kind"
            yield _Choice((speed,), sp.S.Zero, says)

    # ----------------------------------------------------------- the regimes

    def regimes(self, choice: _Choice) -> Iterator[Parametrisation]:
        """One a combination of the regimes in which every coordinate inverts."""
        tau = Dummy("tau", real=True)
        found: list[list[Path]] = []
        for e, g in zip(self.equations, choice.speeds, strict=True):
            domain = self.domain[e.coordinate]
            found.append(paths(e, g / e.root, g, tau, domain, self.h.functions, self.integrate))
            if not found[-1]:
                return
        many = 0
        for chosen in product(*found):
            if many == (MOST if len(self.equations) == 1 else COUPLED):
                return
            if _compatible(chosen) and self._met(chosen, tau):
                given = self._written(choice, chosen, tau)
                if given is not None:
                    many += 1
                    yield given

    def _met(self, chosen: Sequence[Path], tau: Symbol) -> bool:
        """Whether balls find constants for which all coordinates are real in these regimes."""
        moving = {e.coordinate: p.at for e, p in zip(self.equations, chosen, strict=True)}
        valid = tuple(v for p in chosen for v in p.valid)
        where = tuple(dict.fromkeys(d for p in chosen for d in p.where))
        return Along(tau, moving, valid, where, self.h.functions, self.domain).met()

    def _written(
        self, choice: _Choice, along_paths: Sequence[Path], tau: Symbol
    ) -> Parametrisation | None:
        """The coordinates, momenta and laws of one combination of regimes."""
        where = tuple(dict.fromkeys(d for p in along_paths for d in p.where))
        valid = tuple(dict.fromkeys(v for p in along_paths for v in p.valid))
        put = boundary_values(valid)
        coordinates, momenta = [], []
        for n, (e, g, p) in enumerate(zip(self.equations, choice.speeds, along_paths, strict=True)):
            sign = sp.S.One if turns(p.at, tau) else e.sign
            phase = self.parameter if n == 0 else choice.total - self.parameter
            run = {tau: sign * phase}
            at = p.at.xreplace(run)
            coordinates.append((e.coordinate, Formula(at, where, valid)))
            momentum = along(e, p.at, tau, g, sign).xreplace(put).xreplace(run)
            momenta.append((e.momentum, Formula(momentum, where, valid)))
        moving = {q: f.expression for q, f in coordinates}
        laws, rates = [], []
        context = Along(self.parameter, moving, valid, where, self.h.functions, self.domain)
        for symbol, rate in self._rates(choice):
            law = self._law(symbol, rate.xreplace(put), context)
            rates.append((symbol, Formula(rate.xreplace(put), where, valid)))
            laws.append((symbol, Formula(law[0], (*where, law[1]), valid)))
        every = [f.expression for _, f in (*coordinates, *momenta, *laws)]
        if self.h.time not in dict(laws) or not all(is_formula(f) for f in every):
            return None
        return Parametrisation(
            self.parameter,
            tuple(coordinates),
            tuple(momenta),
            tuple(rates),
            tuple(laws),
            choice.says,
        )

    def _rates(self, choice: _Choice) -> Iterator[tuple[Symbol, Expr]]:
        """(time or an ignorable coordinate, its derivative by λ as a function of the others)."""
        owners = {e.drift: e.coordinate for e in self.s.equations if e.root == 0}
        mine = {e.coordinate for e in self.equations}
        others = [e for e in self.s.equations if e.root != 0 and e.coordinate not in mine]
        for k, a in enumerate(self.alphas):
            clock = derivative(self.s.time_momentum or sp.S.Zero, a)
            if (a in owners) == (clock != 0):
                continue
            if any(row[k] != 0 for e in others for row in self._rows(e)):
                continue
            if any(self._rows(e)[0][k] != 0 for e in self.equations):
                continue
            total = Add(
                *(
                    (1 if n == 0 else -1) * sp.cancel(self._rows(e)[1][k] / (2 * g))
                    for n, (e, g) in enumerate(zip(self.equations, choice.speeds, strict=True))
                )
            )
            # Σ_i ∫ ∂p_i/∂α dq_i + ∂T/∂α = β, where ∂T/∂α is −t or φ
            yield (owners[a], -total) if a in owners else (self.h.time, total / -clock)

    def _law(self, symbol: Symbol, rate: Expr, context: Along) -> tuple[Expr, Definition]:
        """symbol(λ) = a constant plus ∫ rate dλ, in closed form where one runs on."""
        start = self._name(f"{symbol.name}_0")
        running = context.unsquared(rate.xreplace(context.moving))
        smooth = context.running_on(running)
        if smooth is not None:
            change = smooth
        else:
            inner = Dummy(self.parameter.name, real=True)
            change = Integral(running.xreplace({self.parameter: inner}), (inner, 0, self.parameter))
        words = f"constant of integration of {symbol.name}"
        return start + change, Definition(start, free=words)


def _compatible(chosen: Sequence[Path]) -> bool:
    """Whether a boundary (zero energy) that one regime lies on is that of the others too."""
    borders = {frozenset(boundary_values(p.valid).items()) for p in chosen}
    return len(borders) == 1


def first_kind(radicand: Expr, u: Expr, q: Symbol) -> Expr | None:
    """G(q) with g dq/√radicand = du/√P(u), P a polynomial without double roots; None if none.

    With radicand (dq/du)² = K(u)² P(u) it is g = K (du/dq)².
    """
    letter = Dummy("u", positive=True) if u.is_positive else Dummy("u", real=True)
    inverse = isolate(u, letter, q)
    if inverse is None:
        return None
    back = inverse.centre + inverse.half
    slope = sp.diff(u, q)
    inside = sp.cancel(sp.together((radicand / slope**2).xreplace({q: back})))
    if not inside.is_rational_function(letter):
        inside = sp.cancel(sp.expand_trig(sp.simplify(inside)))
    if not inside.is_rational_function(letter):
        return None
    above, below = (sp.factor_list(e, letter) for e in sp.fraction(inside))
    k: Expr = sp.S.One
    for (_, factors), sign in ((above, 1), (below, -1)):
        for factor, power in factors:
            # f³ = f·f², 1/f = f/f²
            k *= factor ** (sign * (power // 2) - (1 if sign < 0 and power % 2 else 0))
    return sp.cancel(k.xreplace({letter: u}) * slope**2)

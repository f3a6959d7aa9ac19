"""q(t) and p(t) as explicit functions of time.

Along the motion every coordinate has the parameter τ in which its own
quadrature is inverted, q(τ), and then every other quadrature over that
coordinate is an integral over τ that runs smoothly through turning points:
dq/root = dτ/G(q(τ)).  The sign of the branch is thereby used once, as the
orientation of τ.

A coordinate inverts in physical time when a combination of the Jacobi
relations with constant coefficients holds no other coordinate; these
combinations are found by linear algebra on the rows ∂p_i/∂α_k.
"""

from __future__ import annotations

from dataclasses import dataclass, field

import sympy as sp
from sympy import Add, Dummy, Expr, Symbol
from sympy.core.relational import Relational

from hjsolve.algebra.calculus import derivative
from hjsolve.algebra.generators import NotRational
from hjsolve.algebra.identity import vanish
from hjsolve.algebra.linear import constant_relations
from hjsolve.algebra.regimes import boundary_values
from hjsolve.algebra.roots import unify_roots
from hjsolve.motion.paths import Along, Integrate, Path, along, paths, square, turns
from hjsolve.records import (
    Definition,
    Formula,
    OtherRegime,
    SeparatedEquation,
    Separation,
    Truth,
)


@dataclass(slots=True)
class Found:
    """The explicit motions found so far."""

    coordinates: dict[Symbol, Formula] = field(default_factory=dict)
    momenta: dict[Symbol, Formula] = field(default_factory=dict)
    others: list[OtherRegime] = field(default_factory=list)


@dataclass(frozen=True, slots=True)
class Parametrised:
    """q(τ) with τ = sign·phase(t); ``speed`` is G(q) in dq/root = dτ/G."""

    equation: SeparatedEquation
    tau: Symbol
    speed: Expr
    phase: Expr
    path: Path


def explicit(separation: Separation, phases: dict[Symbol, Expr], integrate: Integrate) -> Found:
    """Explicit motions; ``phases`` is β_k − ∂T/∂α_k for each constant α_k."""
    return _Explicit(separation, phases, integrate).run()


class _Explicit:
    def __init__(
        self, separation: Separation, phases: dict[Symbol, Expr], integrate: Integrate
    ) -> None:
        self.s = separation
        self.h = separation.hamiltonian
        self.alphas = [c.symbol for c in separation.constants]
        self.phases = phases
        self.integrate = integrate
        self.domain = dict(zip(self.h.coordinates, self.h.domains, strict=True))
        self.found = Found()
        self.rows = {e.coordinate: self._rows(e) for e in separation.equations}

    def run(self) -> Found:
        parametrised = []
        for e in self.s.equations:
            weights = self._weights(e)
            if weights is None:
                continue
            found = self._parametrise(e, weights)
            general = [p for p in found if not boundary_values(p.path.valid)]
            for p in general[:1]:
                parametrised.append(p)
                motion, momentum = self._formulas(p)
                self.found.coordinates[e.coordinate] = motion
                self.found.momenta[e.momentum] = momentum
            self.found.others += [
                OtherRegime(e.coordinate, *self._formulas(p)) for p in found if p not in general[:1]
            ]
        for e in self.s.equations:
            if e.coordinate not in self.found.coordinates and e.root == 0:
                self._follow(e, parametrised)
            if e.root == 0 and not e.drift.has(e.coordinate):
                self.found.momenta.setdefault(e.momentum, Formula(e.drift))
        return self.found

    # ---------------------------------------------- which relations combine

    def _rows(self, e: SeparatedEquation) -> list[list[Expr]]:
        """∂drift/∂α and ∂(root²)/∂α as rows of functions of q."""
        rows = [[sp.diff(e.drift, a) for a in self.alphas]]
        if e.root != 0:
            rows.append([sp.diff(square(e.root), a) for a in self.alphas])
        return [r for r in rows if any(x != 0 for x in r)]

    def _weights(self, e: SeparatedEquation) -> list[Expr] | None:
        """c_k with Σ c_k ∂p_i/∂α_k = 0 for all other coordinates i, not for this one."""
        others = [row for q, rows in self.rows.items() if q != e.coordinate for row in rows]
        if not others:
            return [sp.S.One] + [sp.S.Zero] * (len(self.alphas) - 1)
        try:
            candidates = constant_relations(others, self.h.coordinates)
        except NotRational:
            return None
        for weights in candidates:
            own = [
                Add(*(c * x for c, x in zip(weights, row, strict=True)))
                for row in self.rows[e.coordinate]
            ]
            if any(vanish([x])[0].truth is Truth.REFUTED for x in own):
                return weights
        return None

    # -------------------------------------------------------------- invert

    def _parametrise(self, e: SeparatedEquation, weights: list[Expr]) -> list[Parametrised]:
        """q(τ) from Σ_k c_k times the relations, in every regime that inverts."""
        q = e.coordinate
        phase = Add(*(c * self.phases[a] for c, a in zip(weights, self.alphas, strict=True)))
        drift = Add(*(c * sp.diff(e.drift, a) for c, a in zip(weights, self.alphas, strict=True)))
        tau = Dummy("tau", real=True)
        if e.root == 0:
            speed, integrand = sp.S.One, sp.simplify(drift)
        else:
            if drift != 0:
                return []
            squares = (sp.diff(square(e.root), a) for a in self.alphas)
            speed = sp.simplify(Add(*(c * x for c, x in zip(weights, squares, strict=True))) / 2)
            integrand = speed / e.root
        domain, functions = self.domain[q], self.h.functions
        found = paths(e, integrand, speed, tau, domain, functions, self.integrate)
        return [Parametrised(e, tau, speed, phase, path) for path in found]

    def _formulas(self, p: Parametrised) -> tuple[Formula, Formula]:
        """(q(t), p(t)) from q(τ)."""
        e = p.equation
        sign = e.sign if e.root != 0 and not turns(p.path.at, p.tau) else sp.S.One
        run = {p.tau: _oriented(sign, p.phase)}
        valid = tuple(v.xreplace(run) for v in p.path.valid)
        motion = Formula(p.path.at.xreplace(run), p.path.where, valid)
        momentum = along(e, p.path.at, p.tau, p.speed, sign).xreplace(run)
        return motion, Formula(momentum, p.path.where, valid)

    # ------------------------------------------------- ignorable, following

    def _follow(self, e: SeparatedEquation, leaders: list[Parametrised]) -> None:
        """An ignorable coordinate whose rate is driven by coordinates already explicit.

        Its relation is q + Σ_i ∫ ∂p_i/∂α dq_i = phase; each integral is taken
        over τ, and matched to the closed form over q_i at τ = 0.
        """
        alpha = next((a for a in self.alphas if e.drift == a), None)
        if alpha is None:
            return
        total: Expr = self.phases[alpha]
        valid: list[Relational] = []
        where: list[Definition] = []
        for other in self.s.equations:
            if other is e:
                continue
            drift = derivative(other.drift, alpha)
            root = derivative(square(other.root), alpha) / 2
            if drift == 0 and root == 0:
                continue
            leader = next((p for p in leaders if p.equation is other), None)
            if leader is None:
                return
            parts = [
                self._at(leader, drift) if drift != 0 else sp.S.Zero,
                self._along(leader, root) if root != 0 else sp.S.Zero,
            ]
            if None in parts:
                return
            total -= Add(*parts)
            needed = self.found.coordinates[leader.equation.coordinate]
            valid += [v for v in needed.valid if v not in valid]
            where += [d for d in needed.where if d not in where]
        self.found.coordinates[e.coordinate] = Formula(total, tuple(where), tuple(valid))
        self.found.momenta[e.momentum] = Formula(e.drift, (), tuple(valid))

    def _at(self, leader: Parametrised, rate: Expr) -> Expr | None:
        """∫ rate dq at q(t): what has one branch needs no care at turning points."""
        q = leader.equation.coordinate
        forms = self.integrate(rate, q, self.domain[q]).closed_forms
        form = next((f for f in forms if set(f.valid) <= set(leader.path.valid)), None)
        if form is None or form.where:
            return None
        return form.expression.xreplace({q: self.found.coordinates[q].expression})

    def _along(self, leader: Parametrised, above: Expr) -> Expr | None:
        """sign·∫ above/root dq as a function of time, through the turning points."""
        q = leader.equation.coordinate
        path, tau = leader.path, leader.tau
        context = Along(tau, {q: path.at}, path.valid, path.where, self.h.functions, self.domain)
        rate = context.unsquared((above / leader.speed).xreplace({q: path.at}))
        smooth = context.running_on(rate)
        if smooth is None:
            return None
        anti = self.integrate(above / leader.equation.root, q, self.domain[q])
        form = next((f for f in anti.closed_forms if set(f.valid) <= set(path.valid)), None)
        if form is None or not set(form.where) <= set(path.where):
            return None
        start = form.expression.xreplace({q: path.at}).subs(tau, 0)
        offset = sp.simplify(unify_roots(start - smooth.subs(tau, 0)))
        if offset.has(sp.nan, sp.zoo, sp.oo):
            return None
        sign = leader.equation.sign if not turns(path.at, tau) else sp.S.One
        whole = smooth + offset
        return sign * whole.xreplace({tau: _oriented(sign, leader.phase)})


def _oriented(sign: Expr, phase: Expr) -> Expr:
    return phase if sign == 1 else sign * phase

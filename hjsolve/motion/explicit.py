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

from collections.abc import Callable
from dataclasses import dataclass, field

import sympy as sp
from sympy import Add, Dummy, Expr, Mul, Symbol
from sympy.core.relational import Relational

from hjsolve.algebra.calculus import derivative, is_formula
from hjsolve.algebra.generators import NotRational
from hjsolve.algebra.identity import refute, vanish
from hjsolve.algebra.linear import constant_relations
from hjsolve.algebra.regimes import boundary_values
from hjsolve.algebra.roots import unify_roots
from hjsolve.motion.inversions import invert, returns
from hjsolve.records import (
    Antiderivative,
    Domain,
    Formula,
    OtherRegime,
    SeparatedEquation,
    Separation,
    Truth,
)

Integrate = Callable[[Expr, Symbol, Domain], Antiderivative]
Valid = tuple[Relational, ...]


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
    path: Expr
    speed: Expr
    phase: Expr
    form: Expr
    valid: tuple[Relational, ...]


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
            general = [p for p in found if not boundary_values(p.valid)]
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
            rows.append([sp.diff(_square(e.root), a) for a in self.alphas])
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
            squares = (sp.diff(_square(e.root), a) for a in self.alphas)
            speed = sp.simplify(Add(*(c * x for c, x in zip(weights, squares, strict=True))) / 2)
            integrand = speed / e.root
        anti = self.integrate(integrand, q, self.domain[q])
        found = []
        for form in (f for f in anti.closed_forms if not f.where):
            valid = tuple(dict.fromkeys((*form.valid, *e.valid)))
            shape = form.expression

            def admissible(path: Expr, shape: Expr = shape, valid: Valid = valid) -> bool:
                return self._runs(e, tau, path, speed, shape, valid)

            for path, side in invert(shape, q, tau, self.domain[q], valid, admissible):
                needed = (*valid, *side, *self._half_time(e, shape, tau, path, valid))
                found.append(Parametrised(e, tau, path, speed, phase, shape, needed))
        return found

    def _runs(
        self, e: SeparatedEquation, tau: Symbol, path: Expr, speed: Expr, shape: Expr, valid: Valid
    ) -> bool:
        """Whether the momentum along a path is real and that of the separated equation."""
        q = e.coordinate
        slope = derivative(path, tau)
        if not (is_formula(path) and is_formula(slope)):
            return False
        conditions = [v.xreplace({q: path}) for v in valid if v.rel_op in ("<", ">")]
        momentum = e.drift if e.root == 0 else (speed * slope) ** 2 - e.root**2
        residue = momentum.xreplace(boundary_values(valid)).xreplace({q: path})
        if e.root == 0:  # only whether it has a real value
            residue = Add(residue, -residue, evaluate=False)
        found = refute(residue, {tau: (-sp.S.One, sp.S.One)}, self.h.functions, 60, conditions)
        if found.truth is Truth.REFUTED:
            return False
        return found.bound is not None or not shape.has(sp.Abs)

    def _half_time(
        self, e: SeparatedEquation, shape: Expr, tau: Symbol, path: Expr, valid: Valid
    ) -> Valid:
        """The sign of τ that a path needs where its momentum, having one branch, cannot turn."""
        if e.root != 0:
            return ()
        after, before = returns(shape, e.coordinate, tau, path, self.domain[e.coordinate], valid)
        if after and not before:
            return (sp.Le(0, tau, evaluate=False),)
        if before and not after:
            return (sp.Le(tau, 0, evaluate=False),)
        return ()

    def _formulas(self, p: Parametrised) -> tuple[Formula, Formula]:
        """(q(t), p(t)) from q(τ)."""
        e = p.equation
        sign = e.sign if e.root != 0 and not _turns(p.path, p.tau) else sp.S.One
        run = {p.tau: _oriented(sign, p.phase)}
        valid = tuple(v.xreplace(run) for v in p.valid)
        motion = Formula(p.path.xreplace(run), (), valid)
        if e.root == 0:
            momentum = e.drift.xreplace({e.coordinate: p.path}).xreplace(run)
        else:
            along = p.speed.xreplace({e.coordinate: p.path}) * derivative(p.path, p.tau)
            drift = e.drift.xreplace({e.coordinate: p.path})
            momentum = (drift + sign * along).xreplace(run)
        return motion, Formula(momentum, (), valid)

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
        for other in self.s.equations:
            if other is e:
                continue
            drift = derivative(other.drift, alpha)
            root = derivative(_square(other.root), alpha) / 2
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
            needed = self.found.coordinates[leader.equation.coordinate].valid
            valid += [v for v in needed if v not in valid]
        self.found.coordinates[e.coordinate] = Formula(total, (), tuple(valid))
        self.found.momenta[e.momentum] = Formula(e.drift, (), tuple(valid))

    def _at(self, leader: Parametrised, rate: Expr) -> Expr | None:
        """∫ rate dq at q(t): what has one branch needs no care at turning points."""
        q = leader.equation.coordinate
        forms = self.integrate(rate, q, self.domain[q]).closed_forms
        form = next((f for f in forms if set(f.valid) <= set(leader.valid)), None)
        if form is None or form.where:
            return None
        return form.expression.xreplace({q: self.found.coordinates[q].expression})

    def _along(self, leader: Parametrised, above: Expr) -> Expr | None:
        """sign·∫ above/root dq as a function of time, through the turning points."""
        q = leader.equation.coordinate
        rate = sp.expand((above / leader.speed).xreplace({q: leader.path}))
        smooth = _smooth_antiderivative(rate, leader.tau)
        anti = self.integrate(above / leader.equation.root, q, self.domain[q])
        if smooth is None or not anti.closed_forms:
            return None
        form = next((f for f in anti.closed_forms if set(f.valid) <= set(leader.valid)), None)
        if form is None:
            return None
        start = form.expression.xreplace({q: leader.path}).subs(leader.tau, 0)
        offset = sp.simplify(unify_roots(start - smooth.subs(leader.tau, 0)))
        if offset.has(sp.nan, sp.zoo, sp.oo):
            return None
        sign = leader.equation.sign if not _turns(leader.path, leader.tau) else sp.S.One
        return sign * (smooth + offset).xreplace({leader.tau: _oriented(sign, leader.phase)})


def _square(root: Expr) -> Expr:
    if isinstance(root, sp.Pow) and root.exp == sp.Rational(1, 2):
        return root.base
    return root**2


def _oriented(sign: Expr, phase: Expr) -> Expr:
    return phase if sign == 1 else sign * phase


def _turns(path: Expr, tau: Symbol) -> bool:
    """Whether q(τ) has a turning point, so that both signs of p are on one path."""
    if any(tau in f.free_symbols for f in path.atoms(sp.sin, sp.cos)):
        return True
    return bool(sp.expand(path - path.xreplace({tau: -tau})) == 0) or _parabola(path, tau)


def _parabola(path: Expr, tau: Symbol) -> bool:
    return path.is_polynomial(tau) and sp.degree(path, tau) == 2


def _smooth_antiderivative(rate: Expr, tau: Symbol) -> Expr | None:
    """∫ rate dτ for sums of products of polynomials, sin, cos, exp of linear arguments."""
    allowed = (sp.sin, sp.cos, sp.exp, sp.sinh, sp.cosh)
    for term in Add.make_args(rate):
        for factor in Mul.make_args(term):
            base, exponent = factor.as_base_exp() if not isinstance(factor, sp.exp) else (factor, 1)
            if not factor.has(tau):
                continue
            if not (sp.Integer(exponent) == exponent and exponent > 0):
                return None
            if base != tau and not isinstance(base, allowed):
                return None
            if base != tau and sp.diff(base.args[0], tau, 2) != 0:
                return None
    # a frequency that might be zero would make SymPy answer by cases
    inner = {sp.diff(f.args[0], tau) for f in rate.atoms(*allowed)} - {sp.S.Zero}
    letters = {w: Dummy("w", positive=True) for w in inner if not w.is_nonzero}
    put = {
        f: f.func(letters[w] * tau + f.args[0].subs(tau, 0))
        for f in rate.atoms(*allowed)
        for w in [sp.diff(f.args[0], tau)]
        if w in letters
    }
    result: Expr = sp.S.Zero
    for term in Add.make_args(rate.xreplace(put)):
        constant, moving = term.as_independent(tau, as_Add=False)
        result += constant * sp.integrate(moving, tau, manual=True)
    result = result.xreplace({letter: w for w, letter in letters.items()})
    if result.has(sp.Integral):
        return None
    return result if vanish([sp.diff(result, tau) - rate])[0].truth is Truth.PROVED else None

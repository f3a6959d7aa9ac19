"""A coordinate as a function of the parameter in which its quadrature is inverted."""

from __future__ import annotations

from collections.abc import Callable, Collection, Mapping
from dataclasses import dataclass

import sympy as sp
from sympy import Add, Expr, Symbol
from sympy.core.relational import Relational

from hjsolve.algebra.calculus import derivative, is_formula
from hjsolve.algebra.functions import jacobi_cn, jacobi_dn, jacobi_sn
from hjsolve.algebra.identity import Finding, refute
from hjsolve.algebra.named import Names
from hjsolve.algebra.regimes import boundary_values, has_value, inside, regime
from hjsolve.motion.inversions import invert, returns, with_delta
from hjsolve.motion.smooth import smooth_antiderivatives
from hjsolve.records import Antiderivative, Definition, Domain, SeparatedEquation, Truth

Integrate = Callable[[Expr, Symbol, Domain], Antiderivative]

ENOUGH = 20
"""Points at which a sign must be the same to be taken as that of the regime."""


@dataclass(frozen=True, slots=True)
class Path:
    """q(τ) in one regime; ``form`` is τ(q), which it inverts."""

    at: Expr
    form: Expr
    valid: tuple[Relational, ...]
    where: tuple[Definition, ...] = ()


def paths(
    e: SeparatedEquation,
    integrand: Expr,
    speed: Expr,
    tau: Symbol,
    domain: Domain,
    functions: Collection[str],
    integrate: Integrate,
) -> list[Path]:
    """Every q(τ) with dτ = integrand dq, which is speed dq/root where there is a root."""
    q = e.coordinate
    found = []
    for form in integrate(integrand, q, domain).closed_forms:
        valid = tuple(dict.fromkeys((*form.valid, *e.valid)))
        names = Names(form.where) if form.where else None
        case = _Case(e, speed, tau, domain, functions, form.expression, valid, names)
        for at, side in invert(form.expression, q, tau, domain, valid, case.runs, names):
            needed = dict.fromkeys((*valid, *side, *case.half_time(at)))
            kept = tuple(v for v in needed if v != sp.true)
            found.append(Path(at, form.expression, kept, form.where))
    return found


@dataclass(frozen=True, slots=True)
class Along:
    """The coordinates as functions of a parameter, in one regime."""

    parameter: Symbol
    moving: dict[Symbol, Expr]
    valid: tuple[Relational, ...]
    where: tuple[Definition, ...]
    functions: Collection[str]
    domains: Mapping[Symbol, Domain]

    def positive(self, e: Expr) -> bool:
        """Whether an expression is positive at all points of the regime that are met."""
        found = self._sample(sp.sign(e) - 1, ENOUGH)
        return found.truth is not Truth.REFUTED and found.bound is not None

    def running_on(self, rate: Expr) -> Expr | None:
        """∫ rate over the parameter, in a form that runs on all along; None if none is known."""
        for smooth in smooth_antiderivatives(rate, self.parameter):
            if all(self.positive(e) for e in smooth.positive):
                return smooth.expression
        return None

    def unsquared(self, e: Expr) -> Expr:
        """√(x²) as x or −x where x keeps its sign."""
        put = {}
        for power in e.atoms(sp.Pow):
            inner = power.base
            if power.exp == sp.Rational(1, 2) and isinstance(inner, sp.Pow) and inner.exp == 2:
                sign = next((s for s in (1, -1) if self.positive(s * inner.base)), 0)
                if sign:
                    put[power] = sign * inner.base
        return e.xreplace(put)

    def _sample(self, e: Expr, enough: int) -> Finding:
        """Balls of e at up to ``enough`` points of the regime where all coordinates are real."""
        names = Names(self.where) if self.where else None
        kept = names.held if names is not None else ()
        signs, conditions = regime([v.xreplace(self.moving) for v in self.valid], kept)
        for q, path in self.moving.items():
            at = path.xreplace(signs)
            conditions += [has_value(at), *inside(self.domains[q], at)]
        return refute(
            e.xreplace(boundary_values(self.valid)).xreplace(signs),
            {self.parameter: (-sp.S.One, sp.S.One)},
            self.functions,
            60,
            conditions,
            enough,
            names,
        )

    def met(self) -> bool:
        """Whether there are constants for which all coordinates are real in the regime."""
        return self._sample(sp.S.Zero, 1).bound is not None


@dataclass(frozen=True, slots=True)
class _Case:
    """A closed form that is to be inverted, in its regime."""

    equation: SeparatedEquation
    speed: Expr
    tau: Symbol
    domain: Domain
    functions: Collection[str]
    form: Expr
    valid: tuple[Relational, ...]
    names: Names | None

    def runs(self, path: Expr) -> bool:
        """Whether the momentum along a path is real and that of the separated equation."""
        e, q = self.equation, self.equation.coordinate
        slope = derivative(path, self.tau)
        if not (is_formula(path) and is_formula(slope)):
            return False
        conditions = [v.xreplace({q: path}) for v in self.valid if v.rel_op in ("<", ">")]
        momentum = e.drift if e.root == 0 else (self.speed * slope) ** 2 - e.root**2
        residue = momentum.xreplace(boundary_values(self.valid)).xreplace({q: path})
        conditions += [has_value(path), *inside(self.domain, path)]
        if e.root == 0:  # only whether it has a real value
            residue = Add(residue, -residue, evaluate=False)
        around = {self.tau: (-sp.S.One, sp.S.One)}
        found = refute(residue, around, self.functions, 60, conditions, names=self.names)
        if found.truth is Truth.REFUTED:
            return False
        return found.bound is not None or not self.form.has(sp.Abs)

    def half_time(self, path: Expr) -> tuple[Relational, ...]:
        """The sign of τ that a path needs where its momentum, having one branch, cannot turn."""
        e, tau = self.equation, self.tau
        if e.root != 0:
            return ()
        after, before = returns(self.form, e.coordinate, tau, path, self.domain, self.valid)
        if after and not before:
            return (sp.Le(0, tau, evaluate=False),)
        if before and not after:
            return (sp.Le(tau, 0, evaluate=False),)
        return ()


def turns(path: Expr, tau: Symbol) -> bool:
    """Whether q(τ) has a turning point, so that both signs of p are on one path."""
    oscillating = path.atoms(sp.sin, sp.cos, jacobi_sn, jacobi_cn, jacobi_dn)
    if any(f.has(tau) for f in oscillating):
        below = (p for p in path.atoms(sp.Pow) if p.exp.is_negative)
        if not any(f.has(tau) for p in below for f in p.atoms(jacobi_sn, jacobi_cn, jacobi_dn)):
            return True
    return bool(sp.expand(path - path.xreplace({tau: -tau})) == 0) or _parabola(path, tau)


def _parabola(path: Expr, tau: Symbol) -> bool:
    return path.is_polynomial(tau) and sp.degree(path, tau) == 2


def square(root: Expr) -> Expr:
    """root², without its radical sign."""
    if isinstance(root, sp.Pow) and root.exp == sp.Rational(1, 2):
        return root.base
    return root**2


def along(e: SeparatedEquation, path: Expr, tau: Symbol, speed: Expr, sign: Expr) -> Expr:
    """The momentum along q(τ), ``sign`` being the orientation of τ."""
    drift = e.drift.xreplace({e.coordinate: path})
    if e.root == 0:
        return drift
    return with_delta(drift + sign * speed.xreplace({e.coordinate: path}) * derivative(path, tau))

"""The Jacobi relations, formed under the integral sign.

β_k = ∂S/∂α_k = Σ_i ∫ ∂p_i/∂α_k dq_i + ∂T/∂α_k, with S = Σ_i W_i(q_i) + T(t).
Differentiating the integrand first keeps the radical and lowers its order;
differentiating a finished antiderivative does the opposite.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import sympy as sp
from sympy import Add, Eq, Expr, Symbol
from sympy.core.relational import Relational

from hjsolve.algebra.calculus import derivative, root_derivative
from hjsolve.motion.explicit import explicit
from hjsolve.records import (
    Antiderivative,
    Definition,
    Domain,
    Formula,
    Motion,
    Relation,
    Separation,
)

Integrate = Callable[[Expr, Symbol, Domain], Antiderivative]


@dataclass(frozen=True, slots=True)
class Quadrature:
    """∫ ∂p_i/∂α_k dq_i = drift + sign·root."""

    drift: Antiderivative
    root: Antiderivative


def set_in_motion(separation: Separation, integrate: Integrate) -> Motion | None:
    """The Jacobi relations and the explicit motion; None unless H separates completely.

    ``integrate`` is the quadrature room's function.
    """
    h = separation.hamiltonian
    whole = len(separation.equations) == len(h.coordinates) == len(separation.constants)
    if not whole or separation.time_momentum is None:
        return None
    if any(e.where for e in separation.equations):
        return None
    domain = dict(zip(h.coordinates, h.domains, strict=True))
    betas = tuple(_beta(c.symbol, h.names) for c in separation.constants)
    table: dict[tuple[Symbol, Symbol], Quadrature] = {}
    for e in separation.equations:
        for c in separation.constants:
            q = e.coordinate
            table[q, c.symbol] = Quadrature(
                integrate(derivative(e.drift, c.symbol), q, domain[q]),
                integrate(root_derivative(e.root, c.symbol), q, domain[q]),
            )
    in_time = {c.symbol: _time_part(separation, c.symbol, integrate) for c in separation.constants}
    relations = tuple(
        _relation(separation, c.symbol, beta, table, in_time[c.symbol])
        for c, beta in zip(separation.constants, betas, strict=True)
    )
    phases = {
        c.symbol: beta - in_time[c.symbol]
        for c, beta in zip(separation.constants, betas, strict=True)
    }
    found = explicit(separation, phases, integrate)
    coordinates = tuple((q, found.coordinates.get(q)) for q in h.coordinates)
    momenta = tuple((p, found.momenta.get(p)) for p in h.momenta)
    return Motion(relations, coordinates, momenta, tuple(found.others))


def _beta(alpha: Symbol, taken: frozenset[str]) -> Symbol:
    name = alpha.name.replace("alpha", "beta", 1)
    while name in taken:
        name += "_"
    return Symbol(name, real=True)


def _time_part(separation: Separation, alpha: Symbol, integrate: Integrate) -> Expr:
    """∂T/∂α, under the integral sign."""
    if separation.time_momentum is None:
        return sp.S.Zero
    t = separation.hamiltonian.time
    inner = derivative(separation.time_momentum, alpha)
    if not inner.has(t):
        return inner * t
    return integrate(inner, t, Domain()).everywhere(separation.hamiltonian.names).expression


def _relation(
    separation: Separation,
    alpha: Symbol,
    beta: Symbol,
    table: dict[tuple[Symbol, Symbol], Quadrature],
    time_part: Expr,
) -> Relation:
    parts: list[Expr] = [time_part]
    where: list[Definition] = []
    valid: list[Relational] = []
    present: list[Symbol] = []
    reasons: dict[str, None] = {}
    for e in separation.equations:
        quadrature = table[e.coordinate, alpha]
        valid += [v for v in e.valid if v not in valid]
        for factor, anti in ((sp.S.One, quadrature.drift), (e.sign, quadrature.root)):
            if anti.integrand == 0:
                continue
            form = anti.formula(separation.hamiltonian.names)
            if anti.reason:
                reasons[f"{e.coordinate.name}: {anti.reason}"] = None
            parts.append(factor * form.expression)
            where += [d for d in form.where if d not in where]
            valid += [v for v in form.valid if v not in valid]
            if e.coordinate not in present:
                present.append(e.coordinate)
    formula = Formula(Eq(Add(*parts), beta, evaluate=False), tuple(where), tuple(valid))
    says = _says(separation, alpha, beta, present, time_part)
    return Relation(beta, formula, says, "; ".join(reasons))


def _says(
    separation: Separation,
    alpha: Symbol,
    beta: Symbol,
    present: list[Symbol],
    time_part: Expr,
) -> str:
    """What a relation tells, in words."""
    h = separation.hamiltonian
    names = ", ".join(q.name for q in present)
    if time_part != 0:
        if time_part == -h.time:
            return (
                f"motion in time: ∂W/∂{alpha.name} = {h.time.name} + {beta.name} "
                f"is the coordinate that grows uniformly with time; it ties {names} to time"
            )
        return f"motion in time: ties {names} to {h.time.name}"
    if len(present) < 2:
        return f"phase constant of {names}"
    ignorable = [q for q in present if q in separation.verdict.ignorable]
    sums = {q: g for g in separation.verdict.direct_sum for q in g}
    if all(sums[q] != sums[present[0]] for q in present[1:]):
        return (
            f"phase of {names} relative to each other, without time: the shape of the orbit "
            "(for two equal oscillators 0 or half a period is a line, a quarter at equal "
            "amplitudes a circle, else an ellipse)"
        )
    if ignorable:
        others = ", ".join(q.name for q in present if q not in ignorable)
        return f"orbit: {ignorable[0].name} as a function of {others}, time has dropped out"
    return f"orbit: ties {names} to each other, time has dropped out"

"""The Hamilton–Jacobi equation and its complete integral as a sum of single integrals."""

from __future__ import annotations

from collections.abc import Callable

import sympy as sp
from sympy import Add, Eq, Expr, Function, Symbol
from sympy.core.relational import Relational

from hjsolve.records import (
    Antiderivative,
    CompleteIntegral,
    Definition,
    Domain,
    Formula,
    Hamiltonian,
    SeparatedEquation,
    Separation,
    Term,
)

Integrate = Callable[[Expr, Symbol, Domain], Antiderivative]


def complete(separation: Separation, integrate: Integrate) -> CompleteIntegral:
    """W and S from the separated equations.

    ``characteristic`` and ``principal`` are None unless every coordinate has
    an equation and time is accounted for; the terms found are kept anyway.
    """
    h = separation.hamiltonian
    domain = dict(zip(h.coordinates, h.domains, strict=True))
    terms = tuple(_term(e, domain[e.coordinate], integrate) for e in separation.equations)
    time_term = _time_term(separation, integrate)
    whole = len(terms) == len(h.coordinates)
    characteristic = _sum(terms, sp.S.Zero, h.names) if whole else None
    principal = _sum(terms, time_term, h.names) if whole and time_term is not None else None
    return CompleteIntegral(hamilton_jacobi(h), terms, time_term, characteristic, principal)


def hamilton_jacobi(h: Hamiltonian) -> Relational:
    """H(q, ∂S/∂q, t) + ∂S/∂t = 0, or H(q, ∂W/∂q) = α₁ for an autonomous system."""
    names = h.names
    letter = "S" if h.explicit_time else "W"
    while letter in names:
        letter += "_"
    arguments = (*h.coordinates, h.time) if h.explicit_time else h.coordinates
    s = Function(letter)(*arguments)
    put = {p: sp.Derivative(s, q) for q, p in zip(h.coordinates, h.momenta, strict=True)}
    left = h.expression.xreplace(put)
    if h.explicit_time:
        return Eq(left + sp.Derivative(s, h.time), 0, evaluate=False)
    energy = "alpha_1"
    while energy in names:
        energy += "_"
    return Eq(left, Symbol(energy, real=True), evaluate=False)


def _term(equation: SeparatedEquation, domain: Domain, integrate: Integrate) -> Term:
    q = equation.coordinate
    if equation.where:
        reason = "the momentum is known as a root of its polynomial only"
        left = Antiderivative(equation.drift, q, (), "unevaluated", None, reason)
        return Term(equation, left, integrate(sp.S.Zero, q, domain))
    return Term(
        equation,
        integrate(equation.drift, q, domain),
        integrate(equation.root, q, domain),
    )


def _time_term(separation: Separation, integrate: Integrate) -> Expr | None:
    momentum, t = separation.time_momentum, separation.hamiltonian.time
    if momentum is None:
        return None
    if not momentum.has(t):
        return momentum * t
    return integrate(momentum, t, Domain()).everywhere(separation.hamiltonian.names).expression


def _sum(terms: tuple[Term, ...], time_term: Expr, taken: frozenset[str]) -> Formula:
    """Σ_i drift_i + sign_i·root_i, with the names and conditions of its parts."""
    parts: list[Expr] = [time_term]
    where: list[Definition] = []
    valid: list[Relational] = []
    for term in terms:
        valid += [v for v in term.equation.valid if v not in valid]
        for factor, antiderivative in (
            (sp.S.One, term.drift),
            (term.equation.sign, term.root),
        ):
            if antiderivative.integrand == 0:
                continue
            form = antiderivative.formula(taken)
            parts.append(factor * form.expression)
            where += [d for d in (*term.equation.where, *form.where) if d not in where]
            valid += [v for v in form.valid if v not in valid]
    return Formula(Add(*parts), tuple(where), tuple(valid))

"""A solution as the JSON body of the contract's answer."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import Any, TypeAlias

from sympy import Expr, S
from sympy.core.relational import Relational

from hjsolve.records import (
    Antiderivative,
    Certificate,
    Chart,
    CompleteIntegral,
    Formula,
    Geometry,
    Motion,
    Obstruction,
    SeparatedEquation,
    Separation,
    Solution,
    Term,
    Verdict,
)
from hjsolve.writing.formula import DEFAULT, formula_object
from hjsolve.writing.infix import write_infix
from hjsolve.writing.problem import number_text, problem_document

Write: TypeAlias = Callable[[Formula | Expr | Relational | None], dict[str, Any] | None]


MOTION_BRANCH = (
    "The beta in q(t), p(t) are those of the relations on the branch on which every sigma is +1; "
    "a motion that turns runs through both branches."
)


def solution_document(solution: Solution, *, notations: Sequence[str] = DEFAULT) -> dict[str, Any]:
    """Everything of the answer but ``id`` and ``state``, which the service adds.

    What was not worked out is null (an object) or empty (a list).  Formulas
    carry the notations asked for, in that order.

    Raises:
        KeyError: a notation that ``WRITERS`` does not have.
    """

    def write(formula: Formula | Expr | Relational | None) -> dict[str, Any] | None:
        return None if formula is None else formula_object(formula, notations)

    separation = solution.separation
    integral = solution.integral
    return {
        "problem": problem_document(solution.problem),
        "verdict": verdict_object(separation.verdict),
        "charts": [_chart(chart, write) for chart in solution.charts.found]
        if solution.charts
        else [],
        "charts_complete": solution.charts.complete if solution.charts else False,
        "chart_used": solution.chart_used,
        "hamilton_jacobi_equation": write(integral.equation if integral else None),
        "constants": [
            {
                "symbol": constant.symbol.name,
                "meaning": constant.meaning,
                "first_integral": write(constant.first_integral),
            }
            for constant in separation.constants
        ],
        "separated_equations": [_equation(eq, write) for eq in separation.equations],
        "reduced_equations": [
            {"block": [s.name for s in reduced.block], "equation": write(reduced.equation)}
            for reduced in separation.reduced
        ],
        "complete_integral": _integral(integral, write) if integral else None,
        "motion": _motion(solution, solution.motion, write) if solution.motion else None,
        "certificate": _certificate(solution.certificate),
        **_form(separation),
    }


def _chart(chart: Chart, write: Write) -> dict[str, Any]:
    """A coordinate system: its geometry in exact text, its map in formulas."""
    written: dict[str, Any] = {
        "family": chart.family,
        "geometry": {name: _exact(value) for name, value in chart.geometry},
        "free": [letter.name for letter in chart.free],
        "coordinates": [q.name for q in chart.coordinates],
        "transformation": {q.name: write(e) for q, e in chart.transformation},
    }
    if chart.blocks:
        written["geometry"]["blocks"] = [_chart(block, write) for block in chart.blocks]
    if chart.mass_map is not None:
        written["mass_map"] = _exact(chart.mass_map)
    return written


def _exact(value: Geometry) -> Any:
    """A number as infix text, vectors and rows of them as lists."""
    return [_exact(part) for part in value] if isinstance(value, tuple) else write_infix(value)


def _form(separation: Separation) -> dict[str, Any]:
    """``canonical_constants`` is false when the constants are values at a base point."""
    return {"canonical_constants": separation.canonical} if separation.equations else {}


def verdict_object(verdict: Verdict) -> dict[str, Any]:
    """The verdict; ``bound`` and ``limit`` stand beside the contract's fields."""
    return {
        "separability": verdict.separability,
        "blocks": [[symbol.name for symbol in block] for block in verdict.blocks],
        "ignorable": [symbol.name for symbol in verdict.ignorable],
        "direct_sum": [[symbol.name for symbol in group] for group in verdict.direct_sum],
        "proof": verdict.proof,
        "bound": verdict.bound,
        "obstruction": _obstruction(verdict.obstruction) if verdict.obstruction else None,
        "limit": verdict.limit,
    }


def _obstruction(obstruction: Obstruction) -> dict[str, Any]:
    written: dict[str, Any] = {
        "pair": list(obstruction.pair),
        "point": {name: number_text(value) for name, value in obstruction.point},
        "value": {"mid": obstruction.midpoint, "radius": obstruction.radius},
    }
    if obstruction.functions:
        written["functions"] = {name: write_infix(f) for name, f in obstruction.functions}
    return written


def _equation(equation: SeparatedEquation, write: Write) -> dict[str, Any]:
    where, valid, squared = equation.where, equation.valid, equation.squared
    return {
        "coordinate": equation.coordinate.name,
        "momentum": write(Formula(equation.solution, where, valid)),
        "momentum_squared": None if squared is None else write(Formula(squared, where, valid)),
    }


def _integral(integral: CompleteIntegral, write: Write) -> dict[str, Any]:
    return {
        "principal": write(integral.principal),
        "characteristic": write(integral.characteristic),
        "time_term": write(integral.time_term),
        "terms": [_term(term, write) for term in integral.terms],
    }


def _term(term: Term, write: Write) -> dict[str, Any]:
    forms = closed_forms(term)
    written = [write(form) for form in forms]
    return {
        "coordinate": term.equation.coordinate.name,
        "integrand": write(Formula(term.equation.drift + term.equation.root, term.equation.where)),
        "closed_form": written[0] if written else None,
        "closed_forms": written,
        "family": family(term),
        "substitution": write(term.root.substitution or term.drift.substitution),
        "reason": "; ".join(dict.fromkeys(r for r in (term.drift.reason, term.root.reason) if r)),
        "cycles": [
            {
                "kind": cycle.kind,
                "action": write(cycle.action),
                "derivatives": {alpha.name: write(f) for alpha, f in cycle.derivatives},
            }
            for cycle in term.cycles
        ],
    }


def closed_forms(term: Term) -> tuple[Formula, ...]:
    """Antiderivatives of dW_i/dq_i on the positive branch, one a pair of regimes.

    Empty when either part of the momentum has none; a part that is
    identically zero adds nothing and needs none.
    """
    drifts, roots = _forms(term.drift), _forms(term.root)
    return tuple(
        Formula(
            drift.expression + root.expression,
            tuple(dict.fromkeys((*drift.where, *root.where))),
            tuple(dict.fromkeys((*drift.valid, *root.valid))),
        )
        for root in roots
        for drift in drifts
    )


def _forms(part: Antiderivative) -> tuple[Formula, ...]:
    if part.closed_forms or part.integrand != 0:
        return part.closed_forms
    return (Formula(S.Zero),)


_ORDER = ("elementary", "elliptic", "unevaluated")


def family(term: Term) -> str:
    """The harder of the families of the two parts that are not zero."""
    parts = [part for part in (term.drift, term.root) if part.integrand != 0]
    return max((part.family for part in parts), key=_ORDER.index, default="elementary")


def _motion(solution: Solution, motion: Motion, write: Write) -> dict[str, Any]:
    """Momenta stand under the names of their coordinates, whichever symbol the record has."""
    hamiltonian = solution.hamiltonian
    owner = dict(zip(hamiltonian.momenta, hamiltonian.coordinates, strict=True))
    return {
        "relations": [
            {
                "constant": relation.constant.name,
                "equation": write(relation.equation),
                "says": relation.says,
                "reason": relation.reason,
            }
            for relation in motion.relations
        ],
        "coordinates": {symbol.name: write(formula) for symbol, formula in motion.coordinates},
        "momenta": {owner.get(s, s).name: write(formula) for s, formula in motion.momenta},
        "branch": MOTION_BRANCH,
        "regimes": [
            {
                "coordinate": other.coordinate.name,
                "motion": write(other.motion),
                "momentum": write(other.momentum),
            }
            for other in motion.others
        ],
        "parametrisations": [
            {
                "parameter": given.parameter.name,
                "says": given.says,
                "coordinates": {q.name: write(f) for q, f in given.coordinates},
                "momenta": {owner.get(p, p).name: write(f) for p, f in given.momenta},
                "rates": {s.name: write(f) for s, f in given.rates},
                "laws": {s.name: write(f) for s, f in given.laws},
            }
            for given in motion.parametrisations
        ],
    }


def _certificate(certificate: Certificate) -> dict[str, Any]:
    return {
        "checks": [
            {
                "claim": check.claim,
                "verdict": str(check.verdict),
                "method": check.method,
                "bound": check.bound,
            }
            for check in certificate.checks
        ]
    }

"""The chain for transformations: from reading to transformation to writing."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace
from functools import cache
from typing import Any

from sympy import Derivative, Expr, S, Subs, Symbol
from sympy.core.relational import Relational

from hjsolve.algebra.identity import vanish
from hjsolve.errors import InputError
from hjsolve.quadrature import integrate as quadrature
from hjsolve.reading import read_formula, read_problem
from hjsolve.records import (
    Antiderivative,
    Certificate,
    Check,
    Domain,
    Formula,
    Frame,
    Hamiltonian,
    Map,
    Parameter,
    Transformation,
    TransformationProblem,
)
from hjsolve.solve import solve
from hjsolve.transformation import (
    read_request,
    transformation_document,
    transformation_lines,
)
from hjsolve.transformation import transform as analyse
from hjsolve.writing import formula_object, problem_document
from hjsolve.writing.formula import DEFAULT
from hjsolve.writing.person import one_line

STEPS = 4
"""Transformations in one composition, the first not counted."""

INTEGRAL_SECONDS = 1.0
"""For one antiderivative by the quadrature room."""


def transform(request: Mapping[str, Any]) -> Transformation:
    """Everything this program can say about a transformation, as posted.

    Raises:
        InputError: the request cannot be read or its transformation is degenerate.
    """
    if request.get("principal_function_of") is not None:
        others = sorted(set(request) - {"principal_function_of"})
        if others:
            raise InputError(
                "principal_function_of stands alone", pointer=f"/{others[0]}", code="duplicate"
            )
        return _from_solution(request["principal_function_of"])
    steps = request.get("then")
    if steps is not None:
        return _composed({k: v for k, v in request.items() if k != "then"}, steps)
    return _analysed(read_request(request, read_problem, read_formula))


def _analysed(
    problem: TransformationProblem, hint: Mapping[str, Expr] | None = None
) -> Transformation:
    @cache
    def integrate(integrand: Expr, variable: Symbol, domain: Domain) -> Antiderivative:
        return quadrature(integrand, variable, domain, seconds=INTEGRAL_SECONDS)

    return analyse(problem, integrate, hint)


def _composed(first: Mapping[str, Any], steps: object) -> Transformation:
    """Several transformations one after another, as one map on their top-level branches."""
    if not isinstance(steps, Sequence) or isinstance(steps, str) or not 0 < len(steps) <= STEPS:
        raise InputError(
            f"then is a list of up to {STEPS} transformations", pointer="/then", code="wrong-type"
        )
    problem = read_request(first, read_problem, read_formula)
    found = _analysed(problem)
    forth = _closed_form(found, "")
    back = _by_name(found.branches[0].old_in_new)
    shared = {k: first[k] for k in ("parameters", "functions", "time") if k in first}
    side = first["new"]
    for n, step in enumerate(steps):
        if not isinstance(step, Mapping):
            raise InputError("a step is an object", pointer=f"/then/{n}", code="wrong-type")
        try:
            this = read_request({**shared, **step, "old": side}, read_problem, read_formula)
            found = _analysed(this)
        except InputError as error:
            error.pointer = f"/then/{n}{error.pointer}"
            raise
        forth = _after(_closed_form(found, f"/then/{n}"), forth)
        more = _by_name(found.branches[0].old_in_new)
        back = _after(back, more) if back is not None and more is not None else None
        side = step["new"]
        problem = replace(problem, new=this.new, domains=(*problem.domains, *this.domains))
    given = tuple((s, forth[s.name]) for s in problem.new.variables)
    whole = replace(problem, kinds=(), function=None, backward=False, generator=None, given=given)
    return _analysed(whole, back)


def _by_name(values: Map | None) -> dict[str, Expr] | None:
    return None if values is None else {s.name: f.expression for s, f in values}


def _closed_form(found: Transformation, pointer: str) -> dict[str, Expr]:
    values = _by_name(found.branches[0].new_in_old) if found.branches else None
    if values is None:
        raise InputError(
            "the new variables of this step have no closed form, so nothing can follow it",
            pointer=pointer,
            code="implicit",
        )
    return values


def _after(outer: Mapping[str, Expr], inner: Mapping[str, Expr]) -> dict[str, Expr]:
    """The formulas ``outer`` of the variables that ``inner`` gives, put together by name."""
    return {
        name: e.xreplace({s: inner[s.name] for s in e.free_symbols if s.name in inner})
        for name, e in outer.items()
    }


def _from_solution(request: Mapping[str, Any]) -> Transformation:
    """A complete integral S(q, α, t) read as a function of kind 2: p = ∂S/∂q, β = ∂S/∂α.

    On the branch on which every momentum is positive.
    """
    try:
        hamiltonian = read_problem(request)
    except InputError as error:
        error.pointer = f"/principal_function_of{error.pointer}"
        raise
    solution = solve(hamiltonian)
    principal = solution.integral.principal if solution.integral is not None else None
    if principal is None or principal.where:
        raise InputError(
            "this problem has no principal function in closed form",
            pointer="/principal_function_of",
            code="implicit",
        )
    signs = {e.sign: S.One for e in solution.separation.equations}
    function = principal.expression.xreplace(signs)
    alphas = tuple(c.symbol for c in solution.separation.constants)
    names = [a.name.replace("alpha", "beta") for a in alphas]
    betas = tuple(Symbol(name, real=True) for name in names)
    h = solution.hamiltonian
    domains = tuple((q, d) for q, d in zip(h.coordinates, h.domains, strict=True) if d != Domain())
    problem = TransformationProblem(
        Frame(h.coordinates, h.momenta),
        Frame(betas, alphas),
        domains,
        h.parameters,
        h.functions,
        h.time,
        h.expression,
        (2,) * len(alphas),
        function,
    )
    found = _analysed(problem)
    slopes = {p: function.diff(q) for q, p in zip(h.coordinates, h.momenta, strict=True)}
    zero = h.expression.xreplace(slopes) + function.diff(h.time)
    (finding,) = vanish([zero], functions=h.functions, conditions=principal.valid)
    claim = "the new Hamiltonian H(q, ∂S/∂q, t) + ∂S/∂t is zero"
    check = Check(claim, finding.truth, finding.method, finding.bound)
    return replace(found, certificate=Certificate((check, *found.certificate.checks)))


def document(found: Transformation, notations: Sequence[str] = DEFAULT) -> dict[str, Any]:
    """The JSON body of the answer."""

    def write(formula: Formula | Expr | Relational) -> dict[str, Any]:
        return formula_object(formula, notations)

    return {**transformation_document(found, write), "new_problem": _new_problem(found)}


def _new_problem(found: Transformation) -> dict[str, Any] | None:
    """The new Hamiltonian as a problem that can be posted to be solved, None where it cannot."""
    problem = found.problem
    k = found.branches[0].new_hamiltonian if found.branches else None
    if k is None or k.expression.has(Derivative, Subs):
        return None
    domains = dict(problem.domains)
    flow = () if problem.parameter is None else (Parameter(problem.parameter, "real"),)
    known = {p.symbol for p in problem.parameters}
    hamiltonian = Hamiltonian(
        k.expression,
        problem.new.coordinates,
        problem.new.momenta,
        tuple(domains.get(s, Domain()) for s in problem.new.coordinates),
        (*problem.parameters, *(p for p in flow if p.symbol not in known)),
        (),
        problem.functions,
        problem.time,
    )
    return problem_document(hamiltonian)


def for_person(found: Transformation) -> str:
    """The answer as text for a terminal."""
    return "\n".join(transformation_lines(found, one_line)) + "\n"

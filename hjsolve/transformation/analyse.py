"""From a transformation problem to everything that is known of it."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace

from sympy import Expr, Symbol

from hjsolve.algebra.budget import limit
from hjsolve.algebra.identity import vanish
from hjsolve.errors import OutOfTime
from hjsolve.records import (
    Certificate,
    Check,
    Formula,
    Transformation,
    TransformationProblem,
    Truth,
)
from hjsolve.transformation.branches import settle
from hjsolve.transformation.flow import equations, first_order, flow
from hjsolve.transformation.from_function import from_function
from hjsolve.transformation.from_map import from_map
from hjsolve.transformation.potential import Integrate

FLOW_SECONDS = 2.0


def transform(
    problem: TransformationProblem,
    integrate: Integrate,
    hint: Mapping[str, Expr] | None = None,
) -> Transformation:
    """Test, invert, find the generating functions and the new Hamiltonian.

    ``integrate`` is the quadrature room's, handed in by the chain; ``hint`` an
    inverse that the caller has, as for a composition.

    Raises:
        InputError: the generating function or the map is degenerate.
    """
    setting = settle(problem)
    if problem.function is not None:
        return from_function(setting, problem.function, integrate)
    if problem.generator is not None and problem.parameter is not None:
        return _from_flow(problem, problem.generator, problem.parameter, integrate)
    return from_map(setting, integrate, hint)


def _from_flow(
    problem: TransformationProblem, generator: Expr, s: Symbol, integrate: Integrate
) -> Transformation:
    """The flow of a generator: to first order always, exactly where its series was summed."""
    rename = dict(zip(problem.old.variables, problem.new.variables, strict=True))
    linear = tuple(
        (rename[z], Formula(e)) for z, e in first_order(generator, problem.old, s).items()
    )
    claim = "the flow of a generator is canonical for every value of its parameter"
    checks = [Check(claim, Truth.PROVED, "Hamilton's equations")]
    try:
        with limit(FLOW_SECONDS):
            moved = flow(generator, problem.old, s)
    except OutOfTime:
        moved = None
    if moved is not None:
        left = equations(moved, generator, problem.old, s)
        findings = vanish(left, functions=problem.functions)
        if all(f.truth is Truth.PROVED for f in findings):
            given = tuple((rename[z], e) for z, e in moved.items())
            exact = replace(problem, given=given, generator=None)
            back = {s: -s, **rename}
            inverse = {z.name: e.xreplace(back) for z, e in moved.items()}
            found = from_map(settle(exact), integrate, inverse)
            bound = max((f.bound or 0.0 for f in findings), default=0.0)
            solves = Check(
                "the new variables solve dz/ds = [z, G] from the old ones",
                Truth.PROVED,
                "modular",
                bound,
            )
            every = Certificate((*checks, solves, *found.certificate.checks))
            return replace(found, problem=problem, first_order=linear, certificate=every)
    untold = Check("the flow in closed form: not found", Truth.UNDECIDED, "none")
    return Transformation(
        problem,
        Truth.PROVED,
        None,
        (),
        (),
        None,
        (),
        None,
        Certificate((*checks, untold)),
        linear,
    )

"""One verdict case or integral by plain SymPy, in a process of its own: stdin to stdout.

``pdsolve``: the Hamilton-Jacobi equation as it stands.  ``peel``: ``pde_separate_add`` takes off
one coordinate after another, as far as it goes.  ``cleared``: the same with the denominators of
the equation cleared before every step.  The text is read by our reader, so that SymPy starts
from a finished expression.  ``integrate``: an antiderivative, of which only the kind is told.
"""

from __future__ import annotations

import json
import math
import resource
import sys
import time
from collections.abc import Callable
from typing import Any

import sympy as sp
from sympy.solvers.pde import pde_separate_add, pdsolve

from hjsolve.reading import read_problem
from hjsolve.records import Hamiltonian


def equation(hamiltonian: Hamiltonian) -> tuple[sp.Expr, sp.Expr, list[sp.Symbol]]:
    """The left-hand side H(q, ∂S/∂q, t) + ∂S/∂t or − E, the unknown, its variables."""
    timed = hamiltonian.explicit_time
    variables = [*hamiltonian.coordinates, *([hamiltonian.time] if timed else [])]
    unknown = sp.Function("S")(*variables)
    momenta = {
        p: unknown.diff(q)
        for q, p in zip(hamiltonian.coordinates, hamiltonian.momenta, strict=True)
    }
    rest = unknown.diff(hamiltonian.time) if timed else -sp.Symbol("E_0")
    return hamiltonian.expression.subs(momenta) + rest, unknown, variables


def by_pdsolve(lhs: sp.Expr, unknown: sp.Expr, variables: list[sp.Symbol]) -> list[list[str]]:
    """All single when an answer comes; it is not checked further, in SymPy's favour."""
    pdsolve(sp.Eq(lhs, 0), unknown)
    return [[str(v)] for v in variables]


def by_peeling(
    lhs: sp.Expr, unknown: sp.Expr, variables: list[sp.Symbol], clear: bool
) -> list[list[str]]:
    """Greedy: any coordinate that comes off is taken off, until none does."""
    left, blocks, step = list(variables), [], 0
    while len(left) > 1:
        for v in left:
            if clear:
                lhs = sp.fraction(sp.together(lhs))[0]
            others = [w for w in left if w != v]
            step += 1
            single, rest = sp.Function(f"X_{step}")(v), sp.Function(f"Y_{step}")(*others)
            found = pde_separate_add(sp.Eq(sp.expand(lhs), 0), unknown, [single, rest])
            if found is not None:
                lhs, unknown, left = found[1] - sp.Symbol(f"C_{step}"), rest, others
                blocks.append([str(v)])
                break
        else:
            break
    return [*blocks, [str(v) for v in left]]


def by_integrate(integrand: sp.Expr, variable: sp.Symbol) -> str:
    """Whether ``sympy.integrate`` left an integral in its answer."""
    return "left" if sp.integrate(integrand, variable).has(sp.Integral) else "answered"


def prepared(task: dict[str, Any]) -> Callable[[], dict[str, Any]]:
    """The work of a task, with its text read."""
    if task["method"] == "integrate":
        integrand, variable = (sp.sympify(task[k]) for k in ("integrand", "variable"))
        return lambda: {"kind": by_integrate(integrand, variable)}
    parts = equation(read_problem(task["request"]))
    if task["method"] == "pdsolve":
        return lambda: {"blocks": by_pdsolve(*parts)}
    return lambda: {"blocks": by_peeling(*parts, clear=task["method"] == "cleared")}


def main() -> None:
    """Read a task with its method, write its answer or {"error"}, and the time it took."""
    task = json.load(sys.stdin)
    work = prepared(task)
    most = math.ceil(time.process_time() + task["limit"])
    resource.setrlimit(resource.RLIMIT_CPU, (most, most + 1))
    clock, processor = time.perf_counter(), time.process_time()
    try:
        answer = work()
    except Exception as error:
        answer = {"error": type(error).__name__}
    times = {"seconds": time.perf_counter() - clock, "processor": time.process_time() - processor}
    json.dump({**answer, **times}, sys.stdout)


if __name__ == "__main__":
    main()

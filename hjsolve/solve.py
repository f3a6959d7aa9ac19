"""The pipeline on one screen: it alone hands a record from one room to the next."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace
from functools import lru_cache, partial
from importlib import import_module
from types import ModuleType
from typing import TypeVar

from sympy import Expr, Symbol

from hjsolve.algebra.budget import limit
from hjsolve.certification import certify
from hjsolve.errors import Fault, InputError, OutOfTime
from hjsolve.motion import by_parameter, set_in_motion
from hjsolve.quadrature import integrate as quadrature
from hjsolve.quadrature.complete import complete
from hjsolve.quadrature.cycles import with_cycles
from hjsolve.records import (
    Antiderivative,
    Certificate,
    Charts,
    Check,
    Domain,
    Hamiltonian,
    Separation,
    Solution,
    Truth,
    Verdict,
)
from hjsolve.separation import detect, separate

OnStage = Callable[[str, Solution | None], None]
T = TypeVar("T")

SECONDS = {
    "charts": 30.0,
    "separate": 20.0,
    "integrate": 20.0,
    "motion": 15.0,
    "parameter": 15.0,
    "cycles": 10.0,
    "certify": 20.0,
}
"""How long a stage may take before the ones after it go on without it."""


def solve(hamiltonian: Hamiltonian, on_stage: OnStage | None = None) -> Solution:
    """Everything this program can say about a problem.

    ``on_stage(name, found)`` is called when a stage begins, with what is known
    so far, so that it can be kept if the process is ended.  A stage that uses
    up its time is left out and the certificate says so.

    Raises:
        InputError: a coordinate turns out to have no momentum in H.
        Fault: the verdict or a coordinate system was refuted by its own
            certificate; any other refuted result is left out and named there.
    """
    posed = hamiltonian
    tell = on_stage or (lambda _name, _found: None)
    integrate = lru_cache(maxsize=None)(_contained)  # W, the relations and q(t) share integrals
    tell("separate", None)
    late: list[Check] = []
    verdict = detect(hamiltonian)
    placed = Placed(hamiltonian, verdict)
    if hamiltonian.charts:
        tell("charts", Solution(Separation(hamiltonian, verdict)))
        what = "the coordinate systems"
        found = _stage("charts", what, partial(_placed, hamiltonian, verdict), late)
        placed = found or placed
    hamiltonian, verdict = placed.hamiltonian, placed.verdict
    bare = Separation(hamiltonian, verdict)
    what = "the separated equations"
    separation = _stage("separate", what, partial(separate, hamiltonian, verdict), late) or bare
    tell("integrate", Solution(separation))
    what = "the complete integral"
    integral = _stage("integrate", what, partial(complete, separation, integrate), late)
    tell("motion", Solution(separation, integral))
    motion = None
    if integral is not None:
        what = "the equations of motion"
        motion = _stage("motion", what, partial(set_in_motion, separation, integrate), late)
    if motion is not None:
        what = "the motion by a parameter"
        work = partial(by_parameter, separation, motion, integrate)
        motion = _stage("parameter", what, work, late) or motion
    if integral is not None:
        what = "the integrals over a cycle"
        over = partial(with_cycles, separation, integral, integrate)
        integral = _stage("cycles", what, over, late) or integral
    tell("certify", Solution(separation, integral, motion))
    solution = Solution(separation, integral, motion)
    for kept in (solution, Solution(separation), Solution(bare)):
        try:
            certificate = _certified(kept)
        except Fault as fault:
            text = f"{fault}; what rests on it is left out"
            late.append(_left_out(text))
            continue
        first = placed.charts.checks if placed.charts else ()
        return replace(
            kept,
            integral=kept.integral and kept.integral.without(certificate.left_out),
            motion=kept.motion and kept.motion.without(certificate.left_out),
            certificate=Certificate((*first, *certificate.checks, *late)),
            charts=placed.charts,
            chart_used=placed.used,
            posed=posed,
        )
    raise Fault("the verdict itself was refuted by its certificate")


def _stage(name: str, what: str, work: Callable[[], T], late: list[Check]) -> T | None:
    """One stage within its time; what it leaves out is told in ``late``."""
    try:
        with limit(SECONDS[name]):
            return work()
    except OutOfTime:
        late.append(_left_out(f"{what}: stopped at the time limit of the stage"))
    except Exception as error:
        if name == "charts" and isinstance(error, (InputError, Fault)):
            raise  # a name or a system that is wrong, not a stage that failed
        late.append(_left_out(_broken(what, error)))
    return None


def _left_out(text: str) -> Check:
    return Check(text, Truth.UNDECIDED, "none")


def _charts() -> ModuleType:
    """The charts room, loaded when a problem asks for it.

    Building the catalogue takes a quarter of what loading SymPy takes, and
    most problems on the command line stay in their own coordinates.
    """
    return import_module("hjsolve.charts")


def refuse_unknown_charts(hamiltonian: Hamiltonian) -> None:
    """Refuse names of coordinate systems that the catalogue does not have.

    Raises:
        InputError: pointing at ``/charts``.
    """
    if hamiltonian.charts in ((), ("search",)):
        return
    known = [c.family for c in _charts().CHARTS if c.dimension == len(hamiltonian.coordinates)]
    for name in hamiltonian.charts:
        if name.rsplit("/", 1)[-1] not in known:
            raise InputError(
                f"{name!r} is no coordinate system of the catalogue for "
                f"{len(hamiltonian.coordinates)} coordinates",
                pointer="/charts",
                expected=", ".join(known) or "a problem of two or three coordinates",
                code="unknown-chart",
            )


@dataclass(frozen=True, slots=True)
class Placed:
    """The Hamiltonian in the coordinates that are worked in, and how it came there."""

    hamiltonian: Hamiltonian
    verdict: Verdict
    charts: Charts | None = None
    used: int | None = None


def _placed(hamiltonian: Hamiltonian, verdict: Verdict) -> Placed:
    """The charts asked for; the first that separates is used where the given one does not."""
    room = _charts()
    if hamiltonian.charts == ("search",):
        charts = room.search(hamiltonian, detect)
        tried = charts.found
    else:
        tried = tuple(room.named(hamiltonian, name) for name in hamiltonian.charts)
        charts = Charts((), False, reason="only the coordinate systems named were tried")
    separating = []
    for chart in tried:
        carried = room.in_chart(hamiltonian, room.upright(chart))
        found = detect(carried)
        if found.separability == "complete":
            separating.append((chart, carried, found))
    charts = replace(charts, found=tuple(chart for chart, _, _ in separating))
    if len(separating) < len(tried) and hamiltonian.charts == ("search",):
        charts = replace(charts, complete=False, reason="a system found was not confirmed")
    if verdict.separability == "complete" or not separating:
        return Placed(hamiltonian, verdict, charts)
    return Placed(separating[0][1], separating[0][2], charts, 0)


def _certified(solution: Solution) -> Certificate:
    try:
        with limit(SECONDS["certify"]):
            return certify(solution.separation, solution.integral, solution.motion)
    except OutOfTime:
        what = "the certificate: stopped at its time limit"
    except Fault:
        raise
    except Exception as error:
        what = _broken("the certificate", error)
    return Certificate((_left_out(what),))


def _contained(integrand: Expr, variable: Symbol, domain: Domain) -> Antiderivative:
    """The quadrature, whose failure on one integrand is no reason to lose the others."""
    try:
        return quadrature(integrand, variable, domain)
    except OutOfTime:
        raise
    except Exception as error:
        reason = _broken("the quadrature", error)
        return Antiderivative(integrand, variable, (), "unevaluated", None, reason)


def _broken(what: str, error: Exception) -> str:
    """A fault of this program in one stage: what the others found is worth keeping."""
    return f"{what}: left out, {type(error).__name__} in this program ({error})"[:300]

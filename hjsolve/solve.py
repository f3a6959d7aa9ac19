"""The pipeline on one screen: it alone hands a record from one room to the next."""

from __future__ import annotations

from collections.abc import Callable
from functools import lru_cache

from hjsolve.algebra.budget import limit
from hjsolve.certification import certify
from hjsolve.errors import OutOfTime
from hjsolve.motion import set_in_motion
from hjsolve.quadrature import integrate as quadrature
from hjsolve.quadrature.complete import complete
from hjsolve.records import Certificate, Check, Hamiltonian, Separation, Solution, Truth
from hjsolve.separation import detect, separate

OnStage = Callable[[str, Solution | None], None]

SECONDS = {"separate": 20.0, "integrate": 20.0, "motion": 15.0, "certify": 20.0}
"""How long a stage may take before the ones after it go on without it."""


def solve(hamiltonian: Hamiltonian, on_stage: OnStage | None = None) -> Solution:
    """Everything this program can say about a problem.

    ``on_stage(name, found)`` is called when a stage begins, with what is known
    so far, so that it can be kept if the process is ended.  A stage that uses
    up its time is left out and the certificate says so.

    Raises:
        InputError: a coordinate turns out to have no momentum in H.
        Fault: a result was refuted by its own certificate.
    """
    tell = on_stage or (lambda _name, _found: None)
    integrate = lru_cache(maxsize=None)(quadrature)  # W, the relations and q(t) share integrals
    tell("separate", None)
    verdict = detect(hamiltonian)
    separation = Separation(hamiltonian, verdict)
    late: list[str] = []
    try:
        with limit(SECONDS["separate"]):
            separation = separate(hamiltonian, verdict)
    except OutOfTime:
        late.append("the separated equations")
    tell("integrate", Solution(separation))
    integral = None
    try:
        with limit(SECONDS["integrate"]):
            integral = complete(separation, integrate)
    except OutOfTime:
        late.append("the complete integral")
    tell("motion", Solution(separation, integral))
    motion = None
    if integral is not None:
        try:
            with limit(SECONDS["motion"]):
                motion = set_in_motion(separation, integral, integrate)
        except OutOfTime:
            late.append("the equations of motion")
    tell("certify", Solution(separation, integral, motion))
    unfinished = tuple(
        Check(f"{what}: stopped at the time limit of its stage", Truth.UNDECIDED, "none")
        for what in late
    )
    try:
        with limit(SECONDS["certify"]):
            certificate = certify(separation, integral, motion)
    except OutOfTime:
        certificate = Certificate(
            (Check("the certificate: stopped at its time limit", Truth.UNDECIDED, "none"),)
        )
    return Solution(separation, integral, motion, Certificate(certificate.checks + unfinished))

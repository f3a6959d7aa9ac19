"""Direct integration of Hamilton's equations, as an independent check on request.

SciPy is no dependency of this package; where it is not installed the check
says so.
"""

from __future__ import annotations

from dataclasses import replace
from importlib import import_module
from importlib.util import find_spec

import numpy as np
import sympy as sp
from numpy.typing import NDArray

from hjsolve.algebra.balls import precision
from hjsolve.motion.numbers.start import BITS, Setting
from hjsolve.motion.numbers.tape import Tape
from hjsolve.records import Check, Trajectory, Truth

Floats = NDArray[np.float64]

RELATIVE = 1e-12
EVALUATIONS = 2_000_000
AT_MOST = 200
"""Times compared."""

CLAIM = "the trajectory agrees with direct integration of Hamilton's equations"


class _TooLong(Exception):
    """The integration took more evaluations than it was given."""


def with_check(made: Trajectory, setting: Setting) -> Trajectory:
    """The trajectory with a comparison with SciPy's DOP853 at up to ``AT_MOST`` of its times."""
    return replace(made, checks=(*made.checks, _compare(made, setting)))


def _compare(made: Trajectory, setting: Setting) -> Check:
    method = f"SciPy DOP853, rtol {RELATIVE:g}"
    if find_spec("scipy") is None:
        return Check(CLAIM, Truth.UNDECIDED, "SciPy is not installed")
    # only here: where it is installed, loading it is slow and no other work needs it
    solve_ivp = import_module("scipy.integrate").solve_ivp
    h = setting.program.separation.hamiltonian
    symbols = [*h.coordinates, *h.momenta]
    right = [sp.diff(h.expression, p) for p in h.momenta]
    right += [-sp.diff(h.expression, q) for q in h.coordinates]
    with precision(BITS):
        fixed = Tape(right, [*symbols, h.time]).fix(setting.values)
    begin = float(setting.time)
    y0 = np.array([float(setting.start[s.name]) for s in symbols])
    calls = 0

    def field(t: float, y: Floats) -> Floats:
        nonlocal calls
        calls += 1
        if calls > EVALUATIONS:
            raise _TooLong
        return np.array([float(v) for v in fixed.floats(*(np.float64(x) for x in y), t)])

    order = np.argsort(made.times)
    picked = order[np.unique(np.linspace(0, len(order) - 1, AT_MOST).astype(int))]
    worst = 0.0
    known = {name: values for name, values in (*made.coordinates, *made.momenta)}
    table = np.array([known[s.name] for s in symbols])
    for side in (1, -1):
        mine = picked[(made.times[picked] - begin) * side > 0][::side]
        if not len(mine):
            continue
        ends = made.times[mine]
        try:
            with np.errstate(all="ignore"):
                done = solve_ivp(
                    field, (begin, ends[-1]), y0, "DOP853", ends, rtol=RELATIVE, atol=1e-13
                )
        except _TooLong:
            detail = f"{method}: stopped after {EVALUATIONS} evaluations"
            return Check(CLAIM, Truth.UNDECIDED, detail)
        if done.status != 0 or done.y.shape[1] != len(ends):
            return Check(CLAIM, Truth.UNDECIDED, f"{method}: {done.message}")
        size = 1 + np.abs(table[:, mine])
        worst = max(worst, float((np.abs(done.y - table[:, mine]) / size).max()))
    verdict = Truth.PROVED if worst < 1e-4 else Truth.REFUTED
    if verdict is Truth.PROVED:
        # agreement of two computations is evidence, no proof
        return Check(CLAIM, Truth.UNDECIDED, f"{method}: largest relative difference", worst)
    return Check(CLAIM, Truth.UNDECIDED, f"{method}: they differ; one of them is wrong", worst)

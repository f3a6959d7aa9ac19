"""Does a formula q(t; β) pass through given points for some choice of the constants β?"""

from __future__ import annotations

import itertools
import random
from collections.abc import Callable, Mapping, Sequence
from typing import Any

import flint
import mpmath
import sympy as sp

from hjsolve.records import Formula

CLOSE = mpmath.mpf(10) ** -20
STARTS = 40
NAMED = {
    "jacobi_sn": lambda u, m: mpmath.ellipfun("sn", u, m=m),
    "jacobi_cn": lambda u, m: mpmath.ellipfun("cn", u, m=m),
    "jacobi_dn": lambda u, m: mpmath.ellipfun("dn", u, m=m),
    "jacobi_am": lambda u, m: mpmath.atan2(
        mpmath.ellipfun("sn", u, m=m), mpmath.ellipfun("cn", u, m=m)
    ),
}


def as_number(value: Any) -> mpmath.mpf:
    """The real midpoint of an exact or ball value."""
    middle = flint.acb(value).real.mid()
    return mpmath.mpf(middle.str(60, radius=False))


def runs_through(
    formulas: Sequence[Formula],
    numbers: Mapping[str, mpmath.mpf],
    time: sp.Symbol,
    times: Sequence[mpmath.mpf],
    points: Sequence[Sequence[mpmath.mpf]],
) -> bool:
    """Whether one choice of β (and of branch signs) puts every point on the curve.

    β is found by Newton's method at the first time, from many starts, and may be complex:
    a formula continued out of its regime still solves the same equations.
    """
    expressions = [_settled(f, numbers) for f in formulas]
    free = set().union(*(e.free_symbols for e in expressions)) - {time}
    signs = sorted((s for s in free if s.name.startswith("sigma")), key=str)
    betas = sorted(free - set(signs), key=str)
    assert all(s.name.startswith("beta") for s in betas), betas
    assert len(betas) == len(expressions)
    rng = random.Random(4)
    for branch in itertools.product((1, -1), repeat=len(signs)):
        chosen = [e.subs(dict(zip(signs, branch, strict=True))) for e in expressions]
        call = sp.lambdify([time, *betas], chosen, modules=[NAMED, "mpmath"])
        for _ in range(STARTS):
            start = [mpmath.mpc(rng.uniform(-4, 4), rng.choice((0, 0, 1))) for _ in betas]
            if _passes(call, start, times, points):
                return True
    return False


def _passes(
    call: Callable[..., list[Any]],
    start: list[mpmath.mpc],
    times: Sequence[mpmath.mpf],
    points: Sequence[Sequence[mpmath.mpf]],
) -> bool:
    try:
        first = mpmath.matrix(points[0])
        betas = _newton(lambda b: mpmath.matrix(call(times[0], *b)) - first, start)
        return all(
            abs(a - b) < CLOSE
            for time, point in zip(times, points, strict=True)
            for a, b in zip(call(time, *betas), point, strict=True)
        )
    except (ValueError, ZeroDivisionError, OverflowError):
        return False


def _newton(
    miss: Callable[[list[mpmath.mpc]], mpmath.matrix], start: list[mpmath.mpc]
) -> list[mpmath.mpc]:
    """A zero of ``miss`` near ``start``; the derivatives are differences."""
    step = mpmath.mpf(10) ** -20
    betas = list(start)
    for _ in range(60):
        value = miss(betas)
        if mpmath.norm(value) < mpmath.mpf(10) ** -30:
            return betas
        jacobian = mpmath.matrix(len(betas), len(betas))
        for j in range(len(betas)):
            moved = [b + step * (i == j) for i, b in enumerate(betas)]
            jacobian[:, j] = (miss(moved) - value) / step
        change = mpmath.lu_solve(jacobian, value)
        betas = [b - change[i] for i, b in enumerate(betas)]
        if max(abs(b) for b in betas) > 1e3:
            break
    raise ValueError("no convergence")


def _settled(formula: Formula, numbers: Mapping[str, mpmath.mpf]) -> sp.Expr:
    """The expression with its own names and all known numbers put in."""
    known = {name: sp.Float(str(value), 45) for name, value in numbers.items()}
    expression = formula.expression
    for name in reversed(formula.where):
        if name.definition is not None:
            expression = expression.subs(name.symbol, name.definition)
    values = {s: known[s.name] for s in expression.free_symbols if s.name in known}
    expression = expression.subs(values)
    for name in formula.where:
        if name.root_of is not None:
            put = {s: known[s.name] for s in name.root_of.free_symbols if s.name in known}
            roots = sp.Poly(name.root_of.subs(put), name.unknown).nroots(n=40, maxsteps=200)
            real = sorted(r for r in roots if abs(sp.im(r)) < 1e-25)
            expression = expression.subs(name.symbol, real[(name.index or 1) - 1])
    return expression

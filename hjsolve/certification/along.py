"""Do functions of time vanish along a motion?"""

from __future__ import annotations

from collections.abc import Collection, Mapping, Sequence

import sympy as sp
from sympy import Expr, Symbol
from sympy.core.relational import Relational

from hjsolve.algebra.functions import jacobi_am, jacobi_dn
from hjsolve.algebra.identity import Finding, refute, vanish
from hjsolve.algebra.named import Names
from hjsolve.algebra.sampling import Range
from hjsolve.records import Truth

TRIES = 60


def vanish_along(
    residues: Sequence[Expr],
    ranges: Mapping[Symbol, Range],
    functions: Collection[str],
    conditions: Sequence[Relational],
    names: Names | None,
) -> list[Finding]:
    """A finding for each residue, in the regime of ``conditions``.

    √(1 − m sin² am(u, m)) is dn(u, m) for m < 1; where it is written so for the
    proof, balls have to meet the regime and see the residue vanish as it stands.
    """
    positive = [c.rhs for c in conditions if c != sp.false and c.lhs == 0]
    findings = []
    for residue in residues:
        short = residue.replace(_is_delta, _as_delta)
        if short != residue:
            seen = refute(residue, ranges, functions, TRIES, conditions, names=names)
            if seen.truth is Truth.REFUTED or seen.bound is None:
                findings.append(seen)
                continue
        findings += vanish([short], ranges, functions, TRIES, conditions, positive, names)
    return findings


def _is_delta(e: Expr) -> bool:
    """Whether e is an odd power of √(1 − m sin² am(u, m))."""
    if not (isinstance(e, sp.Pow) and e.exp.is_Rational and e.exp.q == 2):
        return False
    found = e.base.atoms(jacobi_am)
    if len(found) != 1:
        return False
    (am,) = found
    return bool(sp.expand(e.base - 1 + am.args[1] * sp.sin(am) ** 2) == 0)


def _as_delta(e: Expr) -> Expr:
    (am,) = e.base.atoms(jacobi_am)
    return jacobi_dn(*am.args) ** (2 * e.exp)

"""Canonical or not: the Poisson brackets of the new variables, exactly.

A map with time in it is canonical when its brackets are at every fixed time;
the function K − H that it then needs exists (the form dp∧dq − dP∧dQ − dt∧(…)
is closed in extended phase space), and is checked where it is found.
"""

from __future__ import annotations

from collections.abc import Collection, Mapping, Sequence
from dataclasses import dataclass
from itertools import combinations

import sympy as sp
from sympy import Expr, Rational, Symbol

from hjsolve.algebra.identity import Finding, vanish
from hjsolve.algebra.sampling import Range
from hjsolve.records import Check, Frame, Truth, WrongBracket
from hjsolve.transformation.tidy import derivative, length, tidied


@dataclass(frozen=True, slots=True)
class Brackets:
    """The verdict on a map, with the constant factor or the bracket that is wrong."""

    canonical: Truth
    multiplier: Expr | None
    obstruction: WrongBracket | None
    checks: tuple[Check, ...]


def bracket(f: Expr, g: Expr, frame: Frame) -> Expr:
    """Σ ∂f/∂q ∂g/∂p − ∂f/∂p ∂g/∂q."""
    return sp.Add(
        *(
            derivative(f, q) * derivative(g, p) - derivative(f, p) * derivative(g, q)
            for q, p in zip(frame.coordinates, frame.momenta, strict=True)
        )
    )


def test_brackets(
    image: Mapping[Symbol, Expr],
    here: Frame,
    there: Frame,
    time: Symbol,
    ranges: Mapping[Symbol, Range],
    functions: Collection[str],
) -> Brackets:
    """The brackets over the variables ``here`` of the variables ``there``, given by ``image``."""
    pairs = _pairs(there)
    values = {pair: bracket(image[pair[0]], image[pair[1]], here) for pair in pairs}
    wanted = {pair: sp.Integer(pairs[pair]) for pair in pairs}
    findings = vanish([values[p] - wanted[p] for p in pairs], ranges, functions)
    truth, bound, method = _together(findings)
    claim = f"the Poisson brackets of {', '.join(s.name for s in there.variables)} are canonical"
    check = Check(claim, truth, method, bound)
    if truth is not Truth.REFUTED:
        return Brackets(truth, sp.S.One if truth is Truth.PROVED else None, None, (check,))
    wrong = next((p, f) for p, f in zip(pairs, findings, strict=True) if f.truth is Truth.REFUTED)
    obstruction = _obstruction(wrong[0], wanted[wrong[0]], values[wrong[0]], wrong[1])
    multiplier, proof = _multiplier(values, pairs, (*here.variables, time), ranges, functions)
    return Brackets(Truth.REFUTED, multiplier, obstruction, (check, *proof))


def _pairs(frame: Frame) -> dict[tuple[Symbol, Symbol], int]:
    """Every bracket to be looked at, and what it is to be."""
    found: dict[tuple[Symbol, Symbol], int] = {}
    for i, Q in enumerate(frame.coordinates):
        for j, P in enumerate(frame.momenta):
            found[Q, P] = int(i == j)
    for side in (frame.coordinates, frame.momenta):
        found.update({pair: 0 for pair in combinations(side, 2)})
    return found


def _together(findings: Sequence[Finding]) -> tuple[Truth, float | None, str]:
    truths = {f.truth for f in findings}
    for truth in (Truth.REFUTED, Truth.UNDECIDED):
        if truth in truths:
            chosen = [f for f in findings if f.truth is truth]
            bounds = [f.bound for f in chosen if f.bound is not None]
            return truth, max(bounds, default=None), chosen[0].method
    return Truth.PROVED, max((f.bound or 0.0 for f in findings), default=0.0), findings[0].method


def _obstruction(
    pair: tuple[Symbol, Symbol], wanted: Expr, value: Expr, finding: Finding
) -> WrongBracket:
    middle, radius = finding.enclosure or (0.0, 0.0)
    point = tuple((s.name, Rational(v.numerator, v.denominator)) for s, v in finding.point)
    names = (pair[0].name, pair[1].name)
    return WrongBracket(names, wanted, tidied(value), point, middle, radius)


def _multiplier(
    values: Mapping[tuple[Symbol, Symbol], Expr],
    pairs: Mapping[tuple[Symbol, Symbol], int],
    moving: Sequence[Symbol],
    ranges: Mapping[Symbol, Range],
    functions: Collection[str],
) -> tuple[Expr | None, tuple[Check, ...]]:
    """The constant c with every bracket c times what it has to be, and the proof."""
    first = next(p for p in pairs if pairs[p] == 1)
    constant = _constant(values[first], moving)
    if constant is None:
        return None, ()
    findings = vanish([values[p] - pairs[p] * constant for p in pairs], ranges, functions)
    truth, bound, method = _together(findings)
    if truth is not Truth.PROVED or constant == 0:
        return None, ()
    claim = "every bracket is the constant multiplier times its canonical value"
    return constant, (Check(claim, truth, method, bound),)


def _constant(value: Expr, moving: Sequence[Symbol]) -> Expr | None:
    """What the value would be if it were constant: its short form, or its value at a point."""
    short = tidied(value)
    if not short.free_symbols & set(moving):
        return short
    for n in range(1, 6):
        point = {s: Rational(2 * k + n + 1, 7 + n) for k, s in enumerate(moving)}
        at = tidied(value.xreplace(point))
        if at.is_finite is not False and not at.has(sp.nan, sp.zoo) and length(at) < 60:
            if any(derivative(at, s) != 0 for s in moving):
                continue
            return at
    return None

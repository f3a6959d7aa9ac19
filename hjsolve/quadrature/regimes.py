"""From the formula of each piece to one formula a regime.

The formulas ask for signs as they go.  A sign nobody knows opens two regimes;
no table of cases is kept, and no piecewise expression is ever built.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field, replace
from fractions import Fraction

from sympy import Add, Expr, Mul, Symbol, false, true
from sympy.core.relational import Relational

from hjsolve.quadrature.dress import Dress
from hjsolve.quadrature.problem import Piece, Problem, Reading
from hjsolve.quadrature.ratios import GivenUp, degree, factors
from hjsolve.quadrature.reduction import Reduction
from hjsolve.quadrature.signs import Assumption, Signs, Undetermined
from hjsolve.records import Definition, Formula

REGIME_LIMIT = 16
"""More regimes than this are not worth having; the integral is left as it stands."""


@dataclass(frozen=True)
class Context:
    """What a formula may ask: signs, the writer, and whether its term is the only one.

    A formula may put names it introduces into ``names``; they begin with ``stem``.
    """

    signs: Signs
    dress: Dress
    only: bool
    names: list[Definition] = field(default_factory=list)
    stem: str = "e"


_HALF = Fraction(1, 2)

PieceFormula = Callable[[Piece, Context], Expr]


def regimes(
    reading: Reading, formula: PieceFormula, terms: Callable[[Reduction], int]
) -> list[tuple[Formula, tuple[Assumption, ...]]]:
    """One Formula a regime with the assumptions it rests on.

    ``terms`` counts the terms of a piece: a formula that consists of one term
    is written so that the variable occurs once.  Raises GivenUp.
    """
    leaves: list[tuple[Formula, tuple[Assumption, ...]]] = []
    stack: list[tuple[Assumption, ...]] = [()]
    tried = 0
    stem = stem_of(reading.problem)
    while stack:
        assumed = stack.pop()
        tried += 1
        reading.problem.left()
        if tried > 4 * REGIME_LIMIT or len(leaves) > REGIME_LIMIT:
            raise GivenUp("too many regimes")
        kernel = reading.kernel
        try:
            pieces = reading.under(assumed)
            only = sum(terms(piece.reduction) for piece in pieces) == 1
            total: list[Expr] = []
            names: list[Definition] = []
            for piece in pieces:
                kernel = piece.kernel
                signs = reading.signs(assumed, kernel)
                writer = Dress(signs, kernel)
                scale = writer.product((piece.scale, _HALF))
                e = formula(piece, Context(signs, writer, only, names, stem))
                total.extend(Mul(scale, term) for term in Add.make_args(e))
        except Undetermined as question:
            where = kernel.expression if degree(question.poly) > 0 else None
            for sign in (-question.first, question.first):
                stack.append((*assumed, Assumption(question.poly, sign, where)))
            continue
        valid = conditions(reading, assumed)
        if valid is not None:
            leaves.append((Formula(Add(*total), tuple(dict.fromkeys(names)), valid), assumed))
    return leaves


def stem_of(problem: Problem) -> str:
    """How the names of roots begin: e_ and the variable, none of the problem's names."""
    stem = f"e_{problem.variable.name}"
    while any(s.name.startswith(stem) for s in problem.integrand.free_symbols):
        stem = "e_" + stem
    return stem


def conditions(reading: Reading, assumed: tuple[Assumption, ...]) -> tuple[Relational, ...] | None:
    """The inequalities of a regime, None when they contradict the symbols' assumptions."""
    valid: list[Relational] = list(reading.kernel.restriction)
    for a in _needed(reading, assumed):
        kernel = reading.kernel
        if a.kernel is not None and a.kernel != kernel.expression:
            kernel = replace(kernel, expression=a.kernel, partner=None, shifts=())
        writer = Dress(reading.signs(), kernel)
        valid.append(writer.inequality(a.poly, a.sign))
    kept: list[Relational] = []
    for relation in valid:
        if relation == false:
            return None
        if relation != true and relation not in kept:
            kept.append(relation)
    return tuple(kept)


def _needed(reading: Reading, assumed: tuple[Assumption, ...]) -> list[Assumption]:
    """The assumptions that do not follow from the others."""
    kept = list(assumed)
    for a in assumed:
        others = tuple(o for o in kept if o is not a)
        if a.kernel is None and reading.signs(others).maybe(a.poly) == a.sign:
            kept = list(others)
    return kept


def boundary(reading: Reading, assumed: Assumption) -> tuple[Symbol, Expr] | None:
    """(symbol, value) that solves poly = 0, when it is linear in a constant of either sign."""
    if assumed.kernel is not None:
        return None
    writer = Dress(reading.signs(), reading.kernel)
    for factor, _ in factors(assumed.poly)[1]:
        for i, constant in enumerate(reading.ring.constants, start=1):
            if not isinstance(constant, Symbol) or constant.is_positive or constant.is_negative:
                continue
            slope = factor.derivative(i)
            if slope.is_zero() or slope.degrees()[i] > 0:
                continue
            if reading.signs().maybe(slope) is None:
                continue
            rest = factor - slope * reading.ring.context.gen(i)
            value = reading.ring.polynomial(-rest) / reading.ring.polynomial(slope)
            return constant, writer.ratio(value)
    return None

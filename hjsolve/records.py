"""Every value that passes between the rooms, in the order of flow.

All are frozen and hashable; formulas are SymPy expressions, sequences are
tuples.  A symbol is made once, by ``reading`` (coordinates, momenta,
parameters, time) or by the room that introduces it (constants, branch signs),
and carries its assumptions from then on.
"""

from __future__ import annotations

from dataclasses import dataclass
from enum import StrEnum
from typing import Literal

from sympy import Expr, Rational, Symbol, oo
from sympy.core.relational import Relational


class Truth(StrEnum):
    """What is known of a claim; never a bare boolean."""

    PROVED = "proved"
    REFUTED = "refuted"
    UNDECIDED = "undecided"


# ------------------------------------------------------------------ reading


@dataclass(frozen=True, slots=True)
class Domain:
    """Where a coordinate lives: the open interval (lower, upper).

    ``angle`` is 2π periodic (lower 0, upper 2π), ``polar-angle`` is (0, π).
    """

    kind: Literal["line", "half-line", "angle", "polar-angle", "interval"] = "line"
    lower: Expr = -oo
    upper: Expr = oo


@dataclass(frozen=True, slots=True)
class Parameter:
    """A parameter left as a letter, with the sign it was declared with."""

    symbol: Symbol
    sign: Literal["positive", "negative", "nonzero", "real"]


@dataclass(frozen=True, slots=True)
class Hamiltonian:
    """H(q, p, t) as read.

    ``expression`` has the numeric parameters already put in, exactly;
    ``numbers`` keeps them by name.  ``functions`` are the names of arbitrary
    functions of the problem.
    """

    expression: Expr
    coordinates: tuple[Symbol, ...]
    momenta: tuple[Symbol, ...]
    domains: tuple[Domain, ...]
    parameters: tuple[Parameter, ...]
    numbers: tuple[tuple[str, Rational], ...]
    functions: tuple[str, ...]
    time: Symbol

    @property
    def explicit_time(self) -> bool:
        """Whether H depends on time explicitly."""
        return self.time in self.expression.free_symbols


# --------------------------------------------------------------- separation


@dataclass(frozen=True, slots=True)
class Definition:
    """A name that an answer introduces.

    Either ``definition`` is its value, or it is the ``index``-th (from 1) real
    root in ascending order of the polynomial ``root_of`` in ``unknown``, or
    ``free`` says in words what it may be.
    """

    symbol: Symbol
    definition: Expr | None = None
    root_of: Expr | None = None
    unknown: Symbol | None = None
    index: int | None = None
    free: str | None = None


@dataclass(frozen=True, slots=True)
class Formula:
    """An expression (or equation), the names it introduces, and where it holds."""

    expression: Expr
    where: tuple[Definition, ...] = ()
    valid: tuple[Relational, ...] = ()


@dataclass(frozen=True, slots=True)
class Obstruction:
    """A point at which Levi-Civita's expression of a pair is proved nonzero.

    ``functions`` gives the functions that stood in for the arbitrary ones.
    """

    pair: tuple[str, str]
    point: tuple[tuple[str, Rational], ...]
    midpoint: float
    radius: float
    functions: tuple[tuple[str, Expr], ...] = ()


@dataclass(frozen=True, slots=True)
class Verdict:
    """Does H separate in its coordinates, and how far?

    ``blocks`` is the finest partition of the coordinates (time included when H
    depends on it).  ``bound`` is the probability that a zero it rests on is
    not one (proof symbolic), or the size below which the numbers vanish
    (proof numeric).  ``limit`` says which limit was hit when undecided.
    """

    separability: Literal["complete", "partial", "none", "undecided"]
    blocks: tuple[tuple[Symbol, ...], ...]
    ignorable: tuple[Symbol, ...]
    direct_sum: tuple[tuple[Symbol, ...], ...]
    proof: Literal["symbolic", "numeric"]
    bound: float
    obstruction: Obstruction | None = None
    limit: str | None = None


@dataclass(frozen=True, slots=True)
class Constant:
    """A constant of the motion: its letter, what it is, and its first integral.

    ``first_integral`` is a function on phase space (and time), None where it
    has no closed form.
    """

    symbol: Symbol
    meaning: str
    first_integral: Expr | None


@dataclass(frozen=True, slots=True)
class SeparatedEquation:
    """p = drift + sign·root, as a function of its own coordinate and the constants.

    ``root`` is not negative where the motion takes place, 0 when the momentum
    has one branch.  ``squared`` is p² when drift is 0, else None.  ``valid``
    holds what was lost when a root in H was squared away.
    """

    coordinate: Symbol
    momentum: Symbol
    sign: Symbol
    drift: Expr
    root: Expr
    squared: Expr | None
    where: tuple[Definition, ...] = ()
    valid: tuple[Relational, ...] = ()

    @property
    def solution(self) -> Expr:
        """The momentum on the branch named by ``sign``."""
        return self.drift + self.sign * self.root


@dataclass(frozen=True, slots=True)
class ReducedEquation:
    """What is left of the Hamilton–Jacobi equation on a block larger than one."""

    block: tuple[Symbol, ...]
    equation: Relational


@dataclass(frozen=True, slots=True)
class Separation:
    """A verdict with what follows from it.

    ``time_momentum`` is ∂S/∂t as a function of time and the constants (−E for
    an autonomous system), None when time does not separate.  ``canonical`` is
    false when the constants are values at a base point rather than in the form
    of the literature.
    """

    hamiltonian: Hamiltonian
    verdict: Verdict
    constants: tuple[Constant, ...] = ()
    equations: tuple[SeparatedEquation, ...] = ()
    reduced: tuple[ReducedEquation, ...] = ()
    time_momentum: Expr | None = None
    canonical: bool = True


# --------------------------------------------------------------- quadrature


@dataclass(frozen=True, slots=True)
class Antiderivative:
    """The outcome of one quadrature.

    ``closed_forms`` holds one form a regime; empty when ``family`` is
    unevaluated, and then ``reason`` says why.  ``substitution`` is u(q).
    """

    integrand: Expr
    variable: Symbol
    closed_forms: tuple[Formula, ...]
    family: Literal["elementary", "elliptic", "unevaluated"]
    substitution: Expr | None = None
    reason: str = ""


@dataclass(frozen=True, slots=True)
class Term:
    """W_i(q_i): the momentum on its positive branch, and its antiderivative.

    ``drift`` and ``root`` are the antiderivatives of the two parts of the
    momentum, so that W_i on either branch is drift + sign·root.
    """

    equation: SeparatedEquation
    drift: Antiderivative
    root: Antiderivative


@dataclass(frozen=True, slots=True)
class CompleteIntegral:
    """The Hamilton–Jacobi equation and its complete integral S = W + T(t)."""

    equation: Relational
    terms: tuple[Term, ...]
    time_term: Expr | None
    characteristic: Formula | None
    principal: Formula | None


# ------------------------------------------------------------------- motion


@dataclass(frozen=True, slots=True)
class Relation:
    """∂S/∂α_k = β_k, and in words what it tells."""

    constant: Symbol
    equation: Formula
    says: str


@dataclass(frozen=True, slots=True)
class Motion:
    """The Jacobi relations, and q(t), p(t) where they invert.

    ``coordinates`` and ``momenta`` have one entry a coordinate; None where
    only the implicit relations exist.
    """

    relations: tuple[Relation, ...]
    coordinates: tuple[tuple[Symbol, Formula | None], ...]
    momenta: tuple[tuple[Symbol, Formula | None], ...]


# ------------------------------------------------------------ certification


@dataclass(frozen=True, slots=True)
class Check:
    """One claim, what is known of it, by which method, to which bound."""

    claim: str
    verdict: Truth
    method: str
    bound: float | None = None


@dataclass(frozen=True, slots=True)
class Certificate:
    """All that was checked of an answer."""

    checks: tuple[Check, ...] = ()


@dataclass(frozen=True, slots=True)
class Solution:
    """Everything that is known of a problem; later rooms may be missing.

    A solve that ran out of time keeps what its earlier stages found.
    """

    separation: Separation
    integral: CompleteIntegral | None = None
    motion: Motion | None = None
    certificate: Certificate = Certificate()

    @property
    def hamiltonian(self) -> Hamiltonian:
        """The problem as read."""
        return self.separation.hamiltonian

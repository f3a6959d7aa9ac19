"""Every value that passes between the rooms, in the order of flow.

All are frozen and hashable; formulas are SymPy expressions, sequences are
tuples.  A symbol is made once, by ``reading`` (coordinates, momenta,
parameters, time) or by the room that introduces it (constants, branch signs),
and carries its assumptions from then on.
"""

from __future__ import annotations

from collections.abc import Collection
from dataclasses import dataclass, replace
from enum import StrEnum
from typing import TYPE_CHECKING, Literal, TypeAlias

from sympy import Expr, Integral, Pow, Rational, S, Symbol, oo
from sympy.core.relational import Relational

if TYPE_CHECKING:
    import numpy as np
    from numpy.typing import NDArray


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
    ``charts`` is empty for the coordinates as given, ("search",), or names.
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
    charts: tuple[str, ...] = ()

    @property
    def names(self) -> frozenset[str]:
        """All names of the problem; an answer's own names keep clear of them."""
        symbols = {
            *self.expression.free_symbols,
            *self.coordinates,
            *self.momenta,
            self.time,
            *(p.symbol for p in self.parameters),
        }
        numbers = {name for name, _ in self.numbers}
        return frozenset({s.name for s in symbols} | numbers | set(self.functions))

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
    ``free`` says in words what it may be, for a turning point beside ``zero_of``,
    the expression in it that vanishes.
    """

    symbol: Symbol
    definition: Expr | None = None
    root_of: Expr | None = None
    unknown: Symbol | None = None
    index: int | None = None
    free: str | None = None
    zero_of: Expr | None = None


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
    an autonomous system), None when time does not separate; ``extended`` is the
    letter for the momentum of time where a first integral holds it.  ``canonical`` is
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
    extended: Symbol | None = None


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

    def formula(self, taken: Collection[str]) -> Formula:
        """The first closed form, or the integral left as it stands, from a turning point on.

        The turning point is a zero of the radicand; an integrand without one
        has any reference point.  Its name keeps clear of the names ``taken``.
        """
        if self.closed_forms:
            return self.closed_forms[0]
        q = self.variable
        name = f"{q.name}_0"
        while name in taken:
            name += "_"
        start = Symbol(name, real=True)
        words = f"reference point: any fixed value of {q.name} in the interval of motion"
        half = (p for p in self.integrand.atoms(Pow) if p.exp.is_Rational and p.exp.q == 2)
        radicands = {p.base for p in half if p.base.has(q)}
        zero = None
        if len(radicands) == 1:
            words = f"lower turning point of {q.name}; {words} will do"
            (zero,) = (r.xreplace({q: start}) for r in radicands)
        below = Definition(start, free=words, zero_of=zero)
        return Formula(Integral(self.integrand, (q, start, q)), (below,))

    def everywhere(self, taken: Collection[str]) -> Formula:
        """As ``formula``, from the closed forms that hold without a condition."""
        free = tuple(f for f in self.closed_forms if not f.valid)
        return replace(self, closed_forms=free).formula(taken)


@dataclass(frozen=True, slots=True)
class Cycle:
    """The integrals over one cycle of a coordinate, in one regime of the constants.

    ``action`` is (1/2π)∮p dq of a libration, not negative, or (1/2π)∫p dq over a
    turn with q increasing of a rotation, with the branch sign of the momentum in
    it.  ``derivatives`` has ∂action/∂α_k by constant.  None where no closed form
    was found or where it failed its check.
    """

    kind: Literal["libration", "rotation"]
    action: Formula | None
    derivatives: tuple[tuple[Symbol, Formula | None], ...]


@dataclass(frozen=True, slots=True)
class Term:
    """W_i(q_i): the momentum on its positive branch, and its antiderivative.

    ``drift`` and ``root`` are the antiderivatives of the two parts of the
    momentum, so that W_i on either branch is drift + sign·root.  ``cycles`` are
    the integrals over a whole cycle, one entry a regime in which there is one.
    """

    equation: SeparatedEquation
    drift: Antiderivative
    root: Antiderivative
    cycles: tuple[Cycle, ...] = ()


@dataclass(frozen=True, slots=True)
class CompleteIntegral:
    """The Hamilton–Jacobi equation and its complete integral S = W + T(t)."""

    equation: Relational
    terms: tuple[Term, ...]
    time_term: Expr | None
    characteristic: Formula | None
    principal: Formula | None

    def without(self, parts: Collection[Part]) -> CompleteIntegral:
        """The same with no cycles in the terms that are among ``parts``."""
        terms = (replace(t, cycles=()) if t in parts else t for t in self.terms)
        return replace(self, terms=tuple(terms))


# ------------------------------------------------------------------- motion


@dataclass(frozen=True, slots=True)
class Relation:
    """∂S/∂α_k = β_k, and in words what it tells; why an integral in it is left, if one is."""

    constant: Symbol
    equation: Formula
    says: str
    reason: str = ""


@dataclass(frozen=True, slots=True)
class OtherRegime:
    """q(t) and p(t) of one coordinate in another regime of the constants."""

    coordinate: Symbol
    motion: Formula
    momentum: Formula


@dataclass(frozen=True, slots=True)
class Parametrisation:
    """The motion by a parameter of its own, for coordinates whose q(t) stays implicit.

    ``coordinates`` and ``momenta`` are functions of ``parameter``.  ``rates`` are
    the derivatives by it of time and the ignorable coordinates, as functions of
    the coordinates; ``laws`` their integrals, up to the constants that they name.
    """

    parameter: Symbol
    coordinates: tuple[tuple[Symbol, Formula], ...]
    momenta: tuple[tuple[Symbol, Formula], ...]
    rates: tuple[tuple[Symbol, Formula], ...]
    laws: tuple[tuple[Symbol, Formula], ...]
    says: str


@dataclass(frozen=True, slots=True)
class Motion:
    """The Jacobi relations, and q(t), p(t) where they invert.

    ``coordinates`` and ``momenta`` have one entry a coordinate; None where
    only the implicit relations exist for general constants.  ``others`` are
    further regimes: other energies, boundaries between regimes.
    ``parametrisations`` give the coordinates that stay implicit in time by a
    common parameter, one a regime.
    """

    relations: tuple[Relation, ...]
    coordinates: tuple[tuple[Symbol, Formula | None], ...]
    momenta: tuple[tuple[Symbol, Formula | None], ...]
    others: tuple[OtherRegime, ...] = ()
    parametrisations: tuple[Parametrisation, ...] = ()

    def without(self, parts: Collection[Part]) -> Motion:
        """The motion less some of its further regimes and parametrisations."""
        return replace(
            self,
            others=tuple(o for o in self.others if o not in parts),
            parametrisations=tuple(p for p in self.parametrisations if p not in parts),
        )


# ------------------------------------------------------------ certification

Part: TypeAlias = OtherRegime | Parametrisation | Term
"""What an answer can do without when it is refuted; of a term, its cycles."""


@dataclass(frozen=True, slots=True)
class Check:
    """One claim, what is known of it, by which method, to which bound."""

    claim: str
    verdict: Truth
    method: str
    bound: float | None = None


@dataclass(frozen=True, slots=True)
class Certificate:
    """All that was checked of an answer.

    ``left_out`` are the parts that were refuted.
    """

    checks: tuple[Check, ...] = ()
    left_out: tuple[Part, ...] = ()


@dataclass(frozen=True, slots=True)
class Solution:
    """Everything that is known of a problem; later rooms may be missing.

    A solve that ran out of time keeps what its earlier stages found.
    """

    separation: Separation
    integral: CompleteIntegral | None = None
    motion: Motion | None = None
    certificate: Certificate = Certificate()
    charts: Charts | None = None
    chart_used: int | None = None
    posed: Hamiltonian | None = None

    @property
    def hamiltonian(self) -> Hamiltonian:
        """The Hamiltonian that was worked on: as read, or carried into the chart used."""
        return self.separation.hamiltonian

    @property
    def problem(self) -> Hamiltonian:
        """The problem as read."""
        return self.posed or self.separation.hamiltonian


# ------------------------------------------------------------------- charts

Geometry: TypeAlias = Expr | tuple[Expr, ...] | tuple[tuple[Expr, ...], ...]
"""A number, a vector, or a list of vectors (rows)."""


@dataclass(frozen=True, slots=True)
class Chart:
    """A coordinate system placed in the space of a Cartesian Hamiltonian.

    ``geometry`` holds its named exact data, in y = ``mass_map`` · x where that is
    given, else in x.  ``free`` are the letters in it that may take any value.
    ``transformation`` gives each coordinate of the request in the chart's own,
    ``squares`` the squared scale factors of the kinetic energy ½ Σ weight·p_i²/h_i².
    ``positive`` are expressions that are positive all over the chart's domain.
    The transformation in two steps: ``frame`` gives the request's coordinates
    linearly in Cartesian ones of the chart's own, ``place`` those in the chart's.
    ``blocks`` are the charts of the subspaces when the family is ``separable``;
    one of a single coordinate has ``forms``, that coordinate in the request's own.
    """

    family: str
    geometry: tuple[tuple[str, Geometry], ...]
    free: tuple[Symbol, ...]
    coordinates: tuple[Symbol, ...]
    transformation: tuple[tuple[Symbol, Expr], ...]
    momenta: tuple[Symbol, ...] = ()
    domains: tuple[Domain, ...] = ()
    squares: tuple[Expr, ...] = ()
    weight: Expr = S.One
    positive: tuple[Expr, ...] = ()
    mass_map: tuple[tuple[Expr, ...], ...] | None = None
    frame: tuple[tuple[Symbol, Expr], ...] = ()
    place: tuple[tuple[Symbol, Expr], ...] = ()
    blocks: tuple[Chart, ...] = ()


@dataclass(frozen=True, slots=True)
class Charts:
    """The coordinate systems in which a Hamiltonian separates, preferred first.

    ``complete``: the list is proved exhaustive for generic values of the
    parameters; an empty complete list means that no orthogonal separable
    coordinates exist on that space, which does not say "not integrable".
    ``dimension`` is that of the space of tensors the list was read from,
    ``unknowns`` how many there were, ``rank`` the rank of the linear conditions
    that balls proved at the real points ``witness`` (unknowns − rank is an upper
    bound on the dimension, the tensors found are a lower one).  ``reason`` says
    why the list is not proved complete.
    """

    found: tuple[Chart, ...]
    complete: bool
    unknowns: int = 0
    dimension: int = 0
    rank: int = 0
    witness: tuple[tuple[tuple[str, Rational], ...], ...] = ()
    reason: str = ""
    conditions: tuple[Expr, ...] = ()
    checks: tuple[Check, ...] = ()


# ----------------------------------------------------------- transformation


@dataclass(frozen=True, slots=True)
class Frame:
    """The canonical variables of one side, pair by pair."""

    coordinates: tuple[Symbol, ...]
    momenta: tuple[Symbol, ...]

    @property
    def variables(self) -> tuple[Symbol, ...]:
        """The coordinates, then the momenta."""
        return self.coordinates + self.momenta


@dataclass(frozen=True, slots=True)
class TransformationProblem:
    """A transformation as read: its generating function, or the new variables.

    ``kinds`` has the kind (1 to 4) of each pair when ``function`` is given.
    ``given`` has the new variables as functions of the old ones (and time), or
    the old ones in the new ones when ``backward``; coordinates alone are to be
    completed with their momenta.  ``generator`` is the G whose flow by
    ``parameter`` makes the new variables.
    """

    old: Frame
    new: Frame
    domains: tuple[tuple[Symbol, Domain], ...]
    parameters: tuple[Parameter, ...]
    functions: tuple[str, ...]
    time: Symbol
    hamiltonian: Expr | None = None
    kinds: tuple[int, ...] = ()
    function: Expr | None = None
    given: tuple[tuple[Symbol, Expr], ...] = ()
    backward: bool = False
    generator: Expr | None = None
    parameter: Symbol | None = None


Map = tuple[tuple[Symbol, Formula], ...]
"""Variables of one side as functions of the other side's."""


@dataclass(frozen=True, slots=True)
class Branch:
    """One branch: both maps and the new Hamiltonian, None where no closed form was found.

    ``positive`` tells whether points with all new variables positive lie in it;
    ``added`` is K − H (K − cH with a multiplier c).
    """

    old_in_new: Map | None
    new_in_old: Map | None
    new_hamiltonian: Formula | None
    positive: bool = False
    added: Formula | None = None


@dataclass(frozen=True, slots=True)
class GeneratingFunction:
    """The function of one combination of kinds; None with the reason where there is none.

    ``exists`` is REFUTED when the generating variables are proved dependent.
    """

    kinds: tuple[int, ...]
    exists: Truth
    function: Formula | None
    reason: str = ""


@dataclass(frozen=True, slots=True)
class WrongBracket:
    """A Poisson bracket that is not what it has to be, and its value at a point."""

    pair: tuple[str, str]
    expected: Expr
    value: Expr
    point: tuple[tuple[str, Rational], ...]
    midpoint: float
    radius: float


@dataclass(frozen=True, slots=True)
class Transformation:
    """Everything that is known of a transformation.

    ``canonical`` is UNDECIDED when neither proved nor refuted; ``multiplier``
    is the constant that all brackets have when it is not 1.  ``branches`` has
    the one of the top level first.  ``relations`` are the implicit relations
    of the generating function that was given; ``first_order`` are the new
    variables up to the second power of a flow's parameter.
    """

    problem: TransformationProblem
    canonical: Truth
    multiplier: Expr | None
    branches: tuple[Branch, ...]
    relations: tuple[Relational, ...]
    generating_function: GeneratingFunction | None
    generating_functions: tuple[GeneratingFunction, ...]
    obstruction: WrongBracket | None
    certificate: Certificate
    first_order: Map = ()


# ------------------------------------------------------- motion in numbers


@dataclass(frozen=True, slots=True)
class Estimate:
    """A number with the bound of its error: proved where ``guaranteed``, else estimated."""

    value: float
    error: float
    guaranteed: bool = False


@dataclass(frozen=True, slots=True)
class Actions:
    """What a start state does in each coordinate, in numbers.

    Pairs (name, what); None where there is no such number.  ``kinds`` is
    libration, rotation, unbounded, fixed or separatrix.  ``frequencies`` are
    ∂H/∂J in radians per unit time, signed; ``mean_rates`` the mean velocities
    of ignorable coordinates on a line; ``angles`` the angle variables of the
    start, in [0, 2π).  ``resonances`` are small integer vectors k with
    k·ω = 0 to the errors.  ``notes`` say in words what is missing and why.
    """

    constants: tuple[tuple[str, Estimate], ...]
    turning_points: tuple[tuple[str, tuple[Estimate | None, Estimate | None]], ...]
    kinds: tuple[tuple[str, str], ...]
    actions: tuple[tuple[str, Estimate | None], ...]
    frequencies: tuple[tuple[str, Estimate | None], ...]
    mean_rates: tuple[tuple[str, Estimate | None], ...]
    periods: tuple[tuple[str, Estimate | None], ...] = ()
    angles: tuple[tuple[str, float | None], ...] = ()
    resonances: tuple[tuple[int, ...], ...] = ()
    notes: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True, eq=False)
class Trajectory:
    """States at times: pairs (name, array of the length of ``times``).

    ``error`` bounds the error of every number, absolute (an estimate);
    ``errors`` the same for each name.  ``checked`` is the largest difference
    from direct integration of Hamilton's equations, where that was asked for.
    """

    times: NDArray[np.float64]
    coordinates: tuple[tuple[str, NDArray[np.float64]], ...]
    momenta: tuple[tuple[str, NDArray[np.float64]], ...]
    error: float
    errors: tuple[tuple[str, float], ...]
    method: str
    checks: tuple[Check, ...] = ()

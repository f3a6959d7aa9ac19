"""The integrals over a cycle, against sums over cycles at random constants."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass
from functools import partial

from flint import arb
from sympy import Expr, Lt, Tuple

from hjsolve.algebra.balls import BallWalk, Imprecise, NotSupported, OutsideDomain, precision
from hjsolve.algebra.calculus import derivative, root_derivative
from hjsolve.algebra.cycle import (
    BITS,
    Conditions,
    Mean,
    NoCycle,
    Path,
    Point,
    constant,
    means,
    path,
)
from hjsolve.algebra.graph import Graph, TooLarge
from hjsolve.algebra.named import Names
from hjsolve.algebra.sampling import points
from hjsolve.records import (
    Check,
    CompleteIntegral,
    Cycle,
    Domain,
    Formula,
    Hamiltonian,
    Term,
    Truth,
)

TRIES, WANTED = 1000, 2
"""Random points tried for each regime, and cycles compared."""

WRONG = 1e-20
"""A relative difference that refutes: the sums are good to 1e-26."""

METHOD = "compared with double-exponential or trapezoidal sums over cycles at random constants"


Claim = tuple[str, Callable[[], list[Check]], Term]


def cycle_claims(integral: CompleteIntegral, h: Hamiltonian) -> list[Claim]:
    """One claim for each coordinate that has cycles."""
    domain = dict(zip(h.coordinates, h.domains, strict=True))
    claims: list[Claim] = []
    for term in integral.terms:
        q = term.equation.coordinate
        if term.cycles:
            what = f"the action of {q.name} and its derivatives are integrals over a cycle"
            claims.append((what, partial(_checked, what, term, domain[q]), term))
    return claims


def _plain(term: Term) -> bool:
    """Whether p does not depend on its coordinate, and each mean is what stands under it."""
    e = term.equation
    if any(part.has(e.coordinate) for part in (e.drift, e.root)):
        return False
    p = e.solution
    return all(
        cycle.kind == "rotation"
        and (cycle.action is None or cycle.action.expression == p)
        and all(f is None or f.expression == derivative(p, a) for a, f in cycle.derivatives)
        for cycle in term.cycles
    )


def _checked(what: str, term: Term, domain: Domain) -> list[Check]:
    if domain.kind == "angle" and _plain(term):
        method = "the momentum is constant along the coordinate, and the turn is 2π"
        return [Check(what, Truth.PROVED, method, 0.0)]
    worst, compared = 0.0, 0
    for cycle in term.cycles:
        try:
            with precision(BITS):
                found = _Comparison(term, cycle, domain).differences()
        except (NotSupported, TooLarge, TypeError):
            continue
        compared += bool(found)
        worst = max([worst, *found])
    if worst > WRONG:
        return [Check(what, Truth.REFUTED, METHOD, worst)]
    if compared < len(term.cycles):
        method = f"{METHOD}; in {len(term.cycles) - compared} regimes none was met"
        return [Check(what, Truth.UNDECIDED, method, worst if compared else None)]
    return [Check(what, Truth.UNDECIDED, f"{METHOD}; bound: relative difference", worst)]


@dataclass(frozen=True)
class _Claim:
    """A formula and the parts of the integrand of which it is the mean."""

    formula: Formula
    drift: Expr
    root: Expr


class _Comparison:
    """One cycle of one term."""

    def __init__(self, term: Term, cycle: Cycle, domain: Domain) -> None:
        e = term.equation
        self.q, self.sign, self.root, self.drift = e.coordinate, e.sign, e.root, e.drift
        self.kind, self.domain = cycle.kind, domain
        self.claims = []
        if cycle.action is not None:
            self.claims.append(_Claim(cycle.action, e.drift, e.root))
        for alpha, formula in cycle.derivatives:
            if formula is not None:
                slopes = derivative(e.drift, alpha), root_derivative(e.root, alpha)
                self.claims.append(_Claim(formula, *slopes))
        self.squared = Graph([e.root**2])

    def differences(self) -> list[float]:
        """The relative differences at the cycles met; empty where there was none."""
        integrands = [f for c in self.claims for f in (c.drift, c.root) if f != 0]
        integrands = list(dict.fromkeys(integrands))
        graph = Graph(integrands)
        found: list[float] = []
        met = 0
        for point, along in self._cycles():
            try:
                values = means(graph, self.q, point, along)
            except NoCycle:
                continue
            known = dict(zip(integrands, values, strict=True))
            here = [
                d for d in (self._difference(c, point, known) for c in self.claims) if d is not None
            ]
            found += here
            met += bool(here)
            if met == WANTED:
                break
        return found

    def _cycles(self) -> Iterator[tuple[Point, Path]]:
        """Cycles of the kind through random points of the regime."""
        first = self.claims[0].formula
        inside = []
        if self.domain.lower.is_finite:
            inside.append(Lt(self.domain.lower, self.q, evaluate=False))
        if self.domain.upper.is_finite:
            inside.append(Lt(self.q, self.domain.upper, evaluate=False))
        conditions = Conditions([*inside, *first.valid])
        called = Names(first.where)
        names = {d.symbol for d in first.where}
        whole = Tuple(self.root, self.drift, *inside, *first.valid)
        letters = (whole.free_symbols - names) | {self.q}
        ranges = {self.q: (self.domain.lower, self.domain.upper)}
        for point in points(letters, ranges, TRIES):
            try:
                known = called.at(point)
                if known is not None and all(conditions.hold(known)):
                    along = self._path(point)
                    if along.kind == self.kind:
                        yield point, along
            except (NoCycle, OutsideDomain, Imprecise):
                continue

    def _path(self, point: Point) -> Path:
        if self.root == 0:
            return Path("rotation", arb(0), 2 * arb.pi())
        return path(self.squared, self.q, point, self.domain)

    def _difference(self, claim: _Claim, point: Point, known: dict[Expr, Mean]) -> float | None:
        """Of a formula, on the positive branch, from the sums; None outside of its regime."""
        try:
            at = Names(claim.formula.where).at(point)
            if at is None or not all(Conditions(claim.formula.valid).hold(at)):
                return None
            at = {**at, self.sign: constant(arb(1))}
            value = BallWalk(Graph([claim.formula.expression]), at, {}).run()[0].value
        except (OutsideDomain, Imprecise):
            return None
        parts = [claim.root, claim.drift] if self.kind == "rotation" else [claim.root]
        seen = [known[p] for p in parts if p != 0]
        size = sum((m.size for m in seen), arb(0)) or arb(1)
        gap = abs(value - sum((m.value for m in seen), arb(0))) / size
        return max(float(gap.abs_upper()), *(m.error for m in seen), 0.0)

"""Both directions of a transformation, branch by branch.

A candidate of the equation solver becomes a map only when it satisfies every
relation: identically, or at least at the points of a part that its conditions
describe.  A map and a map the other way are one branch when the second takes
the image of the first back to where it came from.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace

import sympy as sp
from sympy import Expr, Symbol
from sympy.core.relational import Relational

from hjsolve.algebra.identity import vanish
from hjsolve.algebra.sampling import Range, points
from hjsolve.records import Check, Domain, Formula, Frame, Map, TransformationProblem, Truth
from hjsolve.transformation.probe import POINTS, Point, Probe, inside, positive_points
from hjsolve.transformation.system import Answer
from hjsolve.transformation.tidy import (
    certainly_positive,
    derivative,
    in_grammar,
    in_tangents,
    length,
    tidied,
)

MATCHES = 10
"""Points at which two maps are compared before they are called each other's inverse."""


@dataclass(frozen=True, slots=True)
class Setting:
    """Where everything lives."""

    problem: TransformationProblem
    ranges: Mapping[Symbol, Range]
    domains: Mapping[Symbol, Domain]
    assumed: tuple[Symbol, ...] = ()

    @property
    def functions(self) -> tuple[str, ...]:
        """The arbitrary functions."""
        return self.problem.functions


@dataclass(slots=True)
class Candidate:
    """A map that was put back, with the points at which it holds, the positive ones apart."""

    values: dict[Symbol, Expr]
    conditions: tuple[Expr, ...]
    points: list[Point] = field(default_factory=list)
    positive: list[Point] = field(default_factory=list)
    images: list[list[float]] = field(default_factory=list)
    score: tuple[float, ...] = ()
    proof: Check | None = None


def settle(problem: TransformationProblem) -> Setting:
    """The ranges that can be sampled and the domains by symbol.

    A variable whose root or logarithm stands in the formulas is positive
    wherever they are real; it is made a positive symbol, and said in ``assumed``.
    """
    problem, assumed = _with_signs(problem)
    domains = dict(problem.domains)
    ranges = {
        s: (d.lower, d.upper)
        for s, d in domains.items()
        if d.kind != "line" and (d.lower.is_number and d.upper.is_number)
    }
    return Setting(problem, ranges, domains, assumed)


def _with_signs(
    problem: TransformationProblem,
) -> tuple[TransformationProblem, tuple[Symbol, ...]]:
    """The problem with positive symbols for the variables that must be positive."""
    formulas = [e for _, e in problem.given]
    formulas += [problem.function] if problem.function is not None else []
    put: dict[Symbol, Symbol] = {}
    for s in (*problem.old.variables, *problem.new.variables):
        if not s.is_positive and any(_shows_positive(e, s) for e in formulas):
            put[s] = Symbol(s.name, positive=True)

    def new(e: Expr | None) -> Expr | None:
        return None if e is None else e.xreplace(put)

    def frame(f: Frame) -> Frame:
        return Frame(
            tuple(put.get(s, s) for s in f.coordinates), tuple(put.get(s, s) for s in f.momenta)
        )

    changed = replace(
        problem,
        old=frame(problem.old),
        new=frame(problem.new),
        domains=tuple((put.get(s, s), d) for s, d in problem.domains),
        hamiltonian=new(problem.hamiltonian),
        function=new(problem.function),
        given=tuple((put.get(s, s), e.xreplace(put)) for s, e in problem.given),
    )
    return changed, tuple(put.values())


def _shows_positive(e: Expr, s: Symbol) -> bool:
    inside = [p.base for p in e.atoms(sp.Pow) if p.exp.is_Rational and p.exp.q % 2 == 0]
    inside += [f.args[0] for f in e.atoms(sp.log)]
    for u in inside:
        factor, rest = u.as_independent(s, as_Add=False)
        base, power = rest.as_base_exp()
        if factor.is_positive and base == s and power.is_Integer and power % 2:
            return True
    return False


def admitted(
    answers: Sequence[Answer],
    residues: Sequence[Expr],
    source: Sequence[Symbol],
    setting: Setting,
    *,
    claim: str,
) -> list[Candidate]:
    """The answers that satisfy the residues, the one for positive ``source`` first.

    ``source`` are the variables that the answers are functions of.
    """
    kept = []
    for answer in answers:
        values = {s: in_grammar(v) for s, v in answer.values.items()}
        put = [r.xreplace(values) for r in residues]
        conditions = _beside(answer.conditions, put)
        if conditions and any(v.has(sp.Abs, sp.asin, sp.atan, sp.acos) for v in values.values()):
            values = {s: _opened(v, conditions) for s, v in values.items()}
            put = [_opened(r.xreplace(values), conditions) for r in residues]
        candidate = Candidate(values, conditions)
        if _holds(candidate, put, source, setting, claim):
            kept.append(candidate)
    return sorted(kept, key=lambda c: c.score)


def _beside(conditions: Sequence[Expr], put: Sequence[Expr]) -> tuple[Expr, ...]:
    """The conditions that may fail: those found on the way, and asin(sin g) = g needs |g| ≤ π/2."""
    found = [tidied(c) for c in conditions]
    for residue in put:
        for f in residue.atoms(sp.asin, sp.atan, sp.acos):
            turned = principal(f)
            found += turned[1] if turned else ()
        found += _within_a_turn(residue)
    found = [_opened(c, found) for c in dict.fromkeys(found)]
    return tuple(dict.fromkeys(c for c in found if not certainly_positive(c)))


def _within_a_turn(residue: Expr) -> list[Expr]:
    """What must be ≥ 0 for g in k(g − atan2(y, x)) = 0: atan2 is between −π and π."""
    atoms = residue.atoms(sp.atan2)
    if len(atoms) != 1:
        return []
    (f,) = atoms
    letter = sp.Dummy("f", real=True)
    lettered = residue.xreplace({f: letter})
    factor = derivative(lettered, letter)
    if letter in factor.free_symbols or factor == 0:
        return []
    g = tidied(-lettered.xreplace({letter: sp.S.Zero}) / factor)
    return [sp.pi - g, sp.pi + g]


def principal(f: Expr) -> tuple[Expr, tuple[Expr, ...]] | None:
    """asin(sin g) and the like as g or π/2 − g, with what must be ≥ 0 for it."""
    inner = in_tangents(f.args[0])
    about_zero = (f.func, type(inner)) in {(sp.asin, sp.sin), (sp.atan, sp.tan), (sp.acos, sp.sin)}
    above_zero = (f.func, type(inner)) in {(sp.acos, sp.cos), (sp.asin, sp.cos), (sp.atan, sp.cot)}
    if not (about_zero or above_zero):
        return None
    g = inner.args[0]
    same = f.func.__name__[1:] == type(inner).__name__
    within = (sp.pi / 2 - g, sp.pi / 2 + g) if about_zero else (g, sp.pi - g)
    return (g if same else sp.pi / 2 - g), within


def _opened(e: Expr, conditions: Sequence[Expr]) -> Expr:
    """|u| as u or −u, asin(sin g) as g, where conditions tell."""
    known = set(conditions)
    put: dict[Expr, Expr] = {}
    for bars in e.atoms(sp.Abs):
        u = bars.args[0]
        within = {sp.pi / 2 - u.args[0], sp.pi / 2 + u.args[0]} if isinstance(u, sp.cos) else set()
        within = {u.args[0], sp.pi - u.args[0]} if isinstance(u, sp.sin) else within
        if within and within <= known:
            put[bars] = u
        for c in conditions:
            ratio = tidied(c / u)
            if certainly_positive(ratio):
                put[bars] = u
            elif certainly_positive(-ratio):
                put[bars] = -u
    for f in e.atoms(sp.asin, sp.atan, sp.acos):
        turned = principal(f)
        if turned and set(turned[1]) <= known:
            put[f] = turned[0]
    return tidied(e.xreplace(put)) if put else e


def _holds(
    c: Candidate, put: Sequence[Expr], source: Sequence[Symbol], setting: Setting, claim: str
) -> bool:
    """Whether the residues vanish; fills in where, and how good the branch is to show first."""
    targets = list(c.values)
    probe = Probe(put, c.conditions, [c.values[s] for s in targets], setting.functions)
    symbols = set().union(*(e.free_symbols for e in (*put, *c.values.values(), *c.conditions)))
    symbols |= set(source)
    for where, wanted in (
        (positive_points(symbols, source, setting.ranges), c.positive),
        (points(symbols, setting.ranges, POINTS, seed=1), c.points),
    ):
        for point in where:
            found = probe.at(point)
            if found is None:
                continue
            image = dict(zip(targets, found, strict=True))
            if all(inside(v, setting.domains[s]) for s, v in image.items() if s in setting.domains):
                wanted.append(point)
                c.images.append(found)
                if wanted is c.positive:
                    c.score = (*c.score, *(v > 0 for v in found))
            if len(wanted) >= MATCHES:
                break
    findings = vanish(put, setting.ranges, setting.functions)
    truths = {f.truth for f in findings}
    if truths == {Truth.PROVED}:
        bound = max((f.bound or 0.0 for f in findings), default=0.0)
        c.proof = Check(claim, Truth.PROVED, "modular", bound)
    elif not (c.positive or c.points):
        return False
    else:
        conditions = [sp.Le(0, k, evaluate=False) for k in c.conditions]
        within = vanish(put, setting.ranges, setting.functions, conditions=conditions)
        if any(f.truth is Truth.REFUTED for f in within):
            return False
        seen = len(c.positive) + len(c.points)
        c.proof = Check(f"{claim}, at {seen} points of the branch", Truth.UNDECIDED, "balls", 1e-30)
    if not (c.positive or c.points) and not _unprobed(put, c):
        return False
    share = sum(c.score) / max(len(c.score), 1)
    size = float(sum(length(v) for v in c.values.values()))
    c.score = (0.0 if c.positive else 1.0, -share, size)
    return True


def _unprobed(put: Sequence[Expr], c: Candidate) -> bool:
    """Whether there is nothing that balls could have told (special functions)."""
    return any(e.atoms(sp.Function) for e in c.values.values()) and all(r == 0 for r in put)


def partner(one: Candidate, others: Sequence[Candidate], setting: Setting) -> Candidate | None:
    """Of the maps back, the one that undoes ``one`` at the most points."""
    best: tuple[tuple[int, float], Candidate] | None = None
    for other in others:
        residues = [v.xreplace(one.values) - s for s, v in other.values.items()]
        conditions = [k.xreplace(one.values) for k in other.conditions]
        probe = Probe(residues, (*one.conditions, *conditions), [], setting.functions)
        tried = (*one.positive, *one.points)
        met = sum(probe.at(point) is not None for point in tried)
        rank = (met, -sum(float(length(v)) for v in other.values.values()))
        if met and (best is None or rank > best[0]):
            best = (rank, other)
    return best[1] if best else None


def as_map(c: Candidate, order: Sequence[Symbol]) -> Map:
    """The record of a map, each formula with where it is real."""
    return tuple((s, Formula(c.values[s], (), valid(c.values[s], c.conditions))) for s in order)


def valid(formula: Expr, conditions: Sequence[Expr] = ()) -> tuple[Relational, ...]:
    """The inequalities that a formula needs: its own domain, and its branch's."""
    found: list[Relational] = []
    for c in conditions:
        found.append(sp.Le(0, _bare(c), evaluate=False))
    for power in sorted(formula.atoms(sp.Pow), key=sp.default_sort_key):
        if power.exp.is_Rational and power.exp.q % 2 == 0 and not certainly_positive(power.base):
            kind = sp.Le if power.exp > 0 else sp.Lt
            found.append(kind(0, _bare(power.base), evaluate=False))
    for f in sorted(formula.atoms(sp.log), key=sp.default_sort_key):
        if not certainly_positive(f.args[0]):
            found.append(sp.Lt(0, _bare(f.args[0]), evaluate=False))
    for f in sorted(formula.atoms(sp.asin, sp.acos), key=sp.default_sort_key):
        found.append(sp.Le(f.args[0] ** 2, 1, evaluate=False))
    kept = [
        c
        for c in found
        if not any(c == sp.Le(d.lhs, d.rhs, evaluate=False) and c != d for d in found)
    ]
    return tuple(dict.fromkeys(kept))


def _bare(e: Expr) -> Expr:
    """E without positive factors."""
    e = tidied(e)
    factors = [f for f in sp.Mul.make_args(e) if not certainly_positive(f)]
    return sp.Mul(*factors) if factors else e

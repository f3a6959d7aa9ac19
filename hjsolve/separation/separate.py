"""From a verdict to the separated equations, their constants and first integrals."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import sympy as sp
from sympy import Add, Dummy, Eq, Expr, Function, Mul, Symbol

from hjsolve.algebra.identity import vanish
from hjsolve.algebra.roots import open_squares
from hjsolve.records import (
    Constant,
    Hamiltonian,
    ReducedEquation,
    SeparatedEquation,
    Separation,
    Truth,
    Verdict,
)
from hjsolve.separation.decompose import NewConstant, Pieces, decompose
from hjsolve.separation.freezing import Block
from hjsolve.separation.momentum import Solved, equation, linear


@dataclass(frozen=True, slots=True)
class Timing:
    """H = outer(factor(t)·k(q, p) + shift(t)); ``outer`` is written in ``inside``."""

    k: Expr
    factor: Expr
    shift: Expr
    outer: Expr | None = None
    inside: Symbol | None = None

    def momentum(self, value: Expr) -> Expr:
        """∂S/∂t = −H where k has this value."""
        inner = self.factor * value + self.shift
        if self.outer is None:
            return -inner
        return -self.outer.xreplace({self.inside: inner})


def separate(hamiltonian: Hamiltonian, verdict: Verdict) -> Separation:
    """What follows from a verdict: constants, separated and reduced equations.

    For ``none`` and ``undecided`` nothing follows beyond the energy and the
    momenta of ignorable coordinates.
    """
    if verdict.separability == "undecided":
        return Separation(hamiltonian, verdict)
    return _Separator(hamiltonian, verdict).run()


class _Separator:
    def __init__(self, hamiltonian: Hamiltonian, verdict: Verdict) -> None:
        self.h = hamiltonian
        self.expression = open_squares(hamiltonian.expression)
        self.verdict = verdict
        self.momentum = dict(zip(hamiltonian.coordinates, hamiltonian.momenta, strict=True))
        self.signs = {
            q: Symbol(f"sigma_{q.name}", real=True, nonzero=True) for q in hamiltonian.coordinates
        }
        self.time_momentum = _fresh(f"p_{hamiltonian.time.name}", hamiltonian)
        self.letters = _Letters(hamiltonian)

    def run(self) -> Separation:
        timing = self._timing(self.expression)
        ignorable = list(self.verdict.ignorable)
        solved_one = None
        if timing is not None and len(ignorable) == len(self.h.coordinates):
            solved_one = ignorable.pop(0)
        energy = Dummy("energy", real=True) if timing is not None else None
        held = {self.momentum[q]: Dummy("held", real=True) for q in ignorable}
        k = timing.k if timing is not None else self.expression + self.time_momentum
        k = self._without_ignorable(k).xreplace(held)
        blocks = self._blocks(solved_one, timing is None)
        value = energy if energy is not None else sp.S.Zero
        groups = [frozenset(g) for g in self.verdict.direct_sum]
        pieces = decompose(k, value, blocks, list(held.values()), groups)
        new = [c.symbol for c in pieces.constants]
        order = [energy, *held.values(), *new] if energy is not None else [*new, *held.values()]
        rename = {letter: self.letters.next() for letter in order}
        constants = self._constants(timing, energy, held, pieces.constants, rename)
        time_momentum = self._time_part(timing, energy, pieces)
        return Separation(
            self.h,
            self.verdict,
            constants,
            self._equations(pieces, held, rename),
            self._reduced(blocks, pieces, rename),
            None if time_momentum is None else time_momentum.xreplace(rename),
            canonical=not (pieces.missing or pieces.frozen),
            extended=self.time_momentum if timing is None else None,
        )

    # --------------------------------------------------------------- time

    def _timing(self, h: Expr) -> Timing | None:
        """H as a function of f(t)·k + g(t); None where time does not split off like that."""
        t = self.h.time
        if not self.h.explicit_time:
            return Timing(h, sp.S.One, sp.S.Zero)
        if (t,) not in self.verdict.blocks:
            return None
        moving = [*self.h.coordinates, *self.h.momenta]
        shift, rest = h.as_independent(*moving, as_Add=True)
        if not shift.has(t):
            shift, rest = sp.S.Zero, h
        factored = _time_factor(rest, t, moving)
        if factored is not None:
            return Timing(factored[1], factored[0], shift)
        by_base = self._timing_by_base(h, t, moving)
        if by_base is not None:
            return by_base
        inner = h.base if isinstance(h, sp.Pow) else h.args[0] if len(h.args) == 1 else None
        within = None if inner is None else self._timing(inner)
        if within is None or within.outer is not None:
            return None
        inside = sp.Dummy("inside", real=True)
        return Timing(within.k, within.factor, within.shift, h.xreplace({inner: inside}), inside)

    def _timing_by_base(self, h: Expr, t: Symbol, moving: Sequence[Symbol]) -> Timing | None:
        """F and g from two points of phase space; kept only if H = f·k + g is proved."""
        for start in (sp.S.Zero, sp.S.One):
            k = h.subs(t, start)
            if k.has(sp.nan, sp.zoo, sp.oo):
                continue
            ones = {s: sp.S.One for s in moving}
            twos = {s: sp.Integer(2) if s in self.h.momenta else sp.S.One for s in moving}
            difference = sp.cancel(k.xreplace(twos) - k.xreplace(ones))
            if difference == 0 or difference.has(sp.nan, sp.zoo, sp.oo):
                continue
            factor = sp.cancel((h.xreplace(twos) - h.xreplace(ones)) / difference)
            shift = sp.cancel(h.xreplace(ones) - factor * k.xreplace(ones))
            if vanish([h - factor * k - shift])[0].truth is Truth.PROVED:
                return Timing(k, factor, shift)
        return None

    def _time_part(
        self, timing: Timing | None, energy: Symbol | None, pieces: Pieces
    ) -> Expr | None:
        if timing is not None and energy is not None:
            return timing.momentum(energy)
        own = next((b for b in pieces.solved if b.coordinates == (self.h.time,)), None)
        return None if own is None else pieces.solved[own].drift

    # ------------------------------------------------------------- blocks

    def _without_ignorable(self, k: Expr) -> Expr:
        """K at a fixed value of ignorable coordinates that only seem to occur."""
        seeming = [q for q in self.verdict.ignorable if k.has(q)]
        for value in (sp.S.One, sp.Rational(1, 2), sp.Rational(1, 3)):
            fixed = k.xreplace({q: value for q in seeming})
            if not fixed.has(sp.nan, sp.zoo, sp.oo, sp.AccumBounds):
                return fixed
        return k

    def _blocks(self, solved_one: Symbol | None, with_time: bool) -> list[Block]:
        blocks = []
        for members in self.verdict.blocks:
            held = members[0] in self.verdict.ignorable and members[0] != solved_one
            if held or (members == (self.h.time,) and not with_time):
                continue
            momenta = tuple(self.momentum.get(q, self.time_momentum) for q in members)
            blocks.append(Block(tuple(members), momenta))
        return blocks

    # ------------------------------------------------------------ answers

    def _constants(
        self,
        timing: Timing | None,
        energy: Symbol | None,
        held: dict[Symbol, Symbol],
        new: list[NewConstant],
        rename: dict[Symbol, Symbol],
    ) -> tuple[Constant, ...]:
        back = {letter: p for p, letter in held.items()}
        found = {}
        if timing is not None and energy is not None:
            autonomous = not self.h.explicit_time
            meaning = "energy" if autonomous else _time_meaning(timing, self.h.time)
            found[energy] = Constant(rename[energy], meaning, timing.k)
        domain = dict(zip(self.h.coordinates, self.h.domains, strict=True))
        coordinate = {p: q for q, p in self.momentum.items()}
        for p, letter in held.items():
            q = coordinate[p]
            angular = domain[q].kind == "angle"
            meaning = f"momentum of {q.name}" + (" (angular momentum)" if angular else "")
            found[letter] = Constant(rename[letter], meaning, p)
        for c in new:
            integral = None if c.integral is None else c.integral.xreplace(back)
            meaning = c.meaning
            if integral is not None and meaning == "separation constant":
                meaning = self._recognised(integral) or meaning
            found[c.symbol] = Constant(rename[c.symbol], meaning, integral)
        return tuple(found[letter] for letter in rename)

    def _recognised(self, integral: Expr) -> str | None:
        """The square of the angular momentum, when it is that."""
        domain = dict(zip(self.h.coordinates, self.h.domains, strict=True))
        for theta in (q for q in self.h.coordinates if domain[q].kind == "polar-angle"):
            for phi in self.h.coordinates:
                if phi != theta:
                    p, m = self.momentum[theta], self.momentum[phi]
                    if integral == p**2 + m**2 / sp.sin(theta) ** 2:
                        return "square of the total angular momentum"
        return None

    def _equations(
        self, pieces: Pieces, held: dict[Symbol, Symbol], rename: dict[Symbol, Symbol]
    ) -> tuple[SeparatedEquation, ...]:
        by_coordinate: dict[Symbol, Solved] = {}
        moving = {*self.h.coordinates, *self.h.momenta}
        if any(v.free_symbols & set(self.h.momenta) for v in pieces.valid):
            return ()
        for block, solved in pieces.solved.items():
            others = moving - set(block.coordinates)
            mine = tuple(v for v in pieces.valid if not v.free_symbols & others)
            by_coordinate[block.coordinates[0]] = replace(solved, valid=solved.valid + mine)
        for q in self.h.coordinates:
            letter = held.get(self.momentum[q])
            if letter is not None:
                by_coordinate[q] = linear(letter)
        return tuple(
            equation(q, self.momentum[q], self.signs[q], _renamed(by_coordinate[q], rename))
            for q in self.h.coordinates
            if q in by_coordinate
        )

    def _reduced(
        self,
        blocks: list[Block],
        pieces: Pieces,
        rename: dict[Symbol, Symbol],
    ) -> tuple[ReducedEquation, ...]:
        found = []
        for block in blocks:
            if len(block.coordinates) < 2 or block not in pieces.equations:
                continue
            w = Function("S" if self.h.time in block.coordinates else "W")(*block.coordinates)
            put = {
                p: sp.Derivative(w, q)
                for q, p in zip(block.coordinates, block.momenta, strict=True)
            }
            reduced = pieces.equations[block].xreplace(rename)
            constants = {*rename.values(), *self.letters.given}
            if self.time_momentum in reduced.free_symbols - block.symbols:
                continue
            moved, kept = reduced.as_independent(*block.symbols, as_Add=True)
            if moved.free_symbols <= constants | {p.symbol for p in self.h.parameters}:
                found.append(ReducedEquation(block.coordinates, Eq(kept.xreplace(put), -moved)))
            else:
                whole = Eq(reduced.xreplace(put), 0)
                found.append(ReducedEquation(block.coordinates, whole))
        return tuple(found)


class _Letters:
    """alpha_1, alpha_2, … with a trailing underscore where the request uses the name."""

    def __init__(self, hamiltonian: Hamiltonian) -> None:
        self.taken = hamiltonian.names
        self.given: list[Symbol] = []

    def next(self) -> Symbol:
        name = f"alpha_{len(self.given) + 1}"
        while name in self.taken:
            name += "_"
        self.given.append(Symbol(name, real=True))
        return self.given[-1]


def _fresh(name: str, hamiltonian: Hamiltonian) -> Symbol:
    taken = hamiltonian.names
    while name in taken:
        name += "_"
    return Symbol(name, real=True)


def _time_factor(h: Expr, t: Symbol, moving: Sequence[Symbol]) -> tuple[Expr, Expr] | None:
    """H = f(t)·k with a common factor f of all terms; None when there is none."""
    terms = Add.make_args(h)
    factors, rests = [], []
    for term in terms:
        rest, factor = term.as_independent(t, as_Add=False)
        if isinstance(factor, Add):
            return None
        factors.append(factor)
        rests.append(rest)
    if not factors[0].has(t):
        return None
    ratios = [sp.cancel(f / factors[0]) if f != factors[0] else sp.S.One for f in factors]
    if any(r.has(t) for r in ratios):
        return None
    if any(f.free_symbols & set(moving) for f in factors):
        return None
    return factors[0], Add(*(Mul(r, ratio) for r, ratio in zip(rests, ratios, strict=True)))


def _time_meaning(timing: Timing, t: Symbol) -> str:
    if timing.outer is not None:
        return f"value of h, where H is a function of f({t.name}) h + g({t.name})"
    if timing.shift == 0:
        return f"value of h in H = f({t.name}) h"
    return f"value of h in H = f({t.name}) h + g({t.name})"


def _renamed(solved: Solved, rename: dict[Symbol, Symbol]) -> Solved:
    return Solved(
        solved.drift.xreplace(rename),
        solved.root.xreplace(rename),
        None if solved.squared is None else solved.squared.xreplace(rename),
        tuple(
            d if d.root_of is None else replace(d, root_of=d.root_of.xreplace(rename))
            for d in solved.where
        ),
        tuple(v.xreplace(rename) for v in solved.valid),
    )

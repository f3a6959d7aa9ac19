"""A proof that an algebraic function with dependent square roots is zero on a regime.

Let R be the function, and its radicands w_j rational in independent letters x
(``uniform`` makes them so).  Each is factored over the integers, w_j = c Π f^e.
At a real point at which the f have the signs s_f, exactly

    √w_j = √|c| Π |f|^(e/2),    |f|^(1/2) = ρ_f > 0,    ρ_f² = s_f f,

and R becomes a rational function of x and the ρ.  The f are different and
irreducible, so no product of some of them is a square, not even with complex
numbers: the variety V: ρ_f² = s_f f is irreducible, and R is 0 on all of V, the
real points among them, unless it is 0 on a part of lower dimension only.  Which
of the two is decided at random points of V modulo a random prime, where a
function that is not 0 vanishes with a probability of about deg R · deg V / p
(Schwartz 1980, Lang & Weil 1954; from memory).  That all signs of the ρ occur
there loses nothing.  Factors that are met together only are one product with
one ρ (``orthants.groups``).

What is known of the signs s: the conditions of the regime, the signs of letters,
the order of named roots, and that every radicand is positive, since the claim
is about points at which R is real.  The vectors s that are left (``orthants``)
contain that of every such point, wherever in the regime it lies.  R is proved
zero for each of them; so it does not matter whether the regime is connected.
One vector for which R is not formally zero leaves the claim undecided, and so
does a regime in which there is none.
"""

from __future__ import annotations

import contextlib
from collections.abc import Iterator
from dataclasses import dataclass
from fractions import Fraction
from itertools import chain
from typing import Any

import sympy as sp
from sympy import Expr, Symbol
from sympy.core.relational import Relational

from hjsolve.algebra.candidates import candidates
from hjsolve.algebra.covering import Covering
from hjsolve.algebra.factors import Factors, split
from hjsolve.algebra.generators import NotRational, Ratio
from hjsolve.algebra.graph import Graph, TooLarge
from hjsolve.algebra.named import divided_differences
from hjsolve.algebra.orthants import Signs, groups
from hjsolve.algebra.surface import surface
from hjsolve.algebra.uniform import NotUniform, Root, SignNeeded, Uniform
from hjsolve.records import Definition

FORKS = 4
"""Signs of squares inside roots that are followed both ways."""

HALF = Fraction(1, 2)

TANGENTS = {Fraction(-1, 4): -1, Fraction(0): 0, Fraction(1, 4): 1}
"""tan(πx) where it is rational."""


@dataclass(frozen=True)
class Claim:
    """``expression`` is 0 where the conditions hold and it is real."""

    expression: Expr
    where: tuple[Definition, ...] = ()
    conditions: tuple[Relational, ...] = ()
    positive: tuple[Expr, ...] = ()
    last: tuple[Symbol, ...] = ()
    """Symbols that are solved for only when nothing else is left."""


@dataclass(frozen=True)
class Proof:
    """``bound`` is the probability of a false proof; ``places`` may be points of the regime."""

    bound: float
    places: Iterator[dict[Symbol, Fraction]]


def prove(claim: Claim) -> Proof | None:
    """The proof of a claim, or None; nothing is known then."""
    try:
        return _Attempt(claim).proof()
    except (
        NotUniform,
        NotRational,
        TooLarge,
        RecursionError,
        TypeError,
        ValueError,
        ArithmeticError,
    ):
        return None


class _Attempt:
    def __init__(self, claim: Claim) -> None:
        relations, self.order = divided_differences(claim.where)
        defined = [d for d in claim.where if d.definition is not None]
        if sp.false in claim.conditions:
            raise NotUniform
        self.conditions = [c for c in claim.conditions if c != sp.true]
        facts = [c.gts - c.lts for c in self.conditions]
        # more than a square is positive
        facts += [c.gts for c in self.conditions if c.lts.is_Pow and c.lts.exp.is_even]
        facts += [b - a for a, b in self.order] + list(claim.positive)
        parts = [*(d.definition for d in defined), claim.expression, *relations, *facts]
        self.graph = Graph(parts)
        places = list(self.graph.roots)
        self.aliases = {d.symbol: places.pop(0) for d in defined}
        self.root = places.pop(0)
        self.relations, self.facts = places[: len(relations)], places[len(relations) :]
        self.last = claim.last
        self.named = {d.symbol for d in claim.where if d.root_of is not None}
        self.known: list[Ratio] = []
        self.signs = self._letters()
        self.surface = surface(self.graph, self.root, self.aliases)
        self.roots: dict[Root, None] = {}
        self.sizes: dict[Root, None] = {}
        for at in self.surface:
            node = self.graph.nodes[at]
            if node.op == "power" and node.payload[1] != 1:
                if node.payload[1] not in (2, 4):
                    raise NotUniform
                self.roots[node.args[0], node.payload[1] // 2] = None
            elif node.op in ("abs", "sign"):
                self.sizes[node.args[0], 1] = None

    def _letters(self) -> dict[Symbol, int]:
        """The letters of one sign, by assumption or by a condition.

        What a name is assumed to be is no fact of the regime: it has to follow.
        """
        found = {c.gts: 1 for c in self.conditions if c.lts == 0 and c.gts.is_Symbol}
        found |= {c.lts: -1 for c in self.conditions if c.gts == 0 and c.lts.is_Symbol}
        for node in self.graph.nodes:
            letter = node.payload
            if node.op != "symbol" or letter in self.aliases or letter in self.named:
                continue
            if letter.is_positive or letter.is_negative:
                found[letter] = 1 if letter.is_positive else -1
        return found

    def proof(self) -> Proof | None:
        """Over both signs of every square inside a root."""
        stack: list[dict[Root, int]] = [{}]
        bounds: list[float] = []
        places: Iterator[dict[Symbol, Fraction]] = iter(())
        for _ in range(2 * FORKS):
            if not stack:
                return Proof(max(bounds), places) if bounds else None
            forced = stack.pop()
            uniform = Uniform(self.graph, self.aliases, forced, self.last, self.named, self.signs)
            try:
                found = self._one(uniform)
            except SignNeeded as question:
                stack += [{**forced, question.key: sign} for sign in (1, -1)]
                continue
            if found is None:
                return None
            bounds += found
            places = chain(places, candidates(uniform, self.order, self.known))
        return None

    def _one(self, uniform: Uniform) -> list[float] | None:
        """A bound for every vector of signs; None where one is not proved."""
        wanted = uniform.settle(self.relations, [*self.roots, *self.sizes])
        uniform.freeze()
        radicands: dict[Any, Factors] = {key: split(v) for key, v in wanted.items()}
        rooted: dict[Any, None] = {**self.roots, **dict.fromkeys(uniform.squares)}
        for k in uniform.squares:
            if uniform.keys[k][0] == "letter" and uniform.algebraic(uniform.squares[k]) is None:
                radicands[k] = split(uniform.squares[k])
        signs = self._signs(uniform)
        for key in rooted:
            if key in radicands:
                signs.positive(radicands[key])
        self.known += [wanted[key] for key in self.roots]
        odd, needed = groups(
            [v for key, v in radicands.items() if key in rooted],
            [radicands[key] for key in self.sizes],
        )
        signs.close(f for group in needed for f in group)
        cases = signs.cases(needed)
        if cases is None:
            return None
        bounds = []
        for case in cases:
            covering = Covering(uniform, self.surface, radicands, rooted, odd, case)
            found = covering.bound(self.root)
            if found is None:
                return None
            bounds.append(found)
        return bounds

    def _signs(self, uniform: Uniform) -> Signs:
        """What the conditions, the letters and the roots say."""
        signs = Signs()
        self.known = [v for v in self._positive(uniform) if uniform.algebraic(v) is None]
        for value in self.known:
            if not value.is_zero():
                with contextlib.suppress(NotRational):
                    signs.positive(split(value))
        return signs

    def _positive(self, uniform: Uniform) -> Iterator[Ratio]:
        """Fractions that are positive on the regime; one that is not at hand is left out."""
        with contextlib.suppress(NotUniform, SignNeeded, NotRational):
            yield from uniform.positive_letters()
        yield from (uniform.root(key) for key in (*uniform.roots, *uniform.forced))
        yield from uniform.squares.values()
        for at in self.facts:
            with contextlib.suppress(NotUniform, SignNeeded, NotRational):
                yield uniform.value(at)
        for at, node in enumerate(self.graph.nodes):
            if node.op != "symbol":
                continue
            sign = self.signs.get(node.payload)
            if sign:
                with contextlib.suppress(NotUniform, SignNeeded, NotRational):
                    yield uniform.value(at) * uniform.number(sign)
            yield from self._angles(uniform, node.payload)

    def _angles(self, uniform: Uniform, symbol: Symbol) -> Iterator[Ratio]:
        """What bounds on an angle say of t = tan(unit·angle/2), where it increases."""
        found = [(k, u) for k, u in uniform.units_of(symbol) if uniform.keys[k][0] == "turn"]
        if not found:
            return
        ((k, unit),) = found
        low = [sp.S.Zero] if symbol.is_positive else []
        low += [c.lts / sp.pi for c in self.conditions if c.gts == symbol]
        high = [c.gts / sp.pi for c in self.conditions if c.lts == symbol]
        turns = [
            [unit * Fraction(int(x.p), int(x.q)) / 2 for x in ends if x.is_Rational]
            for ends in (low, high)
        ]
        if not all(turns) or max(turns[0]) < -HALF or min(turns[1]) > HALF:
            return
        t = uniform.letter(k)
        if max(turns[0]) in TANGENTS:
            yield t - uniform.number(TANGENTS[max(turns[0])])
        if min(turns[1]) in TANGENTS:
            yield uniform.number(TANGENTS[min(turns[1])]) - t

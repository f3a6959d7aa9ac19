"""Roots inside roots and named roots made rational: values of a graph as exact fractions.

Under a square root only rational functions can be factored.  What is not
rational there is made so by a change of parameters: a named root e of a
polynomial P, or a root y with y² = g, becomes a free letter, and a letter in
which the relation P(e) = 0 or y² = g is linear is solved for instead.  With
three roots e_1, e_2, e_3 of a cubic the relations are the divided differences
P[e_1] = P[e_1, e_2] = P[e_1, e_2, e_3] = 0 (equivalent to P(e_k) = 0 for
distinct roots), so that P(u) factors into the u − e_k.

A relation is solved only where one irreducible factor of it is left that may
vanish.  Then the points that the solution misses, where the letter's
coefficient is 0, are of lower dimension, and an analytic function that is zero
elsewhere is zero there: the regime is an open set of the problem's letters, and
the named roots and the y are functions of them.
"""

from __future__ import annotations

from collections.abc import Collection, Iterator, Mapping, Sequence
from fractions import Fraction
from typing import Any

from flint import fmpz_mpoly_ctx
from sympy import Symbol

from hjsolve.algebra.factors import split, square_part
from hjsolve.algebra.generators import Ratio, coefficients, lowest
from hjsolve.algebra.graph import Graph, Node
from hjsolve.algebra.surface import OPAQUE, units

SPARE = 8
"""Roots inside roots that get a letter of their own."""

TURNS = 12
"""Multiples of an angle above this are not multiplied out."""

Root = tuple[int, int]
"""A root: the node under it, and how many roots are taken: 2 for a fourth root."""


class NotUniform(Exception):
    """No rational parameters were found, or the way there is too long."""


class _Restart(Exception):
    """The parameters have changed; values are to be formed anew."""


class SignNeeded(Exception):
    """The root of a square inside another root: of which sign is its base?"""

    def __init__(self, key: Root) -> None:
        super().__init__()
        self.key = key


class Uniform:
    """Exact values of the nodes of a graph in rational parameters.

    ``aliases`` are symbols that stand for nodes (definitions), ``forced`` the
    signs of bases asked for by SignNeeded, ``last`` symbols that are solved for
    only when nothing else is left, ``named`` the named roots,
    ``signs`` the letters of one sign.
    """

    def __init__(
        self,
        graph: Graph,
        aliases: Mapping[Symbol, int],
        forced: Mapping[Root, int],
        last: Collection[Symbol] = (),
        named: Collection[Symbol] = (),
        signs: Mapping[Symbol, int] | None = None,
    ) -> None:
        self.graph, self.aliases, self.forced, self.named = graph, aliases, forced, named
        self.signs = signs or {}
        self._units = units(graph)
        self.keys: list[tuple[str, Any]] = []
        for at, node in enumerate(graph.nodes):
            if node.op == "symbol" and node.payload not in aliases:
                self.keys.append(("letter", node.payload))
            elif node.op in OPAQUE:
                self.keys.append(("free", at))
        self.keys += list(self._units)
        self._first = len(self.keys)
        self.keys += [("root", k) for k in range(SPARE)]
        self.index = {key: k for k, key in enumerate(self.keys)}
        self.context = fmpz_mpoly_ctx.get([f"g{k}" for k in range(len(self.keys))], "lex")
        self.one = self.number(1)
        self._rank = {
            k: 2 if key[0] != "letter" else 3 if key[1] in last else int(bool(key[1].is_positive))
            for key, k in self.index.items()
        }
        self.solved: dict[int, Ratio] = {}
        """Letters that were solved for."""
        self.squares: dict[int, Ratio] = {}
        """Letters known by their square only."""
        self.roots: dict[Root, tuple[int, Ratio]] = {}
        """For a root inside another: its letter y and the factor v with root = y·v."""
        self._named = 0
        self._known: dict[int, Ratio] = {}
        self._frozen = False

    # ------------------------------------------------------------ arithmetic

    def number(self, numerator: int, denominator: int = 1) -> Ratio:
        """A rational number."""
        unit = self.context.constant(1)
        return Ratio(unit * numerator, unit * denominator)

    def letter(self, k: int) -> Ratio:
        """Generator k, or what it was solved for."""
        return self.solved.get(k) or Ratio(self.context.gen(k), self.context.constant(1))

    def power(self, base: Ratio, exponent: int) -> Ratio:
        """base**exponent; raises NotRational for one with too many terms."""
        if exponent < 0:
            base, exponent = self.one / base, -exponent
        result = self.one
        for _ in range(exponent if exponent <= TURNS else 0):
            result = self._reduced(result * base)
        if exponent > TURNS:
            raise NotUniform
        return result

    def positive_letters(self) -> Iterator[Ratio]:
        """What exponential functions and π say: e^u > 0, (e^u − 1) u > 0."""
        for (kind, at), k in self.index.items():
            if kind == "exp":
                yield self.letter(k)
                yield (self.letter(k) - self.one) * self.value(at)
            elif kind == "free" and self.graph.nodes[at].op == "pi":
                yield self.letter(k)

    def units_of(self, symbol: Symbol) -> Iterator[tuple[int, Fraction]]:
        """(k, unit) for each letter tan(unit·symbol/2) or exp(unit·symbol)."""
        for (kind, at), unit in self._units.items():
            if self.graph.nodes[at].payload == symbol:
                yield self.index[kind, at], unit

    def algebraic(self, value: Ratio) -> int | None:
        """A letter known by its square only that is left in a value."""
        used = _letters(value)
        return max((k for k in self.squares if k in used), default=None)

    def _reduced(self, value: Ratio) -> Ratio:
        """A value in which letters known by their square enter linearly."""
        for _ in range(4 * SPARE):
            above, below = value.numerator.degrees(), value.denominator.degrees()
            k = next((k for k in self.squares if max(above[k], below[k]) > 1), None)
            if k is None:
                return value
            value = self._halved(value.numerator, k) / self._halved(value.denominator, k)
        raise NotUniform

    def _halved(self, polynomial: Any, k: int) -> Ratio:
        """A polynomial with the square of letter k put in."""
        total, letter = self.number(0), Ratio(self.context.gen(k), self.context.constant(1))
        for exponent, part in coefficients(polynomial, k, self.context).items():
            piece = Ratio(part, self.context.constant(1))
            for _ in range(exponent // 2):
                piece = piece * self.squares[k]
            total = total + (piece * letter if exponent % 2 else piece)
        return total

    # --------------------------------------------------------------- values

    def settle(self, relations: Sequence[int], wanted: Sequence[Root]) -> dict[Root, Ratio]:
        """Solve the relations (nodes that vanish) and form what is under the roots ``wanted``.

        Raises NotUniform, SignNeeded, NotRational, ZeroDivisionError.
        """
        todo = list(relations)
        for _ in range(2 * SPARE + len(todo)):
            try:
                while todo:
                    self._solve_relation(todo[0])
                    del todo[0]
                return {key: self._radicand(key) for key in wanted}
            except _Restart:
                self._known.clear()
        raise NotUniform

    def freeze(self) -> None:
        """From here on no parameters change: a value that needs it raises NotUniform."""
        self._frozen = True

    def value(self, at: int) -> Ratio:
        """Node ``at`` as a fraction."""
        if at not in self._known:
            self._known[at] = self._reduced(self._value(self.graph.nodes[at], at))
        return self._known[at]

    def _value(self, node: Node, at: int) -> Ratio:
        match node.op:
            case "number":
                return self.number(*node.payload)
            case "symbol" if node.payload in self.aliases:
                return self.value(self.aliases[node.payload])
            case "symbol":
                return self.letter(self.index["letter", node.payload])
            case "add":
                total = self.value(node.args[0])
                for a in node.args[1:]:
                    total = total + self.value(a)
                return total
            case "mul":
                product = self.value(node.args[0])
                for a in node.args[1:]:
                    product = self._reduced(product * self.value(a))
                return product
            case "power":
                numerator, denominator = node.payload
                if denominator not in (1, 2, 4):
                    raise NotUniform
                base = (
                    self.value(node.args[0])
                    if denominator == 1
                    else self.root((node.args[0], denominator // 2))
                )
                return self.power(base, numerator)
            case "sin" | "cos":
                return self._turned(node)[node.op == "sin"]
            case "exp":
                product = self.one
                for coefficient, monomial in zip(node.payload, node.args[1:], strict=True):
                    times = Fraction(*coefficient) / self._units["exp", monomial]
                    product *= self.power(self.letter(self.index["exp", monomial]), int(times))
                return product
        if node.op in OPAQUE:
            return self.letter(self.index["free", at])
        raise NotUniform

    def _turned(self, node: Node) -> tuple[Ratio, Ratio]:
        """(cos, sin) in t = tan(unit/2)."""
        cosine, sine = self.one, self.number(0)
        for coefficient, monomial in zip(node.payload, node.args[1:], strict=True):
            times = int(Fraction(*coefficient) / self._units["turn", monomial])
            if abs(times) > TURNS:
                raise NotUniform
            t = self.letter(self.index["turn", monomial])
            below = self.one + t * t
            c, s = (self.one - t * t) / below, self.number(2 if times > 0 else -2) * t / below
            for _ in range(abs(times)):
                cosine, sine = cosine * c - sine * s, sine * c + cosine * s
        return cosine, sine

    def _radicand(self, key: Root) -> Ratio:
        """What is under a root, free of letters known by their square."""
        at, times = key
        value = self.value(at) if times == 1 else self.root((at, times - 1))
        left = self.algebraic(value)
        if left is not None:
            self._eliminate(left)
        return value

    def root(self, key: Root) -> Ratio:
        """A root inside another one."""
        if key in self.roots:
            k, outside = self.roots[key]
            return self._reduced(self.letter(k) * outside)
        content, factors = split(self._radicand(key))
        inside, outside = self.one, self.one
        for factor, times in factors:
            one = Ratio(factor.poly, self.context.constant(1))
            odd = times % 2 if times > 0 else -(times % 2)
            inside *= self.power(one, odd)
            outside *= self.power(one, (times - odd) // 2)
        square, rest = square_part(content.numerator * content.denominator)
        outside *= self.number(square, content.denominator)
        if not _letters(inside):
            if rest != 1:
                raise NotUniform
            if key not in self.forced:
                raise SignNeeded(key)
            return outside * self.number(self.forced[key])
        if self._frozen or self._named == SPARE:
            raise NotUniform
        k = self._first + self._named
        self._named += 1
        self.squares[k] = inside * self.number(rest)
        self.roots[key] = k, outside
        return self.letter(k) * outside

    # ----------------------------------------------------------- elimination

    def _solve_relation(self, at: int) -> None:
        """Solve one letter from a node that vanishes."""
        value = self.value(at)
        if value.is_zero():
            return
        left = self.algebraic(value)
        if left is not None:
            self._eliminate(left)
        _, factors = split(Ratio(value.numerator, self.context.constant(1)))
        open_ = [f.poly for f, _ in factors if not self._is_free(f.poly)]
        if len(open_) != 1:
            raise NotUniform
        self._solve(open_[0], ())
        self._known.clear()

    def _is_free(self, factor: Any) -> bool:
        """Whether a factor holds letters of the problem only: it is 0 on a null set only."""
        keys = [self.keys[k] for k, d in enumerate(factor.degrees()) if d]
        return all(kind == "letter" and of not in self.named for kind, of in keys)

    def _eliminate(self, k: int) -> None:
        """Make a letter known by its square a free one, another solved; raises _Restart."""
        if self._frozen:
            raise NotUniform
        square = self.squares[k]
        inner = self.algebraic(square)
        if inner is not None:
            self._eliminate(inner)
        gen = self.context.gen(k)
        del self.squares[k]
        self._solve(gen * gen * square.denominator - square.numerator, (k,))
        raise _Restart

    def _solve(self, relation: Any, kept: Collection[int]) -> None:
        """Put in the letter, or the square of one, in which the relation is linear."""
        if any(d and self.keys[k][0] == "free" for k, d in enumerate(relation.degrees())):
            raise NotUniform  # such a letter may depend on others
        best: list[tuple[Any, ...]] = []
        for k, d in enumerate(relation.degrees()):
            if d not in (1, 2) or k in kept or k in self.squares:
                continue
            parts = coefficients(relation, k, self.context)
            if d == 2 and 1 in parts:
                continue
            size = len(parts[d]) + len(parts.get(0, ()))
            rank = self._rank[k]
            if d == 2:  # a root that was made a letter is to stay one
                rank = 9 if self.keys[k][0] == "root" else -rank
            best.append((d, rank, size, k, parts))
        if not best:
            raise NotUniform
        d, _, _, k, parts = min(best, key=lambda b: b[:4])
        if 0 not in parts:
            raise NotUniform
        value = lowest(-parts[0], parts[d])
        if d == 2:
            self.squares[k] = value
            for other, old in self.squares.items():
                self.squares[other] = self._reduced(old)
            return
        for known in (self.solved, self.squares):
            for other, old in known.items():
                known[other] = self._put(old, k, value)
        self.roots = {key: (j, self._put(v, k, value)) for key, (j, v) in self.roots.items()}
        self.solved[k] = value

    def _put(self, ratio: Ratio, k: int, value: Ratio) -> Ratio:
        """A fraction with ``value`` for letter k."""
        if k not in _letters(ratio):
            return ratio
        sides = []
        for polynomial in (ratio.numerator, ratio.denominator):
            total = self.number(0)
            for exponent, part in coefficients(polynomial, k, self.context).items():
                piece = Ratio(part, self.context.constant(1))
                total = total + piece * self.power(value, exponent)
            sides.append(total)
        return sides[0] / sides[1]


def _letters(value: Ratio) -> set[int]:
    return {
        k
        for side in (value.numerator, value.denominator)
        for k, d in enumerate(side.degrees())
        if d
    }

"""Values of a graph at random points modulo a prime.

A rational function that is not zero vanishes at a random point modulo a random
prime p with probability at most deg/p (Schwartz 1980; citation from memory).
Everything else is made rational by a generator drawn at random:

* exp(m/D), tan(m/2D) of every monomial m are free, tied to the value of m, so
  that the addition formulas hold; log u is free, tied to the value of u;
* a root takes one of its values: only points are kept at which every radicand
  is a square, the sign is drawn per point and radicand;
* an arbitrary function and each of its derivatives is a hash of its name,
  orders and arguments.

Free generators know fewer identities than the functions they stand for.  So a
formal zero is a zero, while a formal non-zero may still be one: it has to be
confirmed with balls before anybody says so.  After Gonnet 1984 (citation from
memory).
"""

from __future__ import annotations

import math
import secrets
from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np
from sympy import Symbol
from sympy.ntheory import isprime

from hjsolve.algebra.graph import Graph

if TYPE_CHECKING:
    import numpy.typing as npt  # 25 ms at start-up that only a type checker needs

    Array = npt.NDArray[np.int64]
else:
    Array = np.ndarray

ROOT_LIMIT = 6
"""More independent square roots than this would need too many draws."""

POINTS = 8
FIELDS = 64
"""Primes tried: a constant under a root is a square modulo every other prime only."""

DENOMINATOR_LIMIT = 100_000
EXPONENT_LIMIT = 1 << 40


class NoPoints(Exception):
    """No point modulo p was found at which the graph has a value."""


class Field:
    """A random prime and the random draws made modulo it."""

    def __init__(self, graph: Graph) -> None:
        self.odd = _odd_root_degrees(graph)
        self.p = prime(self.odd, radicands(graph).constants)
        self.salt = secrets.randbits(63)
        self.denominator = _argument_denominator(graph)

    def inverse(self, a: Array) -> Array:
        """1/a, elementwise; 0 where a is 0."""
        return self.power(a, self.p - 2)

    def power(self, a: Array, exponent: int) -> Array:
        """a**exponent, elementwise, for exponent >= 0."""
        result = np.ones_like(a)
        square = a % self.p
        while exponent:
            if exponent & 1:
                result = result * square % self.p
            square = square * square % self.p
            exponent >>= 1
        return result

    def hashed(self, key: int, *values: Array) -> Array:
        """A residue in 1..p-1 that depends on ``key`` and ``values`` alone."""
        start = (self.salt ^ (key * 0x9E3779B97F4A7C15)) & (2**64 - 1)
        state = np.full(values[0].shape, start, dtype=np.uint64)
        for value in values:
            state = _mix(state ^ value.astype(np.uint64))
        return (state % np.uint64(self.p - 1)).astype(np.int64) + 1

    def rational(self, numerator: int, denominator: int) -> int:
        """numerator/denominator as a residue."""
        below = denominator % self.p
        if below == 0:
            raise NoPoints
        return numerator % self.p * pow(below, -1, self.p) % self.p


def _mix(z: npt.NDArray[Any]) -> npt.NDArray[np.uint64]:
    """Steele, Lea and Flood's splitmix64 finaliser (from memory)."""
    with np.errstate(over="ignore"):
        z = z + np.uint64(0x9E3779B97F4A7C15)
        z = (z ^ (z >> np.uint64(30))) * np.uint64(0xBF58476D1CE4E5B9)
        z = (z ^ (z >> np.uint64(27))) * np.uint64(0x94D049BB133111EB)
        return z ^ (z >> np.uint64(31))


def _odd_root_degrees(graph: Graph) -> int:
    product = 1
    for node in graph.nodes:
        if node.op == "power":
            degree = node.payload[1]
            while degree % 2 == 0:
                degree //= 2
            product = math.lcm(product, degree)
    if product > 10**6:
        raise NoPoints
    return product


def _argument_denominator(graph: Graph) -> int:
    common = 1
    for node in graph.nodes:
        if node.op in ("exp", "sin", "cos"):
            for _, below in node.payload:
                both = math.lcm(common, below)
                common = both if both <= DENOMINATOR_LIMIT else common
    return common


def prime(odd: int, constants: Sequence[tuple[int, int]]) -> int:
    """A random prime below 2**31, 3 modulo 4, that suits the roots taken.

    Odd roots are unique modulo it, and the rational numbers ``constants`` are
    squares (half of the primes for each; the first six are seen to).
    """
    while True:
        p = (secrets.randbelow(2**29) + 2**30 + 2**29) | 3
        if p >= 2**31 or math.gcd(p - 1, odd) != 1 or not isprime(p):
            continue
        if all(pow(a * b, (p - 1) // 2, p) == 1 for a, b in constants[:6]):
            return p


@dataclass(frozen=True, slots=True)
class Radicands:
    """What stands under even roots: rational numbers, ±a letter, anything else."""

    constants: tuple[tuple[int, int], ...]
    letters: dict[Symbol, int]
    others: int


def radicands(graph: Graph) -> Radicands:
    """Sort the radicands of a graph by what is needed to make squares of them."""
    constants: list[tuple[int, int]] = []
    letters: dict[Symbol, int] = {}
    others = len({n.args[0] for n in graph.nodes if n.op == "asin"})  # 1 − u² is to be a square
    for at in {n.args[0] for n in graph.nodes if n.op == "power" and n.payload[1] % 2 == 0}:
        node = graph.nodes[at]
        sign, letter = 1, node
        if node.op == "mul" and len(node.args) == 2:
            first, letter = (graph.nodes[k] for k in node.args)
            sign = -1 if first.payload == (-1, 1) else 0
        if node.op == "number":
            constants.append(node.payload)
        elif letter.op == "symbol" and sign and letters.setdefault(letter.payload, sign) == sign:
            continue
        else:
            others += 1
    return Radicands(tuple(constants), letters, others)


def square_roots(graph: Graph) -> int:
    """How many even roots the graph takes."""
    return len(
        {
            n.args[0]
            for n in graph.nodes
            if n.op in ("asin", "delta") or (n.op == "power" and n.payload[1] % 2 == 0)
        }
    )


class Walk:
    """Values of a graph at K random points modulo p."""

    def __init__(self, graph: Graph) -> None:
        self.graph = graph
        self.field = Field(graph)
        self.places: Array = np.arange(0)  # which of the points drawn are looked at

    def values(self) -> tuple[list[Array], int]:
        """The values of the graph's roots, each (K,), and K; raises NoPoints."""
        at = self.points()
        size = _size(at)
        out: list[Array] = []
        for node in self.graph.nodes:
            out.append(self.evaluate(node.op, node.payload, [out[a] for a in node.args], at, size))
        return [out[r] for r in self.graph.roots], size

    def points(self) -> dict[Symbol, Array]:
        """Residues for every symbol at points where the graph has a value; raises NoPoints."""
        roots, hard = square_roots(self.graph), radicands(self.graph).others
        if hard > ROOT_LIMIT:
            raise NoPoints
        keep = POINTS if roots == 0 else min(6 * 2**roots, 96)
        for _ in range(FIELDS):
            values = self._draw(max(2 * keep, keep * 2 ** (hard + 1)))
            good = self._good(values)
            if good.size >= keep // 2:
                # the signs of roots go with the points: a root inside another must keep its own
                self.places = good[:keep]
                return {s: v[good[:keep]] for s, v in values.items()}
            self.field = Field(self.graph)
        raise NoPoints

    def _draw(self, count: int) -> dict[Symbol, Array]:
        rng = np.random.default_rng(secrets.randbits(128))
        symbols = [n.payload for n in self.graph.nodes if n.op == "symbol"]
        drawn = {s: rng.integers(2, self.field.p - 1, size=count) for s in symbols}
        # a letter that stands alone under a root is drawn as a square: no point is lost to it
        for letter, sign in radicands(self.graph).letters.items():
            drawn[letter] = sign * drawn[letter] ** 2 % self.field.p
        return drawn

    def _good(self, values: dict[Symbol, Array]) -> Array:
        """Positions at which nothing divides by 0 and every radicand is a square."""
        size = _size(values)
        self.places = np.arange(size)
        alive = np.ones(size, dtype=bool)
        level = (self.field.p - 1) // 2
        out: list[Array] = []
        for node in self.graph.nodes:
            jet = self.evaluate(node.op, node.payload, [out[a] for a in node.args], values, size)
            if node.op == "power":
                base = out[node.args[0]]
                if node.payload[0] < 0 or node.payload[1] != 1:
                    alive &= base != 0
                if node.payload[1] % 2 == 0:
                    alive &= self.field.power(base, level) == 1
            elif node.op == "asin":
                square = (1 - out[node.args[0]] ** 2) % self.field.p
                alive &= self.field.power(square, level) == 1
            elif node.op == "delta":
                alive &= self.field.power(out[node.args[0]], level) == 1
            elif node.op in ("log", "abs", "atan2"):
                alive &= out[node.args[0]] != 0
            elif node.op in ("sin", "cos"):
                alive &= self.turn(node.payload, [out[a] for a in node.args[1:]])[2]
            out.append(jet)
        return np.flatnonzero(alive)

    # ------------------------------------------------------------- values

    def evaluate(
        self,
        op: str,
        payload: object,
        below: list[Array],
        values: dict[Symbol, Array],
        size: int,
    ) -> Array:
        """The value of one node at ``size`` points."""
        field, p = self.field, self.field.p
        match op:
            case "number":
                return np.full(size, field.rational(*payload), dtype=np.int64)  # type: ignore[misc]
            case "pi":
                return np.full(size, field.hashed(1, np.zeros(1, dtype=np.int64))[0])
            case "symbol":
                return values[payload]
            case "add":
                total = below[0]
                for term in below[1:]:
                    total = (total + term) % p
                return total
            case "mul":
                product = below[0]
                for term in below[1:]:
                    product = product * term % p
                return product
            case "power":
                return self.root_power(below[0], *payload)  # type: ignore[misc]
            case "exp":
                return self._exponential(payload, below[1:], size)  # type: ignore[arg-type]
            case "sin":
                return self.turn(payload, below[1:])[1]  # type: ignore[arg-type]
            case "cos":
                return self.turn(payload, below[1:])[0]  # type: ignore[arg-type]
            case "abs":
                return below[0] * self.sign(below[0]) % p
            case "sign":
                return self.sign(below[0])
            case "call":
                return (
                    field.hashed(key_of(payload), *below)
                    if below
                    else field.hashed(key_of(payload), np.zeros(size, dtype=np.int64))
                )
            case "delta":
                root = field.power(below[0], (p + 1) // 4)
                bit = field.hashed(key_of(("delta",)), below[1], below[2]) & 1
                return np.where(bit == 1, root, p - root)
            case "log":
                total = np.zeros(size, dtype=np.int64)
                for exponent, factor in zip(payload, below[1:], strict=True):  # type: ignore[call-overload]
                    free = field.hashed(key_of(("log",)), factor)
                    total = (total + field.rational(*exponent) * free) % p
                return total
            case _:  # asin, atan, atan2: free values tied to their argument
                return field.hashed(key_of((op,)), *below)

    def sign(self, a: Array) -> Array:
        """±1 by a hash of ±a, so that |a| = |−a|."""
        small = np.minimum(a, self.field.p - a)
        bit = self.field.hashed(key_of(("sign",)), small, self.places) & 1
        flip = (a > small).astype(np.int64)
        return np.where((bit ^ flip) == 1, 1, self.field.p - 1).astype(np.int64)

    def root_power(self, base: Array, numerator: int, denominator: int) -> Array:
        """base**(numerator/denominator) on the branch drawn for this radicand."""
        field, p = self.field, self.field.p
        value = base
        odd, twos = denominator, 0
        while odd % 2 == 0:
            odd, twos = odd // 2, twos + 1
        if odd > 1:
            value = field.power(value, pow(odd, -1, p - 1))
        for _ in range(twos):
            value = field.power(value, (p + 1) // 4)
        if twos:
            # a constant's root too is to take both signs over the points
            bit = field.hashed(key_of(("root", denominator)), base, self.places) & 1
            value = np.where(bit == 1, value, p - value)
        return field.power(value, numerator % (p - 1))

    def _generator(self, key: int, monomial: Array) -> tuple[Array, npt.NDArray[np.bool_]]:
        """(free residue for |m|, whether m counts as −|m|); so that m and −m agree."""
        flipped = monomial > self.field.p // 2
        size = np.where(flipped, self.field.p - monomial, monomial)
        return self.field.hashed(key, size), flipped

    def _exponent(self, coefficient: tuple[int, int]) -> int | None:
        scaled, rest = divmod(coefficient[0] * self.field.denominator, coefficient[1])
        return scaled if rest == 0 and abs(scaled) < EXPONENT_LIMIT else None

    def _exponential(
        self, coefficients: Sequence[tuple[int, int]], monomials: list[Array], size: int
    ) -> Array:
        field, p = self.field, self.field.p
        product = np.ones(size, dtype=np.int64)
        for coefficient, monomial in zip(coefficients, monomials, strict=True):
            exponent = self._exponent(coefficient)
            if exponent is None:
                monomial, exponent = monomial * field.rational(*coefficient) % p, 1
            free, flipped = self._generator(key_of(("exp",)), monomial)
            plain = field.power(free, exponent % (p - 1))
            turned = field.power(free, -exponent % (p - 1))
            product = product * np.where(flipped, turned, plain) % p
        return product

    def turn(
        self, coefficients: Sequence[tuple[int, int]], monomials: list[Array]
    ) -> tuple[Array, Array, npt.NDArray[np.bool_]]:
        """(cos, sin, where they exist) of Σ coefficient·monomial."""
        field, p = self.field, self.field.p
        size = monomials[0].size
        cosine: Array = np.ones(size, dtype=np.int64)
        sine: Array = np.zeros(size, dtype=np.int64)
        exists = np.ones(size, dtype=bool)
        for coefficient, monomial in zip(coefficients, monomials, strict=True):
            quarter = self._quarter_turns(coefficient, monomial)
            if quarter is not None:
                a, b = [(1, 0), (0, 1), (p - 1, 0), (0, p - 1)][quarter]
                cosine, sine = (a * cosine - b * sine) % p, (a * sine + b * cosine) % p
                continue
            exponent = self._exponent(coefficient)
            if exponent is None:
                monomial, exponent = monomial * field.rational(*coefficient) % p, 1
            t, flipped = self._generator(key_of(("turn",)), monomial)
            below = (1 + t * t) % p
            exists &= below != 0
            inverse = field.inverse(below)
            c1, s1 = (1 - t * t) % p * inverse % p, 2 * t * inverse % p
            s1 = np.where(flipped ^ (exponent < 0), (p - s1) % p, s1)
            c, s = self._turned(c1, s1, abs(exponent))
            cosine, sine = (cosine * c - sine * s) % p, (sine * c + cosine * s) % p
        return cosine, sine, exists

    def _quarter_turns(self, coefficient: tuple[int, int], monomial: Array) -> int | None:
        """The argument in quarter turns when it is a multiple of π/2."""
        pi = self.field.hashed(1, np.zeros(1, dtype=np.int64))[0]
        if 2 % coefficient[1] or not bool(np.all(monomial == pi)):
            return None
        return 2 * coefficient[0] // coefficient[1] % 4

    def _turned(self, c: Array, s: Array, times: int) -> tuple[Array, Array]:
        p = self.field.p
        cosine, sine = np.ones_like(c), np.zeros_like(s)
        while times:
            if times & 1:
                cosine, sine = (cosine * c - sine * s) % p, (sine * c + cosine * s) % p
            c, s = (c * c - s * s) % p, 2 * c * s % p
            times >>= 1
        return cosine, sine


def _size(values: dict[Symbol, Array]) -> int:
    return next((v.size for v in values.values()), POINTS)


def key_of(what: object) -> int:
    """A stable integer for a name and derivative orders."""
    return hash_text(repr(what))


def hash_text(text: str) -> int:
    """FNV-1a of a text, 64 bits (from memory); independent of the hash seed."""
    h = 0xCBF29CE484222325
    for byte in text.encode():
        h = (h ^ byte) * 0x100000001B3 & (2**64 - 1)
    return h

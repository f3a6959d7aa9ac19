"""The variety of the roots of a function, at random points modulo a prime.

The points of V: ρ_G² = s_G Π_{f ∈ G} f are drawn as evenly as they lie: a letter
in which a product is linear is computed from a random ρ, the other products are
left to chance, and only points are kept at which they are squares.
"""

from __future__ import annotations

import math
import secrets
from collections.abc import Collection, Mapping, Sequence
from fractions import Fraction
from typing import TYPE_CHECKING, Any

import numpy as np

from hjsolve.algebra.factors import Factors
from hjsolve.algebra.generators import coefficients
from hjsolve.algebra.graph import Node
from hjsolve.algebra.modular import prime
from hjsolve.algebra.orthants import Group
from hjsolve.algebra.uniform import NotUniform, Uniform

if TYPE_CHECKING:
    import numpy.typing as npt

    Array = npt.NDArray[np.int64]
else:
    Array = np.ndarray

POINTS = 64
"""Points modulo p at which the function is to vanish."""

DRAWN = 1 << 17
"""Points drawn at most to get them."""

PRIMES = 4096
"""Primes tried until all constants under roots are squares."""


class Covering:
    """One vector of signs.

    ``radicands`` are the factors of what is under each root (by what names it in
    the graph, or the number of a letter known by its square) and in each size;
    ``rooted`` names the roots among them.
    """

    def __init__(
        self,
        uniform: Uniform,
        surface: Sequence[int],
        radicands: Mapping[Any, Factors],
        rooted: Collection[Any],
        odd: Sequence[Group],
        signs: Mapping[Group, int],
    ) -> None:
        self.uniform, self.surface, self.radicands, self.signs = uniform, surface, radicands, signs
        self.group = {f: group for group in signs for f in group}
        self.products = {g: math.prod((f.poly for f in g[1:]), start=g[0].poly) for g in odd}
        roots = {k: v for k, v in radicands.items() if k in rooted}
        contents = [abs(c.numerator * c.denominator) for c, _ in roots.values()]
        self.constants = coprime(contents)
        self.p = _prime(self.constants)
        self.rng = np.random.default_rng(secrets.randbits(128))

    def bound(self, root: int) -> float | None:
        """The probability that node ``root`` is zero by chance; None where it is not zero."""
        self._draw()
        out: dict[int, Array] = {}
        degrees: dict[int, tuple[int, int]] = {}
        nodes = self.uniform.graph.nodes
        for at in self.surface:
            node = nodes[at]
            below = [out[a] for a in node.args if a in out]
            under = [degrees[a] for a in node.args if a in degrees]
            match node.op:
                case "add":
                    total = below[0]
                    for x in below[1:]:
                        total = (total + x) % self.p
                    out[at], degrees[at] = total, _sum_degree(under)
                case "mul":
                    total = below[0]
                    for x in below[1:]:
                        total = total * x % self.p
                    out[at] = total
                    degrees[at] = sum(n for n, _ in under), sum(d for _, d in under)
                case "power" if node.payload[1] == 1:
                    n = node.payload[0]
                    out[at] = self._power(below[0], n)
                    up, down = under[0] if n >= 0 else under[0][::-1]
                    degrees[at] = up * abs(n), down * abs(n)
                case _:
                    out[at], degrees[at] = self._leaf(at, node, out, degrees)
        value = out[root][~self._dead]
        if len(value) < POINTS // 2 or value.any():
            return None
        weight = math.prod(max(2, int(p.total_degree())) for p in self.products.values())
        one = (sum(degrees[root]) + 1) * weight / self.p
        return float(max(one ** len(value), 1e-300)) if one < 0.5 else None

    def _leaf(
        self, at: int, node: Node, out: Mapping[int, Array], degrees: Mapping[int, tuple[int, int]]
    ) -> tuple[Array, tuple[int, int]]:
        """The value of a node that is no sum, product or power, and its degrees."""
        if node.op == "symbol" and node.payload in self.uniform.aliases:
            place = self.uniform.aliases[node.payload]
            return out[place], degrees[place]
        if node.op == "power":
            n, denominator = node.payload
            content, factors = self.radicands[node.args[0], denominator // 2]
            degree = sum(int(f.poly.total_degree()) * abs(k * n) for f, k in factors)
            return self._power(self._root(content, factors), n), (degree, degree)
        if node.op in ("abs", "sign"):
            content, factors = self.radicands[node.args[0], 1]
            met = {self.group[f] for f, n in factors if n % 2}
            sign = math.prod(self.signs[g] for g in met) * (1 if content > 0 else -1)
            if node.op == "sign":
                return np.full(self.size, sign % self.p), (0, 0)
            value = np.full(self.size, self._residue(content) * sign % self.p)
            for f, n in factors:
                value = value * self._power(self._polynomial(f.poly), n) % self.p
            degree = sum(int(f.poly.total_degree()) * abs(n) for f, n in factors)
            return value, (degree, degree)
        ratio = self.uniform.value(at)
        above, below = ratio.numerator, ratio.denominator
        value = self._polynomial(above) * self._power(self._polynomial(below), -1) % self.p
        return value, (int(above.total_degree()), int(below.total_degree()))

    # ---------------------------------------------------------------- points

    def _draw(self) -> None:
        """Random points of V: letters, the roots ρ, and which points are kept."""
        plan, rest = self._plan()
        if len(rest) > 20 or POINTS << (len(rest) + 1) > DRAWN:
            raise NotUniform
        self.size = POINTS << (len(rest) + 1)
        self.letters: dict[int, Array] = {}
        self.rho: dict[Any, Array] = {}
        self._dead = np.zeros(self.size, dtype=bool)
        for group, k in plan:
            polynomial, sign = self.products[group], self.signs[group]
            self._fill(polynomial, k)
            root = self.rng.integers(1, self.p, self.size)
            parts = coefficients(polynomial, k, self.uniform.context)
            value = sign * root * root - (self._polynomial(parts[0]) if 0 in parts else 0)
            below = self._power(self._polynomial(parts[1]), -1)
            self.letters[k] = value % self.p * below % self.p
            self.rho[group] = root
        for group in rest:
            polynomial, sign = self.products[group], self.signs[group]
            self._fill(polynomial, None)
            value = sign * self._polynomial(polynomial) % self.p
            square = self._power(value, (self.p - 1) // 2) == 1
            turn = self.rng.choice(np.array([1, self.p - 1]), self.size)
            self.rho[group] = self._power(value, (self.p + 1) // 4) * turn % self.p
            self._keep(square)
        everything = set(range(len(self.uniform.keys))) - set(self.uniform.squares)
        for k in everything - set(self.letters):
            self.letters[k] = self.rng.integers(1, self.p, self.size)
        self._keep(np.arange(self.size) < POINTS)
        for k in self.uniform.squares:
            if k in self.radicands:
                one = self.uniform.signs.get(self.uniform.keys[k][1])
                turn = self.rng.choice(np.array([one] if one else [1, -1]), self.size)
                self.letters[k] = self._root(*self.radicands[k]) * turn % self.p

    def _plan(self) -> tuple[list[tuple[Group, int]], list[Group]]:
        """Factors that a letter of their own makes squares of, and those left to chance."""
        taken: set[int] = set(self.uniform.squares)
        plan = []
        left = sorted(self.products, key=lambda g: len(self.products[g]))
        progress = True
        while progress:
            progress = False
            for group in left:
                used = {k: d for k, d in enumerate(self.products[group].degrees()) if d}
                free = [k for k, d in used.items() if d == 1 and k not in taken]
                if free:
                    plan.append((group, free[-1]))
                    left.remove(group)
                    taken |= set(used)
                    progress = True
                    break
        return plan, left

    def _fill(self, polynomial: Any, but: int | None) -> None:
        for k, d in enumerate(polynomial.degrees()):
            if d and k != but and k not in self.letters:
                self.letters[k] = self.rng.integers(1, self.p, self.size)

    def _keep(self, mask: Any) -> None:
        """Only the points of the mask from here on."""
        mask = mask & ~self._dead
        self.letters = {k: v[mask] for k, v in self.letters.items()}
        self.rho = {k: v[mask] for k, v in self.rho.items()}
        self._dead = self._dead[mask]
        self.size = len(self._dead)

    # ------------------------------------------------------------ arithmetic

    def _power(self, base: Array, exponent: int) -> Array:
        """base**exponent; points at which 0 is divided by are not looked at."""
        if exponent < 0:
            self._dead |= base == 0
            base, exponent = self._power(base, self.p - 2), -exponent
        result, square = np.ones_like(base), base
        while exponent:
            if exponent & 1:
                result = result * square % self.p
            square = square * square % self.p
            exponent >>= 1
        return result

    def _residue(self, number: Fraction) -> int:
        return number.numerator * pow(number.denominator, -1, self.p) % self.p

    def _polynomial(self, polynomial: Any) -> Array:
        total = np.zeros(self.size, dtype=np.int64)
        for exponents, coefficient in polynomial.to_dict().items():
            term = np.full(self.size, int(coefficient) % self.p, dtype=np.int64)
            for k, e in enumerate(exponents):
                if e:
                    if k not in self.letters:
                        raise NotUniform
                    term = term * self._power(self.letters[k], int(e)) % self.p
            total = (total + term) % self.p
        return total

    def _root(self, content: Fraction, factors: Sequence[tuple[Any, int]]) -> Array:
        """√(c Π f^k) = √|c| Π |f|^(k/2) by the signs s and the roots ρ."""
        n = abs(content.numerator * content.denominator)
        number = self._residue(Fraction(1, content.denominator))
        for b in self.constants:
            while n % b == 0:
                n //= b
                number = number * pow(b, (self.p + 1) // 4, self.p) % self.p
        if n != 1:
            raise NotUniform
        value: Array = np.full(self.size, number, dtype=np.int64)
        first: dict[Group, int] = {}
        for f, times in factors:
            if times % 4 == 0:
                value = value * self._power(self._polynomial(f.poly), times // 2) % self.p
                continue
            group = self.group[f]
            if group not in first:
                first[group] = times
                size = self.rho[group] if times % 2 else self._size(group)
                value = value * self._power(size, times if times % 2 else times // 2) % self.p
            rest = (times - first[group]) // 2
            value = value * self._power(self._polynomial(f.poly), rest) % self.p
        return value

    def _size(self, group: Group) -> Array:
        """|Π f|."""
        product = np.full(self.size, self.signs[group] % self.p, dtype=np.int64)
        for f in group:
            product = product * self._polynomial(f.poly) % self.p
        return product


def _sum_degree(parts: Sequence[tuple[int, int]]) -> tuple[int, int]:
    """Degrees of numerator and denominator of a sum."""
    below = sum(d for _, d in parts)
    return max(n - d for n, d in parts) + below, below


def coprime(numbers: Sequence[int]) -> list[int]:
    """Coprime numbers above 1, none of them a square, of which all ``numbers`` are products."""
    base: list[int] = []
    todo = list(numbers)
    while todo:
        n = todo.pop()
        root = math.isqrt(n)
        if n < 2 or n in base:
            continue
        if root * root == n:
            todo.append(root)
            continue
        for b in base:
            g = math.gcd(n, b)
            if g > 1:
                base.remove(b)
                todo += [g, n // g, b // g]
                break
        else:
            base.append(n)
    return base


def _prime(constants: Sequence[int]) -> int:
    """A random prime modulo which the constants are squares that are not 0."""
    for _ in range(PRIMES):
        p = prime(1, [(c, 1) for c in constants[:6]])
        if all(pow(c, (p - 1) // 2, p) == 1 for c in constants):
            return p
    raise NotUniform

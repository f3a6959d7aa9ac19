"""The linear conditions on concircular tensors, and their exact solution.

In a flat space with constant metric g the concircular tensors are

    L = A + w⊗x + x⊗w + α x⊗x ,

and L goes with V when K = tr(L) g⁻¹ − L satisfies d(K dV) = 0, which is linear
in (A, w, α).  L = g⁻¹ always does and is left out by A_nn = 0.  (Benenti;
Crampin, Diff. Geom. Appl. 18 (2003) 87; Rauch-Wojciechowski & Waksjö, Math.
Phys. Anal. Geom. 6 (2003) 301; citations from memory.)

The conditions are collected over whatever functions of x occur, which are
taken as independent up to s² + c² = 1 and R^b = u.  Relations between them that
this does not know can only make the solution space too small: what is found
here is a solution, and ``witness`` bounds the dimension from the other side.
"""

from __future__ import annotations

import math
import secrets
from collections.abc import Sequence
from dataclasses import dataclass, field
from itertools import combinations
from typing import Any

import sympy as sp
from sympy import Abs, Expr, Matrix, Symbol, eye, sign, sqrt
from sympy.ntheory import nextprime

from hjsolve.algebra.generators import Generators, NotRational, Ratio, divide
from hjsolve.algebra.roots import open_squares, unify_roots
from hjsolve.charts.exact import inverse, tidy

TERMS = 60_000
"""A condition with more terms is not collected."""


class TooHard(Exception):
    """The conditions were not collected; the message says why."""


def unknowns(n: int) -> list[tuple[str, int, int]]:
    """What the unknowns are: ('A', i, j), ('w', i, 0), ('alpha', 0, 0), in this order."""
    found = [("A", i, j) for i in range(n) for j in range(i, n) if (i, j) != (n - 1, n - 1)]
    return [*found, *(("w", i, 0) for i in range(n)), ("alpha", 0, 0)]


def tensor(kind: tuple[str, int, int], x: Sequence[Any]) -> list[list[Any]]:
    """The matrix L of one unknown set to 1, at the point x."""
    n = len(x)
    what, i, j = kind
    zero = x[0] * 0
    L = [[zero] * n for _ in range(n)]
    if what == "A":
        L[i][j] = L[j][i] = zero + 1
    elif what == "w":
        for k in range(n):
            L[i][k] = L[i][k] + x[k]
            L[k][i] = L[k][i] + x[k]
    else:
        L = [[a * b for b in x] for a in x]
    return L


def concircular(x: Sequence[Symbol], gram: Sequence[Sequence[Expr]]) -> list[list[Expr]]:
    """For every unknown the n² entries of tr(L) δ − gL, by rows, as polynomials in x."""
    n = len(x)
    metric = inverse(Matrix(gram))
    found = []
    for kind in unknowns(n):
        product = metric * Matrix(tensor(kind, x))
        found.append(_flat(product.trace() * eye(n) - product))
    return found


def spherical(y: Sequence[Expr], gram: Sequence[Sequence[Expr]]) -> list[list[Expr]]:
    """The same for the quadratic forms in the angular momenta about y = 0.

    The unknowns are the entries of a symmetric B, the last one left out.  With
    unit metric K = tr B (r² − y⊗y) − [(y·By) − y⊗By − By⊗y + r² B], for diagonal
    B the integral Σ b_k J_k²; here y, B are contravariant and g lowers indices.
    """
    n = len(y)
    metric = inverse(Matrix(gram))
    v = Matrix(y)
    low = metric * v
    square = (v.T * low)[0]
    found = []
    for kind in unknowns(n)[: n * (n + 1) // 2 - 1]:
        B = Matrix(tensor(kind, y))
        moved = B * low
        K = (metric * B).trace() * (square * eye(n) - low * v.T)
        K -= (low.T * moved)[0] * eye(n) - low * moved.T - metric * moved * v.T
        K -= square * metric * B
        found.append(_flat(K))
    return found


def _flat(M: Matrix) -> list[Expr]:
    n = M.shape[0]
    return [sp.expand(M[i, j]) for i in range(n) for j in range(n)]


def smooth(potential: Expr) -> tuple[Expr, set[Symbol]]:
    """The potential with its roots made alike and without |u|, and the letters σ used.

    |u| becomes an arbitrary function of u: what holds for every function holds
    for it, while |u| = ±u would call |x| + |y| separable about every angle, which
    it is in each quadrant only.  √u √v with uv = w² becomes σ w with a letter σ,
    so that √(r+x) and √(r−x) are one generator: there the wall w = 0 is where the
    roots themselves end.
    """
    potential = without_sizes(unify_roots(open_squares(potential)))
    sigmas: dict[Expr, Symbol] = {}
    radicands = sorted(
        {p.base for p in potential.atoms(sp.Pow) if p.exp.is_Rational and p.exp.q == 2},
        key=lambda e: (e.count_ops(), str(e)),
    )
    for first, second in combinations([r for r in radicands if r.is_Add], 2):
        product = open_squares(sqrt(sp.expand(first * second)))
        if product.has(sqrt(sp.expand(first * second))) or not product.has(Abs):
            continue
        for size in product.atoms(Abs):
            sigma = sigmas.setdefault(size.args[0], sp.Dummy("sigma", real=True))
            product = product.xreplace({size: sigma * size.args[0]})
        roots = [p for p in potential.atoms(sp.Pow) if p.base == second and p.exp.q == 2]
        potential = potential.xreplace({p: (product / sqrt(first)) ** (2 * p.exp) for p in roots})
    return potential, set(sigmas.values())


def without_sizes(e: Expr) -> Expr:
    """The expression with |u| and sign u replaced by arbitrary functions of u."""
    while e.has(Abs, sign):
        innermost = [a for a in e.atoms(Abs, sign) if not a.args[0].has(Abs, sign)]
        e = e.xreplace({a: sp.Function(f"_{type(a).__name__}")(a.args[0]) for a in innermost})
    return e


@dataclass
class Conditions:
    """d(K dV) = 0 collected: rows of polynomials in the parameters.

    ``rows[k]`` has one entry an unknown, each a dictionary from exponents to
    integer coefficients in the generators of ``ring`` that do not depend on x.
    """

    coordinates: tuple[Symbol, ...]
    fields: Sequence[Sequence[Expr]]
    potential: Expr
    ring: Generators = field(init=False)
    rows: list[list[dict[tuple[int, ...], int]]] = field(init=False)
    sigmas: set[Symbol] = field(init=False)

    def __post_init__(self) -> None:
        """Collect; raises TooHard."""
        try:
            self._collect()
        except (NotRational, ArithmeticError) as error:
            raise TooHard(f"the potential has no manageable form: {error}") from error

    # ---------------------------------------------------------- collecting

    def _collect(self) -> None:
        n, x = len(self.coordinates), self.coordinates
        potential, self.sigmas = smooth(self.potential)
        # multiplied out by exact polynomials first: SymPy's derivatives of powers of
        # linear forms took 8 of 9 s on a rotated sextic
        plain = [t for t in sp.Add.make_args(potential) if t.is_polynomial(*x)]
        if plain:
            potential = potential - sp.Add(*plain) + tidy(sp.Add(*plain))
        first = [sp.diff(potential, q) for q in x]
        second = {(i, j): sp.diff(first[i], x[j]) for i in range(n) for j in range(i, n)}
        fields = self.fields
        entries = [e for M in fields for e in M]
        self.ring = Generators([*first, *second.values(), *entries], extra=x)
        v1 = [self._ratio(e) for e in first]
        v2 = {k: self._ratio(e) for k, e in second.items()}
        below = self._common([*v1, *v2.values()])
        p1 = [self._over(v, below) for v in v1]
        p2 = {k: self._over(v, below) for k, v in v2.items()}
        self.rows = []
        pieces = [[self.ring.ratio(e) for e in M] for M in fields]
        slopes = [
            {(i, k): self.ring.ratio(sp.diff(M[k], x[i])) for i in range(n) for k in range(n * n)}
            for M in fields
        ]
        scale = self._common([r for p in pieces for r in p])
        for i, j in combinations(range(n), 2):
            conditions = []
            for M, D in zip(pieces, slopes, strict=True):
                total = self.ring.context.constant(0)
                for m in range(n):
                    slope = D[i, n * j + m] - D[j, n * i + m]
                    total += self._over(slope, scale) * p1[m]
                    total += self._over(M[n * j + m], scale) * p2[min(m, i), max(m, i)]
                    total -= self._over(M[n * i + m], scale) * p2[min(m, j), max(m, j)]
                conditions.append(total)
            self._split(self._reduced(conditions))

    def _ratio(self, e: Expr) -> Ratio:
        return self.ring.reduce(self.ring.ratio(e))

    def _common(self, values: Sequence[Ratio]) -> Any:
        below = self.ring.context.constant(1)
        for v in values:
            below = divide(below, below.gcd(v.denominator)) * v.denominator
        return below

    def _over(self, v: Ratio, below: Any) -> Any:
        return v.numerator * divide(below, v.denominator)

    def _reduced(self, polynomials: list[Any]) -> list[Any]:
        """The polynomials with the ring's relations used, all times the same factor."""
        again = True
        while again:
            again = False
            for k, degree, power in reversed(self.ring.relations):
                most = max(p.degrees()[k] // degree if not p.is_zero() else 0 for p in polynomials)
                if most <= 0:
                    continue
                again = True
                polynomials = [self._replaced(p, k, degree, power, most) for p in polynomials]
                if sum(map(len, polynomials)) > TERMS:
                    raise TooHard("the conditions on the tensors have too many terms")
        return polynomials

    def _replaced(self, polynomial: Any, k: int, degree: int, power: Ratio, most: int) -> Any:
        parts: dict[int, dict[tuple[int, ...], Any]] = {}
        for exponents, c in polynomial.to_dict().items():
            times, left = divmod(int(exponents[k]), degree)
            rest = (*exponents[:k], left, *exponents[k + 1 :])
            parts.setdefault(times, {})[rest] = c
        total = self.ring.context.constant(0)
        for times, terms in parts.items():
            total += (
                self.ring.context.from_dict(terms)
                * power.numerator**times
                * power.denominator ** (most - times)
            )
        return total

    def _split(self, polynomials: list[Any]) -> None:
        """Rows of the coefficients of every product of functions of x."""
        moving = set(self.coordinates)
        depends = [bool(g.free_symbols & moving) for g in self.ring.items]
        found: dict[tuple[int, ...], list[dict[tuple[int, ...], int]]] = {}
        for k, polynomial in enumerate(polynomials):
            for exponents, c in polynomial.to_dict().items():
                inner = tuple(int(e) if d else 0 for e, d in zip(exponents, depends, strict=True))
                outer = tuple(0 if d else int(e) for e, d in zip(exponents, depends, strict=True))
                row = found.setdefault(inner, [{} for _ in polynomials])
                row[k][outer] = int(c)
        seen = {str(row): row for row in found.values()}
        self.rows.extend(seen.values())

    # ------------------------------------------------------------- solving

    def solve(self) -> list[list[Expr]]:
        """A basis of the solution space, in the order of ``unknowns``; raises TooHard."""
        try:
            rows = self._independent()
            basis = self._kernel(rows)
            self._check(basis)
        except (NotRational, ArithmeticError) as error:
            raise TooHard(f"the linear system was not solved: {error}") from error
        found = [[self.ring.expression(v) for v in vector] for vector in basis]
        if any(e.free_symbols & self.sigmas for vector in found for e in vector):
            raise TooHard("the tensors depend on the sign of an absolute value")
        return found

    def _independent(self) -> list[list[Ratio]]:
        """Rows that span all, the shortest first: chosen at a random point modulo a prime."""
        p, at = self._point()
        order = sorted(self.rows, key=lambda row: sum(map(len, row)))
        chosen: list[list[dict[tuple[int, ...], int]]] = []
        reduced: list[tuple[int, list[int]]] = []
        for row in order:
            values = [_value(entry, at, p) for entry in row]
            for pivot, known in reduced:
                if values[pivot]:
                    factor = values[pivot]
                    values = [(a - factor * b) % p for a, b in zip(values, known, strict=True)]
            head = next((k for k, v in enumerate(values) if v), None)
            if head is None:
                continue
            inverse = pow(values[head], -1, p)
            reduced.append((head, [v * inverse % p for v in values]))
            chosen.append(row)
            if len(chosen) == len(row):
                break
        unit = self.ring.context.constant(1)
        return [
            [Ratio(self.ring.context.from_dict(entry), unit) for entry in row] for row in chosen
        ]

    def _point(self) -> tuple[int, list[int]]:
        """A prime and a value for every generator free of x, consistent with the relations."""
        for _ in range(200):
            p = nextprime(secrets.randbits(60) + 2**60)
            if p % 4 != 3 or p % 3 != 2:
                continue
            at = [secrets.randbelow(p - 2) + 1 for _ in self.ring.items]
            if self._consistent(p, at):
                return p, at
        raise TooHard("no point was found at which the roots of the parameters exist")

    def _consistent(self, p: int, at: list[int]) -> bool:
        moving = set(self.coordinates)
        for k, degree, power in self.ring.relations:
            item = self.ring.items[k]
            if item.free_symbols & moving:
                continue
            below = _value(_terms(power.denominator), at, p)
            if below == 0:
                return False
            value = _value(_terms(power.numerator), at, p) * pow(below, -1, p) % p
            odd = degree
            while odd % 2 == 0:
                if pow(value, (p - 1) // 2, p) != 1:
                    value = -1
                    break
                value, odd = pow(value, (p + 1) // 4, p), odd // 2
            if value <= 0 or math.gcd(odd, p - 1) != 1:
                return False
            at[k] = pow(value, pow(odd, -1, p - 1), p) if odd > 1 else value
        return True

    def _kernel(self, rows: list[list[Ratio]]) -> list[list[Ratio]]:
        """The exact kernel over the field of the parameters."""
        n = len(self.fields)
        rows = [list(row) for row in rows]
        done: list[tuple[int, list[Ratio]]] = []
        while rows:
            choices = [
                (len(row[c].numerator) + len(row[c].denominator), c, k)
                for k, row in enumerate(rows)
                for c in range(n)
                if not row[c].is_zero()
            ]
            if not choices:
                break
            _, column, at = min(choices)
            pivot = rows.pop(at)
            head = pivot[column]
            pivot = [self.ring.reduce(v / head) for v in pivot]
            rows = [self._cleared(row, pivot, column) for row in rows]
            done = [(c, self._cleared(row, pivot, column)) for c, row in done]
            done.append((column, pivot))
        fixed = {c: row for c, row in done}
        basis = []
        for free in (c for c in range(n) if c not in fixed):
            vector = [self.ring.number(0)] * n
            vector[free] = self.ring.number(1)
            for c, row in fixed.items():
                vector[c] = -row[free]
            basis.append(vector)
        return basis

    def _cleared(self, row: list[Ratio], pivot: list[Ratio], column: int) -> list[Ratio]:
        factor = row[column]
        if factor.is_zero():
            return row
        return [
            self.ring.reduce(a - factor * b) if not b.is_zero() else a
            for a, b in zip(row, pivot, strict=True)
        ]

    def _check(self, basis: list[list[Ratio]]) -> None:
        """Every row times every vector, at a point modulo another prime."""
        p, at = self._point()
        for vector in basis:
            values = []
            for v in vector:
                below = _value(_terms(v.denominator), at, p)
                values.append(_value(_terms(v.numerator), at, p) * pow(below, -1, p) % p)
            for row in self.rows:
                if sum(_value(e, at, p) * v for e, v in zip(row, values, strict=True)) % p:
                    raise TooHard("a solution of the chosen rows does not solve the others")


def _terms(polynomial: Any) -> dict[tuple[int, ...], int]:
    return {tuple(map(int, e)): int(c) for e, c in polynomial.to_dict().items()}


def _value(terms: dict[tuple[int, ...], int], at: list[int], p: int) -> int:
    total = 0
    for exponents, c in terms.items():
        product = c % p
        for e, v in zip(exponents, at, strict=True):
            if e:
                product = product * pow(v, e, p) % p
        total += product
    return total % p

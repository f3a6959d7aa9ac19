"""Which axes does a space of symmetric matrices of space know?

Matrices count up to multiples of the unit matrix.  The ones that commute with
the second derivatives of a potential are those of a sum of blocks; the same
shapes occur among the quadratic forms in the angular momenta.  Any other shape
is reported, not guessed.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import combinations
from typing import Literal

from sympy import Expr, Matrix, Poly, S, Symbol, eye, factor_list

from hjsolve.charts.exact import Unsure, Vector, null, root, tidy, unit, zero


@dataclass(frozen=True, slots=True)
class Axes:
    """The shape of a space of symmetric 3 × 3 matrices modulo the unit matrix.

    ``none``: {0}; ``axis``: n⊗n, with ``rows[0]`` = n; ``single``: one matrix with
    distinct ``values`` along ``rows``; ``triad``: all that are diagonal along ``rows``;
    ``axial``: n⊗n and all of the plane across, with ``rows[2]`` = n; ``all``.
    """

    kind: Literal["none", "axis", "single", "triad", "axial", "all"]
    rows: tuple[Vector, ...] = ()
    values: Vector = ()


def axes_of(matrices: Sequence[Matrix]) -> Axes:
    """The shape of the span of linearly independent matrices; raises Unsure."""
    match len(matrices):
        case 0:
            return Axes("none")
        case 1:
            return _one(matrices[0])
        case 2:
            a, b = matrices
            if not null(a * b - b * a):
                raise Unsure("a plane of quadratic forms without common axes")
            return _triad(a, b)
        case 3:
            return _axial(matrices)
        case 5:
            return Axes("all", tuple(map(tuple, eye(3).tolist())))
    raise Unsure(f"a space of quadratic forms of dimension {len(matrices)}")


def _one(a: Matrix) -> Axes:
    n = double(a)
    if n is not None:
        return Axes("axis", (n,))
    values = eigenvalues(a)
    return Axes("single", tuple(eigenvector(a, v) for v in values), tuple(values))


def double(a: Matrix) -> Vector | None:
    """The unit vector n of a = λ + ν n⊗n, None when the eigenvalues are distinct.

    A double eigenvalue is (c1 c2 − 9 c3)/(2(c1² − 3 c2)) in the coefficients of
    λ³ − c1 λ² + c2 λ − c3, so no root is taken.
    """
    rest = a - a.trace() / 3 * eye(3)
    if null(rest):
        raise Unsure("a multiple of the unit matrix has no axis")
    c2 = tidy((rest.trace() ** 2 - (rest * rest).trace()) / 2)
    c3 = tidy(rest.det())
    if not zero(4 * c2**3 + 27 * c3**2):
        return None
    value = tidy(3 * c3 / (2 * c2))
    rank_one = (rest - value * eye(3)).applyfunc(tidy)
    for k in range(3):
        column = tuple(rank_one[:, k])
        if not null(column):
            return unit(column)
    raise Unsure("no axis was found")


def excess(a: Matrix, n: Vector) -> Expr:
    """The ν of a = λ + ν n⊗n."""
    v = Matrix(n)
    along = (v.T * a * v)[0]
    return tidy((3 * along - a.trace()) / 2)


def eigenvalues(a: Matrix) -> list[Expr]:
    """Distinct eigenvalues, ascending where the order is known; raises Unsure.

    By factors over the field of the entries; a quadratic factor by its root.
    """
    t = Symbol("t")
    polynomial = Poly((a - t * eye(3)).det(), t)
    _, factors = factor_list(polynomial.as_expr(), t)
    found: list[Expr] = []
    for part, _ in factors:
        p = Poly(part, t)
        if p.degree() == 1:
            found.append(tidy(-p.coeff_monomial(1) / p.coeff_monomial(t)))
        elif p.degree() == 2:
            c, b, d = (p.coeff_monomial(t**k) for k in (2, 1, 0))
            half = root(b**2 - 4 * c * d)
            found += [tidy((-b - half) / (2 * c)), tidy((-b + half) / (2 * c))]
        else:
            raise Unsure("the axes are the roots of a cubic that does not factor")
    if all(v.is_number for v in found):
        found.sort(key=lambda v: float(v))
    return found


def eigenvector(a: Matrix, value: Expr) -> Vector:
    """The unit vector of a simple eigenvalue; raises Unsure."""
    m = (a - value * eye(3)).applyfunc(tidy)
    for i, j in combinations(range(3), 2):
        cross = tuple(tidy(e) for e in m[i, :].cross(m[j, :]))
        if not null(cross):
            return unit(cross)
    raise Unsure("an eigenvalue is not simple")


def _triad(a: Matrix, b: Matrix) -> Axes:
    """The common axes: a combination with distinct eigenvalues shows them."""
    for k in (0, 1, 2, -1, 3, -2, 5):
        mixed = (a + k * b).applyfunc(tidy)
        try:
            if double(mixed) is not None:
                continue
        except Unsure:
            continue
        rows = tuple(eigenvector(mixed, v) for v in eigenvalues(mixed))
        return Axes("triad", _ordered(rows))
    raise Unsure("no common axes were found")


def _axial(matrices: Sequence[Matrix]) -> Axes:
    """Commutators of block matrices all turn about the axis."""
    n: Vector | None = None
    for a, b in combinations(matrices, 2):
        c = (a * b - b * a).applyfunc(tidy)
        turn = (c[2, 1], c[0, 2], c[1, 0])
        if null(turn):
            continue
        if n is None:
            n = unit(turn)
        elif not null(Matrix(n).cross(Matrix(turn))):
            raise Unsure("quadratic forms without a common axis")
    if n is None:
        raise Unsure("three commuting quadratic forms")
    v = Matrix(n)
    if not all(null((a * v).cross(v)) for a in matrices):
        raise Unsure("quadratic forms without a common axis")
    return Axes("axial", frame(n))


def frame(n: Vector) -> tuple[Vector, Vector, Vector]:
    """A right-handed orthonormal triad whose last vector is n, rational where n is.

    Householder's reflection takes e_3 to n; one of the others is turned round.
    """
    e = Matrix([S.Zero, S.Zero, S.One])
    v = Matrix(n) - e
    if null(v):
        return ((S.One, S.Zero, S.Zero), (S.Zero, S.One, S.Zero), n)
    size = (v.T * v)[0]
    reflect = (eye(3) - 2 * v * v.T / size).applyfunc(tidy)
    first, second = tuple(reflect[:, 1]), tuple(reflect[:, 0])
    if n == (S.One, S.Zero, S.Zero):
        first, second = (S.Zero, S.One, S.Zero), (S.Zero, S.Zero, S.One)
    if n == (S.Zero, S.One, S.Zero):
        first, second = (S.Zero, S.Zero, S.One), (S.One, S.Zero, S.Zero)
    return first, second, n


def _ordered(rows: Sequence[Vector]) -> tuple[Vector, ...]:
    """The rows in the order of the request's axes where they are those."""
    units = [tuple(row) for row in eye(3).tolist()]
    if all(row in units for row in rows):
        return tuple(sorted(rows, key=units.index))
    return tuple(rows)

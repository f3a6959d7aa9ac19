"""The smaller problems that a multiple eigenvalue leaves: a plane or a sphere."""

from __future__ import annotations

from collections.abc import Sequence

from sympy import Dummy, Expr, Matrix, Pow, S, Symbol, diff, eye

from hjsolve.charts.exact import Unsure, Vector, inverse, null, tidy, zero
from hjsolve.charts.search.proof import solved
from hjsolve.charts.search.tensors import concircular, spherical
from hjsolve.charts.space import Space


def plane_leaf(where: Space, rows: Sequence[Vector]) -> list[Vector]:
    """The tensors of the plane across the last row, as ``PlaneReader`` takes them.

    The potential is the sum of a function along the last row and of one across
    it, so that any fixed height serves; the height is a letter, drawn like a
    parameter.  The plane is solved in oblique coordinates of the request's own
    space: masses and the length of the row then enter without roots, which
    three masses on a line would need six of.

    Returns:
        Rows (A_11 − A_22, 2A_12, w_1, w_2, α) in coordinates along the first two rows.

    Raises:
        Unsure: the number of tensors was not proved.
    """
    basis, normal = _sheet(where, rows)
    metric = inverse(Matrix(where.gram))
    if where.mass_map is None:
        metric = eye(3)
    inner = Matrix(2, 2, lambda i, j: tidy((basis[i].T * metric * basis[j])[0]))
    gram = inverse(inner).tolist()
    s, t = Dummy("s", real=True), Dummy("t", real=True)
    height = Dummy("height", positive=True)
    x = s * basis[0] + t * basis[1] + height * normal
    potential = where.potential.xreplace(dict(zip(where.coordinates, x, strict=True)))
    found = _solved(where, (s, t), concircular((s, t), gram), potential, {height})
    turn = Matrix(rows[:2]) * where.map * Matrix.hstack(*basis)
    return [_turned(v, turn) for v in found]


def _sheet(where: Space, rows: Sequence[Vector]) -> tuple[list[Matrix], Matrix]:
    """Two vectors of the request's space that span the plane, and one across it."""
    if where.mass_map is None and not any(_has_roots(e) for row in rows for e in row):
        return [Matrix(rows[0]), Matrix(rows[1])], Matrix(rows[2])
    metric = inverse(Matrix(where.gram))
    normal = inverse(where.map) * Matrix(rows[2])
    lead = next(e for e in normal if not zero(e))
    normal = (normal / lead).applyfunc(tidy)
    across = (metric * normal).applyfunc(tidy)
    pivot = next(k for k in range(3) if not zero(across[k]))
    basis = []
    for k in range(3):
        if k != pivot:
            v = Matrix.zeros(3, 1)
            v[k], v[pivot] = S.One, tidy(-across[k] / across[pivot])
            basis.append(v)
    return basis, normal


def _has_roots(e: Expr) -> bool:
    return any(p.exp.is_Rational and p.exp.q != 1 for p in e.atoms(Pow))


def _turned(v: Sequence[Expr], turn: Matrix) -> Vector:
    """A solution in oblique coordinates as a row of the plane reader in turned ones."""
    A = turn * Matrix([[v[0], v[1]], [v[1], S.Zero]]) * turn.T
    w = turn * Matrix([v[2], v[3]])
    return tidy(A[0, 0] - A[1, 1]), tidy(2 * A[0, 1]), tidy(w[0]), tidy(w[1]), v[4]


def sphere_leaf(where: Space, center: Vector) -> list[list[Expr]]:
    """The quadratic forms in the angular momenta about a point that go with the potential.

    Their B is in the request's coordinates, as ``spherical`` has it.

    Raises:
        Unsure: their number was not proved.
    """
    # in the request's own coordinates the masses enter without roots
    middle = inverse(where.map) * Matrix(center)
    shifted = [q - tidy(b) for q, b in zip(where.coordinates, middle, strict=True)]
    fields = spherical(shifted, where.gram)
    return _solved(where, where.coordinates, fields, where.potential, set())


def slope(where: Space, row: Sequence[Expr]) -> Expr:
    """The derivative of the potential along a vector of the space of unit metric."""
    along = inverse(where.map) * Matrix(row)
    return sum(
        (a * diff(where.potential, q) for a, q in zip(along, where.coordinates, strict=True)),
        S.Zero,
    )


def flat_along(where: Space, row: Vector) -> bool:
    """Whether the potential does not change along a vector; raises Unsure."""
    along = inverse(where.map) * Matrix(row)
    lead = next(e for e in along if not zero(e))
    # scaled so, a direction of masses and lengths enters without their roots
    scaled = where.map * (along / lead).applyfunc(tidy)
    return zero(slope(where, tuple(scaled)))


def uniform_force(where: Space, rows: Sequence[Vector]) -> Vector | None:
    """The gradient along orthonormal rows where it is the same everywhere and not zero.

    Raises:
        Unsure: whether it is was not decided.
    """
    values = [tidy(slope(where, row)) for row in rows]
    if any(e.free_symbols & set(where.coordinates) for e in values) or null(values):
        return None
    total: Vector = (S.Zero, S.Zero, S.Zero)
    for value, row in zip(values, rows, strict=True):
        total = tuple(tidy(t + value * a) for t, a in zip(total, row, strict=True))
    return total


def _solved(
    where: Space,
    coordinates: tuple[Symbol, ...],
    fields: list[list[Expr]],
    potential: Expr,
    foreign: set[Symbol],
) -> list[list[Expr]]:
    found = solved(coordinates, fields, potential, {}, where.hamiltonian.functions)
    if found.reason:
        raise Unsure(f"a leaf: {found.reason}")
    basis = found.basis
    if any(e.free_symbols & foreign for v in basis for e in v):
        raise Unsure("the tensors of a leaf depend on where it is cut")
    return basis

"""A concircular tensor in Cartesian coordinates of unit metric, and its rows."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from sympy import Expr, Matrix, S

from hjsolve.charts.exact import Vector, tidy
from hjsolve.charts.search.tensors import unknowns
from hjsolve.charts.space import Space


@dataclass(frozen=True, slots=True)
class Tensor:
    """L = A + w⊗y + y⊗w + α y⊗y; A counts up to multiples of the unit matrix."""

    A: Matrix
    w: Matrix
    alpha: Expr


def cartesian(vector: Sequence[Expr], where: Space) -> Tensor:
    """A solution in the request's coordinates as a tensor in y = mass_map · x."""
    n = where.dimension
    A, w, alpha = Matrix.zeros(n, n), Matrix.zeros(n, 1), S.Zero
    for (what, i, j), value in zip(unknowns(n), vector, strict=True):
        if what == "A":
            A[i, j] = A[j, i] = value
        elif what == "w":
            w[i] = value
        else:
            alpha = value
    M = where.map
    if where.mass_map is None:
        return Tensor(A, w, alpha)
    return Tensor((M * A * M.T).applyfunc(tidy), (M * w).applyfunc(tidy), alpha)


def plane_row(t: Tensor) -> Vector:
    """(A_11 − A_22, 2A_12, w_1, w_2, α) of a tensor of the plane."""
    return (tidy(t.A[0, 0] - t.A[1, 1]), tidy(2 * t.A[0, 1]), t.w[0], t.w[1], t.alpha)


def rest(t: Tensor) -> Vector:
    """(A_11 − A_33, A_22 − A_33, A_12, A_13, A_23, w_1, w_2, w_3, α) of a tensor of space."""
    A = t.A
    return (
        tidy(A[0, 0] - A[2, 2]),
        tidy(A[1, 1] - A[2, 2]),
        *(A[0, 1], A[0, 2], A[1, 2]),
        *t.w,
        t.alpha,
    )


def tensor_of(v: Vector) -> Tensor:
    """The tensor of such a row, with A_33 = 0."""
    A = Matrix([[v[0], v[2], v[3]], [v[2], v[1], v[4]], [v[3], v[4], S.Zero]])
    return Tensor(A, Matrix(v[5:8]), v[8])

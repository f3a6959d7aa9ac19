"""Normal forms of the concircular tensors of space with α = 0, w ≠ 0."""

from __future__ import annotations

from collections.abc import Sequence

from sympy import Matrix, S

from hjsolve.charts.exact import Unsure, Vector, null, tidy, unit
from hjsolve.charts.search.axes import frame
from hjsolve.charts.search.systems import added
from hjsolve.charts.search.tensor import Tensor


def parabolic_form(t: Tensor) -> tuple[Vector, Vector, Matrix]:
    """(e, c, A″): L/|w| = A″ + e⊗(y−c) + (y−c)⊗e with A″e = 0."""
    e = unit(tuple(t.w))
    v = Matrix(e)
    length = (t.w.T * v)[0]
    A = (t.A / length).applyfunc(tidy)
    c = -A * v + v * (v.T * A * v)[0] / 2
    across = (A + c * v.T + v * c.T).applyfunc(tidy)
    return e, tuple(tidy(p) for p in c), across


def focus_of(t: Tensor, rows: Sequence[Vector] = ()) -> Vector:
    """The focus of a rotational parabolic tensor; raises Unsure for any other.

    Along ``rows`` constant tensors go with it, and one of those makes it rotational.
    """
    e, center, across = parabolic_form(t)
    if rows:
        others = [n for n in rows if not null(Matrix(n).cross(Matrix(e)))]
        if not null([block_of(across, others[0], others[1])[0, 1]]):
            raise Unsure("parabolic tensors askew to the axes of the potential")
        return center
    block = block_of(across, *frame(e)[:2])
    if not null((block[0, 0] - block[1, 1], block[0, 1])):
        raise Unsure("parabolic tensors that are not rotational")
    return added(center, e, block[0, 0] / 2)


def common_focus(linear: Sequence[Tensor]) -> Vector:
    """The focus that all parabolic tensors share; raises Unsure when they do not."""
    foci = [focus_of(t) for t in linear]
    if not all(null(added(f, foci[0], -S.One)) for f in foci):
        raise Unsure("parabolic tensors without a common focus")
    return foci[0]


def orthonormal(vectors: Sequence[Matrix]) -> list[Vector]:
    """Gram and Schmidt's orthonormal basis."""
    found: list[Vector] = []
    for v in vectors:
        for e in found:
            v = v - Matrix(e) * (v.T * Matrix(e))[0]
        found.append(unit(tuple(tidy(p) for p in v)))
    return found


def block_of(A: Matrix, first: Vector, second: Vector) -> Matrix:
    """A restricted to the plane of two orthonormal vectors."""
    basis = Matrix([first, second])
    return (basis * A * basis.T).applyfunc(tidy)

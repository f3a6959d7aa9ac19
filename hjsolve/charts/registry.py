"""The catalogue: the coordinate systems in which anything can separate.

To add a system: write a ``CoordinateSystem`` in a file of its own or beside its
kin, and name it here.  The tests are parametrised over ``CHARTS``.
"""

from __future__ import annotations

from hjsolve.charts import cylinders, plane, quadrics, rotational
from hjsolve.charts.system import CoordinateSystem

CHARTS: tuple[CoordinateSystem, ...] = (
    plane.CARTESIAN,
    plane.POLAR,
    plane.PARABOLIC,
    plane.ELLIPTIC,
    cylinders.CARTESIAN,
    cylinders.CIRCULAR,
    rotational.SPHERICAL,
    cylinders.PARABOLIC,
    cylinders.ELLIPTIC,
    rotational.PARABOLIC,
    rotational.PROLATE,
    rotational.OBLATE,
    quadrics.CONICAL,
    quadrics.PARABOLOIDAL,
    quadrics.ELLIPSOIDAL,
)
"""The 4 orthogonal separable systems of the plane and the 11 of space (Eisenhart 1934,
from memory), in the order of preference within a dimension."""


def system(family: str, dimension: int) -> CoordinateSystem:
    """The entry of a family; KeyError when the dimension has none of that name."""
    for entry in CHARTS:
        if entry.family == family and entry.dimension == dimension:
            return entry
    raise KeyError(family)

"""Actions, the matrix ∂J/∂α and the frequencies, from the integrals over each cycle."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from flint import arb, arb_mat
from numpy.typing import NDArray

from hjsolve.motion.numbers.angle import Angle, angle_of
from hjsolve.motion.numbers.cells import Cells, build
from hjsolve.motion.numbers.enclosures import Enclosure, enclose
from hjsolve.motion.numbers.start import Coordinate, Setting
from hjsolve.motion.numbers.tape import cannot
from hjsolve.motion.numbers.turning import Region, region

Floats = NDArray[np.float64]


@dataclass(slots=True)
class Branch:
    """One coordinate that is not ignorable: its interval, its angle, its integrals.

    ``row`` is ∂J/∂α_k (balls) and ``row_error`` what quadrature may have missed;
    None where the motion has no cycle.
    """

    coordinate: Coordinate
    region: Region
    angle: Angle | None
    cells: Cells | None
    row: list[Any] | None
    row_error: Floats
    action: Any | None
    action_error: float
    pole: bool
    stable: bool = True
    enclosure: Enclosure | None = None


def branches(setting: Setting, *, cells: bool = True) -> list[Branch]:
    """Every coordinate whose momentum depends on it.

    Without ``cells``, which a trajectory needs, integrals over a cycle are
    enclosed where that can be proved.

    Raises:
        InputError: an interval of motion cannot be isolated or integrated.
    """
    n = len(setting.alphas)
    return [branch(c, n, cells) for c in setting.coordinates if not c.compiled.constant]


def branch(c: Coordinate, n: int, with_cells: bool) -> Branch:
    """One coordinate's interval and integrals over a cycle."""
    found = region(c)
    if found.kind == "fixed":
        return _rest(c, found, n)
    if found.kind not in ("libration", "rotation"):
        return Branch(c, found, None, None, None, np.zeros(n), None, 0.0, pole=False)
    angle = angle_of(c, found)
    pole = "pole" in (found.lower.kind, found.upper.kind)
    enclosed = None if with_cells else enclose(c, found, angle, n)
    if enclosed is not None:
        return Branch(
            c,
            found,
            angle,
            None,
            enclosed.row,
            np.zeros(n),
            enclosed.action,
            0.0,
            pole,
            enclosure=enclosed,
        )
    top = arb.pi() if angle.shape == "circle" else 2 * arb.pi()
    cells = build(c, angle, n, arb(0), top, pole=pole)
    turn = 2 * arb.pi()
    return Branch(
        c,
        found,
        angle,
        cells,
        [t / turn for t in cells.totals],
        cells.error / (2 * np.pi),
        cells.area / turn,
        cells.area_error / (2 * np.pi),
        pole,
    )


def _rest(c: Coordinate, found: Region, n: int) -> Branch:
    """An equilibrium: the limits of small amplitude, exact.

    Where it is unstable the row is only known up to a factor, which is enough
    for the frequencies of the others.
    """
    curvature = c.second.balls(c.q)[0]
    slopes = c.pieces.balls(c.q)[2 : 2 + n]
    stable = bool(curvature < 0) and c.compiled.order == 2
    row = [s / (2 * (-curvature / 2).sqrt()) for s in slopes] if stable else slopes
    return Branch(c, found, None, None, row, np.zeros(n), arb(0), 0.0, pole=False, stable=stable)


@dataclass(slots=True)
class Frequencies:
    """The inverse of ∂J/∂α.

    ``inverse[k][j]`` = ∂α_k/∂J_j (balls) with ``error`` from quadrature; J of an
    ignorable coordinate is its momentum.  ``guaranteed``: the balls say it all.
    """

    inverse: list[list[Any]]
    error: Floats
    matrix: list[list[Any]]
    guaranteed: bool


def frequencies(setting: Setting, found: list[Branch]) -> Frequencies | None:
    """∂α/∂J, or None where a coordinate has no cycle.

    Raises:
        InputError: the matrix is singular to the working precision.
    """
    if any(b.row is None for b in found):
        return None
    by_name = {b.coordinate.name: b for b in found}
    rows, errors = [], []
    for c in setting.coordinates:
        if c.name in by_name:
            rows.append(list(by_name[c.name].row or ()))
            errors.append(by_name[c.name].row_error)
        else:
            rows.append(constant_slopes(c, len(setting.alphas)))
            errors.append(np.zeros(len(setting.alphas)))
    try:
        inverse = arb_mat(rows).inv()
    except ZeroDivisionError:
        raise cannot("the actions do not depend on the constants independently here") from None
    n = len(rows)
    table = [[inverse[k, j] for j in range(n)] for k in range(n)]
    size = np.array([[abs(float(v.mid())) for v in row] for row in table])
    proved = all(b.enclosure is not None or (b.region.kind == "fixed" and b.stable) for b in found)
    return Frequencies(table, size @ np.array(errors) @ size, rows, proved)


def constant_slopes(c: Coordinate, n: int) -> list[Any]:
    """∂p/∂α_k of a momentum that does not depend on its coordinate."""
    radicand, _, *slopes = c.pieces.balls(c.q)
    even, odd = slopes[:n], slopes[n:]
    if c.compiled.equation.root == 0:
        return list(odd)
    order = c.compiled.order
    root = radicand.sqrt() if order == 2 else radicand.sqrt().sqrt()
    if c.sign == 0:
        raise cannot(f"the momentum of {c.name} is at the end of its range, where H has a fold")
    return [c.sign * s * root / (order * radicand) + o for s, o in zip(even, odd, strict=True)]

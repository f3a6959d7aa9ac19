"""Exact arithmetic with expressions in the parameters of a problem.

A number here is a rational function of the parameters and of roots of such;
its normal form comes from python-flint's fractions, not from a simplifier.
"""

from __future__ import annotations

from collections.abc import Sequence

from sympy import Abs, Expr, Matrix, Pow, Rational, S, atan, pi, radsimp, sqrt

from hjsolve.algebra.generators import Generators, NotRational
from hjsolve.algebra.identity import vanish
from hjsolve.algebra.roots import open_squares, unify_roots
from hjsolve.records import Truth

Vector = tuple[Expr, ...]
Point = tuple[Expr, Expr]
"""A vector of the plane, also read as a complex number."""


class Unsure(Exception):
    """Whether a number is zero, or which sign it has, is not known."""


def tidy(e: Expr) -> Expr:
    """The normal form of an expression; the expression itself where it has none."""
    if isinstance(e, Rational) or e.is_Symbol:
        return e
    try:
        ring = Generators([e])
        found = ring.expression(ring.reduce(ring.ratio(e)))
    except (NotRational, ArithmeticError):
        return e
    return radsimp(found) if found.is_number and not found.is_Rational else found


def zero(e: Expr) -> bool:
    """Whether a number vanishes for all values of the parameters.

    Raises:
        Unsure: neither was proved.
    """
    if isinstance(e, Rational):
        return bool(e == 0)
    try:
        ring = Generators([e])
        if ring.reduce(ring.ratio(e)).is_zero():
            return True
    except (NotRational, ArithmeticError):
        pass
    finding = vanish([e])[0]
    if finding.truth is Truth.UNDECIDED:
        raise Unsure(f"whether {e} is zero was not decided")
    return finding.truth is Truth.PROVED


def root(e: Expr) -> Expr:
    """√e in tidy form."""
    return unify_roots(open_squares(sqrt(tidy(e))))


def inverse(M: Matrix) -> Matrix:
    """The inverse of a small matrix in tidy form, by its adjugate.

    SymPy's elimination asks its simplifier for every pivot: 1.7 s where the
    entries hold two free angles.
    """
    if M.is_diagonal():
        return M.applyfunc(lambda e: 1 / e if e != 0 else e)
    return (M.adjugate() / M.det()).applyfunc(tidy)


def times(a: Point, b: Point) -> Point:
    """The product of two complex numbers."""
    return tidy(a[0] * b[0] - a[1] * b[1]), tidy(a[0] * b[1] + a[1] * b[0])


def plus(a: Point, b: Point, factor: Expr = S.One) -> Point:
    """A + factor·b."""
    return tidy(a[0] + factor * b[0]), tidy(a[1] + factor * b[1])


def over(a: Point, b: Point) -> Point:
    """a/b for complex numbers; b must not be zero."""
    size = b[0] ** 2 + b[1] ** 2
    above = times(a, (b[0], -b[1]))
    return tidy(above[0] / size), tidy(above[1] / size)


def null(a: Sequence[Expr]) -> bool:
    """Whether every entry vanishes; raises Unsure."""
    return all(zero(e) for e in a)


def parallel(a: Point, b: Point) -> bool:
    """Whether two vectors of the plane are linearly dependent; raises Unsure."""
    return zero(a[0] * b[1] - a[1] * b[0])


def complex_root(a: Point) -> Point:
    """One of the two square roots of a complex number, real and imaginary part.

    With X² − Y² = a_0, 2XY = a_1 and s = |a|: X² = (s + a_0)/2, so Y = a_1/(2X),
    which is free of absolute values where s and X are rational.
    """
    real, imaginary = tidy(a[0]), tidy(a[1])
    if zero(imaginary):
        if real.is_negative:
            return S.Zero, root(-real)
        if real.is_nonnegative:
            return root(real), S.Zero
        for value, point in ((real, 0), (-real, 1)):
            whole = _signless(root(value))
            if not any(p.exp.is_Rational and p.exp.q == 2 for p in whole.atoms(Pow)):
                return (S.Zero, whole) if point else (whole, S.Zero)
        raise Unsure(f"the sign of {real} depends on the parameters")
    size = _signless(root(real**2 + imaginary**2))
    for first in (size, -size):
        half = tidy((first + real) / 2)
        if half.is_negative or zero(half):
            continue
        part = _signless(root(half))
        if zero(part**2 - half):
            return part, tidy(imaginary / (2 * part))
    raise Unsure(f"no square root of {real} + i·({imaginary}) was found")


def _signless(e: Expr) -> Expr:
    """The expression without its absolute value: either sign serves as a root."""
    found = e.atoms(Abs)
    return e.xreplace({a: a.args[0] for a in found}) if len(found) == 1 else e


def unit(direction: Sequence[Expr]) -> Vector:
    """The unit vector along a direction, its first nonzero entry not negative if known."""
    size = root(sum((e**2 for e in direction), S.Zero))
    size = _signless(size)
    vector = tuple(tidy(e / size) for e in direction)
    first = next(e for e in vector if e != 0)
    return tuple(tidy(-e) for e in vector) if first.is_negative else vector


def angle(direction: Point) -> Expr:
    """The angle of a line to the first axis, in (−π/2, π/2]."""
    if zero(direction[0]):
        return pi / 2
    return atan(tidy(direction[1] / direction[0]))


def echelon(rows: Sequence[Vector], order: Sequence[int]) -> list[tuple[int, Vector]]:
    """Reduced rows with their pivot columns, taken in ``order``; raises Unsure."""
    left = [tuple(tidy(e) for e in row) for row in rows]
    done: list[tuple[int, Vector]] = []
    for column in order:
        chosen = next((k for k, row in enumerate(left) if not zero(row[column])), None)
        if chosen is None:
            continue
        pivot = left.pop(chosen)
        pivot = tuple(tidy(e / pivot[column]) for e in pivot)
        left = [_cleared(row, pivot, column) for row in left]
        done = [(k, _cleared(row, pivot, column)) for k, row in done]
        done.append((column, pivot))
    return done


def _cleared(row: Vector, pivot: Vector, column: int) -> Vector:
    if row[column] == 0:
        return row
    return tuple(tidy(a - row[column] * b) for a, b in zip(row, pivot, strict=True))

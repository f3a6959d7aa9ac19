"""Many points at once, in floating point: those at which conditions look met.

Conditions on named roots or on several letters are hardly ever met by a point
drawn alone.  Here thousands are drawn together and looked at as arrays; what a
point is worth is decided in balls by who uses it, so rounding does no harm.
"""

from __future__ import annotations

from collections.abc import Collection, Iterator, Mapping, Sequence
from fractions import Fraction
from typing import TYPE_CHECKING, Any

import numpy as np
import sympy as sp
from sympy import Expr, Symbol
from sympy.core.relational import Relational

from hjsolve.algebra.sampling import Range
from hjsolve.records import Definition

if TYPE_CHECKING:
    from numpy.typing import NDArray

    Floats = NDArray[np.float64]
else:
    Floats = np.ndarray

DRAWN = 3000
SPREADS = (0.7, 2.0)
"""Standard deviations of the logarithms of what is drawn, half of the points each."""

REAL = 1e-7
"""The imaginary part, relative to the largest root, below which a root counts as real."""

KNOWN = (
    *(sp.sin, sp.cos, sp.tan, sp.exp, sp.log, sp.sinh, sp.cosh, sp.tanh),
    *(sp.asin, sp.acos, sp.atan, sp.Abs, sp.sign),
)
"""Functions that arrays can be put into; a condition with others is left to the balls."""


def likely(
    symbols: Collection[Symbol],
    ranges: Mapping[Symbol, Range],
    conditions: Sequence[Relational],
    where: Sequence[Definition],
    count: int,
) -> Iterator[dict[Symbol, Fraction]]:
    """Up to ``count`` points of ``symbols`` at which the conditions look met."""
    order = sorted(symbols, key=lambda s: s.name)
    rng = np.random.default_rng(0xC0FFEE)
    with np.errstate(all="ignore"):
        values: dict[Symbol, Any] = {s: _drawn(rng, s, ranges.get(s)) for s in order}
        good = np.ones(DRAWN, dtype=bool)
        for d in where:
            values[d.symbol] = _named(d, values)
            good &= np.isfinite(values[d.symbol])
        for c in conditions:
            side = c.gts - c.lts
            if side.free_symbols <= set(values) and _known(side):
                good &= _value(side, values) > 0
    for n in np.flatnonzero(good)[:count]:
        yield {s: Fraction(float(values[s][n])).limit_denominator(10**6) for s in order}


def _drawn(rng: Any, symbol: Symbol, given: Range | None) -> Floats:
    if given is not None and (given[1] - given[0]).is_number and (given[1] - given[0]).is_finite:
        low, high = float(given[0]), float(given[1])
        return np.asarray(rng.uniform(low, high, DRAWN))
    size = rng.lognormal(0.0, np.repeat(SPREADS, DRAWN // 2))
    if given is not None and given[0].is_number and given[0].is_finite:
        return np.asarray(float(given[0]) + size)
    if symbol.is_positive or symbol.is_nonnegative:
        return np.asarray(size)
    if symbol.is_negative or symbol.is_nonpositive:
        return np.asarray(-size)
    return np.asarray(size * rng.choice((1.0, -1.0), DRAWN))


def _known(e: Expr) -> bool:
    return all(isinstance(f, KNOWN) for f in e.atoms(sp.Function)) and not e.has(sp.Integral)


def _value(e: Expr, values: Mapping[Symbol, Any]) -> Floats:
    names = sorted(e.free_symbols, key=lambda s: s.name)
    found = sp.lambdify(names, e, modules="numpy")(*(values[s] for s in names))
    return np.broadcast_to(np.asarray(found, dtype=float), (DRAWN,))


def _named(d: Definition, values: Mapping[Symbol, Any]) -> Floats:
    """The values of a name; nan where it has none."""
    missing = np.full(DRAWN, np.nan)
    if d.definition is not None:
        ready = d.definition.free_symbols <= set(values) and _known(d.definition)
        return _value(d.definition, values) if ready else missing
    if d.root_of is None or d.index is None:
        return missing
    coefficients = sp.Poly(d.root_of, d.unknown).all_coeffs()
    ready = all(c.free_symbols <= set(values) and _known(c) for c in coefficients)
    if not ready or d.index >= len(coefficients):
        return missing
    rows = np.array([_value(c, values) for c in coefficients]).T
    fine = np.all(np.isfinite(rows), axis=1) & (rows[:, 0] != 0)
    monic = rows[fine, 1:] / rows[fine, :1]
    degree = monic.shape[1]
    companion = np.zeros((len(monic), degree, degree))
    companion[:, np.arange(1, degree), np.arange(degree - 1)] = 1.0
    companion[:, 0, :] = -monic
    roots = np.linalg.eigvals(companion)
    near = np.abs(roots.imag) < REAL * np.max(np.abs(roots), axis=1, keepdims=True)
    reals = np.sort(np.where(near, roots.real, np.inf), axis=1)[:, d.index - 1]
    missing[fine] = np.where(np.isfinite(reals), reals, np.nan)
    return missing

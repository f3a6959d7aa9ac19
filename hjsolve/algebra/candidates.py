"""Points at which a regime may be met, from its rational parameters.

A regime with all roots of a quartic real, or with letters of very different
sizes, is hardly ever met by letters drawn one by one.  Here the named roots are
drawn, in order, the letters solved for follow, and only points are offered at
which what is known to be positive is so.  All is in floating point and rounded:
what a point is worth is decided by who looks at it.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from fractions import Fraction
from typing import TYPE_CHECKING, Any

import numpy as np
from sympy import Symbol

from hjsolve.algebra.generators import Ratio
from hjsolve.algebra.uniform import Uniform

if TYPE_CHECKING:
    import numpy.typing as npt

    Floats = npt.NDArray[np.float64]
else:
    Floats = np.ndarray

DRAWN = 8000
"""Points drawn."""

SPREADS = (0.5, 1.5, 6.0)
"""Standard deviations of the logarithm of what is drawn, for each number one of them."""

OFFERED = 24


def candidates(
    uniform: Uniform, order: Sequence[tuple[Symbol, Symbol]], positive: Sequence[Ratio]
) -> Iterator[dict[Symbol, Fraction]]:
    """Points of the problem's letters; ``order`` has (smaller, larger) roots."""
    rng = np.random.default_rng(0x5EED)
    letters = {k: of for k, (kind, of) in enumerate(uniform.keys) if kind == "letter"}
    with np.errstate(all="ignore"):
        values = {k: _drawn(rng, letters.get(k)) for k in range(len(uniform.keys))}
        for a, b in order:
            i, j = uniform.index["letter", a], uniform.index["letter", b]
            values[i], values[j] = (
                np.minimum(values[i], values[j]),
                np.maximum(values[i], values[j]),
            )
        for k, symbol in letters.items():
            for t, unit in uniform.units_of(symbol):
                kind = uniform.keys[t][0]
                at = values[k] * float(unit)
                values[t] = np.exp(at) if kind == "exp" else np.tan(at / 2)
        good = _complete(uniform, letters, values)
        for ratio in positive:
            good &= _value(ratio, values) > 0
    for n in np.flatnonzero(good)[:OFFERED]:
        yield {
            s: Fraction(float(values[k][n])).limit_denominator(10**9)
            for k, s in letters.items()
            if s not in uniform.named
        }


def _drawn(rng: Any, symbol: Symbol | None) -> Floats:
    size: Floats = rng.lognormal(0.0, rng.choice(SPREADS, DRAWN))
    if symbol is not None and symbol.is_positive:
        return size
    return size * rng.choice([1.0, -1.0], DRAWN)


def _complete(uniform: Uniform, letters: Mapping[int, Symbol], values: dict[int, Floats]) -> Any:
    """Put in what was solved for; where all of it is finite and of the right sign."""
    good = np.ones(DRAWN, dtype=bool)
    for k, square in uniform.squares.items():
        if k in letters:
            values[k] = np.sqrt(_value(square, values)) * np.sign(values[k])
    for k, solved in uniform.solved.items():
        if k in letters:
            values[k] = _value(solved, values)
    for k, symbol in letters.items():
        good &= np.isfinite(values[k]) & (values[k] != 0)
        if symbol.is_positive:
            good &= values[k] > 0
    return good


def _value(ratio: Ratio, values: Mapping[int, Floats]) -> Floats:
    return _polynomial(ratio.numerator, values) / _polynomial(ratio.denominator, values)


def _polynomial(polynomial: Any, values: Mapping[int, Floats]) -> Floats:
    total = np.zeros(DRAWN)
    for exponents, c in polynomial.to_dict().items():
        term = np.full(DRAWN, float(int(c)))
        for k, e in enumerate(exponents):
            if e:
                term = term * values[k] ** int(e)
        total = total + term
    return total

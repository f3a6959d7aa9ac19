"""Zeros of many monotone functions at once."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]

TRIES = 200


def monotone(
    gap: Callable[[Floats], tuple[Floats, Floats]], x: Floats, low: Floats, high: Floats
) -> Floats:
    """The zeros of monotone functions in brackets: Newton, halved where it leaves its bracket.

    Args:
        gap: values and derivatives at many places, one function each.
        x: where to begin.
        low: lower ends of the brackets.
        high: upper ends.
    """
    low, high = low.copy(), high.copy()
    value, slope = gap(x)
    rising = bool(np.median(slope) > 0)
    last = np.full_like(x, np.inf)
    for _ in range(TRIES):
        above = (value > 0) == rising
        high = np.where(above, x, high)
        low = np.where(above, low, x)
        with np.errstate(all="ignore"):
            step = value / slope
        new = x - step
        outside = ~((new > low) & (new < high)) | ~(np.abs(step) < 0.9 * last)
        if outside.any():
            outside &= np.abs(value) > 4e-16 * (1 + np.abs(x))
            new = np.where(outside, (low + high) / 2, np.where(np.isfinite(new), new, x))
            new = np.clip(new, low, high)
        last = np.abs(new - x)
        x = new
        if (last <= 3e-16 * (1 + np.abs(x))).all() or (last.max() < 1e-8 and not outside.any()):
            break
        value, slope = gap(x)
    return x

"""Phases at large times: ω·t to the last bit, by double-double arithmetic.

ω in a plain double would lose 1e-11 of a cycle at 10⁵ periods.  Products are
split after Dekker (Numer. Math. 18 (1971) 224; citation from memory).
"""

from __future__ import annotations

from typing import Any

import numpy as np
from flint import arb
from numpy.typing import NDArray

Floats = NDArray[np.float64]

SPLIT = 134217729.0  # 2**27 + 1
TURN = 2 * np.pi


def double_double(x: Any) -> tuple[float, float]:
    """A ball's midpoint as the sum of two doubles."""
    high = float(x.mid())
    return high, float((x - arb(high)).mid())


def product(a: Floats, b: float) -> tuple[Floats, Floats]:
    """(a·b rounded, what rounding lost), exactly."""
    p = a * b
    t = SPLIT * a
    a1 = t - (t - a)
    a2 = a - a1
    u = SPLIT * b
    b1 = u - (u - b)
    b2 = b - b1
    return p, ((a1 * b1 - p) + a1 * b2 + a2 * b1) + a2 * b2

"""Differentiate back, inside the regime: the check every formula passes.

Points are drawn that satisfy the conditions and at which the integrand is real;
there the formula's derivative, by automatic differentiation in ball arithmetic,
must enclose the integrand's value to 30 digits.  On the interval around such a
point on which the integrand stays real the formula must not jump either, which
no derivative would show.
"""

from __future__ import annotations

import time
from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

import numpy as np
from flint import arb
from numpy.typing import NDArray
from sympy import Expr, Symbol
from sympy.core.relational import Relational

from hjsolve.algebra.balls import BallWalk, Imprecise, NotSupported, OutsideDomain, precision
from hjsolve.algebra.graph import Graph, TooLarge
from hjsolve.records import Domain

Floats = NDArray[np.float64]

POINTS = 6
"""Points at which a formula is compared; at least WANTED of them must be decided."""

WANTED = 3

DRAWS = 6_000
"""Points drawn at once."""

SPREADS = (1.5, 4.0, 20.0, 90.0)
"""Natural logarithms by which sizes vary, round by round.

Problems with the constants of nature put in have solutions at sizes far from 1.
"""

DIGITS = 30


@dataclass(frozen=True)
class Sample:
    """Points of a regime: a value for each symbol, the variable among them."""

    symbols: tuple[Symbol, ...]
    values: Floats

    def exact(self, i: int) -> dict[Symbol, Fraction]:
        """The i-th point as rational numbers."""
        return {
            s: Fraction(float(v)) for s, v in zip(self.symbols, self.values[:, i], strict=True)
        }


def floats(graph: Graph, values: dict[Symbol, Floats]) -> list[Floats]:
    """The roots of a graph at many points at once; nan where not real.

    Raises NotSupported for a function without a floating-point form here.
    """
    out: list[Any] = []
    with np.errstate(all="ignore"):
        for node in graph.nodes:
            a = [out[k] for k in node.args]
            out.append(_operation(node.op, node.payload, a, values))
        size = len(next(iter(values.values())))
        return [np.broadcast_to(np.asarray(out[r], dtype=float), (size,)) for r in graph.roots]


def _operation(op: str, payload: Any, a: list[Any], values: dict[Symbol, Floats]) -> Any:
    match op:
        case "number":
            return payload[0] / payload[1]
        case "pi":
            return np.pi
        case "symbol":
            return values[payload]
        case "add":
            return sum(a)
        case "mul":
            product = a[0]
            for factor in a[1:]:
                product = product * factor
            return product
        case "power":
            n, d = payload
            return np.asarray(a[0], dtype=float) ** (n if d == 1 else n / d)
        case "asin":
            return np.arcsin(a[0])
        case "atan":
            return np.arctan(a[0])
        case "atan2":
            return np.arctan2(a[0], a[1])
        case "exp" | "log" | "sin" | "cos" | "abs" | "sign":
            return getattr(np, op)(a[0])
    raise NotSupported(op)


def sample(
    integrand: Expr,
    variable: Symbol,
    domain: Domain,
    valid: Sequence[Relational],
    seed: int = 0,
) -> Sample | None:
    """Up to 40 points that satisfy ``valid`` and at which the integrand is real.

    None when none was found.  Raises TypeError, NotSupported, TooLarge when the
    integrand has parts that cannot be evaluated.
    """
    bounds = [b for b in (domain.lower, domain.upper) if b.is_finite]
    roots = [integrand, *(side for r in valid for side in (r.lts, r.gts)), *bounds]
    graph = Graph(roots)
    names = {n.payload for n in graph.nodes if n.op == "symbol"} | {variable}
    symbols = tuple(sorted(names, key=lambda s: s.name))
    rng = np.random.default_rng(0xA11CE + seed)
    for spread in SPREADS:
        values = {s: _draw(s, rng, spread) for s in symbols}
        values[variable] = _draw_variable(variable, domain, values, rng, spread)
        numbers = floats(graph, values)
        good = np.isfinite(numbers[0])
        for k in range(len(valid)):
            below, above = numbers[1 + 2 * k], numbers[2 + 2 * k]
            good &= below < above if not valid[k].rel_op.endswith("=") else below <= above
        if good.any():
            at = np.flatnonzero(good)[:40]
            return Sample(symbols, np.array([values[s][at] for s in symbols]))
    return None


def _draw(symbol: Symbol, rng: np.random.Generator, spread: float) -> Floats:
    size = np.exp(rng.uniform(-spread, spread, DRAWS))
    if symbol.is_positive:
        return size
    if symbol.is_negative:
        return -size
    return size * rng.choice((-1.0, 1.0), DRAWS)


def _draw_variable(
    variable: Symbol,
    domain: Domain,
    values: dict[Symbol, Floats],
    rng: np.random.Generator,
    spread: float,
) -> Floats:
    free = dict(values)
    free.setdefault(variable, np.ones(DRAWS))
    ends: list[Floats | None] = []
    for end in (domain.lower, domain.upper):
        ends.append(floats(Graph([end]), free)[0] if end.is_finite else None)
    lower, upper = ends
    if lower is not None and upper is not None:
        return lower + (upper - lower) * rng.uniform(0.02, 0.98, DRAWS)
    size = np.exp(rng.uniform(-spread, spread, DRAWS))
    if lower is not None:
        return lower + size
    if upper is not None:
        return upper - size
    if variable.is_positive:
        return size
    return size * rng.choice((-1.0, 1.0), DRAWS)


def holds(
    antiderivative: Expr,
    integrand: Expr,
    variable: Symbol,
    domain: Domain,
    points: Sample,
    deadline: float = float("inf"),
) -> bool:
    """Whether the formula differentiates back at the points and does not jump."""
    try:
        graph = Graph([antiderivative, integrand])
    except (TooLarge, TypeError):
        return False
    try:
        decided = 0
        for i in range(min(3 * POINTS, points.values.shape[1])):
            if time.monotonic() > deadline or decided == POINTS:
                break
            verdict = _derivative_agrees(graph, points.exact(i), variable)
            if verdict is False:
                return False
            decided += verdict is True
        if decided < min(WANTED, points.values.shape[1]):
            return False
        return _continuous(graph, points, variable, domain)
    except NotSupported:
        return False


def _derivative_agrees(
    graph: Graph, point: dict[Symbol, Fraction], variable: Symbol
) -> bool | None:
    """True, False, or None where the balls stay too wide or the point is on an edge."""
    walk = BallWalk(graph, point, {}, {variable: 0})
    for bits in (192, 512):
        with precision(bits):
            try:
                formula, integrand = walk.run()
            except Imprecise:
                continue
            except OutsideDomain:
                return False
            want = integrand.value
            difference = formula.first.get(0, arb(0)) - want
            if not difference.contains(0):
                return False
            if difference.rad() < abs(want).lower() * arb(10) ** -DIGITS:
                return True
    return None


def _continuous(graph: Graph, points: Sample, variable: Symbol, domain: Domain) -> bool:
    """No step of the formula survives when the interval around it shrinks."""
    for i in range(min(4, points.values.shape[1])):
        fixed = dict(zip(points.symbols, points.values[:, i], strict=True))
        grid = _neighbourhood(graph, fixed, variable, domain)
        values = _along(graph, fixed, variable, grid)[0]
        finite = np.flatnonzero(np.isfinite(values))
        if len(finite) < 3:
            continue
        grid, values = grid[finite[0] : finite[-1] + 1], values[finite[0] : finite[-1] + 1]
        if not np.isfinite(values).all():
            return False
        steps = np.abs(np.diff(values))
        size = np.abs(values - values[0]).max()
        for k in np.argsort(steps)[-3:]:
            low, high, step = grid[k], grid[k + 1], steps[k]
            for _ in range(24):
                inner = np.array([low, (low + high) / 2, high])
                at = _along(graph, fixed, variable, inner)[0]
                first, second = abs(at[1] - at[0]), abs(at[2] - at[1])
                low, high = (inner[0], inner[1]) if first > second else (inner[1], inner[2])
                step = max(first, second)
            if step > 0.05 * steps[k] and step > 1e-6 * size:
                return False
    return True


def _along(
    graph: Graph, fixed: dict[Symbol, float], variable: Symbol, grid: Floats
) -> list[Floats]:
    values = {s: np.full(len(grid), v) for s, v in fixed.items()}
    values[variable] = grid
    return floats(graph, values)


def _neighbourhood(
    graph: Graph, fixed: dict[Symbol, float], variable: Symbol, domain: Domain
) -> Floats:
    """A grid on the part around the point where the integrand is real."""
    centre = fixed[variable]
    reach = 4.0 * abs(centre)
    low, high = centre - reach, centre + reach
    for end, upper in ((domain.lower, False), (domain.upper, True)):
        if end.is_finite:
            value = float(end.subs({s: v for s, v in fixed.items() if s != variable}))
            low, high = (low, min(high, value)) if upper else (max(low, value), high)
    grid = np.unique(np.concatenate([np.linspace(low, high, 402)[1:-1], [centre]]))
    real = np.isfinite(_along(graph, fixed, variable, grid)[1])
    k = int(np.searchsorted(grid, centre))
    start, stop = k, k
    while start > 0 and real[start - 1]:
        start -= 1
    while stop < len(grid) - 1 and real[stop + 1]:
        stop += 1
    return grid[start : stop + 1]



"""Points of a regime: where its conditions hold and the integrand is real."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass
from fractions import Fraction
from functools import partial
from typing import Any

import numpy as np
from numpy.typing import NDArray
from sympy import Expr, Symbol
from sympy.core.relational import Relational

from hjsolve.algebra.balls import BallWalk, Imprecise, NotSupported, OutsideDomain, precision
from hjsolve.algebra.graph import Graph
from hjsolve.quadrature.elliptic_floats import FLOATS
from hjsolve.records import Domain

Floats = NDArray[np.float64]

KEPT = 12
"""Points kept of a regime."""

DRAWS = 6_000
"""Points drawn at once."""

SPREADS = (1.5, 4.0, 20.0, 90.0)
"""Natural logarithms by which sizes vary, round by round.

Problems with the constants of nature put in have solutions at sizes far from 1.
"""

BITS = 192


@dataclass(frozen=True)
class Sample:
    """Points of a regime: a value for each symbol, the variable among them.

    ``extra`` holds values that are no rational numbers, for each point: something
    that gives a ball when called, and a float (the roots a formula names).
    """

    symbols: tuple[Symbol, ...]
    values: Floats
    extra: tuple[dict[Symbol, Any], ...] = ()

    def exact(self, i: int) -> dict[Symbol, Any]:
        """The i-th point as rational numbers."""
        point: dict[Symbol, Any] = {
            s: Fraction(float(v)) for s, v in zip(self.symbols, self.values[:, i], strict=True)
        }
        return {**point, **self.extra[i]} if self.extra else point


class Order:
    """The points of a draw, those first whose signs differ most from the ones kept.

    What depends on the sign of a letter shows only at points with both signs of it.
    """

    def __init__(self, sample: Sample) -> None:
        self._signs = np.sign(sample.values).T
        count = len(self._signs)
        self._apart, self._misses = np.zeros(count), np.zeros(count)
        self._left = np.ones(count, dtype=bool)
        self.missed = 0
        """How many of the points had no cycle."""

    def keep(self, i: int) -> None:
        """The point is used."""
        apart = (self._signs != self._signs[i]).sum(axis=1)
        self._apart = np.minimum(self._apart, apart) if self._apart.any() else apart

    def miss(self, i: int) -> None:
        """The point has no cycle, nor perhaps have others with its signs."""
        self.missed += 1
        self._misses += (self._signs == self._signs[i]).all(axis=1)

    def __iter__(self) -> Iterator[int]:
        while self._left.any():
            rank = np.where(self._left, self._misses - self._apart / 1e3, np.inf)
            best = int(np.argmin(rank))
            self._left[best] = False
            yield best


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
        case "call" if payload[0] in FLOATS and not any(payload[1]):
            return FLOATS[payload[0]](*(np.asarray(x, dtype=float) for x in a))
    raise NotSupported(op)


def sample(
    integrand: Expr,
    variable: Symbol,
    domain: Domain,
    valid: Sequence[Relational],
    seed: int = 0,
) -> Sample | None:
    """Up to KEPT points that satisfy ``valid`` and at which the integrand is real.

    None when none was found.  Raises TypeError, NotSupported, TooLarge when the
    integrand has parts that cannot be evaluated.
    """
    for found, graph in _drawn(integrand, variable, domain, valid, seed):
        kept = [
            i
            for i in range(min(3 * KEPT, found.values.shape[1]))
            if _inside(graph, found.exact(i), valid)
        ]
        if kept:
            return Sample(found.symbols, found.values[:, kept[:KEPT]])
    return None


def crowd(
    integrand: Expr,
    variable: Symbol,
    domain: Domain,
    valid: Sequence[Relational],
    seed: int,
    count: int,
    first: int = 0,
) -> tuple[Sample, Callable[[int], bool]] | None:
    """Up to ``count`` points of one draw, in floating point, and the check of one in balls.

    ``first`` is the place in SPREADS to begin with.  None when the draw met none.
    Raises as ``sample`` does.
    """
    for found, graph in _drawn(integrand, variable, domain, valid, seed, first):
        if found.values.shape[1]:
            few = Sample(found.symbols, found.values[:, :count])
            return few, partial(_confirmed, graph, few, valid)
    return None


def _confirmed(graph: Graph, points: Sample, valid: Sequence[Relational], i: int) -> bool:
    return _inside(graph, points.exact(i), valid)


def _drawn(
    integrand: Expr,
    variable: Symbol,
    domain: Domain,
    valid: Sequence[Relational],
    seed: int,
    first: int = 0,
) -> Iterator[tuple[Sample, Graph]]:
    """Draws of rising spread, those points kept that look right in floating point."""
    bounds = [b for b in (domain.lower, domain.upper) if b.is_finite]
    roots = [integrand, *(side for r in valid for side in (r.lts, r.gts)), *bounds]
    graph = Graph(roots)
    names = {n.payload for n in graph.nodes if n.op == "symbol"} | {variable}
    symbols = tuple(sorted(names, key=lambda s: s.name))
    rng = np.random.default_rng(0xA11CE + seed)
    for spread in SPREADS[first:]:
        values = {s: _draw(s, rng, spread) for s in symbols}
        values[variable] = _draw_variable(variable, domain, values, rng, spread)
        numbers = floats(graph, values)
        good = np.isfinite(numbers[0])
        for k in range(len(valid)):
            below, above = numbers[1 + 2 * k], numbers[2 + 2 * k]
            good &= below < above if not valid[k].rel_op.endswith("=") else below <= above
        yield Sample(symbols, np.array([values[s][good] for s in symbols])), graph


def _inside(graph: Graph, point: dict[Symbol, Fraction], valid: Sequence[Relational]) -> bool:
    """Whether balls confirm that the integrand is real and the conditions hold.

    Floating point alone lets points of very unequal sizes in by rounding.
    """
    with precision(BITS):
        try:
            values = [jet.value for jet in BallWalk(graph, point, {}).run()]
        except (Imprecise, OutsideDomain):
            return False
        return all(
            values[1 + 2 * k] < values[2 + 2 * k]
            if not relation.rel_op.endswith("=")
            else not values[1 + 2 * k] > values[2 + 2 * k]
            for k, relation in enumerate(valid)
        )


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

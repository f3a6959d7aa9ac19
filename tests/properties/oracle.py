"""An independent judge of separability, for the tests alone.

It shares nothing with the solver: its own reader, exact rational sample points, univariate
power series in complex balls for the derivatives, and the block condition instead of
Levi-Civita's brackets: a partition of the coordinates separates iff, for every two of its
blocks A and B, uᵀ D²H v = 0 for all u in ker dH|_A and v in ker dH|_B.

Blocks that violate the condition can be in no separating partition apart from each other (the
kernels of larger blocks contain those of smaller ones), so merging violators from single
coordinates upwards ends at the unique finest partition.  Time, when H depends on it, is the
coordinate of H + p_t.
"""

from __future__ import annotations

import itertools
import random
from typing import Any

import flint
import numpy as np
from formula import Node, evaluate, names_in, parse

BITS = 900
POINTS = 4
TINY = flint.arb(10) ** -80


class Unclear(Exception):
    """Neither zero nor nonzero at the precision used, or no regular point found."""


class Problem:
    """A request of the service as a function of numbers.

    ``pairs`` are (coordinate, momentum) names; with explicit time the last pair is
    (time, "p_t of the extended phase space").
    """

    def __init__(self, request: dict[str, Any]) -> None:
        self.coordinates: list[str] = list(request["coordinates"])
        momenta = request.get("momenta") or [f"p_{q}" for q in self.coordinates]
        self.functions: list[str] = list(request.get("functions", []))
        self.tree: Node = parse(request["hamiltonian"], self.functions)
        self.time: str = request.get("time", "t")
        self.parameters: dict[str, Any] = dict(request.get("parameters", {}))
        self.domains: dict[str, Any] = dict(request.get("domains", {}))
        self.pairs = list(zip(self.coordinates, momenta, strict=True))
        self.timed = self.time in names_in(self.tree)
        if self.timed:
            self.pairs.append((self.time, ""))
        self.names = [name for pair in self.pairs for name in pair]

    def point(self, rng: random.Random) -> dict[str, flint.fmpq]:
        """Rational values in the domains for every name."""
        values: dict[str, flint.fmpq] = {"": _rational(rng, -2, 2)}
        for name, kind in self.parameters.items():
            if isinstance(kind, int | float) or kind not in (
                "positive",
                "negative",
                "nonzero",
                "real",
            ):
                values[name] = _constant(str(kind))
            else:
                low, high = {"positive": (0, 2), "negative": (-2, 0)}.get(kind, (-2, 2))
                values[name] = _rational(rng, low, high)
        for q, p in self.pairs:
            values[p] = _rational(rng, -2, 2)
            low, high = _bounds(self.domains.get(q, "line"))
            values[q] = _rational(rng, low, high)
        return values

    def functions_at(self, rng: random.Random) -> dict[str, list[flint.fmpq]]:
        """Random coefficients of the polynomials that stand for arbitrary functions."""
        return {f: [_rational(rng, -1, 1) for _ in range(40)] for f in self.functions}


def _constant(text: str) -> flint.fmpq:
    value = evaluate(parse(text, []), {}, {})
    if not isinstance(value, flint.fmpq):
        raise ValueError(text)
    return value


def _bounds(domain: Any) -> tuple[float, float]:
    if isinstance(domain, list):
        low, high = (float(_number(str(x))) for x in domain)
        return low, min(high, low + 5)
    return {"line": (-2.0, 2.0), "half-line": (0.0, 2.0), "angle": (0.0, 6.2)}.get(
        domain, (0.0, 3.1)
    )


def _number(text: str) -> float:
    value = evaluate(parse(text, []), {}, {})
    return int(value.p) / int(value.q) if isinstance(value, flint.fmpq) else float(value.real)


def _rational(rng: random.Random, low: float, high: float) -> flint.fmpq:
    """A rational strictly inside (low, high), with a prime denominator."""
    inside = low + (high - low) * (0.08 + 0.84 * rng.random())
    return flint.fmpq(round(inside * 99991), 99991)


def derivatives(problem: Problem, rng: random.Random) -> tuple[np.ndarray, np.ndarray]:
    """Gradient (2n,) and Hessian (2n, 2n) of the extended H at a random point, in balls."""
    point, functions = problem.point(rng), problem.functions_at(rng)
    n = len(problem.names)

    def along(direction: dict[str, int]) -> tuple[flint.acb, flint.acb]:
        values: dict[str, Any] = dict(point)
        for name, step in direction.items():
            values[name] = flint.acb_series([point[name], step, 0])
        got = evaluate(problem.tree, values, functions)
        series = got if isinstance(got, flint.acb_series) else flint.acb_series([got, 0, 0])
        extra = direction.get("", 0)
        return flint.acb(series[1]) + extra, 2 * flint.acb(series[2])

    gradient = np.empty(n, dtype=object)
    hessian = np.empty((n, n), dtype=object)
    for i, name in enumerate(problem.names):
        gradient[i], hessian[i, i] = along({name: 1})
    for i, j in itertools.combinations(range(n), 2):
        both = along({problem.names[i]: 1, problem.names[j]: 1})[1]
        hessian[i, j] = hessian[j, i] = (both - hessian[i, i] - hessian[j, j]) / 2
    return gradient, hessian


def _kernel(gradient: np.ndarray, block: frozenset[int]) -> list[np.ndarray]:
    """A basis of ker dH restricted to the pairs of ``block``, as vectors of length 2n."""
    places = [k for pair in sorted(block) for k in (2 * pair, 2 * pair + 1)]
    pivot = max(places, key=lambda k: float(abs(gradient[k]).mid()))
    if not abs(gradient[pivot]) > 0:
        raise Unclear("dH vanishes on a block")
    basis = []
    for k in places:
        if k != pivot:
            vector = np.array([flint.acb(0)] * len(gradient), dtype=object)
            vector[k], vector[pivot] = flint.acb(1), -gradient[k] / gradient[pivot]
            basis.append(vector)
    return basis


def condition_holds(
    sample: tuple[np.ndarray, np.ndarray], a: frozenset[int], b: frozenset[int]
) -> bool:
    """Whether uᵀ D²H v = 0 for the kernels of two blocks at one point.

    Raises:
        Unclear: a ball contains 0 but is not tiny.
    """
    gradient, hessian = sample
    left, right = _kernel(gradient, a), _kernel(gradient, b)
    used_a = [k for pair in a for k in (2 * pair, 2 * pair + 1)]
    used_b = [k for pair in b for k in (2 * pair, 2 * pair + 1)]
    corner = hessian[np.ix_(used_a, used_b)]
    wide = False
    for u, v in itertools.product(left, right):
        value = u[used_a] @ corner @ v[used_b]
        if not value.contains(0):
            return False
        wide = wide or not abs(value) < TINY
    if wide:
        raise Unclear("a ball around zero is too wide")
    return True


def _samples(problem: Problem, seed: int, count: int) -> list[tuple[np.ndarray, np.ndarray]]:
    """Derivatives at ``count`` regular points: finite balls, no ∂H/∂p zero."""
    rng, found = random.Random(seed), []
    for _ in range(12 * count):
        try:
            gradient, hessian = derivatives(problem, rng)
        except (ValueError, ZeroDivisionError):  # a pole, or a root of zero
            continue
        regular = all(x.is_finite() for x in gradient) and all(
            x.is_finite() for x in hessian.ravel()
        )
        n = len(gradient) // 2
        if regular and all(abs(gradient[2 * i + 1]) > 0 for i in range(n)):
            found.append((gradient, hessian))
        if len(found) == count:
            return found
    raise Unclear("no regular points")


def finest_partition(
    request: dict[str, Any], seed: int = 0, points: int = POINTS
) -> set[frozenset[str]]:
    """The finest partition of the coordinates over which the characteristic function splits."""
    problem = Problem(request)
    with flint.ctx.workprec(BITS):
        cap, flint.ctx.cap = flint.ctx.cap, 3
        try:
            samples = _samples(problem, seed, points)
            blocks = _merge(samples, len(problem.pairs))
        finally:
            flint.ctx.cap = cap
    return {frozenset(problem.pairs[i][0] for i in block) for block in blocks}


def _merge(samples: list[tuple[np.ndarray, np.ndarray]], count: int) -> list[frozenset[int]]:
    blocks = [frozenset([i]) for i in range(count)]
    while True:
        for a, b in itertools.combinations(blocks, 2):
            if not all(condition_holds(s, a, b) for s in samples):
                blocks = [x for x in blocks if x not in (a, b)] + [a | b]
                break
        else:
            return blocks


def separates(request: dict[str, Any], partition: list[list[str]], seed: int = 0) -> bool:
    """Whether one given partition satisfies the block condition, all pairs of blocks at once."""
    problem = Problem(request)
    place = {q: i for i, (q, _) in enumerate(problem.pairs)}
    with flint.ctx.workprec(BITS):
        cap, flint.ctx.cap = flint.ctx.cap, 3
        try:
            samples = _samples(problem, seed, 2)
            blocks = [frozenset(place[q] for q in block) for block in partition]
            return all(
                condition_holds(s, a, b)
                for s in samples
                for a, b in itertools.combinations(blocks, 2)
            )
        finally:
            flint.ctx.cap = cap


def separability(partition: set[frozenset[str]]) -> str:
    """The word the contract uses for a finest partition."""
    if all(len(block) == 1 for block in partition):
        return "complete"
    return "none" if len(partition) == 1 else "partial"


def frozen_equations_fit(request: dict[str, Any], seed: int = 0, tries: int = 3) -> bool:
    """A finite test of complete separability that uses no second derivatives.

    At a random base point (c, a) with E = H(c, a) every coordinate has its frozen equation
    H(q_i, p_i; c, a) = E.  H separates only if momenta solved from those one by one satisfy
    H(q, p) = E together, at coordinates a finite distance away.

    Raises:
        Unclear: Newton's method found no momentum, or the sum is neither tiny nor nonzero.
    """
    problem = Problem(request)
    rng = random.Random(seed)
    with flint.ctx.workprec(BITS):
        cap, flint.ctx.cap = flint.ctx.cap, 3
        try:
            for _ in range(20 * tries):
                try:
                    return all(_fits(problem, rng) for _ in range(tries))
                except (ValueError, ZeroDivisionError, Unclear):
                    continue
        finally:
            flint.ctx.cap = cap
    raise Unclear("no base point with momenta nearby")


def _fits(problem: Problem, rng: random.Random) -> bool:
    base, functions = problem.point(rng), problem.functions_at(rng)

    def energy(values: dict[str, Any]) -> Any:
        return evaluate(problem.tree, values, functions) + values[""]

    level = flint.acb(energy(base))
    together: dict[str, Any] = dict(base)
    for q, p in problem.pairs:
        alone: dict[str, Any] = dict(base)
        alone[q] = base[q] + _rational(rng, -0.02, 0.02)
        together[q] = alone[q]
        together[p] = _newton(energy, alone, p, level)
    miss = abs(flint.acb(energy(together)) - level)
    if miss < TINY:
        return True
    if miss > TINY:
        return False
    raise Unclear("the energy is enclosed too widely")


def _newton(energy: Any, values: dict[str, Any], p: str, level: flint.acb) -> flint.acb:
    """The momentum near ``values[p]`` at which the energy is ``level``, to working precision."""
    momentum = flint.acb(values[p])
    for _ in range(60):
        series = energy({**values, p: flint.acb_series([momentum, 1, 0])})
        change = (flint.acb(series[0]) - level) / flint.acb(series[1])
        momentum = flint.acb((momentum - change).real.mid(), (momentum - change).imag.mid())
        if abs(change) < TINY * TINY:
            return momentum
    raise Unclear("Newton's method did not settle")

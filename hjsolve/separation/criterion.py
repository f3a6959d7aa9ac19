"""Does H separate in its own coordinates, and into which blocks?

Levi-Civita's expression of a pair of coordinates, with subscripts for partial
derivatives,

    L_ij = H_qi H_qj H_pipj + H_pi H_pj H_qiqj − H_qi H_pj H_piqj − H_pi H_qj H_qipj ,

vanishes identically for every pair exactly when H separates completely (Levi-
Civita, Math. Ann. 59 (1904); citation from memory).  The connected components
of the graph whose edges are the pairs with L_ij ≢ 0 are the finest partition
into blocks: with D_i = ∂_qi − (H_qi/H_pi) ∂_pi, i and j in different components
have [D_i, D_j] = 0, and the brackets along a spanning tree generate all of the
kernel of dH on its block.  Explicit time is one more coordinate whose momentum
enters as H + p_t.

A zero is claimed from jets modulo a random prime; a non-zero only from a ball
that excludes 0 at a point of the domain.  Where both fail the pair counts as
zero with the bound the balls gave, and the proof is called numeric.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

import numpy as np
from flint import arb
from sympy import Rational, Symbol, oo

from hjsolve.algebra.balls import BallJet, BallWalk, NotSupported, Ridges
from hjsolve.algebra.graph import Graph, TooLarge
from hjsolve.algebra.identity import SAFE_CHANCE, attempts, chance, middle
from hjsolve.algebra.jets import Jet, JetWalk
from hjsolve.algebra.modular import Array, NoPoints, square_roots
from hjsolve.algebra.sampling import Range, points, stand_ins
from hjsolve.errors import InputError
from hjsolve.records import Hamiltonian, Obstruction, Verdict

TRIES = 40
"""Real points tried for one pair before it is called zero to a bound."""

WIDEST_ZERO = 1e-60
"""The widest enclosure of 0 that is still called zero, numerically; relative to the
product of the derivatives that enter."""

REFEREES = 2
"""Real points at which a modular zero is looked at again when roots may be dependent."""


@dataclass(frozen=True, slots=True)
class _Link:
    """What was found for one pair: is it linked, and how is that known?"""

    linked: bool
    proved: bool
    bound: float
    obstruction: Obstruction | None = None


class _OutOfReach(Exception):
    """A stated limit was hit; the message says which."""


def ranges(hamiltonian: Hamiltonian) -> dict[Symbol, Range]:
    """Where each coordinate lives."""
    found = {}
    for q, domain in zip(hamiltonian.coordinates, hamiltonian.domains, strict=True):
        if domain.lower.is_finite or domain.upper is not oo:
            found[q] = (domain.lower, domain.upper)
    return found


def detect(hamiltonian: Hamiltonian) -> Verdict:
    """The verdict on H in its given coordinates.

    Raises:
        InputError: a derivative ∂H/∂p_i vanishes identically, so that q_i is a
            parameter and not a degree of freedom.
    """
    try:
        return _Detector(hamiltonian).verdict()
    except TooLarge:
        reason = "the formula's graph is larger than this program evaluates"
    except TypeError as error:
        reason = str(error)
    except _OutOfReach as limit:
        reason = str(limit)
    names = _with_time(hamiltonian)
    return Verdict("undecided", (names,), (), (names,), "numeric", 1.0, None, reason)


def _with_time(hamiltonian: Hamiltonian) -> tuple[Symbol, ...]:
    extra = (hamiltonian.time,) if hamiltonian.explicit_time else ()
    return (*hamiltonian.coordinates, *extra)


class _Detector:
    """One decision: the graph of H, its jets modulo p, and the balls when needed."""

    def __init__(self, hamiltonian: Hamiltonian) -> None:
        self.h = hamiltonian
        self.n = len(hamiltonian.coordinates)
        self.graph = Graph([hamiltonian.expression])
        time = (hamiltonian.time,) if hamiltonian.explicit_time else ()
        self.variables = (*hamiltonian.coordinates, *hamiltonian.momenta, *time)
        self.ranges = ranges(hamiltonian)
        self.kinks = self._kinks()
        self.stand = stand_ins(self.graph, hamiltonian.functions)
        self.roots = square_roots(self.graph)
        self.last_bound = 0.0
        self.numeric: list[float] = []
        try:
            walk = JetWalk(self.graph, self.variables)
            jets, self.count = walk.jets()
            self.prime = walk.field.p
            self.gradient, self.hessian = _dense(jets[0], len(self.variables))
        except NoPoints:
            self.count = 0
        self.chance = chance(self.graph, 16.0, self.count) if self.count else 1.0

    # ------------------------------------------------------------ verdict

    def verdict(self) -> Verdict:
        moving = self._moving()
        links = self._components(moving, self._levi_civita_mod, self._levi_civita)
        sums = self._components(list(range(self.n)), self._mixed_mod, self._mixed, time=False)
        blocks, proof, bound, obstruction = links
        ignorable = tuple(q for k, q in enumerate(self.h.coordinates) if k not in moving)
        blocks = _in_order(_with_time(self.h), (*blocks, *((q,) for q in ignorable)))
        self._refuse_pieces(blocks)
        if self.numeric:
            proof, bound = "numeric", max(self.numeric)
        direct = _in_order(self.h.coordinates, sums[0])
        if all(len(b) == 1 for b in blocks):
            kind = "complete"
        elif len(blocks) == 1:
            kind = "none"
        else:
            kind = "partial"
        return Verdict(
            kind,  # type: ignore[arg-type]
            blocks,
            ignorable,
            direct,
            proof,  # type: ignore[arg-type]
            bound,
            None if kind == "complete" else obstruction,
        )

    def _moving(self) -> list[int]:
        """Coordinates on which H depends; the others are ignorable."""
        for k, q in enumerate(self.h.coordinates):
            if not self._depends(self.n + k):
                raise InputError(
                    f"the derivative of H with respect to {self.h.momenta[k]} vanishes "
                    f"identically, so {q} is a parameter, not a degree of freedom; "
                    f"declare it under parameters",
                    pointer=f"/coordinates/{k}",
                    expected="a coordinate whose momentum occurs in the Hamiltonian",
                    code="no-momentum",
                )
        jumpy = frozenset().union(*self.kinks)
        return [k for k in range(self.n) if self._depends(k) or self.variables[k] in jumpy]

    def _kinks(self) -> list[frozenset[Symbol]]:
        """Variables under each |u|, sign, asin, atan: derivatives may cancel piece by piece."""
        holds: list[frozenset[Symbol]] = []
        for node in self.graph.nodes:
            own = frozenset((node.payload,)) if node.op == "symbol" else frozenset()
            holds.append(own.union(*(holds[a] for a in node.args)))
        kinked = ("abs", "sign", "asin", "atan", "atan2")
        return [
            holds[k] & set(self.variables)
            for k, node in enumerate(self.graph.nodes)
            if node.op in kinked
        ]

    def _refuse_pieces(self, blocks: tuple[tuple[Symbol, ...], ...]) -> None:
        """A kink across blocks: the derivatives cancel on pieces, H does not come apart.

        |x + y| + |x − y| is 2x or 2y or their negative; every expression of
        Levi-Civita vanishes off the kinks, but no S separates across them.
        """
        owner = {q: n for n, block in enumerate(blocks) for q in block}
        owner |= {p: owner[q] for q, p in zip(self.h.coordinates, self.h.momenta, strict=True)}
        for kink in self.kinks:
            if len({owner[s] for s in kink if s in owner}) > 1:
                names = ", ".join(sorted(s.name for s in kink))
                raise _OutOfReach(
                    f"an absolute value, sign or inverse function of {names} together has kinks "
                    "or jumps, and H separates at most piece by piece between them"
                )

    def _depends(self, variable: int) -> bool:
        """Whether H depends on a variable at all."""
        if self.variables[variable] not in self.h.expression.free_symbols:
            return False
        if self.count and self.roots < 2 and bool((self.gradient[:, variable] != 0).any()):
            return True
        if self.count and self.chance < SAFE_CHANCE and self.roots < 2:
            return False
        if self._nonzero(lambda first, second: first(variable), (variable,), ()) is not None:
            return True
        formal = self.count and not bool((self.gradient[:, variable] != 0).any())
        if not (formal and self.chance < SAFE_CHANCE):
            self.numeric.append(self.last_bound)
        return False

    def _components(
        self,
        members: list[int],
        formal: Callable[[int, int], bool | None],
        exact: Callable[[int, int], _Link],
        time: bool = True,
    ) -> tuple[tuple[tuple[Symbol, ...], ...], str, float, Obstruction | None]:
        """Connected components of the graph of proved links among ``members``.

        Every pair that is not formally zero is looked at unless its ends are
        joined already; only a spanning forest needs proofs.
        """
        items = [*members, *([2 * self.n] if time and self.h.explicit_time else [])]
        parent = {k: k for k in items}

        def find(k: int) -> int:
            while parent[k] != k:
                k = parent[k]
            return k

        obstruction: Obstruction | None = None
        unsure: list[tuple[int, int, float]] = []
        for i, j in _pairs(items):
            zero = formal(i, j)
            if zero and self.chance < SAFE_CHANCE and self.roots < 2:
                continue
            if find(i) == find(j):
                continue
            link = exact(i, j) if not zero else self._referee(i, j, exact)
            if link.linked:
                parent[find(j)] = find(i)
                obstruction = obstruction or link.obstruction
            elif not link.proved:
                unsure.append((i, j, link.bound))
        between = [b for i, j, b in unsure if find(i) != find(j)]
        groups: dict[int, list[Symbol]] = {}
        for k in items:
            groups.setdefault(find(k), []).append(self.variables[k])
        blocks = tuple(tuple(g) for g in groups.values())
        if between:
            return blocks, "numeric", max(between), obstruction
        return blocks, "symbolic", self.chance, obstruction

    def _referee(self, i: int, j: int, exact: Callable[[int, int], _Link]) -> _Link:
        """A formal zero once more, in balls: the branches drawn may not be the real ones."""
        link = exact(i, j)
        if link.linked:
            return link
        return _Link(False, self.chance < SAFE_CHANCE, self.chance)

    # ----------------------------------------------------- the two links

    def _levi_civita_mod(self, i: int, j: int) -> bool | None:
        """Whether L_ij vanishes at all modular points; None without points."""
        if not self.count:
            return None
        p, g, h = self.prime, self.gradient, self.hessian
        if j == 2 * self.n:
            a, b = self.n + i, i
            value = g[:, a] * h[:, j, b] % p - g[:, b] * h[:, j, a] % p
            return bool((value % p == 0).all())
        qi, qj, pi, pj = i, j, self.n + i, self.n + j
        value = (
            g[:, qi] * g[:, qj] % p * h[:, pi, pj] % p
            + g[:, pi] * g[:, pj] % p * h[:, qi, qj] % p
            - g[:, qi] * g[:, pj] % p * h[:, pi, qj] % p
            - g[:, pi] * g[:, qj] % p * h[:, qi, pj] % p
        )
        return bool((value % p == 0).all())

    def _levi_civita(self, i: int, j: int) -> _Link:
        if j == 2 * self.n:
            qi, pi, t = i, self.n + i, j
            return self._link(
                (i, j),
                lambda first, second: first(pi) * second(t, qi) - first(qi) * second(t, pi),
                (qi, pi, t),
                ((t, qi), (t, pi)),
            )
        qi, qj, pi, pj = i, j, self.n + i, self.n + j
        return self._link(
            (i, j),
            lambda first, second: (
                first(qi) * first(qj) * second(pi, pj)
                + first(pi) * first(pj) * second(qi, qj)
                - first(qi) * first(pj) * second(pi, qj)
                - first(pi) * first(qj) * second(qi, pj)
            ),
            (qi, qj, pi, pj),
            ((pi, pj), (qi, qj), (pi, qj), (qi, pj)),
        )

    def _mixed_mod(self, i: int, j: int) -> bool | None:
        """Whether the mixed second derivatives of the pairs (q, p) of i and j vanish."""
        if not self.count:
            return None
        a, b = [i, self.n + i], [j, self.n + j]
        return not bool(self.hessian[:, a][:, :, b].any())

    def _mixed(self, i: int, j: int) -> _Link:
        links = [
            self._link((i, j), lambda first, second, a=a, b=b: second(a, b), (a, b), ((a, b),))
            for a in (i, self.n + i)
            for b in (j, self.n + j)
            if not self.count or bool(self.hessian[:, a, b].any())
        ]
        for link in links:
            if link.linked:
                return link
        return _Link(False, False, max((link.bound for link in links), default=0.0))

    # -------------------------------------------------------------- balls

    def _link(
        self,
        pair: tuple[int, int],
        value_of: Callable[..., Any],
        variables: tuple[int, ...],
        seconds: tuple[tuple[int, int], ...],
    ) -> _Link:
        found = self._nonzero(value_of, variables, seconds)
        if found is None:
            return _Link(False, False, self.last_bound)
        point, enclosure = found
        mid, radius = middle(enclosure)
        names = (self.variables[pair[0]].name, self.variables[pair[1]].name)
        where = tuple((s.name, Rational(v.numerator, v.denominator)) for s, v in point.items())
        stand = tuple((name, _formula(r)) for name, r in self.stand.items())
        return _Link(True, True, 0.0, Obstruction(names, where, mid, radius, stand))

    def _nonzero(
        self,
        value_of: Callable[..., Any],
        variables: tuple[int, ...],
        seconds: tuple[tuple[int, int], ...],
        enough: int = 8,
    ) -> tuple[Mapping[Symbol, Fraction], Any] | None:
        """A point of the domain at which a ball excludes 0, or None.

        None means that at ``enough`` points the balls contained 0;
        ``last_bound`` is then the largest relative size they left possible.

        Raises:
            _OutOfReach: no point of the domain was met, a function has no
                balls, or the balls stayed too wide to call anything zero.
        """
        chosen = {self.variables[k]: k for k in variables}
        met, wide, self.last_bound = 0, 0, 0.0
        for point in points(self._symbols(), self.ranges, TRIES):
            found = None
            walk = BallWalk(self.graph, point, self.stand, chosen, seconds)
            try:
                for found in attempts(walk, lambda jets: _measured(value_of, jets[0])):
                    if found[0].is_zero() or not found[0].contains(0):
                        break
            except NotSupported as error:
                raise _OutOfReach(f"the function {error} has no ball evaluation here") from error
            if found is None:
                continue
            value, size = found
            if not value.contains(0):
                return point, value
            if size > WIDEST_ZERO:
                wide += 1
                continue
            met += 1
            self.last_bound = max(self.last_bound, size)
            if met >= enough:
                break
        if not met and wide:
            raise _OutOfReach("the balls stayed too wide to tell zero from a small number")
        if not met:
            raise _OutOfReach("no point was found at which the Hamiltonian has a real value")
        return None

    def _symbols(self) -> list[Symbol]:
        return [n.payload for n in self.graph.nodes if n.op == "symbol"]


def _measured(value_of: Callable[..., Any], jet: BallJet) -> tuple[Any, float]:
    """The value, and its size relative to the derivatives it is made of."""
    value = value_of(*_readers(jet))
    largest = arb(1)
    for d in (*jet.first.values(), *jet.first.values(), *jet.second.values()):
        largest = largest * (1 + abs(d).upper())
    if value.is_zero():
        return value, 0.0
    return value, max(float((abs(value).upper() / largest).upper()), 1e-300)


def _readers(jet: BallJet) -> tuple[Callable[[int], Any], Callable[[int, int], Any]]:
    """First and second derivatives of a jet as functions of the variables."""
    zero = arb(0)
    return (
        lambda k: jet.first.get(k, zero),
        lambda a, b: jet.second.get((min(a, b), max(a, b)), zero),
    )


def _formula(stand_in: Ridges) -> Any:
    """The function that stands in for an arbitrary one, written in x_1, x_2 and so on."""
    total: Any = 0
    for direction, coefficients in zip(stand_in.directions, stand_in.coefficients, strict=True):
        letters = [Symbol(f"x_{k + 1}") for k in range(len(direction))]
        along = sum(Rational(w) * x for w, x in zip(direction, letters, strict=True))
        total += sum(Rational(c) * along**k for k, c in enumerate(coefficients))
    return total


def _pairs(items: list[int]) -> Iterable[tuple[int, int]]:
    return ((i, j) for at, i in enumerate(items) for j in items[at + 1 :])


def _dense(jet: Jet, size: int) -> tuple[Array, Array]:
    """Gradient and second derivatives over all variables."""
    count = jet.value.size
    gradient = np.zeros((count, size), dtype=np.int64)
    hessian = np.zeros((count, size, size), dtype=np.int64)
    if jet.support:
        at = np.array(jet.support)
        gradient[:, at] = jet.gradient
        hessian[np.ix_(np.arange(count), at, at)] = jet.hessian
    return gradient, hessian


def _in_order(
    order: tuple[Symbol, ...], groups: Iterable[tuple[Symbol, ...]]
) -> tuple[tuple[Symbol, ...], ...]:
    """Groups and their members in the order of the coordinates."""
    rank = {s: k for k, s in enumerate(order)}
    inner = [tuple(sorted(g, key=rank.__getitem__)) for g in groups]
    return tuple(sorted(inner, key=lambda g: rank[g[0]]))

"""Four and more dimensions: the subspaces on which the potential is a sum.

The constant tensors A are those that commute with all second derivatives of V.
Their eigenspaces split space into subspaces of which V is a sum (centre of mass
and relative motion, normal modes); each of two or three dimensions is searched
as before.  One system is found this way, not every one: the list is never
called complete, and a subspace of four dimensions that does not split is left.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace

from sympy import Dummy, Expr, Matrix, Poly, Rational, S, Symbol, eye, factor_list, radsimp, symbols

from hjsolve.charts.exact import Unsure, echelon, inverse, null, root, tidy
from hjsolve.charts.placement import taken
from hjsolve.charts.search.tensors import unknowns
from hjsolve.charts.space import Space
from hjsolve.records import Chart, Charts, Domain, Hamiltonian

Search = Callable[[Hamiltonian], Charts]


@dataclass(frozen=True, slots=True)
class Subspace:
    """Independent vectors of the request's space, one a column of ``basis``."""

    basis: Matrix

    @property
    def dimension(self) -> int:
        """The number of vectors."""
        return int(self.basis.shape[1])


def separable(where: Space, solutions: Sequence[Sequence[Expr]], search: Search) -> Chart:
    """A chart made of charts of subspaces.

    Raises:
        Unsure: V is no sum over subspaces that all separate.
    """
    metric = inverse(Matrix(where.gram))
    constant = [_matrix(v, where.dimension) * metric for v in _constant(where, solutions)]
    pieces = [Subspace(eye(where.dimension))]
    for A in constant:
        pieces = [part for piece in pieces for part in _refined(piece, A, metric)]
    if len(pieces) == 1:
        raise Unsure(f"{where.dimension} dimensions that do not split")
    heights = symbols(f"h1:{where.dimension + 1}", cls=Dummy, positive=True)
    pieces = [_scaled(piece, metric) for piece in pieces]
    charts = []
    for piece in pieces:
        others = [other.basis for other in pieces if other is not piece]
        across = Matrix.hstack(*others)
        level = across * Matrix(heights[: across.shape[1]])
        charts.append(_searched(where, metric, piece, level, search))
    return _joined(where, pieces, charts)


def _scaled(piece: Subspace, metric: Matrix) -> Subspace:
    """The subspace with the coordinates a physicist takes: centre of mass, difference.

    A vector that moves some coordinates by the same amount is kept, its
    coordinate is their centre of mass; else the form of the coordinate starts
    with ±1.  Columns are scaled alike or not at all, so that lengths stay lengths.
    """
    factors = []
    for k in range(piece.dimension):
        v = piece.basis.col(k)
        if set(v) <= {S.Zero, S.One}:
            return piece
        low = metric * v
        form = (low / (v.T * low)[0]).applyfunc(tidy)
        factors.append(next(e for e in reversed(form) if e != 0))
    if any(tidy(f - factors[0]) != 0 for f in factors):
        return piece
    return Subspace((factors[0] * piece.basis).applyfunc(_plain))


def _constant(where: Space, solutions: Sequence[Sequence[Expr]]) -> list[Sequence[Expr]]:
    """The solutions with w = 0 and α = 0."""
    kinds = unknowns(where.dimension)
    moving = [k for k, (what, _, _) in enumerate(kinds) if what != "A"]
    rest = [k for k, (what, _, _) in enumerate(kinds) if what == "A"]
    rows = echelon([tuple(v) for v in solutions], (*reversed(moving), *rest))
    return [v for k, v in rows if k in rest]


def _matrix(vector: Sequence[Expr], n: int) -> Matrix:
    A = Matrix.zeros(n, n)
    for (what, i, j), value in zip(unknowns(n), vector, strict=True):
        if what == "A":
            A[i, j] = A[j, i] = value
    return A


def _refined(piece: Subspace, A: Matrix, metric: Matrix) -> list[Subspace]:
    """The eigenspaces of A on a subspace; the subspace itself where A leaves it or is opaque."""
    if piece.dimension == 1:
        return [piece]
    B = piece.basis
    dual = inverse((B.T * metric * B).applyfunc(tidy)) * B.T * metric
    inside = (dual * A * B).applyfunc(tidy)
    if not null(A * B - B * inside):
        return [piece]
    t = Symbol("t")
    found = []
    for part, _ in factor_list((inside - t * eye(piece.dimension)).det(method="berkowitz"), t)[1]:
        p = Poly(part, t)
        if p.degree() == 0:
            continue
        if p.degree() > 2:
            return [piece]
        for value in _roots(p, t):
            vectors = _kernel(inside - value * eye(piece.dimension))
            found.append(Subspace((B * Matrix.hstack(*vectors)).applyfunc(_plain)))
    return found if sum(f.dimension for f in found) == piece.dimension else [piece]


def _roots(p: Poly, t: Symbol) -> list[Expr]:
    c = [p.coeff_monomial(t**k) for k in range(p.degree() + 1)]
    if len(c) == 2:
        return [tidy(-c[0] / c[1])]
    half = root(c[1] ** 2 - 4 * c[0] * c[2])
    return [tidy((-c[1] - half) / (2 * c[2])), tidy((-c[1] + half) / (2 * c[2]))]


def _plain(e: Expr) -> Expr:
    """Tidy, and a number without roots below the line."""
    e = tidy(e)
    return radsimp(e) if e.is_number else e


def _kernel(m: Matrix) -> list[Matrix]:
    n = m.shape[1]
    rows = dict(echelon([tuple(m.row(k)) for k in range(m.shape[0])], range(n)))
    basis = []
    for free in (k for k in range(n) if k not in rows):
        v = Matrix.zeros(n, 1)
        v[free] = S.One
        for k, row in rows.items():
            v[k] = -row[free]
        basis.append(v)
    return basis


def _searched(
    where: Space, metric: Matrix, piece: Subspace, level: Matrix, search: Search
) -> Chart:
    """The first chart of a subspace, cut at a level; of a line, the length along it."""
    B = piece.basis
    gram = inverse((B.T * metric * B).applyfunc(tidy))
    if piece.dimension == 1:
        return _line(where, B, metric, gram[0, 0])
    if piece.dimension > 3:
        raise Unsure(f"a subspace of {piece.dimension} dimensions that does not split")
    s = symbols(f"s1:{piece.dimension + 1}", cls=Dummy, real=True)
    p = symbols(f"p1:{piece.dimension + 1}", cls=Dummy, real=True)
    x = B * Matrix(s) + level
    potential = where.potential.xreplace(dict(zip(where.coordinates, x, strict=True)))
    kinetic = (Matrix([p]) * gram * Matrix(p))[0] / 2
    h = replace(
        where.hamiltonian,
        expression=kinetic + potential,
        coordinates=s,
        momenta=p,
        domains=(Domain(),) * len(s),
    )
    charts = search(h)
    chosen = next((c for c in charts.found if not set(c.free)), None) or next(
        iter(charts.found), None
    )
    if chosen is None:
        raise Unsure(f"a subspace of {piece.dimension} dimensions: {charts.reason or 'none there'}")
    if any(e.free_symbols & level.free_symbols - set(s) for _, e in chosen.transformation):
        raise Unsure("a chart of a subspace depends on where it is cut")
    return chosen


def _line(where: Space, B: Matrix, metric: Matrix, inverse_mass: Expr) -> Chart:
    """The Cartesian chart of a line: its coordinate is that of the basis vector."""
    s = Dummy("s", real=True)
    form = (inverse_mass * B.T * metric).applyfunc(tidy)
    return Chart(
        family="cartesian",
        geometry=(("forms", (tuple(form.row(0)),)),),
        free=(),
        coordinates=(s,),
        transformation=((s, s),),
        domains=(Domain(),),
        squares=(S.One,),
        weight=inverse_mass,
        frame=((s, s),),
        place=((s, s),),
    )


def _joined(where: Space, pieces: Sequence[Subspace], charts: Sequence[Chart]) -> Chart:
    """The charts of the subspaces as one, their coordinates told apart."""
    names = taken(where)
    named: list[Chart] = []
    for number, chart in enumerate(charts, 1):
        put: dict[Symbol, Symbol] = {}
        for q in chart.coordinates:
            name = f"q_{number}" if isinstance(q, Dummy) and len(charts) else q.name
            while name in names or f"p_{name}" in names:
                name += "_"
            names.add(name)
            put[q] = Symbol(
                name, **{k: True for k in ("positive", "real") if q.assumptions0.get(k)}
            )
        named.append(_renamed(chart, put))
    x, own = Matrix.zeros(where.dimension, 1), Matrix.zeros(where.dimension, 1)
    for piece, chart in zip(pieces, named, strict=True):
        x += piece.basis * Matrix([e for _, e in chart.transformation])
        own += piece.basis * Matrix([e for _, e in chart.frame])
    coordinates = tuple(q for chart in named for q in chart.coordinates)
    return Chart(
        family="separable",
        geometry=(),
        free=tuple(s for chart in named for s in chart.free),
        coordinates=coordinates,
        transformation=tuple(zip(where.coordinates, x, strict=True)),
        momenta=tuple(Symbol(f"p_{q.name}", real=True) for q in coordinates),
        domains=tuple(d for chart in named for d in chart.domains),
        squares=tuple(tidy(1 / c.weight) * e for c in named for e in c.squares),
        weight=Rational(1),
        positive=tuple(e for chart in named for e in chart.positive),
        frame=tuple(zip(where.coordinates, own, strict=True)),
        place=tuple(pair for chart in named for pair in chart.place),
        blocks=tuple(named),
    )


def _renamed(chart: Chart, put: dict[Symbol, Symbol]) -> Chart:
    """The chart with other names for its coordinates."""
    return replace(
        chart,
        coordinates=tuple(put[q] for q in chart.coordinates),
        momenta=tuple(Symbol(f"p_{put[q].name}", real=True) for q in chart.coordinates),
        transformation=tuple((s, e.xreplace(put)) for s, e in chart.transformation),
        squares=tuple(e.xreplace(put) for e in chart.squares),
        positive=tuple(e.xreplace(put) for e in chart.positive),
        place=tuple((s, e.xreplace(put)) for s, e in chart.place),
    )

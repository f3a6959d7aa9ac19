"""Put a coordinate system of the catalogue at its place in the space of a problem."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

from sympy import Dummy, Expr, Matrix, S, Symbol, symbols

from hjsolve.charts.exact import inverse, tidy
from hjsolve.charts.registry import system
from hjsolve.charts.space import Space
from hjsolve.charts.system import coordinate
from hjsolve.records import Chart, Domain, Geometry


def taken(space: Space) -> set[str]:
    """The names a problem uses."""
    h = space.hamiltonian
    symbols = {*h.coordinates, *h.momenta, *(p.symbol for p in h.parameters), h.time}
    return {s.name for s in symbols} | set(h.functions) | {name for name, _ in h.numbers}


def letter(space: Space, name: str, **assumptions: bool) -> Symbol:
    """A free letter of a family, with an underscore for every clash with the problem's names."""
    names = taken(space)
    while name in names:
        name += "_"
    return Symbol(name, **(assumptions or {"real": True}))


def placed(
    space: Space,
    family: str,
    geometry: Sequence[tuple[str, Geometry]],
    *,
    center: Sequence[Expr],
    axes: Sequence[Sequence[Expr]],
    scale: Expr = S.One,
    shape: Mapping[Symbol, Expr] | None = None,
    free: Sequence[Symbol] = (),
) -> Chart:
    """The chart with the standard system's axes along ``axes``.

    ``axes`` are n orthogonal rows of equal squared length ``scale``, so that the
    half-distance of foci can be carried by them without a root.  ``shape`` gives
    the shape parameters; center and axes are in y = mass_map · x.
    """
    entry = system(family, space.dimension)
    values = dict(shape or {})
    standard = [e.xreplace(values) for e in entry.place]
    own = symbols(f"X1:{space.dimension + 1}", cls=Dummy, real=True)
    y = [
        center[i] + sum((u * axis[i] for u, axis in zip(own, axes, strict=True)), S.Zero)
        for i in range(space.dimension)
    ]
    if space.mass_map is None:
        x = y
    else:
        back = inverse(Matrix(space.mass_map)) * Matrix(y)
        x = [e.expand() for e in back]
    frame = tuple(zip(space.coordinates, x, strict=True))
    x = [e.xreplace(dict(zip(own, standard, strict=True))) for e in x]
    names = _renamed(space, entry.coordinates, entry.domains, x, free)
    domains = tuple(
        Domain(d.kind, *(S(e).xreplace(values) for e in (d.lower, d.upper))) for d in entry.domains
    )
    squares = tuple((tidy(scale) * e.xreplace(values)).xreplace(names) for e in entry.squares)
    coordinates = tuple(names[q] for q in entry.coordinates)
    return Chart(
        family=family,
        geometry=tuple(geometry),
        free=tuple(free),
        coordinates=coordinates,
        transformation=tuple(
            (q, e.xreplace(names)) for q, e in zip(space.coordinates, x, strict=True)
        ),
        momenta=tuple(Symbol(f"p_{q.name}", real=True) for q in coordinates),
        domains=domains,
        squares=squares,
        weight=space.weight,
        positive=tuple(
            e.xreplace(values).xreplace(names)
            for e in entry.positive
            if e.xreplace(values).free_symbols & set(entry.coordinates)
        ),
        mass_map=space.mass_map,
        frame=frame,
        place=tuple(zip(own, (e.xreplace(names) for e in standard), strict=True)),
    )


def _renamed(
    space: Space,
    coordinates: Sequence[Symbol],
    domains: Sequence[Domain],
    x: Sequence[Expr],
    free: Sequence[Symbol],
) -> dict[Symbol, Symbol]:
    """Names for a chart's coordinates that nothing else in the problem has.

    A coordinate that is one of the request's keeps that one's name and symbol;
    rotated or shifted Cartesian coordinates are u, v, w.
    """
    names = taken(space) | {s.name for s in free}
    own = dict(zip("xyz", "uvw", strict=True))
    found: dict[Symbol, Symbol] = {}
    for q, d in zip(coordinates, domains, strict=True):
        same = [s for s, e in zip(space.coordinates, x, strict=True) if e == q]
        if same:
            found[q] = same[0]
            continue
        name = own.get(q.name, q.name)
        while name in names or f"p_{name}" in names:
            name += "_"
        names.add(name)
        found[q] = coordinate(name, d)
    return found

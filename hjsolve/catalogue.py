"""The catalogue of coordinate systems as a document: ``GET /v1/charts`` serves it."""

from __future__ import annotations

import json
from typing import Any

from sympy import Expr, S

from hjsolve.charts import CHARTS
from hjsolve.charts.system import CoordinateSystem, x, y, z
from hjsolve.records import Definition, Domain
from hjsolve.writing.infix import write_infix


def catalogue() -> list[dict[str, Any]]:
    """The systems a Hamiltonian can be carried into, in standard position.

    Formulas are infix strings in the system's own coordinates and ``shape``
    parameters; x, y, z are the Cartesian coordinates; f, g, h in ``potential``
    are arbitrary functions.
    """
    return [_entry(system) for system in CHARTS]


def _entry(system: CoordinateSystem) -> dict[str, Any]:
    n = system.dimension
    return {
        "name": system.name,
        "family": system.family,
        "dimension": n,
        "source": system.source,
        "coordinates": [q.name for q in system.coordinates],
        "shape": [s.name for s in system.shape],
        "geometry": list(system.geometry),
        "domains": {
            q.name: _domain(d) for q, d in zip(system.coordinates, system.domains, strict=True)
        },
        "transformation": {
            q.name: write_infix(e) for q, e in zip((x, y, z), system.place, strict=False)
        },
        "inverse": {
            q.name: _inverse(e) for q, e in zip(system.coordinates, system.inverse, strict=True)
        },
        "squared_scale_factors": [write_infix(e) for e in system.squares],
        "staeckel_matrix": [[write_infix(e) for e in row] for row in system.staeckel],
        "potential": write_infix(system.potential),
        "examples": list(system.examples),
    }


def _domain(domain: Domain) -> str | list[str | None]:
    """A domain's name, or its two ends, null for infinity."""
    if domain.kind != "interval":
        return domain.kind
    return [write_infix(e) if e.is_finite else None for e in (domain.lower, domain.upper)]


def _inverse(formula: Expr | Definition) -> str | dict[str, Any]:
    """A formula, or the root of a polynomial that it is."""
    if not isinstance(formula, Definition):
        return write_infix(formula)
    return {
        "root_of": write_infix(formula.root_of or S.Zero),
        "in": str(formula.unknown),
        "index": formula.index,
    }


if __name__ == "__main__":
    print(json.dumps(catalogue(), indent=1, ensure_ascii=False))

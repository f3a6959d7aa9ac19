"""The catalogue of coordinate systems.

The service process never loads SymPy, so the catalogue is served from
``api/catalogue.json``; a test holds it equal to ``hjsolve.catalogue.catalogue()``,
and ``python -m hjsolve.catalogue`` writes it.
"""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

from fastapi import APIRouter

router = APIRouter(prefix="/v1/charts", tags=["charts"])

_CATALOGUE: list[dict[str, Any]] = json.loads(
    (Path(__file__).parents[1] / "catalogue.json").read_text("utf-8")
)


@router.get("", summary="The coordinate systems")
def charts() -> dict[str, list[dict[str, Any]]]:
    """List the systems a Hamiltonian can be carried into, in standard position.

    Formulas are infix strings in the system's own coordinates and ``shape``
    parameters; x, y, z are the Cartesian coordinates; f, g, h in ``potential``
    are arbitrary functions.
    """
    return {"charts": _CATALOGUE}

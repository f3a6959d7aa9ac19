"""The explanation of each kind of error, at the address that its ``type`` names."""

from __future__ import annotations

from typing import Any

from fastapi import APIRouter

from api.errors import PROBLEM_TYPES, Problem, Refused

router = APIRouter(prefix="/problems", tags=["problems"])


@router.get("/{name}", summary="Explain a kind of error")
async def explain(name: str) -> dict[str, Any]:
    """Return its title, status, and what to do about it."""
    kind = PROBLEM_TYPES.get(name)
    if kind is None:
        detail = f"There is no kind of error {name[:100]!a}; there are {', '.join(PROBLEM_TYPES)}."
        raise Refused(Problem("not-found", detail))
    return {
        "type": f"/problems/{name}",
        "title": kind.title,
        "status": kind.status,
        "remedy": kind.remedy,
    }

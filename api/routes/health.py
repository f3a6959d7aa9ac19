"""Is the process alive, and would a problem posted now be taken?"""

from __future__ import annotations

from fastapi import APIRouter, Request
from fastapi.responses import JSONResponse, Response

from hjsolve import __version__

router = APIRouter(tags=["health"])


@router.get("/healthz", summary="Alive")
async def healthz() -> dict[str, str]:
    """Answer without touching anything: the event loop runs."""
    return {"status": "alive", "version": __version__}


@router.get("/readyz", summary="Ready", responses={503: {"description": "Not ready."}})
async def readyz(request: Request) -> Response:
    """Say whether a new problem would be taken now, and if not, why."""
    state = request.app.state
    checks = {
        "workers": state.supervisor.ready,
        "queue": not state.queue.full,
        "accepting": not state.queue.draining,
    }
    ready = all(checks.values())
    return JSONResponse({"ready": ready, "checks": checks}, 200 if ready else 503)

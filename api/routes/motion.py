"""The motion of a solution in numbers: actions and trajectories."""

from __future__ import annotations

import json
from typing import Any

from fastapi import APIRouter, Request
from fastapi.responses import Response

from api.convert import read_motion_request
from api.jobs.store import Job
from api.routes.solutions import TheJob, TheQueue, TheSettings, read_body
from api.schemas import ActionsRequest, TrajectoryRequest

ARCHIVE = "application/x-npz"

router = APIRouter(prefix="/v1/solutions", tags=["motion in numbers"])


def _error(description: str) -> dict[str, Any]:
    schema = {"$ref": "#/components/schemas/Problem"}
    return {
        "description": description,
        "content": {"application/problem+json": {"schema": schema}},
    }


ERRORS: dict[int | str, dict[str, Any]] = {
    400: _error("The body is no JSON."),
    404: _error("Unknown id."),
    413: _error("The body is too large."),
    422: _error("The request can be read but not meant, or this motion has no numbers."),
    429: _error("Too many requests are waiting."),
    503: _error("The service is shutting down."),
}

EXAMPLE = {
    "values": {"m": 1, "k": 1},
    "start": {"r": 1, "theta": 0, "p_r": 0, "p_theta": 1.1},
}


def _body(model: type[ActionsRequest], example: dict[str, Any]) -> dict[str, Any]:
    schema = {"$ref": f"#/components/schemas/{model.__name__}"}
    content = {"application/json": {"schema": schema, "example": example}}
    return {"requestBody": {"required": True, "content": content}}


def _work(job: Job, request: dict[str, Any]) -> bytes:
    return json.dumps({"problem": json.loads(job.problem), "request": request}).encode()


@router.post(
    "/{solution_id}/actions",
    summary="Turning points, actions and frequencies",
    responses={
        200: {
            "description": "Numbers with their errors; a NumPy archive where `Accept` asks.",
            "content": {"application/json": {}, ARCHIVE: {}},
        },
        **ERRORS,
    },
    openapi_extra=_body(ActionsRequest, EXAMPLE),
)
async def post_actions(
    request: Request, job: TheJob, settings: TheSettings, queue: TheQueue
) -> Response:
    """Say what a start state, or each case of a scan, does in each coordinate."""
    body = await read_body(request, settings.request_bytes)
    asked = read_motion_request(body, ActionsRequest)
    return await _evaluated(request, queue, "actions", _work(job, asked))


@router.post(
    "/{solution_id}/trajectory",
    summary="States at any times",
    responses={
        200: {
            "description": "The states; a NumPy archive where `Accept` asks for one.",
            "content": {"application/json": {}, ARCHIVE: {}},
        },
        **ERRORS,
    },
    openapi_extra=_body(
        TrajectoryRequest, {**EXAMPLE, "times": {"from": 0, "to": 1000, "count": 5}}
    ),
)
async def post_trajectory(
    request: Request, job: TheJob, settings: TheSettings, queue: TheQueue
) -> Response:
    """Give the state at every time asked for, as JSON or (`Accept: application/x-npz`) binary."""
    body = await read_body(request, settings.request_bytes)
    asked = read_motion_request(body, TrajectoryRequest)
    return await _evaluated(request, queue, "trajectory", _work(job, asked))


async def _evaluated(request: Request, queue: TheQueue, kind: str, work: bytes) -> Response:
    """The answer of a worker, as JSON or, where ``Accept`` asks for one, a NumPy archive."""
    binary = ARCHIVE in request.headers.get("accept", "")
    found = await queue.evaluate(kind, work, "npz" if binary else "json")
    media_type = ARCHIVE if binary else "application/json"
    return Response(found, media_type=media_type, headers={"Vary": "Accept"})

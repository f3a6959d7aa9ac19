"""Transformations: post one, get both its maps, its generating functions, the new Hamiltonian."""

from __future__ import annotations

import json
from typing import Any

from fastapi import APIRouter, Request
from fastapi.responses import Response

from api.convert import read_transformation_request
from api.errors import MEDIA_TYPE, Refused
from api.jobs.queue import Queue
from api.routes.solutions import Notation, TheQueue, TheSettings, read_body
from api.schemas import TRANSFORMATION_EXAMPLES, TransformationRequest

router = APIRouter(prefix="/v1/transformations", tags=["transformations"])


def _documented(description: str, media_type: str, schema: str) -> dict[str, Any]:
    content = {media_type: {"schema": {"$ref": f"#/components/schemas/{schema}"}}}
    return {"description": description, "content": content}


@router.post(
    "",
    summary="Transform canonically",
    responses={
        200: _documented("The transformation.", "application/json", "Transformation"),
        400: _documented("The body is no JSON.", MEDIA_TYPE, "Problem"),
        413: _documented("The body is too large.", MEDIA_TYPE, "Problem"),
        422: _documented("It can be read but not meant, or is degenerate.", MEDIA_TYPE, "Problem"),
        429: _documented("Too many requests are waiting.", MEDIA_TYPE, "Problem"),
        503: _documented("The service is shutting down.", MEDIA_TYPE, "Problem"),
    },
    openapi_extra={
        "requestBody": {
            "required": True,
            "content": {
                "application/json": {
                    "schema": {"$ref": f"#/components/schemas/{TransformationRequest.__name__}"},
                    "examples": TRANSFORMATION_EXAMPLES,
                }
            },
        },
    },
)
async def post_transformation(
    request: Request, settings: TheSettings, queue: TheQueue, notation: Notation = None
) -> Response:
    """Answer within 30 s: canonical or not with the proof, both maps, the generating functions.

    A degenerate generating function is refused with 422.
    """
    problem = read_transformation_request(await read_body(request, settings.request_bytes))
    wanted = problem.pop("solve", False)
    plain, with_mathml = await queue.transform(json.dumps(problem, default=str).encode())
    body = with_mathml if notation == "mathml" else plain
    if wanted:
        body = json.dumps(await _solved_too(json.loads(body), queue)).encode()
    return Response(body, media_type="application/json")


async def _solved_too(answer: dict[str, Any], queue: Queue) -> dict[str, Any]:
    """The answer with ``solution``: where the problem in the new variables is being solved.

    Null when there is no new Hamiltonian in closed form; the reason under ``problem_detail``
    when it is no problem (a momentum that does not occur) or the queue is full.
    """
    if answer["new_problem"] is None:
        return {**answer, "solution": None}
    try:
        job = await queue.submit(json.dumps(answer["new_problem"]).encode())
    except Refused as refused:
        return {**answer, "solution": {"problem_detail": refused.problem.document()}}
    return {**answer, "solution": {"id": job.id, "location": f"/v1/solutions/{job.id}"}}

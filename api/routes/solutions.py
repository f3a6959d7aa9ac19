"""Solutions: post a problem, get its solution, cancel it, follow its progress."""

from __future__ import annotations

import asyncio
import json
import time
from collections.abc import AsyncIterator
from dataclasses import dataclass
from typing import Annotated, Any, Literal

from fastapi import APIRouter, Depends, Query, Request
from fastapi.responses import Response, StreamingResponse
from starlette.requests import ClientDisconnect

from api.convert import read_request
from api.errors import MEDIA_TYPE, Problem, Refused
from api.jobs.queue import Queue
from api.jobs.store import Job, Store
from api.schemas import EXAMPLES, ProblemRequest
from api.settings import Settings

#: A body somewhat too large is read and dropped, so that its sender sees the 413.
DROPPED_BODIES = 8
HEARTBEAT_SECONDS = 10.0
STREAMS = 64

router = APIRouter(prefix="/v1/solutions", tags=["solutions"])

Notation = Annotated[
    Literal["mathml"] | None,
    Query(description="Adds `mathml` to every formula, beside `infix` and `latex`."),
]


def _documented(description: str, media_type: str, schema: str) -> dict[str, Any]:
    content = {media_type: {"schema": {"$ref": f"#/components/schemas/{schema}"}}}
    return {"description": description, "content": content}


def _error(description: str) -> dict[str, Any]:
    return _documented(description, MEDIA_TYPE, "Problem")


def _solution(description: str) -> dict[str, Any]:
    return _documented(description, "application/json", "Solution")


ERRORS: dict[int | str, dict[str, Any]] = {404: _error("Unknown id."), 422: _error("No meaning.")}


@dataclass(frozen=True, slots=True)
class Preference:
    """What the header ``Prefer`` (RFC 7240) asks for."""

    wait: float | None = None
    respond_async: bool = False

    def seconds(self, settings: Settings) -> float:
        """How long to wait for the solution."""
        usual = 0.0 if self.respond_async else settings.wait_seconds
        return min(usual if self.wait is None else self.wait, settings.wait_limit_seconds)

    def applied(self, settings: Settings) -> str:
        """The value of ``Preference-Applied``; empty when nothing was asked."""
        parts = ["respond-async"] if self.respond_async else []
        if self.wait is not None:
            parts.append(f"wait={self.seconds(settings):g}")
        return ", ".join(parts)


def read_preference(values: list[str]) -> Preference:
    """Read the headers ``Prefer``; what is unknown or malformed is ignored, as RFC 7240 asks."""
    wait: float | None = None
    respond_async = False
    for item in ",".join(values).split(","):
        name, _, value = item.partition(";")[0].partition("=")
        name, value = name.strip().lower(), value.strip().strip('"')
        if name == "respond-async":
            respond_async = True
        elif name == "wait" and value.isascii() and value.isdigit() and wait is None:
            wait = float(value[:9])
    return Preference(wait, respond_async)


async def read_body(request: Request, limit: int) -> bytes:
    """The body of a request.

    Raises:
        Refused: 413, when it is longer than ``limit`` bytes.
    """
    chunks: list[bytes] = []
    size = 0
    try:
        async for chunk in request.stream():
            size += len(chunk)
            if size <= limit:
                chunks.append(chunk)
            elif size > DROPPED_BODIES * limit:
                break
    except ClientDisconnect:
        raise Refused(Problem("not-json", "The body ended early.")) from None
    if size > limit:
        raise Refused(Problem("too-large", f"The body has more than {limit} bytes."))
    return b"".join(chunks)


async def _settings(request: Request) -> Settings:
    settings: Settings = request.app.state.settings
    return settings


async def _queue(request: Request) -> Queue:
    queue: Queue = request.app.state.queue
    return queue


async def _job(request: Request, solution_id: str) -> Job:
    store: Store = request.app.state.store
    job = store.get(solution_id)
    if job is None:
        detail = f"No solution {solution_id[:100]!a}: never posted, or no longer kept."
        raise Refused(Problem("not-found", detail))
    return job


TheSettings = Annotated[Settings, Depends(_settings)]
TheQueue = Annotated[Queue, Depends(_queue)]
TheJob = Annotated[Job, Depends(_job)]


def _answer(job: Job, status: int, notation: str | None, headers: dict[str, str]) -> Response:
    if not job.ended:
        headers["Retry-After"] = "1"
    return Response(
        job.body(mathml=notation == "mathml"), status, headers, media_type="application/json"
    )


@router.post(
    "",
    summary="Solve a problem",
    responses={
        200: _solution("The solution, or how the solve ended."),
        202: _solution("Not ready within the wait; see `Location` and `Retry-After`."),
        400: _error("The body is no JSON."),
        413: _error("The body is too large."),
        422: _error("The problem can be read but not meant."),
        429: _error("Too many problems are waiting."),
        503: _error("The service is shutting down."),
    },
    openapi_extra={
        "requestBody": {
            "required": True,
            "content": {
                "application/json": {
                    "schema": {"$ref": f"#/components/schemas/{ProblemRequest.__name__}"},
                    "examples": EXAMPLES,
                }
            },
        },
        "parameters": [
            {
                "name": "Prefer",
                "in": "header",
                "description": "`wait=SECONDS`, `respond-async` (RFC 7240).",
                "schema": {"type": "string"},
                "example": "wait=5",
            }
        ],
    },
)
async def post_solution(
    request: Request, settings: TheSettings, queue: TheQueue, notation: Notation = None
) -> Response:
    """Answer with the solution when it is ready within the wait, else with where it will be.

    The same problem has the same id and is solved once; one that failed or was cancelled is
    queued anew.  `Prefer: respond-async` answers 202 at once, whatever the state.
    """
    preference = read_preference(request.headers.getlist("prefer"))
    problem = read_request(await read_body(request, settings.request_bytes))
    job = await queue.submit(json.dumps(problem).encode())
    seconds = preference.seconds(settings)
    ended = seconds > 0 and await job.wait_ended(seconds)
    headers = {"Location": f"{router.prefix}/{job.id}", "Vary": "Prefer"}
    if applied := preference.applied(settings):
        headers["Preference-Applied"] = applied
    if ended:
        return _answer(job, 200, notation, headers)
    headers["Retry-After"] = "0" if job.ended else "1"
    return _answer(job, 202, notation, headers)


@router.get(
    "/{solution_id}",
    summary="Get a solution",
    responses={200: _solution("The solution as far as it has come."), **ERRORS},
)
async def get_solution(job: TheJob, notation: Notation = None) -> Response:
    """Return a solution as far as it has come."""
    return _answer(job, 200, notation, {})


@router.delete(
    "/{solution_id}",
    summary="Cancel a solve",
    responses={200: _solution("The solution, with what was found."), **ERRORS},
)
async def delete_solution(job: TheJob, queue: TheQueue, notation: Notation = None) -> Response:
    """Cancel a solve that waits or runs; one that has ended stays as it is.

    Either way the answer is the solution with what was found.
    """
    await queue.cancel(job)
    return _answer(job, 200, notation, {})


@router.get(
    "/{solution_id}/progress",
    summary="Follow a solve",
    response_class=StreamingResponse,
    responses={
        200: {"description": "Server-sent events.", "content": {"text/event-stream": {}}},
        **ERRORS,
        429: _error("Too many streams are open."),
    },
)
async def follow_solution(request: Request, job: TheJob, settings: TheSettings) -> Response:
    """Send an event `stage` for each stage, past ones included, and `end` with the last state.

    A stream ends with the solve, or after the longest wait; a client that wants more asks again.
    """
    if request.app.state.streams >= STREAMS:
        detail = f"There are {STREAMS} progress streams open, which is the limit."
        raise Refused(Problem("too-many-requests", detail), retry_seconds=5)
    events = _events(request, job, settings.wait_limit_seconds)
    return StreamingResponse(
        events, media_type="text/event-stream", headers={"Cache-Control": "no-store"}
    )


async def _events(request: Request, job: Job, seconds: float) -> AsyncIterator[bytes]:
    request.app.state.streams += 1
    try:
        stop = time.monotonic() + seconds
        told = 0
        while True:
            # Taken before anything is sent: what changes meanwhile is seen the next time round.
            changed, ended, stages = job.changed, job.ended, job.stages
            for stage in stages[told:]:
                yield _event("stage", {"stage": stage.name, "seconds": stage.seconds})
            told = len(stages)
            if ended:
                yield _event("end", {"state": job.state})
                return
            left = stop - time.monotonic()
            if left <= 0:
                return
            try:
                await asyncio.wait_for(changed.wait(), min(left, HEARTBEAT_SECONDS))
            except TimeoutError:
                yield b": still at it\n\n"
    finally:
        request.app.state.streams -= 1


def _event(name: str, content: dict[str, Any]) -> bytes:
    return f"event: {name}\ndata: {json.dumps(content)}\n\n".encode()

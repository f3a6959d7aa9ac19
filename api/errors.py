"""One shape for every error: problem details, RFC 9457.

``PROBLEM_TYPES`` is the only list of what can go wrong; ``type`` of an error is a path under
which the service explains it.
"""

from __future__ import annotations

import logging
from collections.abc import Mapping
from dataclasses import dataclass, field
from http import HTTPStatus
from typing import Any

from fastapi import FastAPI, Request
from fastapi.exceptions import RequestValidationError
from fastapi.responses import JSONResponse, Response
from starlette.exceptions import HTTPException

log = logging.getLogger("uvicorn.error")

MEDIA_TYPE = "application/problem+json"


@dataclass(frozen=True, slots=True)
class ProblemType:
    """A kind of error: its status, its title, and what to do about it."""

    status: int
    title: str
    remedy: str


PROBLEM_TYPES: dict[str, ProblemType] = {
    "not-json": ProblemType(
        400,
        "The body is no JSON",
        "Send one JSON object in UTF-8, without duplicate members, NaN or Infinity.",
    ),
    "not-found": ProblemType(
        404,
        "Nothing is known under this address",
        "A solution is kept until newer ones need its place; post the problem again.",
    ),
    "method-not-allowed": ProblemType(
        405, "This address does not take this method", "The header Allow lists those it takes."
    ),
    "too-large": ProblemType(
        413, "The body is too large", "Make the problem smaller, or raise HJSOLVE_REQUEST_BYTES."
    ),
    "not-a-problem": ProblemType(
        422,
        "The problem can be read but not meant",
        "The member pointer names the field, position the place in its text, expected what"
        " would have been accepted there.",
    ),
    "out-of-time": ProblemType(
        422,
        "Out of time",
        "Post the problem again to try once more, make it smaller, or raise"
        " HJSOLVE_DEADLINE_SECONDS.  The answer keeps what was found.",
    ),
    "out-of-memory": ProblemType(
        422,
        "Out of memory",
        "Make the problem smaller, or raise HJSOLVE_MEMORY_MB.  The answer keeps what was found.",
    ),
    "answer-too-large": ProblemType(
        422, "The answer is too large", "Make the problem smaller.  The answer keeps its beginning."
    ),
    "too-many-requests": ProblemType(
        429, "Too many problems are waiting", "Try again after the time in the header Retry-After."
    ),
    "fault": ProblemType(
        500,
        "A fault of this program",
        "Please report the problem that led here.  The answer keeps what was found before.",
    ),
    "refuted": ProblemType(
        500,
        "The answer was refuted by its own check",
        "This program is wrong about this problem, so nothing of the answer is shown.  Please"
        " report the problem that led here.",
    ),
    "worker-died": ProblemType(
        500,
        "The worker died",
        "SIGABRT and SIGSEGV mostly mean that a library was given no more memory or stack."
        "  The answer keeps what was found; post the problem again to try once more.",
    ),
    "draining": ProblemType(
        503, "The service is shutting down", "Try again after the time in the header Retry-After."
    ),
}

_OF_STATUS = {400: "not-json", 404: "not-found", 405: "method-not-allowed", 422: "not-a-problem"}


@dataclass(frozen=True, slots=True)
class Problem:
    """One error: a name from ``PROBLEM_TYPES``, what happened, and further members."""

    name: str
    detail: str
    members: Mapping[str, Any] = field(default_factory=dict)

    @property
    def kind(self) -> ProblemType:
        """Its kind."""
        return PROBLEM_TYPES[self.name]

    def document(self) -> dict[str, Any]:
        """The problem details object."""
        return {
            "type": f"/problems/{self.name}",
            "title": self.kind.title,
            "status": self.kind.status,
            "detail": self.detail,
            **self.members,
        }


class Refused(Exception):
    """A request that is answered with a problem."""

    def __init__(self, problem: Problem, *, retry_seconds: int | None = None) -> None:
        super().__init__(problem.detail)
        self.problem = problem
        self.retry_seconds = retry_seconds


def problem_response(problem: Problem, headers: Mapping[str, str] | None = None) -> Response:
    """The response of a problem."""
    return JSONResponse(
        problem.document(),
        problem.kind.status,
        headers=dict(headers or {}),
        media_type=MEDIA_TYPE,
    )


def install_handlers(app: FastAPI) -> None:
    """Have every error of the application answered in this shape."""
    app.add_exception_handler(Refused, _answer_refused)
    app.add_exception_handler(RequestValidationError, _answer_validation)
    app.add_exception_handler(HTTPException, _answer_http)
    app.add_exception_handler(Exception, _answer_fault)


async def _answer_refused(request: Request, error: Exception) -> Response:
    assert isinstance(error, Refused)
    headers = {} if error.retry_seconds is None else {"Retry-After": str(error.retry_seconds)}
    return problem_response(error.problem, headers)


async def _answer_validation(request: Request, error: Exception) -> Response:
    """A path or query parameter that FastAPI refused; bodies are read in ``convert``."""
    assert isinstance(error, RequestValidationError)
    first = error.errors()[0]
    where, *names = first["loc"]
    detail = f"The {where} parameter {'.'.join(map(str, names))}: {first['msg']}."
    return problem_response(Problem("not-a-problem", detail))


async def _answer_http(request: Request, error: Exception) -> Response:
    assert isinstance(error, HTTPException)
    name = _OF_STATUS.get(error.status_code)
    if name is None:
        document = {
            "type": "about:blank",
            "title": HTTPStatus(error.status_code).phrase,
            "status": error.status_code,
            "detail": str(error.detail),
        }
        return JSONResponse(document, error.status_code, error.headers, media_type=MEDIA_TYPE)
    detail = str(error.detail)
    if detail == HTTPStatus(error.status_code).phrase:
        detail = f"{request.method} {request.url.path[:200]}: {PROBLEM_TYPES[name].title.lower()}."
    return problem_response(Problem(name, detail), error.headers)


async def _answer_fault(request: Request, error: Exception) -> Response:
    log.error("%s %s failed", request.method, request.url.path, exc_info=error)
    return problem_response(Problem("fault", "The service failed to answer this request."))

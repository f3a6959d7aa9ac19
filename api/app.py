"""The application: settings in, routes and the processes behind them out."""

from __future__ import annotations

from collections.abc import AsyncIterator
from contextlib import asynccontextmanager
from typing import Any

from fastapi import FastAPI
from fastapi.openapi.utils import get_openapi

from api.errors import install_handlers
from api.jobs.queue import Queue
from api.jobs.store import State, Store
from api.jobs.supervisor import Supervisor
from api.routes import charts, health, motion, problems, solutions, transformations
from api.schemas import ActionsRequest, ProblemRequest, TrajectoryRequest, TransformationRequest
from api.settings import Settings
from hjsolve import __version__

#: Besides the workers that solve: one that reads what is posted, one spare.
EXTRA_WORKERS = 2

#: FastAPI's schema of a 422, which is documented for every route with a parameter.
VALIDATION_SCHEMA = "HTTPValidationError"

PROBLEM_SCHEMA: dict[str, Any] = {
    "title": "Problem",
    "description": "Problem details, RFC 9457.",
    "type": "object",
    "required": ["type", "title", "status", "detail"],
    "properties": {
        "type": {"type": "string", "format": "uri-reference"},
        "title": {"type": "string"},
        "status": {"type": "integer"},
        "detail": {"type": "string"},
        "pointer": {"type": "string", "description": "the field, RFC 6901"},
        "position": {"type": "integer", "description": "0-based offset into its text"},
        "expected": {"type": "string"},
        "code": {"type": "string"},
    },
}

SOLUTION_SCHEMA: dict[str, Any] = {
    "title": "Solution",
    "description": "A problem as read, and what is known of its solution.  README.md describes"
    " each member; a formula is an object with `infix` and `latex`.",
    "type": "object",
    "required": ["id", "state", "problem"],
    "properties": {
        "id": {"type": "string"},
        "state": {"type": "string", "enum": [str(state) for state in State]},
        "stage": {"type": "string", "description": "the last stage that began"},
        "problem_detail": {"$ref": "#/components/schemas/Problem"},
        "problem": {"type": "object"},
        **{
            name: {"type": ["object", "null"]}
            for name in (
                *("verdict", "hamilton_jacobi_equation", "complete_integral"),
                *("motion", "certificate"),
            )
        },
        **{
            name: {"type": "array", "items": {"type": "object"}}
            for name in ("constants", "separated_equations", "reduced_equations")
        },
    },
}


TRANSFORMATION_SCHEMA: dict[str, Any] = {
    "title": "Transformation",
    "description": "A canonical transformation: both maps on the branch with positive new"
    " variables, the other branches, its generating functions, the new Hamiltonian.",
    "type": "object",
    "required": ["canonical", "certificate"],
    "properties": {
        "canonical": {"type": ["boolean", "null"], "description": "null when undecided"},
        "multiplier": {"type": "object"},
        **{
            name: {"type": ["object", "null"]}
            for name in (
                *("old_in_new", "new_in_old", "new_hamiltonian", "added_to_hamiltonian"),
                *("generating_function", "obstruction", "certificate"),
            )
        },
        **{
            name: {"type": "array", "items": {"type": "object"}}
            for name in (
                *("generating_functions", "generating_functions_missing"),
                *("relations", "branches"),
            )
        },
    },
}


def create_app(settings: Settings, worker_module: str = "api.jobs.worker") -> FastAPI:
    """The application; its processes start and end with its lifespan.

    ``worker_module`` is what runs in a worker, see ``Supervisor``.
    """

    @asynccontextmanager
    async def lifespan(app: FastAPI) -> AsyncIterator[None]:
        await app.state.supervisor.start()
        try:
            yield
        finally:
            await app.state.queue.drain(0)
            await app.state.supervisor.stop()

    app = FastAPI(
        title="hjsolve",
        version=__version__,
        summary="Separation of Hamilton–Jacobi equations",
        lifespan=lifespan,
        redirect_slashes=False,
    )
    supervisor = Supervisor(
        count=settings.workers + EXTRA_WORKERS,
        memory_bytes=settings.memory_bytes,
        worker_module=worker_module,
    )
    store = Store(count=settings.store_solutions, size_bytes=settings.store_bytes)
    app.state.settings = settings
    app.state.supervisor = supervisor
    app.state.store = store
    app.state.queue = Queue(settings, supervisor, store)
    app.state.streams = 0
    for resource in (solutions, motion, charts, health, problems, transformations):
        app.include_router(resource.router)
    install_handlers(app)
    app.openapi = lambda: _openapi(app)  # type: ignore[method-assign]
    return app


def _openapi(app: FastAPI) -> dict[str, Any]:
    """The OpenAPI document: FastAPI's own error taken out, the schemas that no route names in."""
    if app.openapi_schema is None:
        document = get_openapi(
            title=app.title, version=app.version, summary=app.summary, routes=app.routes
        )
        schemas = document.setdefault("components", {}).setdefault("schemas", {})
        for unused in (VALIDATION_SCHEMA, "ValidationError"):
            schemas.pop(unused, None)
        for operations in document["paths"].values():
            for operation in operations.values():
                if VALIDATION_SCHEMA in str(operation["responses"].get("422")):
                    del operation["responses"]["422"]
        schemas["Problem"] = PROBLEM_SCHEMA
        schemas["Solution"] = SOLUTION_SCHEMA
        for model in (ProblemRequest, ActionsRequest, TrajectoryRequest, TransformationRequest):
            schema = model.model_json_schema(ref_template="#/components/schemas/{model}")
            schemas.update(schema.pop("$defs", {}))
            schemas[model.__name__] = schema
        schemas["Transformation"] = TRANSFORMATION_SCHEMA
        app.openapi_schema = document
    return app.openapi_schema

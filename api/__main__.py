"""Run the service: ``python -m api [--host HOST] [--port PORT]``."""

from __future__ import annotations

import argparse
import asyncio
import os
import sys
from types import FrameType

import uvicorn
from fastapi import FastAPI

from api.app import create_app
from api.jobs.queue import Queue
from api.settings import read_settings

#: What open requests get when the solves have ended; uvicorn's own default has no bound.
SHUTDOWN_SECONDS = 5
CONNECTIONS = 512


class Server(uvicorn.Server):
    """A server that at the first signal drains its queue, and only then closes its doors.

    Meanwhile new problems are answered with 503, and solutions can still be fetched.  A second
    signal stops at once.
    """

    def __init__(self, config: uvicorn.Config, queue: Queue, drain_seconds: float) -> None:
        super().__init__(config)
        self._queue = queue
        self._drain_seconds = drain_seconds
        self._loop: asyncio.AbstractEventLoop | None = None
        self._draining: asyncio.Task[None] | None = None

    async def main_loop(self) -> None:
        """Serve; a signal handler, which runs outside of the loop, finds the loop here."""
        self._loop = asyncio.get_running_loop()
        await super().main_loop()

    def handle_exit(self, sig: int, frame: FrameType | None) -> None:
        """Take a signal."""
        if self._loop is None or self._queue.draining:
            super().handle_exit(sig, frame)
        else:
            self._loop.call_soon_threadsafe(self._start_draining)

    def _start_draining(self) -> None:
        if self._draining is None:
            self._draining = asyncio.get_running_loop().create_task(self._drain())

    async def _drain(self) -> None:
        await self._queue.drain(self._drain_seconds)
        self.should_exit = True


def serve(app: FastAPI, host: str, port: int) -> int:
    """Serve an application until a signal; the exit status."""
    config = uvicorn.Config(
        app,
        host=host,
        port=port,
        loop="asyncio",
        http="h11",
        ws="none",
        lifespan="on",
        limit_concurrency=CONNECTIONS,
        timeout_graceful_shutdown=SHUTDOWN_SECONDS,
        server_header=False,
    )
    server = Server(config, app.state.queue, app.state.settings.drain_seconds)
    server.run()
    return 0 if server.started else 1


def main(arguments: list[str]) -> int:
    """Read arguments and environment, and serve; the exit status."""
    parser = argparse.ArgumentParser(prog="hjsolve serve", description="Run the service.")
    parser.add_argument("--host", default="127.0.0.1")
    parser.add_argument("--port", type=int, default=8000)
    options = parser.parse_args(arguments)
    try:
        settings = read_settings(os.environ)
    except ValueError as error:
        print(f"hjsolve serve: {error}", file=sys.stderr)
        return 2
    return serve(create_app(settings), options.host, options.port)


if __name__ == "__main__":
    sys.exit(main(sys.argv[1:]))

"""Watches the workers: gives them tasks, ends them at the deadline, replaces them.

It never waits for a worker's goodwill.  A worker past its deadline gets SIGKILL, since code in
C that checks no signals hears nothing else, and the spare takes its place at once.
"""

from __future__ import annotations

import asyncio
import contextlib
import logging
import os
import signal
import socket
from asyncio.subprocess import PIPE, Process
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

from api.jobs.forkserver import FORK, PROCESS_ID, REAP
from api.jobs.messages import BrokenMessage, Message, pack, read_header
from api.jobs.processes import child_environment, module_arguments

log = logging.getLogger("uvicorn.error")

#: A worker grows (56 to 76 MB over 600 jobs when measured), so it is replaced now and then.
TASKS_PER_WORKER = 200
START_SECONDS = 60.0
RESTART_SECONDS = 0.5
STATUS_SECONDS = 2.0


class WorkerDied(Exception):
    """A worker ended in the middle of a task, by a signal or by itself."""


@dataclass(eq=False, slots=True)
class Worker:
    """A worker process and the service's end of its pipe."""

    process: int
    reader: asyncio.StreamReader
    writer: asyncio.StreamWriter
    tasks: int = 0


class Supervisor:
    """A fork server and ``count`` workers forked from it.

    Args:
        count: workers kept; with one more than tasks that run at the same time, a warm spare
            takes over at once when one is ended.
        memory_bytes: address space of each, see ``processes.limit_process``.
        worker_module: its ``serve(connection, memory_bytes)`` is what a worker runs.
    """

    def __init__(
        self, *, count: int, memory_bytes: int, worker_module: str = "api.jobs.worker"
    ) -> None:
        self._count = count
        self._memory_bytes = memory_bytes
        self._worker_module = worker_module
        self._idle: asyncio.Queue[Worker] = asyncio.Queue()
        self._workers: set[Worker] = set()
        self._starting = 0
        self._tasks: set[asyncio.Task[None]] = set()
        self._ended: dict[int, asyncio.Future[int]] = {}
        self._server: Process | None = None
        self._control: socket.socket | None = None
        self._stopping = False

    @property
    def ready(self) -> bool:
        """Whether a task could start now."""
        return self._control is not None and bool(self._workers)

    @property
    def processes(self) -> frozenset[int]:
        """The ids of the workers."""
        return frozenset(worker.process for worker in self._workers)

    async def start(self) -> None:
        """Start the fork server and the workers; returns when it has loaded everything.

        Raises:
            RuntimeError: it ended instead; its standard error says why.
            TimeoutError: it took longer than a minute.
        """
        await self._start_server()
        self._begin(self._watch())

    async def stop(self) -> None:
        """End every process."""
        self._stopping = True
        for worker in tuple(self._workers):
            self.end(worker)
        for task in tuple(self._tasks):
            task.cancel()
        await asyncio.gather(*self._tasks, return_exceptions=True)
        if self._control is not None:
            self._control.close()
            self._control = None
        if self._server is not None:
            with contextlib.suppress(ProcessLookupError):
                self._server.kill()
            await self._server.wait()

    async def run(
        self,
        header: dict[str, Any],
        problem: bytes,
        seconds: float,
        on_message: Callable[[Message], None],
    ) -> Message:
        """Have a worker do a task; the last message it sends.

        Args:
            header: the task, see ``worker``.
            problem: JSON text.
            seconds: the deadline, counted from when a worker is free.
            on_message: called with each message before the last.

        Raises:
            TimeoutError: the deadline passed and the worker was ended.
            WorkerDied: see there.
        """
        # Every worker may be found dead when a task is given to it; then one that is new.
        for _ in range(self._count + 1):
            try:
                # Not wait_for: that of Python 3.11 loses a cancellation when both come at once.
                async with asyncio.timeout(START_SECONDS):
                    worker = await self._take()
            except TimeoutError:
                raise WorkerDied("no worker could be started") from None
            accepted = reusable = False
            try:
                async with asyncio.timeout(seconds):
                    worker.writer.write(pack(header, problem))
                    while message := await receive_async(worker.reader):
                        if message.kind == "accepted":
                            accepted = True
                        elif message.kind == "stage":
                            on_message(message)
                        else:
                            worker.tasks += 1
                            retire = message.header.pop("retire", False)
                            reusable = not retire and worker.tasks < TASKS_PER_WORKER
                            return message
            except BrokenMessage as error:
                log.warning("worker %d: %s", worker.process, error)
            finally:
                if reusable and worker in self._workers:
                    self._idle.put_nowait(worker)
                else:
                    status = self.end(worker)
            if accepted:
                raise WorkerDied(await _describe(status))
        raise WorkerDied("no worker took the task")

    def end(self, worker: Worker) -> asyncio.Future[int]:
        """End a worker and have another started; its exit status, negative for a signal."""
        status: asyncio.Future[int] = asyncio.get_running_loop().create_future()
        worker.writer.close()
        if worker in self._workers:
            self._workers.remove(worker)
            if self._control is not None:
                with contextlib.suppress(ProcessLookupError):
                    os.kill(worker.process, signal.SIGKILL)
                self._ended[worker.process] = status
                self._order(REAP + PROCESS_ID.pack(worker.process))
        self._replenish()
        return status

    async def _take(self) -> Worker:
        while True:
            worker = await self._idle.get()
            if worker in self._workers and not worker.reader.at_eof():
                return worker
            self.end(worker)

    def _replenish(self) -> None:
        if self._stopping or self._control is None:
            return
        while len(self._workers) + self._starting < self._count:
            self._starting += 1
            self._begin(self._add_worker())

    async def _add_worker(self) -> None:
        ours, theirs = socket.socketpair()
        try:
            self._order(FORK, theirs)
            theirs.close()
            reader, writer = await asyncio.open_connection(sock=ours)
            started = await receive_async(reader)
            if started is None:
                raise BrokenMessage("the fork server ended")
            worker = Worker(int(started.header["process"]), reader, writer)
            self._workers.add(worker)
            self._idle.put_nowait(worker)
        except BrokenMessage as error:
            log.warning("no worker started: %s", error)
        finally:
            self._starting -= 1

    def _order(self, order: bytes, descriptor: socket.socket | None = None) -> None:
        descriptors = [] if descriptor is None else [descriptor.fileno()]
        if self._control is not None:
            with contextlib.suppress(ConnectionError):  # noticed by _watch
                socket.send_fds(self._control, [order], descriptors)

    async def _start_server(self) -> None:
        ours, theirs = socket.socketpair()
        with theirs:
            arguments = module_arguments(
                "api.jobs.forkserver",
                *(str(theirs.fileno()), str(os.getpid())),
                *(str(self._memory_bytes), self._worker_module),
            )
            self._server = await asyncio.create_subprocess_exec(
                *arguments,
                stdout=PIPE,
                pass_fds=[theirs.fileno()],
                env=child_environment(),
                # The service decides when workers end, not the terminal's interrupt.
                start_new_session=True,
            )
        async with asyncio.timeout(START_SECONDS):
            line = await self._lines().readline()
        if not line.startswith(b"ready "):
            ours.close()
            raise RuntimeError(
                f"the fork server ended with status {await self._server.wait()}"
                " before it was ready; its messages stand above"
            )
        self._control = ours
        self._replenish()

    async def _watch(self) -> None:
        """Take down how workers ended; start the fork server again when it ends."""
        while True:
            while line := await self._lines().readline():
                word, process, code = line.split()
                status = self._ended.pop(int(process), None)
                if word == b"ended" and status is not None and not status.done():
                    status.set_result(int(code))
            log.error("the fork server ended; starting it again")
            if self._control is not None:
                self._control.close()
                self._control = None
            for worker in tuple(self._workers):
                self.end(worker)
            self._ended.clear()
            while self._control is None:
                await asyncio.sleep(RESTART_SECONDS)
                with contextlib.suppress(RuntimeError, TimeoutError, OSError):
                    await self._start_server()

    def _lines(self) -> asyncio.StreamReader:
        assert self._server is not None
        assert self._server.stdout is not None
        return self._server.stdout

    def _begin(self, work: Any) -> None:
        task = asyncio.get_running_loop().create_task(work)
        self._tasks.add(task)
        task.add_done_callback(self._tasks.discard)


async def receive_async(stream: asyncio.StreamReader) -> Message | None:
    """Read one message as ``messages.receive`` does, from a stream of the event loop.

    Raises:
        BrokenMessage: see there; a connection that is lost counts as one.
    """
    try:
        line = await stream.readline()
        if not line:
            return None
        header, sizes = read_header(line)
        return Message(header, tuple([await stream.readexactly(size) for size in sizes]))
    except (asyncio.IncompleteReadError, ConnectionError, ValueError) as error:
        raise BrokenMessage(str(error)) from error


async def _describe(status: asyncio.Future[int]) -> str:
    try:
        code = await asyncio.wait_for(status, STATUS_SECONDS)
    except TimeoutError:
        return "it ended"
    if code >= 0:
        return f"it ended with status {code}"
    return f"it was ended by {signal.Signals(-code).name}"

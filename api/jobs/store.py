"""The jobs, and which of them are kept."""

from __future__ import annotations

import asyncio
import json
import time
from collections import OrderedDict
from dataclasses import dataclass, field
from enum import StrEnum
from typing import Any


class State(StrEnum):
    """Where a job is; the last three are ends."""

    QUEUED = "queued"
    RUNNING = "running"
    FINISHED = "finished"
    FAILED = "failed"
    CANCELLED = "cancelled"


ENDS = frozenset((State.FINISHED, State.FAILED, State.CANCELLED))


@dataclass(frozen=True, slots=True)
class Stage:
    """A stage that began, ``seconds`` after the job did."""

    name: str
    seconds: float


@dataclass(eq=False, slots=True)
class Job:
    """A problem and what is known of its solution.

    ``document`` and ``with_mathml`` are JSON texts of an object that is not empty, as the worker
    made them; they are handed on unread.  They begin as ``as_read``, the problem alone.
    """

    id: str
    problem: bytes
    as_read: tuple[bytes, bytes]
    document: bytes = b""
    with_mathml: bytes = b""
    state: State = State.QUEUED
    stages: tuple[Stage, ...] = ()
    problem_detail: dict[str, Any] | None = None
    started: float = 0.0
    changed: asyncio.Event = field(default_factory=asyncio.Event)

    def __post_init__(self) -> None:
        self.document, self.with_mathml = self.as_read

    @property
    def ended(self) -> bool:
        """Whether nothing more will come."""
        return self.state in ENDS

    @property
    def size(self) -> int:
        """Bytes kept."""
        texts = (self.problem, *self.as_read, self.document, self.with_mathml)
        return sum(map(len, texts))

    def tell(self) -> None:
        """Wake everyone who waits for a change."""
        self.changed.set()
        self.changed = asyncio.Event()

    def enter(self, stage: str) -> None:
        """Record that a stage began."""
        now = time.monotonic()
        self.stages = (*self.stages, Stage(stage, round(now - self.started, 3)))

    async def wait_ended(self, seconds: float) -> bool:
        """Wait until it has ended or the time is up; whether it has ended."""
        try:
            async with asyncio.timeout(seconds):
                while not self.ended:
                    await self.changed.wait()
        except TimeoutError:
            pass
        return self.ended

    def body(self, *, mathml: bool) -> bytes:
        """The JSON text of the whole: id, state, and the members of the document."""
        head: dict[str, Any] = {"id": self.id, "state": self.state}
        if self.stages:
            head["stage"] = self.stages[-1].name
        if self.problem_detail is not None:
            head["problem_detail"] = self.problem_detail
        rest = self.with_mathml if mathml else self.document
        return json.dumps(head).encode()[:-1] + b", " + rest[1:]


class Store:
    """Jobs by id.  Those that have ended are dropped, the least recently used first.

    Nothing posted makes it grow without bound: jobs that have not ended are bounded by the
    queue's limit, ended ones by ``count`` and ``size_bytes``.
    """

    def __init__(self, *, count: int, size_bytes: int) -> None:
        self._count = count
        self._size_bytes = size_bytes
        self._open: dict[str, Job] = {}
        self._ended: OrderedDict[str, Job] = OrderedDict()
        self._size = 0

    def get(self, name: str) -> Job | None:
        """The job, now the most recently used; None when unknown or dropped."""
        if name in self._ended:
            self._ended.move_to_end(name)
            return self._ended[name]
        return self._open.get(name)

    def add(self, job: Job) -> None:
        """Add a job that has not ended, in place of an ended one of the same id."""
        old = self._ended.pop(job.id, None)
        if old is not None:
            self._size -= old.size
        self._open[job.id] = job

    def settle(self, job: Job) -> None:
        """Count a job that has ended among those that may be dropped."""
        if self._open.pop(job.id, None) is None:
            return
        self._ended[job.id] = job
        self._size += job.size
        while len(self._ended) > self._count or (
            self._size > self._size_bytes and len(self._ended) > 1
        ):
            _, dropped = self._ended.popitem(last=False)
            self._size -= dropped.size

    @property
    def open_jobs(self) -> tuple[Job, ...]:
        """The jobs that have not ended, oldest first."""
        return tuple(self._open.values())

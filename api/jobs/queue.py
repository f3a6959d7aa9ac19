"""The queue: which problems are solved, when, and how each ends."""

from __future__ import annotations

import asyncio
import logging
import math
import time

from api.convert import input_problem
from api.errors import Problem, Refused
from api.jobs.messages import Message
from api.jobs.store import ENDS, Job, State, Store
from api.jobs.supervisor import Supervisor, WorkerDied
from api.settings import Settings

log = logging.getLogger("uvicorn.error")

#: Reading is bounded by itself to well under a second; this ends a reader that is not.
READ_SECONDS = 5.0

#: A transformation is answered within this time, its wait for a worker included.
TRANSFORM_SECONDS = 30.0


class Queue:
    """Reads problems, queues them first come first served, and keeps what comes out."""

    def __init__(self, settings: Settings, supervisor: Supervisor, store: Store) -> None:
        self._settings = settings
        self._supervisor = supervisor
        self._store = store
        self._slots = asyncio.Semaphore(settings.workers)
        self._reading = asyncio.Semaphore(1)
        self._reads_waiting = 0
        self._transforms = 0
        self._evaluations = 0
        self._work: dict[str, asyncio.Task[None]] = {}
        self._usual_seconds = 1.0
        self.draining = False

    @property
    def full(self) -> bool:
        """Whether the next new problem would be refused."""
        waiting = sum(job.state is State.QUEUED for job in self._store.open_jobs)
        return waiting >= self._settings.queue_limit

    @property
    def retry_seconds(self) -> int:
        """When it is worth trying again: the queue at the usual pace, a minute at most."""
        waiting = len(self._store.open_jobs)
        return math.ceil(min(60.0, 1 + waiting * self._usual_seconds / self._settings.workers))

    async def submit(self, problem: bytes) -> Job:
        """The job of a problem: the one there is, or a new one.

        A job that failed or was cancelled is queued anew, since time may have been short; one
        that is queued, running or finished is returned as it stands.

        Raises:
            Refused: the problem cannot be meant, the queue is full, or the service drains.
        """
        self._refuse_when_draining()
        read = await self._read(problem)
        name = str(read.header["id"])
        known = self._store.get(name)
        if known is not None and known.state not in (State.FAILED, State.CANCELLED):
            return known
        self._refuse_when_draining()
        if self.full:
            raise self._too_many("The queue is full.")
        job = Job(name, problem, (read.parts[0], read.parts[1]))
        self._store.add(job)
        task = asyncio.get_running_loop().create_task(self._solve(job))
        self._work[name] = task
        task.add_done_callback(lambda _: self._close(job, task))
        return job

    async def transform(self, problem: bytes) -> tuple[bytes, bytes]:
        """The answer of a transformation, without and with MathML.

        Raises:
            Refused: it cannot be meant, took too long or too much memory, too many wait, or the
                service drains.
        """
        self._refuse_when_draining()
        if self._transforms >= self._settings.queue_limit:
            raise self._too_many("Too many transformations are waiting.")
        stop = time.monotonic() + TRANSFORM_SECONDS
        self._transforms += 1
        try:
            try:
                async with asyncio.timeout(TRANSFORM_SECONDS):
                    await self._slots.acquire()
            except TimeoutError:
                raise self._too_many("Every worker is busy with longer work.") from None
            try:
                left = max(stop - time.monotonic(), 0.1)
                last = await self._supervisor.run(
                    {"kind": "transform", "seconds": left}, problem, left, lambda message: None
                )
            finally:
                self._slots.release()
        except TimeoutError:
            limit = f"{TRANSFORM_SECONDS:g} s"
            detail = f"The transformation took longer than {limit}; make it smaller."
            raise Refused(Problem("out-of-time", detail)) from None
        except WorkerDied as error:
            raise Refused(Problem("worker-died", f"In the transformation: {error}.")) from None
        finally:
            self._transforms -= 1
        if last.kind != "transformed":
            raise Refused(self._failure(last))
        return last.parts[0], last.parts[1]

    async def cancel(self, job: Job) -> None:
        """End a job that has not ended; what was found is kept."""
        task = self._work.get(job.id)
        if job.ended or task is None:
            return
        task.cancel()
        await asyncio.wait([task])

    async def drain(self, seconds: float) -> None:
        """Refuse new problems, give the open ones some time, then cancel them."""
        self.draining = True
        if self._work:
            await asyncio.wait(tuple(self._work.values()), timeout=seconds)
        for task in tuple(self._work.values()):
            task.cancel()
        if self._work:
            await asyncio.wait(tuple(self._work.values()))

    async def evaluate(self, kind: str, work: bytes, answer: str) -> bytes:
        """Have a worker put a motion into numbers, within the deadline of a solve.

        Args:
            kind: ``actions`` or ``trajectory``.
            work: JSON text with ``problem`` and ``request``.
            answer: ``json`` or ``npz``.

        Raises:
            Refused: the request cannot be meant, the work ran out of time or memory, too
                much waits, or the service drains.
        """
        self._refuse_when_draining()
        if self._evaluations >= self._settings.queue_limit:
            raise self._too_many("Too many motions wait to be put into numbers.")
        self._evaluations += 1
        deadline = self._settings.deadline_seconds
        try:
            async with self._slots:
                last = await self._supervisor.run(
                    {"kind": kind, "seconds": deadline, "answer": answer},
                    work,
                    deadline,
                    lambda message: None,
                )
        except TimeoutError:
            detail = f"The numbers took longer than {deadline:g} s; ask for fewer."
            raise Refused(Problem("out-of-time", detail)) from None
        except WorkerDied as error:
            raise Refused(Problem("worker-died", f"In making the numbers: {error}.")) from None
        finally:
            self._evaluations -= 1
        if last.kind != "numbers":
            raise Refused(self._failure(last))
        return last.parts[0]

    async def _read(self, problem: bytes) -> Message:
        """Have a worker read it: whatever reading does, the service goes on."""
        if self._reads_waiting >= self._settings.queue_limit:
            raise self._too_many("Too many problems wait to be read.")
        self._reads_waiting += 1
        try:
            async with self._reading:
                read = await self._supervisor.run(
                    {"kind": "read", "seconds": READ_SECONDS},
                    problem,
                    READ_SECONDS,
                    lambda message: None,
                )
        except TimeoutError:
            detail = f"Reading the problem took longer than {READ_SECONDS:g} s; make it smaller."
            raise Refused(Problem("out-of-time", detail)) from None
        except WorkerDied as error:
            raise Refused(Problem("worker-died", f"In reading the problem: {error}.")) from None
        finally:
            self._reads_waiting -= 1
        if read.kind == "refused":
            raise Refused(input_problem(read.header))
        if read.kind != "read":
            raise Refused(self._failure(read))
        return read

    async def _solve(self, job: Job) -> None:
        deadline = self._settings.deadline_seconds
        try:
            async with self._slots:
                job.state, job.started = State.RUNNING, time.monotonic()
                job.tell()
                last = await self._supervisor.run(
                    {"kind": "solve", "seconds": deadline},
                    job.problem,
                    deadline,
                    lambda message: _advance(job, message),
                )
            if last.kind == "solved":
                job.document, job.with_mathml = last.parts
                job.state = State.FINISHED
            else:
                if last.header.get("problem") == "refuted":
                    job.document, job.with_mathml = job.as_read
                _fail(job, self._failure(last))
        except asyncio.CancelledError:
            job.state = State.CANCELLED
        except TimeoutError:
            detail = (
                f"The solve took longer than {deadline:g} s and was ended"
                f"{_during(job)}; what was found before stands in the answer."
            )
            _fail(job, Problem("out-of-time", detail))
        except WorkerDied as error:
            _fail(job, Problem("worker-died", f"The worker died{_during(job)}: {error}."))
        finally:
            if job.state not in ENDS:
                _fail(job, Problem("fault", "The service failed to run this solve."))
            if job.started:
                spent = time.monotonic() - job.started
                self._usual_seconds += 0.2 * (spent - self._usual_seconds)

    def _failure(self, last: Message) -> Problem:
        """What a worker's last message says when it is no answer."""
        if last.kind == "refused":
            return input_problem(last.header)
        name = str(last.header.get("problem", "fault"))
        if "traceback" in last.header:
            log.error("fault in a worker:\n%s", last.header["traceback"])
        if name == "out-of-memory":
            detail = (
                f"The solve needed more than the {self._settings.memory_mb} MiB it may use;"
                " what was found before stands in the answer."
            )
            return Problem(name, detail)
        return Problem(name, str(last.header.get("detail", "")))

    def _refuse_when_draining(self) -> None:
        if self.draining:
            raise Refused(
                Problem("draining", "The service is shutting down and takes no new problems."),
                retry_seconds=math.ceil(self._settings.drain_seconds) + 1,
            )

    def _too_many(self, detail: str) -> Refused:
        return Refused(
            Problem("too-many-requests", f"{detail} Try again later."),
            retry_seconds=self.retry_seconds,
        )

    def _close(self, job: Job, task: asyncio.Task[None]) -> None:
        """Settle a job whose task is done, also when it was cancelled before it began."""
        if not job.ended:
            job.state = State.CANCELLED
        if self._work.get(job.id) is task:
            del self._work[job.id]
        self._store.settle(job)
        job.tell()


def _advance(job: Job, message: Message) -> None:
    job.enter(str(message.header["stage"]))
    if len(message.parts) == 2:
        job.document, job.with_mathml = message.parts
    job.tell()


def _fail(job: Job, problem: Problem) -> None:
    job.problem_detail = problem.document()
    job.state = State.FAILED


def _during(job: Job) -> str:
    return f" during the stage {job.stages[-1].name!r}" if job.stages else ""

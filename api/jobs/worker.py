"""What runs in a worker: read a problem, or solve one and tell of every stage.

Tasks come in on a pipe as messages ``read`` and ``solve``, each with the deadline in ``seconds``
and the problem as its part; and ``actions`` and ``trajectory``, whose part holds the ``problem``
and the ``request``, and whose ``answer`` is json or npz; and ``transform``, whose part is the
transformation.
Out goes ``accepted``, then for a solve one ``stage`` at the beginning of each stage with what
was found so far, and last one of

    read        ``id``; parts: the problem as read, once a notation set
    solved      parts: the solution, once a notation set
    transformed parts: the transformation, once a notation set
    numbers     parts: the answer to ``actions`` or ``trajectory``
    refused     the members of ``hjsolve.errors.InputError``
    failed      ``problem`` (out-of-memory, out-of-time, answer-too-large, refuted, fault),
                ``detail``, and ``traceback`` of a fault

``retire`` in the last one asks for no more tasks: memory ran out, or much of it was used.
"""

from __future__ import annotations

import json
import socket
import traceback
from collections.abc import Callable
from importlib import import_module
from typing import Any

from api.jobs.messages import SIZE_LIMIT, Message, pack, receive
from api.jobs.processes import limit_cpu, limit_process, peak_memory_bytes
from hjsolve import __version__
from hjsolve.errors import Fault, InputError, OutOfTime
from hjsolve.reading import read_problem
from hjsolve.records import Hamiltonian, Solution, Transformation
from hjsolve.solve import refuse_unknown_charts, solve
from hjsolve.writing import content_id, problem_document, solution_document

#: Loaded when a task needs them; a service loads them beforehand, once for all its workers.
NUMBERS, TRANSFORM = "api.jobs.in_numbers", "hjsolve.transform"
PRELOADED = (NUMBERS, TRANSFORM, "hjsolve.charts")

#: Time on the processor beyond the deadline after which the kernel ends a worker.
CPU_MARGIN_SECONDS = 10.0

#: Made beforehand: when memory has run out there may be none to make a message with.
OUT_OF_MEMORY = pack({"kind": "failed", "problem": "out-of-memory", "retire": True})

TRACEBACK_CHARACTERS = 5000

Send = Callable[[bytes], None]
Render = Callable[[Hamiltonian, Solution], tuple[bytes, ...]]
RenderTransformation = Callable[[Transformation], tuple[bytes, ...]]


def serve(connection: socket.socket, memory_bytes: int) -> None:
    """Do tasks from ``connection`` until it is closed or one asks this process to retire."""
    limit_process(memory_bytes)
    stream = connection.makefile("rb")
    try:
        while task := receive(stream):
            connection.sendall(pack({"kind": "accepted"}))
            last = perform(task, connection.sendall, render_documents)
            if peak_memory_bytes() > memory_bytes // 2:
                last["retire"] = True
            connection.sendall(pack(last, *last.pop("parts", ())))
    except MemoryError:
        connection.sendall(OUT_OF_MEMORY)
    except ConnectionError:
        pass  # the service is gone, and nobody is left to tell


def perform(
    task: Message,
    send: Send,
    render: Render,
    render_transformation: RenderTransformation | None = None,
) -> dict[str, Any]:
    """Do one task; the header of the last message, its parts under ``parts``.

    Raises:
        MemoryError: the limit was reached; the process should take no more tasks, since a
            library that ran out of memory half-way is in no known state.
    """
    limit_cpu(float(task.header["seconds"]) + CPU_MARGIN_SECONDS)
    try:
        if task.kind in ("actions", "trajectory"):
            return _numbers(task)
        if task.kind == "transform":
            rendered = render_transformation or transformation_documents
            found = import_module(TRANSFORM).transform(json.loads(task.parts[0]))
            return _sized("transformed", rendered(found))
        hamiltonian = read_problem(json.loads(task.parts[0]))
        refuse_unknown_charts(hamiltonian)
        if task.kind == "read":
            document = {"problem": problem_document(hamiltonian)}
            parts = (_json_text(without_mathml(document)), _json_text(document))
            return {"kind": "read", "id": content_id(hamiltonian, __version__), "parts": parts}
        return _solve(hamiltonian, send, render)
    except InputError as error:
        return {
            "kind": "refused",
            "detail": error.detail,
            "pointer": error.pointer,
            "position": error.position,
            "expected": error.expected,
            "code": error.code,
        }
    except OutOfTime as error:
        return {"kind": "failed", "problem": "out-of-time", "detail": str(error)}
    except Fault as error:
        return {"kind": "failed", "problem": "refuted", "detail": str(error)}
    except MemoryError:
        raise
    except Exception as error:
        # Told, not printed: standard error may be a file, and a worker may write none.
        return {
            "kind": "failed",
            "problem": "fault",
            "detail": f"{type(error).__name__}: {error}"[:500],
            "traceback": traceback.format_exc()[-TRACEBACK_CHARACTERS:],
        }


def _numbers(task: Message) -> dict[str, Any]:
    work = json.loads(task.parts[0])
    text = import_module(NUMBERS).answer_in_numbers(
        task.kind, work["problem"], work["request"], str(task.header.get("answer", "json"))
    )
    if len(text) > SIZE_LIMIT:
        detail = f"the answer takes {len(text)} bytes; at most {SIZE_LIMIT} are sent"
        return {"kind": "failed", "problem": "answer-too-large", "detail": detail}
    return {"kind": "numbers", "parts": (text,)}


def _solve(hamiltonian: Hamiltonian, send: Send, render: Render) -> dict[str, Any]:
    def on_stage(stage: str, found: Solution | None) -> None:
        parts = () if found is None else render(hamiltonian, found)
        if sum(map(len, parts)) > SIZE_LIMIT:
            parts = ()
        send(pack({"kind": "stage", "stage": stage}, *parts))

    return _sized("solved", render(hamiltonian, solve(hamiltonian, on_stage)))


def _sized(kind: str, parts: tuple[bytes, ...]) -> dict[str, Any]:
    """The last message of an answer, unless the answer is too large to be sent."""
    size = sum(map(len, parts))
    if size > SIZE_LIMIT:
        detail = f"the answer takes {size} bytes; at most {SIZE_LIMIT} are sent"
        return {"kind": "failed", "problem": "answer-too-large", "detail": detail}
    return {"kind": kind, "parts": parts}


def transformation_documents(found: Transformation) -> tuple[bytes, bytes]:
    """A transformation as JSON text, without and with MathML."""
    full = import_module(TRANSFORM).document(found, ("infix", "latex", "mathml"))
    return _json_text(without_mathml(full)), _json_text(full)


def render_documents(hamiltonian: Hamiltonian, solution: Solution) -> tuple[bytes, bytes]:
    """The answer as JSON text, without and with MathML; the problem stands first."""
    full = {
        "problem": problem_document(hamiltonian),
        **solution_document(solution, notations=("infix", "latex", "mathml")),
    }
    return _json_text(without_mathml(full)), _json_text(full)


def without_mathml(value: Any) -> Any:
    """A copy without the ``mathml`` of its formulas.

    A formula is told by its ``infix`` text: a coordinate may be named ``mathml`` too.
    """
    if isinstance(value, dict):
        formula = isinstance(value.get("infix"), str)
        return {
            key: without_mathml(each)
            for key, each in value.items()
            if not (formula and key == "mathml")
        }
    if isinstance(value, (list, tuple)):
        return [without_mathml(each) for each in value]
    return value


def _json_text(document: dict[str, Any]) -> bytes:
    return json.dumps(document, allow_nan=False).encode()

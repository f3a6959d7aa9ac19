"""Solve the problem of a file: ``python -m api.solve_file --text FILE``.

Run by the commands ``hjsolve solve`` and, with ``--task transform``, ``hjsolve transform``.  The
work is done in a forked child held to the deadline and the memory limit of the service; what it
found before it was ended is printed all the same.
"""

from __future__ import annotations

import argparse
import gc
import json
import math
import os
import signal
import socket
import sys
import threading
import time
import tomllib
from dataclasses import dataclass
from decimal import Decimal
from importlib import import_module
from pathlib import Path
from typing import Any, BinaryIO, NoReturn

from api.jobs.messages import Message, pack, receive
from api.jobs.processes import die_with_parent, limit_process
from api.jobs.worker import (
    OUT_OF_MEMORY,
    TRANSFORM,
    perform,
    render_documents,
    transformation_documents,
)
from api.scope import refuse_beyond_scope
from api.settings import read_settings
from api.strict_json import read_json
from hjsolve.errors import InputError
from hjsolve.records import Hamiltonian, Solution, Transformation
from hjsolve.writing import as_latex, for_person

SOLVED, FAILED, BAD_INPUT = 0, 1, 2

SHOWN_CHARACTERS = 72  # of a line of a formula with a caret under it
PROGRESS_AFTER_SECONDS = 1.0
PROGRESS_EVERY_SECONDS = 0.5


@dataclass(slots=True)
class Outcome:
    """How the child ended, and the last it said of the solution."""

    found: bytes = b""
    stage: str = ""
    last: Message | None = None
    timed_out: bool = False
    status: int = 0


def main(arguments: list[str]) -> int:
    """Solve, print; the exit status."""
    options = _parser().parse_args(arguments)
    where = "standard input" if options.file == "-" else options.file
    try:
        settings = read_settings(os.environ)
        problem = read_file(options.file)
        refuse_beyond_scope(problem)
    except InputError as error:
        print(explain(error, where, {}), file=sys.stderr)
        return BAD_INPUT
    except (OSError, ValueError, RecursionError) as error:
        print(f"hjsolve: {where}: {error}", file=sys.stderr)
        return BAD_INPUT
    text = json.dumps(problem, default=str).encode()
    outcome = solve_in_child(
        text, options.form, options.deadline, settings.memory_bytes, options.task
    )
    return report(outcome, where, problem, options, settings.memory_mb)


def read_file(name: str) -> dict[str, Any]:
    """The problem of a JSON or TOML file, numbers as exact text.

    Raises:
        OSError: it cannot be read.
        ValueError: it is neither JSON nor TOML, or no object.
        InputError: a number in it is too long.
    """
    content = sys.stdin.buffer.read() if name == "-" else Path(name).read_bytes()
    text = content.decode("utf-8")
    try:
        if text.lstrip().startswith("{"):
            problem = read_json(content)
        else:
            problem = tomllib.loads(text, parse_float=Decimal)
    except tomllib.TOMLDecodeError as error:
        raise ValueError(f"neither JSON (no opening brace) nor TOML: {error}") from None
    if not isinstance(problem, dict):
        raise ValueError("a problem is one object")
    return problem


def solve_in_child(
    problem: bytes, form: str, deadline: float, memory_bytes: int, task: str = "solve"
) -> Outcome:
    """Fork, have the child solve, and end it at the deadline (seconds)."""
    ours, theirs = socket.socketpair()
    parent = os.getpid()
    gc.freeze()
    process = os.fork()
    if process == 0:
        ours.close()
        _run_child(theirs, parent, problem, form, deadline, memory_bytes, task)
    theirs.close()
    outcome = Outcome()

    def end() -> None:
        outcome.timed_out = True
        os.kill(process, signal.SIGKILL)

    timer = threading.Timer(deadline, end)
    timer.daemon = True
    timer.start()
    try:
        with ours, ours.makefile("rb") as stream:
            _follow(stream, outcome)
    finally:
        timer.cancel()
        timer.join()
        os.kill(process, signal.SIGKILL)  # not reaped yet, so the id is still its own
        _, status = os.waitpid(process, 0)
        outcome.status = os.waitstatus_to_exitcode(status)
    return outcome


def _run_child(
    connection: socket.socket,
    parent: int,
    problem: bytes,
    form: str,
    deadline: float,
    memory_bytes: int,
    kind: str,
) -> NoReturn:
    def render(hamiltonian: Hamiltonian, solution: Solution) -> tuple[bytes, ...]:
        if form == "json":
            return (render_documents(hamiltonian, solution)[0],)
        write = as_latex if form == "latex" else for_person
        return (write(solution).encode(),)

    def render_transformation(found: Transformation) -> tuple[bytes, ...]:
        if form == "json":
            return (transformation_documents(found)[0],)
        return (import_module(TRANSFORM).for_person(found).encode(),)

    try:
        die_with_parent(parent)
        limit_process(memory_bytes)
        task = Message({"kind": kind, "seconds": deadline}, (problem,))
        last = perform(task, connection.sendall, render, render_transformation)
        connection.sendall(pack(last, *last.pop("parts", ())))
    except MemoryError:
        connection.sendall(OUT_OF_MEMORY)
    finally:
        os._exit(0)


def _follow(stream: BinaryIO, outcome: Outcome) -> None:
    """Take down what the child says; on a terminal, say how far it is."""
    done = threading.Event()
    if sys.stderr.isatty():
        threading.Thread(target=_show_progress, args=(outcome, done), daemon=True).start()
    try:
        while message := receive(stream):
            if message.kind == "stage":
                outcome.stage = str(message.header["stage"])
            else:
                outcome.last = message
            outcome.found = message.parts[0] if message.parts else outcome.found
    finally:
        done.set()


def _show_progress(outcome: Outcome, done: threading.Event) -> None:
    began = time.monotonic()
    pause = PROGRESS_AFTER_SECONDS
    while not done.wait(pause):
        seconds = time.monotonic() - began
        line = f"{outcome.stage or 'read'}, {seconds:.0f} s"
        print(f"\r\x1b[K{line}", end="", file=sys.stderr, flush=True)
        pause = PROGRESS_EVERY_SECONDS
    if pause == PROGRESS_EVERY_SECONDS:
        print("\r\x1b[K", end="", file=sys.stderr, flush=True)


def report(
    outcome: Outcome,
    where: str,
    problem: dict[str, Any],
    options: argparse.Namespace,
    memory_mb: int,
) -> int:
    """Print the answer, or why there is none; the exit status."""
    last = outcome.last
    if last is not None and last.kind == "refused":
        members = ("pointer", "position", "expected", "code")
        error = InputError(
            last.header["detail"],
            **{key: last.header[key] for key in members},
        )
        print(explain(error, where, problem), file=sys.stderr)
        return BAD_INPUT
    if last is not None and last.header.get("problem") == "refuted":
        outcome.found = b""  # some of it is wrong
    if outcome.found:
        sys.stdout.buffer.write(outcome.found.rstrip(b"\n") + b"\n")
        sys.stdout.buffer.flush()
    if last is not None and last.kind in ("solved", "transformed"):
        return SOLVED
    if outcome.timed_out:
        why = f"it took longer than {options.deadline:g} s; --deadline gives it more"
    elif last is not None and last.header.get("problem") == "out-of-memory":
        why = f"it needed more than {memory_mb} MiB; HJSOLVE_MEMORY_MB gives it more"
    elif last is not None:
        why = str(last.header.get("detail", "a fault of this program"))
    else:
        why = f"the process that solves ended with status {outcome.status}"
    during = f" during the stage {outcome.stage!r}" if outcome.stage else ""
    kept = "; what was found before is printed" if outcome.found else ""
    print(f"hjsolve: {where}: ended{during}: {why}{kept}", file=sys.stderr)
    return FAILED


def explain(error: InputError, where: str, problem: dict[str, Any]) -> str:
    """The message of an error, with a caret under the place in the text it points at."""
    lines = [f"hjsolve: {where}: {error.pointer or 'the problem'}: {error.detail}"]
    text = _text_at(problem, error.pointer)
    if error.position is not None and text is not None:
        lines += _caret_lines(text, error.position)
    if error.expected:
        lines.append(f"expected: {error.expected}")
    return "\n".join(lines)


def _caret_lines(text: str, position: int) -> list[str]:
    """The line of a text that holds a place, cut to a window, and the caret under it."""
    position = min(max(position, 0), len(text))
    start = max(text.rfind("\n", 0, position) + 1, position - SHOWN_CHARACTERS // 2)
    stop = text.find("\n", position)
    stop = min(len(text) if stop < 0 else stop, start + SHOWN_CHARACTERS)
    # What does not print, or could command the terminal, is shown as a question mark.
    shown = "".join(each if each.isprintable() else "?" for each in text[start:stop])
    return [f"    {shown}", f"    {' ' * (position - start)}^"]


def _text_at(problem: Any, pointer: str) -> str | None:
    """The text that an RFC 6901 pointer leads to, None when it leads to none."""
    place = problem
    for step in pointer.split("/")[1:]:
        step = step.replace("~1", "/").replace("~0", "~")
        if isinstance(place, dict) and step in place:
            place = place[step]
        elif isinstance(place, list) and step.isdigit() and int(step) < len(place):
            place = place[int(step)]
        else:
            return None
    return place if isinstance(place, str) else None


def _deadline(text: str) -> float:
    seconds = float(text)
    if not 0 < seconds < math.inf:
        raise argparse.ArgumentTypeError("a number of seconds above 0 was expected")
    return seconds


def _parser() -> argparse.ArgumentParser:
    parser = argparse.ArgumentParser(prog="hjsolve solve")
    parser.add_argument("file")
    parser.add_argument("--deadline", type=_deadline, default=60.0)
    parser.add_argument("--task", choices=("solve", "transform"), default="solve")
    for form in ("text", "json", "latex"):
        parser.add_argument(f"--{form}", dest="form", action="store_const", const=form)
    return parser


if __name__ == "__main__":
    sys.exit(main(sys.argv[1:]))

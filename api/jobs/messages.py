"""Messages between a supervisor and a worker.

A message is one line of JSON, then the parts whose sizes the line gives.  The parts are JSON
texts that the service hands on without reading them; nothing on the pipe is ever unpickled, so
a worker taken over by its input gains no code in the service.
"""

from __future__ import annotations

import json
from dataclasses import dataclass
from typing import Any, BinaryIO

#: A worker whose answer is larger says so instead of sending it.
SIZE_LIMIT = 32 << 20
LINE_LIMIT = 1 << 16


class BrokenMessage(Exception):
    """The other side sent no message of ours, or ended in the middle of one."""


@dataclass(frozen=True, slots=True)
class Message:
    """A header (its ``kind`` says what it is) and its parts."""

    header: dict[str, Any]
    parts: tuple[bytes, ...]

    @property
    def kind(self) -> str:
        """What the message is."""
        return str(self.header.get("kind", ""))


def pack(header: dict[str, Any], *parts: bytes) -> bytes:
    """The bytes of a message."""
    line = json.dumps({**header, "sizes": [len(part) for part in parts]})
    return b"".join((line.encode(), b"\n", *parts))


def receive(stream: BinaryIO) -> Message | None:
    """Read one message; None at the end of the stream.

    Raises:
        BrokenMessage: see there.
    """
    line = stream.readline(LINE_LIMIT)
    if not line:
        return None
    header, sizes = read_header(line)
    parts = tuple(stream.read(size) for size in sizes)
    if [len(part) for part in parts] != sizes:
        raise BrokenMessage("the stream ended in a message")
    return Message(header, parts)


def read_header(line: bytes) -> tuple[dict[str, Any], list[int]]:
    """The header in the first line of a message, and the sizes of its parts.

    Raises:
        BrokenMessage: see there.
    """
    try:
        header = json.loads(line)
        sizes = header.pop("sizes")
        valid = all(type(size) is int and size >= 0 for size in sizes) and sum(sizes) <= SIZE_LIMIT
    except (ValueError, TypeError, KeyError, AttributeError, RecursionError) as error:
        raise BrokenMessage(f"no message: {line[:80]!r}") from error
    if not valid:
        raise BrokenMessage(f"sizes out of bounds: {sizes!r:.80}")
    return header, sizes

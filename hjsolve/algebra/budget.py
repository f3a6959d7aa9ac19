"""A limit in seconds on a stage, so that the stages after it still run.

The limit is a timer signal where Python allows one (the main thread of a
process, which is where the service solves); elsewhere it does nothing and the
caller's own deadline must serve.  The signal is seen between two Python
operations: a single call into C is not cut short, so sizes are bounded before
such calls and the process deadline stands behind.
"""

from __future__ import annotations

import signal
import threading
import time
from collections.abc import Iterator
from contextlib import contextmanager
from types import FrameType

from hjsolve.errors import OutOfTime

AGAIN_SECONDS = 0.25
"""How soon the timer rings again: a library may swallow an exception.  Long enough for
the first one to have left every ``finally`` on its way."""

UNRAISABLE = ("gc_callback", "__del__")
"""Functions in which Python ignores an exception."""

_deadlines: list[float] = []
"""When the limits now open end, outermost first."""


def _ring(_signal: int, frame: FrameType | None) -> None:
    """Raise when the earliest deadline has passed; stays installed, and is silent otherwise.

    Giving the signal back to the system's default between limits would let a
    late ring end the process.
    """
    if not _deadlines or time.monotonic() < min(_deadlines):
        return
    if frame is not None and frame.f_code.co_name in UNRAISABLE:
        return
    raise OutOfTime("a stage used up its time")


def _arm() -> None:
    if _deadlines:
        left = max(min(_deadlines) - time.monotonic(), 1e-3)
        signal.setitimer(signal.ITIMER_REAL, left, AGAIN_SECONDS)
    else:
        signal.setitimer(signal.ITIMER_REAL, 0)


@contextmanager
def limit(seconds: float) -> Iterator[None]:
    """Raise OutOfTime inside the block once ``seconds`` have passed.

    Limits nest: an inner one never outlasts the outer.
    """
    if threading.current_thread() is not threading.main_thread() or seconds <= 0:
        yield
        return
    if signal.getsignal(signal.SIGALRM) is not _ring:
        signal.signal(signal.SIGALRM, _ring)
    depth = len(_deadlines)
    try:
        _deadlines.append(time.monotonic() + seconds)
        _arm()
        yield
    finally:
        del _deadlines[depth:]
        _arm()

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

AGAIN_SECONDS = 0.05
"""How soon the timer rings again: a library may swallow an exception."""

UNRAISABLE = ("gc_callback", "__del__")
"""Functions in which Python ignores an exception."""


@contextmanager
def limit(seconds: float) -> Iterator[None]:
    """Raise OutOfTime inside the block once ``seconds`` have passed.

    Limits nest: an inner one never outlasts the outer.
    """
    if threading.current_thread() is not threading.main_thread() or seconds <= 0:
        yield
        return

    def ring(_signal: int, frame: FrameType | None) -> None:
        if frame is not None and frame.f_code.co_name in UNRAISABLE:
            return  # raised there it would be printed and lost; the timer rings again
        raise OutOfTime(f"more than {seconds:g} s")

    began = time.monotonic()
    outer_handler = signal.getsignal(signal.SIGALRM)
    outer_left, _ = signal.getitimer(signal.ITIMER_REAL)
    if outer_left and outer_left <= seconds:
        yield
        return
    signal.signal(signal.SIGALRM, ring)
    signal.setitimer(signal.ITIMER_REAL, seconds, AGAIN_SECONDS)
    try:
        yield
    finally:
        signal.setitimer(signal.ITIMER_REAL, 0)
        signal.signal(signal.SIGALRM, outer_handler)
        if outer_left:
            left = max(outer_left - (time.monotonic() - began), 1e-3)
            signal.setitimer(signal.ITIMER_REAL, left)

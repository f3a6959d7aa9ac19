"""Room on Python's call stack for SymPy's recursive printers."""

from __future__ import annotations

import sys
import threading
from collections.abc import Callable
from typing import TypeVar

T = TypeVar("T")

ENOUGH = 50_000
"""Frames that suffice for any formula the reader lets in."""

_lock = threading.Lock()


def deep(function: Callable[..., T], *arguments: object) -> T:
    """Call a recursive function, again with a higher recursion limit if it needs one.

    The limit is the process's own, so one thread at a time raises it and puts
    it back.  Pure Python calls do not use the C stack from Python 3.11 on, so
    a higher limit does not risk a crash.
    """
    try:
        return function(*arguments)
    except RecursionError:
        with _lock:
            before = sys.getrecursionlimit()
            sys.setrecursionlimit(max(before, ENOUGH))
            try:
                return function(*arguments)
            finally:
                sys.setrecursionlimit(before)

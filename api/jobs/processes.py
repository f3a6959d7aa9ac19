"""What a child process is started with, and what it is held to.

Standard library only, so that a command can use it before anything else is loaded.
"""

from __future__ import annotations

import ctypes
import os
import resource
import signal
import sys

PR_SET_PDEATHSIG = 1  # <linux/prctl.h>

_libc = ctypes.CDLL(None, use_errno=True) if sys.platform.startswith("linux") else None


def child_environment() -> dict[str, str]:
    """The environment of every process that solves.

    The whole of ``sys.path`` goes along, since a path that this process got in another way
    than from its environment would be lost.  The hash seed is fixed because the order of
    SymPy's sets, and with it the form of some answers, depends on it.  One thread for linear
    algebra: a process that forks must have no other thread, and each costs address space.
    """
    return {
        **os.environ,
        "PYTHONPATH": os.pathsep.join(path for path in sys.path if path),
        "PYTHONHASHSEED": "0",
        "OPENBLAS_NUM_THREADS": "1",
        "OMP_NUM_THREADS": "1",
        "MKL_NUM_THREADS": "1",
    }


def module_arguments(module: str, *arguments: str) -> list[str]:
    """The argument list that runs a module in this interpreter.

    With ``-P`` a directory ``api`` that happens to lie in the working directory is not
    mistaken for this package.
    """
    return [sys.executable, "-P", "-m", module, *arguments]


def die_with_parent(parent: int) -> None:
    """Have the kernel end this process when ``parent`` ends, however that comes about.

    Linux only; elsewhere a process whose parent is gone ends when it next reads its pipe.

    Raises:
        OSError: the kernel refused.
    """
    if _libc is None:
        return
    if _libc.prctl(PR_SET_PDEATHSIG, signal.SIGKILL, 0, 0, 0) != 0:
        number = ctypes.get_errno()
        raise OSError(number, os.strerror(number))
    if os.getppid() != parent:  # it ended before the kernel was asked
        os._exit(1)


def limit_process(memory_bytes: int) -> None:
    """Bound address space; no file may be written and no core dumped."""
    _lower(resource.RLIMIT_AS, memory_bytes)
    _lower(resource.RLIMIT_FSIZE, 0)
    _lower(resource.RLIMIT_CORE, 0)


def limit_cpu(seconds: float) -> None:
    """Give this process ``seconds`` more of CPU time, after which SIGXCPU ends it.

    A second line of defence: a supervisor ends its workers by wall time, which this cannot
    precede as long as the supervisor works.  Counted from what was used so far, since
    RLIMIT_CPU counts the life of the process and a worker does many jobs.
    """
    usage = resource.getrusage(resource.RUSAGE_SELF)
    limit = int(usage.ru_utime + usage.ru_stime + seconds) + 1
    hard = resource.getrlimit(resource.RLIMIT_CPU)[1]
    if hard != resource.RLIM_INFINITY:
        limit = min(limit, hard)
    resource.setrlimit(resource.RLIMIT_CPU, (limit, hard))


def peak_memory_bytes() -> int:
    """The most memory that this process has had in use."""
    peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
    return peak if sys.platform == "darwin" else peak * 1024


def _lower(which: int, limit: int) -> None:
    hard = resource.getrlimit(which)[1]
    if hard != resource.RLIM_INFINITY:
        limit = min(limit, hard)
    resource.setrlimit(which, (limit, limit))

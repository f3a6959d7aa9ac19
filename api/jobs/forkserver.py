"""The process that workers are forked from: SymPy and hjsolve are loaded once, here.

    python -m api.jobs.forkserver CONTROL_FD PARENT_PID MEMORY_BYTES WORKER_MODULE

Why not the standard library's: that of Python 3.11 does not hand ``sys.path`` to the modules it
preloads and hides their ImportError (cpython#117378), and its workers inherit a pipe that keeps
them alive when the service is gone.  Here an import that fails ends the process with its
traceback.

Orders come in on a socket: ``F`` with a descriptor forks a worker that serves it, ``R`` and a
process id reaps a worker that was ended.  A worker is reaped on order only, so that its id
stays its own until the service has done with it.  Out on standard output go ``ready VERSION``
and, for each worker reaped, ``ended PID STATUS``.
"""

from __future__ import annotations

import contextlib
import gc
import importlib
import os
import socket
import struct
import sys
import traceback
from collections.abc import Callable
from typing import NoReturn

from api.jobs.messages import pack
from api.jobs.processes import die_with_parent
from hjsolve import __version__

FORK, REAP = b"F", b"R"
PROCESS_ID = struct.Struct("!q")
NICENESS = 5  # the service answers before the workers compute

Serve = Callable[[socket.socket, int], None]


def main(control_descriptor: int, parent: int, memory_bytes: int, worker_module: str) -> None:
    """Carry out orders until the control socket is closed."""
    die_with_parent(parent)
    control = socket.socket(fileno=control_descriptor)
    module = importlib.import_module(worker_module)
    for name in getattr(module, "PRELOADED", ()):
        importlib.import_module(name)
    serve: Serve = module.serve
    gc.collect()
    gc.freeze()  # else the first collection in a worker copies every page
    print("ready", __version__, flush=True)
    while True:
        order, descriptors, _, _ = socket.recv_fds(control, 1, 1)
        if order == FORK:
            fork_worker(control, descriptors[0], serve, memory_bytes)
        elif order == REAP:
            (process,) = PROCESS_ID.unpack(control.recv(PROCESS_ID.size, socket.MSG_WAITALL))
            _, status = os.waitpid(process, 0)
            print("ended", process, os.waitstatus_to_exitcode(status), flush=True)
        else:
            return


def fork_worker(control: socket.socket, descriptor: int, serve: Serve, memory_bytes: int) -> None:
    """Fork a worker that serves ``descriptor``, and tell its id there."""
    server = os.getpid()
    process = os.fork()
    if process == 0:
        control.close()  # a hung worker must not keep the service's sockets open
        _run_worker(server, descriptor, serve, memory_bytes)
    with socket.socket(fileno=descriptor) as connection:
        connection.sendall(pack({"kind": "started", "process": process}))


def _run_worker(server: int, descriptor: int, serve: Serve, memory_bytes: int) -> NoReturn:
    """Serve, and leave without the fork server's own way out."""
    code = 1
    try:
        die_with_parent(server)
        null = os.open(os.devnull, os.O_RDWR)
        os.dup2(null, 0)
        os.dup2(null, 1)
        os.nice(NICENESS)
        serve(socket.socket(fileno=descriptor), memory_bytes)
        code = 0
    except BaseException:
        with contextlib.suppress(OSError):  # standard error may be a file, out of bounds here
            traceback.print_exc(file=sys.stderr)
    finally:
        os._exit(code)


if __name__ == "__main__":
    main(int(sys.argv[1]), int(sys.argv[2]), int(sys.argv[3]), sys.argv[4])

"""A worker that does to the service what the first coordinate's name says."""

import itertools
import os
import signal
import tempfile
import time

from api.jobs import worker
from hjsolve.errors import Fault, InputError
from hjsolve.records import Separation, Solution, Verdict

DIRECTORY = tempfile.gettempdir()  # found by writing a file, which a worker may not


def hang():
    """Never returns from C, and never looks at signals."""
    sum(itertools.repeat(0))


def hoard():
    blocks = []
    while True:
        blocks.append(bytes(50_000_000))


def swell():
    """Uses much memory, but not too much."""
    return len(bytes(range(256)) * (400 << 12))


def write():
    descriptor, path = tempfile.mkstemp(dir=DIRECTORY)
    os.unlink(path)
    os.write(descriptor, b"x")


def refute():
    raise Fault("the derivative of W is not p")


def blunder():
    return {}["nothing here"]


def refuse():
    raise InputError("not this one", pointer="/hamiltonian", position=3, code="odd")


BEHAVIOURS = {
    "quick": lambda: None,
    "nap": lambda: time.sleep(0.4),
    "hang": hang,
    "sleep": lambda: time.sleep(600),
    "hoard": hoard,
    "swell": swell,
    "write": write,
    "refute": refute,
    "blunder": blunder,
    "refuse": refuse,
    "die": lambda: os.kill(os.getpid(), signal.SIGKILL),
    "abort": os.abort,
    "leave": lambda: os._exit(3),
}


def odd_solve(hamiltonian, on_stage=None):
    blocks = tuple((coordinate,) for coordinate in hamiltonian.coordinates)
    verdict = Verdict("undecided", blocks, (), (), "numeric", 0.0, limit=f"{os.getpid()}")
    found = Solution(Separation(hamiltonian, verdict))
    on_stage("separate", None)
    on_stage("integrate", found)
    BEHAVIOURS[hamiltonian.coordinates[0].name]()
    return found


def serve(connection, memory_bytes):
    worker.solve = odd_solve
    worker.serve(connection, memory_bytes)

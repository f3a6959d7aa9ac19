"""What the environment may set; nothing else configures the service.

====================================  =======  ==================================================
variable                              default  meaning
====================================  =======  ==================================================
``HJSOLVE_DEADLINE_SECONDS``               60  wall time a solve may take before it is ended
``HJSOLVE_WORKERS``                         2  solves that run at the same time
``HJSOLVE_MEMORY_MB``                    1024  address space of one worker, MiB (RLIMIT_AS)
``HJSOLVE_QUEUE_LIMIT``                    64  problems that may wait; the next one gets 429
``HJSOLVE_STORE_SOLUTIONS``              1000  ended solutions kept, the least recently used go
``HJSOLVE_STORE_MB``                      128  and their total size, MiB
``HJSOLVE_REQUEST_BYTES``             1048576  size of a request body; above it 413
``HJSOLVE_WAIT_SECONDS``                   10  wait for a solution when the request names none
``HJSOLVE_WAIT_LIMIT_SECONDS``             60  longest wait, and life of one progress stream
``HJSOLVE_DRAIN_SECONDS``                  10  time that running solves get after SIGTERM
====================================  =======  ==================================================

The memory limit counts address space, not memory in use: an idle worker (Python, SymPy, NumPy
with one thread, FLINT) measures about 160 MiB of address space and 73 MiB of memory on x86-64
Linux.  RLIMIT_AS is not enforced on macOS.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, fields

PREFIX = "HJSOLVE_"


@dataclass(frozen=True, slots=True)
class Settings:
    """The settings by their names in the table above, in lower case."""

    deadline_seconds: float = 60.0
    workers: int = 2
    memory_mb: int = 1024
    queue_limit: int = 64
    store_solutions: int = 1000
    store_mb: int = 128
    request_bytes: int = 1 << 20
    wait_seconds: float = 10.0
    wait_limit_seconds: float = 60.0
    drain_seconds: float = 10.0

    @property
    def memory_bytes(self) -> int:
        """``memory_mb`` in bytes."""
        return self.memory_mb << 20

    @property
    def store_bytes(self) -> int:
        """``store_mb`` in bytes."""
        return self.store_mb << 20


MINIMUM = {"memory_mb": 256, "workers": 1, "store_solutions": 1, "store_mb": 1, "queue_limit": 1}


def read_settings(environment: Mapping[str, str]) -> Settings:
    """Read the settings from a mapping such as ``os.environ``.

    Raises:
        ValueError: a variable is no number, too small, or its name is not in the
            table (a misspelt setting must not pass for a set one).
    """
    usual = Settings()
    known = {field.name: type(getattr(usual, field.name)) for field in fields(Settings)}
    values: dict[str, float] = {}
    for variable, text in environment.items():
        if not variable.startswith(PREFIX):
            continue
        name = variable.removeprefix(PREFIX).lower()
        if name not in known:
            wanted = ", ".join(PREFIX + each.upper() for each in known)
            raise ValueError(f"{variable} is not a setting; the settings are {wanted}")
        try:
            value = known[name](text)
        except ValueError:
            kind = "a whole number" if known[name] is int else "a number"
            raise ValueError(f"{variable} is {text!r}; expected {kind}") from None
        least = MINIMUM.get(name, 0)
        if not least <= value < float("inf"):
            raise ValueError(f"{variable} is {text}; expected at least {least}")
        values[name] = value
    return Settings(**values)  # type: ignore[arg-type]

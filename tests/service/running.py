"""Starts real server processes on free ports, and looks at what runs under them."""

import contextlib
import itertools
import os
import signal
import socket
import subprocess
import sys
import time
from pathlib import Path

import httpx

ROOT = Path(__file__).resolve().parents[2]
HERE = Path(__file__).resolve().parent
_numbers = itertools.count(1)


class Service:
    """A server process and a client for it."""

    def __init__(self, log, *arguments, **settings):
        with socket.socket() as free:
            free.bind(("127.0.0.1", 0))
            self.port = free.getsockname()[1]
        self.log = log
        clean = {k: v for k, v in os.environ.items() if not k.startswith("HJSOLVE_")}
        environment = {
            **clean,
            "PYTHONPATH": os.pathsep.join([str(HERE), str(ROOT), *filter(None, sys.path)]),
            **{f"HJSOLVE_{name.upper()}": str(value) for name, value in settings.items()},
        }
        command = [each.replace("PORT", str(self.port)) for each in arguments]
        with log.open("wb") as output:
            self.process = subprocess.Popen(
                [sys.executable, *command], env=environment, stdout=output, stderr=output
            )
        self.client = httpx.Client(base_url=f"http://127.0.0.1:{self.port}", timeout=30)
        self.wait_ready()

    def wait_ready(self, seconds=30):
        stop = time.monotonic() + seconds
        while time.monotonic() < stop:
            with contextlib.suppress(httpx.TransportError):
                if self.client.get("/readyz").status_code == 200:
                    return
            if self.process.poll() is not None:
                break
            time.sleep(0.05)
        raise AssertionError("not ready: " + self.log.read_text()[-3000:])

    def post(self, problem, prefer=None, **more):
        headers = {"Prefer": prefer} if prefer else {}
        return self.client.post("/v1/solutions", json=problem, headers=headers, **more)

    def get(self, name):
        response = self.client.get(f"/v1/solutions/{name}")
        assert response.status_code == 200, response.text
        return response.json()

    def wait_state(self, name, *states, seconds=20):
        stop = time.monotonic() + seconds
        while (answer := self.get(name))["state"] not in states:
            assert time.monotonic() < stop, answer
            time.sleep(0.02)
        return answer

    def descendants(self):
        return descendants(self.process.pid)

    def stop(self):
        self.client.close()
        if self.process.poll() is None:
            self.process.send_signal(signal.SIGTERM)
            try:
                self.process.wait(20)
            except subprocess.TimeoutExpired:
                self.process.kill()
                self.process.wait()
                raise


def odd(behaviour):
    """A problem that no other test has posted, with a worker that behaves so."""
    number = next(_numbers)
    return {"coordinates": [behaviour], "hamiltonian": f"p_{behaviour}**2/2 + {number}*{behaviour}"}


def descendants(process):
    """The ids of the processes under one, from /proc."""
    parents = {}
    for entry in Path("/proc").iterdir():
        if entry.name.isdigit():
            with contextlib.suppress(OSError):
                fields = (entry / "stat").read_text().rpartition(")")[2].split()
                parents[int(entry.name)] = int(fields[1])
    found, new = set(), {process}
    while new:
        new = {child for child, parent in parents.items() if parent in new} - found
        found |= new
    return found


def alive(process):
    """Whether a process is there and no zombie."""
    try:
        return Path(f"/proc/{process}/stat").read_text().rpartition(")")[2].split()[0] != "Z"
    except OSError:
        return False


def eventually(condition, seconds=10):
    stop = time.monotonic() + seconds
    while time.monotonic() < stop:
        if condition():
            return True
        time.sleep(0.02)
    return bool(condition())

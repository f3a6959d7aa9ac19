"""Parts of the service that need no server."""

import asyncio
import io
import os
import subprocess
import sys
from dataclasses import fields
from pathlib import Path

import pytest
from running import ROOT

from api.convert import json_pointer
from api.jobs.messages import BrokenMessage, Message, pack, receive
from api.jobs.queue import Queue
from api.jobs.store import Job, State, Store
from api.jobs.supervisor import Supervisor, receive_async
from api.jobs.worker import without_mathml
from api.routes.solutions import Preference, read_preference
from api.settings import Settings, read_settings
from api.settings import __doc__ as settings_table
from api.strict_json import NotJSON, read_json
from hjsolve.errors import InputError


def test_settings_come_from_the_environment():
    settings = read_settings({"HJSOLVE_WORKERS": "4", "HJSOLVE_DEADLINE_SECONDS": "2.5", "X": "1"})
    assert settings == Settings(workers=4, deadline_seconds=2.5)


@pytest.mark.parametrize(
    ("variable", "text"),
    [
        ("HJSOLVE_WORKERS", "0"),
        ("HJSOLVE_WORKERS", "two"),
        ("HJSOLVE_WORKERS", "1.5"),
        ("HJSOLVE_DEADLINE_SECONDS", "nan"),
        ("HJSOLVE_DEADLINE_SECONDS", "inf"),
        ("HJSOLVE_DEADLINE_SECONDS", "-1"),
        ("HJSOLVE_MEMORY_MB", "16"),
        ("HJSOLVE_WORKER", "2"),
    ],
)
def test_settings_that_cannot_be_are_refused(variable, text):
    with pytest.raises(ValueError, match=variable):
        read_settings({variable: text})


def test_the_table_of_settings_is_true():
    rows = [line.split() for line in settings_table.splitlines() if line.startswith("``HJSOLVE_")]
    documented = {row[0].strip("`"): float(row[1]) for row in rows}
    usual = {
        f"HJSOLVE_{field.name.upper()}": getattr(Settings(), field.name)
        for field in fields(Settings)
    }
    assert documented == usual


@pytest.mark.parametrize(
    ("headers", "expected"),
    [
        ([], Preference()),
        (["wait=3"], Preference(3.0)),
        (["respond-async, wait=10"], Preference(10.0, True)),
        (["Respond-Async", "WAIT = 7"], Preference(7.0, True)),
        (['wait="5"; x=1, other'], Preference(5.0)),
        (["wait=2, wait=9"], Preference(2.0)),
        (["wait=²"], Preference()),
    ],
)
def test_preferences(headers, expected):
    assert read_preference(headers) == expected


def test_a_wait_has_a_limit():
    settings = Settings(wait_limit_seconds=30)
    preference = read_preference(["wait=" + "9" * 400])
    assert preference.seconds(settings) == 30
    assert preference.applied(settings) == "wait=30"


def test_pointers_are_escaped():
    assert json_pointer(["parameters", "a/b~c", "[key]"]) == "/parameters/a~1b~0c"


@pytest.mark.parametrize("text", [b"NaN", b'{"a":1,"a":1}', b'"\\ud800"', b"\xff", b"[" * 10**5])
def test_strict_json_refuses(text):
    with pytest.raises(NotJSON):
        read_json(text)


def test_strict_json_takes_a_whole_surrogate_pair_and_exact_numbers():
    assert read_json(b'"\\ud83d\\ude00"') == "\N{GRINNING FACE}"
    assert str(read_json(b"0.10000000000000000001")) == "0.10000000000000000001"
    with pytest.raises(InputError):
        read_json(b"1" * 1001)


def test_messages_go_both_ways():
    content = pack({"kind": "stage"}, b"{}", b"\n\n") + pack({"kind": "read"})
    stream = io.BytesIO(content)
    first = receive(stream)
    assert (first.kind, first.parts) == ("stage", (b"{}", b"\n\n"))
    assert receive(stream).kind == "read"
    assert receive(stream) is None

    async def again():
        reader = asyncio.StreamReader()
        reader.feed_data(content)
        reader.feed_eof()
        return [await receive_async(reader) for _ in range(3)]

    assert asyncio.run(again()) == [first, receive(io.BytesIO(pack({"kind": "read"}))), None]


BROKEN = [
    b"\x80\x04N.\n",  # a pickle
    b"[]\n",
    b"{}\n",
    b'{"sizes": [-1]}\n',
    b'{"sizes": ["1"]}\n',
    b'{"sizes": [1e3]}\n',
    b'{"sizes": [99999999999]}\n',
    b'{"sizes": 5}\n',
    b'{"sizes": [5]}\nab',
    b'{"sizes": [',
    b"[" * 60_000 + b"\n",
    b"x" * 100_000,
]


@pytest.mark.parametrize("content", BROKEN, ids=lambda each: repr(each[:20]))
def test_broken_messages(content):
    with pytest.raises(BrokenMessage):
        receive(io.BytesIO(content))

    async def read():
        reader = asyncio.StreamReader()
        reader.feed_data(content)
        reader.feed_eof()
        await receive_async(reader)

    with pytest.raises(BrokenMessage):
        asyncio.run(read())


def ended(name, size):
    job = Job(name, b"x" * size, (b"", b""))
    job.state = State.FINISHED
    return job


def test_the_store_is_bounded_in_size():
    store = Store(count=100, size_bytes=1000)
    for number in range(50):
        job = ended(f"{number}", 300)
        store.add(job)
        store.settle(job)
    assert [n for n in range(50) if store.get(f"{n}")] == [47, 48, 49]
    large = ended("large", 5000)
    store.add(large)
    store.settle(large)
    assert store.get("large") is large  # at least the last answer can be fetched
    assert store.get("49") is None


def test_the_store_never_drops_what_has_not_ended():
    store = Store(count=1, size_bytes=1000)
    running = Job("running", b"x" * 5000, (b"", b""))
    store.add(running)
    for number in range(5):
        job = ended(f"{number}", 10)
        store.add(job)
        store.settle(job)
    assert store.get("running") is running
    assert store.open_jobs == (running,)


def test_mathml_is_taken_out_of_formulas_only():
    formula = {"infix": "x", "latex": "x", "mathml": "<math/>", "where": [{"mathml": 1}]}
    document = {"coordinates": {"mathml": formula, "infix": None}, "list": [formula]}
    bare = {"infix": "x", "latex": "x", "where": [{"mathml": 1}]}
    assert without_mathml(document) == {
        "coordinates": {"mathml": bare, "infix": None},
        "list": [bare],
    }


def supervise(work, **settings):
    """Run ``work(supervisor)`` under a supervisor of odd workers."""

    async def run():
        settings.setdefault("worker_module", "odd_worker")
        supervisor = Supervisor(count=1, memory_bytes=700 << 20, **settings)
        await supervisor.start()
        try:
            return await work(supervisor)
        finally:
            await supervisor.stop()

    return asyncio.run(run())


READ = b'{"coordinates": ["x"], "hamiltonian": "p_x**2/2"}'


def test_a_worker_is_replaced_after_its_share_of_tasks(monkeypatch):
    monkeypatch.setattr("api.jobs.supervisor.TASKS_PER_WORKER", 5)

    async def work(supervisor):
        seen = []
        for _ in range(12):
            await supervisor.run({"kind": "read", "seconds": 5}, READ, 5, lambda message: None)
            while not supervisor.processes:
                await asyncio.sleep(0.01)
            seen.append(min(supervisor.processes))
        return seen

    assert len(set(supervise(work))) == 3


def test_the_hash_seed_of_a_worker_is_fixed():
    async def work(supervisor):
        while not supervisor.processes:
            await asyncio.sleep(0.01)
        (process,) = supervisor.processes
        return Path(f"/proc/{process}/environ").read_bytes().split(b"\0")

    assert b"PYTHONHASHSEED=0" in supervise(work)


def test_modules_that_only_this_process_has_a_path_to_are_found(tmp_path, monkeypatch):
    source = "from api.jobs.worker import serve\n__all__ = ['serve']\n"
    (tmp_path / "worker_elsewhere.py").write_text(source)
    monkeypatch.syspath_prepend(str(tmp_path))

    async def work(supervisor):
        return await supervisor.run({"kind": "read", "seconds": 5}, READ, 5, lambda message: None)

    assert supervise(work, worker_module="worker_elsewhere").kind == "read"


def test_an_import_that_fails_ends_the_start(tmp_path, monkeypatch, capfd):
    (tmp_path / "worker_broken.py").write_text("import no_such_module\n")
    monkeypatch.syspath_prepend(str(tmp_path))
    with pytest.raises(RuntimeError, match="before it was ready"):
        supervise(None, worker_module="worker_broken")
    assert "no_such_module" in capfd.readouterr().err


def test_a_worker_that_speaks_no_json_is_ended(tmp_path, monkeypatch):
    source = "def serve(connection, memory_bytes):\n"
    source += "    connection.recv(100_000)\n    connection.sendall(b'\\x80\\x04N.' * 99_999)\n"
    (tmp_path / "worker_babbling.py").write_text(source)
    monkeypatch.syspath_prepend(str(tmp_path))

    async def work(supervisor):
        await supervisor.run({"kind": "read", "seconds": 5}, READ, 5, lambda message: None)

    with pytest.raises(Exception, match="no worker took the task"):
        supervise(work, worker_module="worker_babbling")


def test_a_worker_is_held_to_its_limits():
    code = """if True:
        import resource, signal
        from api.jobs.processes import limit_cpu, limit_process
        limit_process(900 << 20)
        limit_cpu(0.2)
        for which in (resource.RLIMIT_AS, resource.RLIMIT_FSIZE, resource.RLIMIT_CORE):
            print(*resource.getrlimit(which))
        sum(range(10**12))
    """
    done = subprocess.run(
        [sys.executable, "-c", code],
        capture_output=True,
        env={**os.environ, "PYTHONPATH": str(ROOT)},
        timeout=20,
        check=False,
    )
    assert done.stdout.split() == [b"943718400"] * 2 + [b"0"] * 4
    assert done.returncode == -24  # SIGXCPU


def test_the_image_installs_as_the_project_says():
    dockerfile = (ROOT / "Dockerfile").read_text("utf-8")
    assert "pip install ." in dockerfile
    assert 'CMD ["hjsolve", "serve", "--host", "0.0.0.0", "--port", "8000"]' in dockerfile
    assert "USER hjsolve" in dockerfile
    assert "/healthz" in dockerfile


class ReadsOnly:
    """A supervisor that reads everything and solves nothing."""

    async def run(self, header, problem, seconds, on_message):
        if header["kind"] == "solve":
            await asyncio.sleep(60)
        name = problem.decode()
        return Message({"kind": "read", "id": name}, (b'{"problem": {}}', b'{"problem": {}}'))


def test_a_job_cancelled_before_it_began_is_settled():
    async def run():
        store = Store(count=5, size_bytes=1000)
        queue = Queue(Settings(workers=1), ReadsOnly(), store)
        jobs = [await queue.submit(name) for name in (b"first", b"second")]
        await queue.cancel(jobs[1])
        assert await jobs[1].wait_ended(1)
        await queue.drain(0)
        return [job.state for job in jobs], store.open_jobs

    assert asyncio.run(run()) == ([State.CANCELLED, State.CANCELLED], ())

"""The command, as a process of its own."""

import json
import os
import signal
import subprocess
import sys
import time

import pytest
from running import HERE, ROOT, Service, alive, descendants, eventually

MORSE = ROOT / "samples/molecule_morse.json"
PATHS = os.pathsep.join([str(ROOT), str(HERE)])


def environment(**more):
    clean = {k: v for k, v in os.environ.items() if not k.startswith("HJSOLVE_")}
    return {**clean, "PYTHONPATH": PATHS, **more}


def hjsolve(*arguments, given=None, cwd=ROOT, module="api.command", **more):
    return subprocess.run(
        [sys.executable, "-P", "-m", module, *map(str, arguments)],
        input=given,
        capture_output=True,
        env=environment(**more),
        cwd=cwd,
        timeout=60,
        check=False,
    )


def problem_file(tmp_path, **members):
    problem = {"coordinates": ["x"], "hamiltonian": "p_x**2/2 + x**2/2", **members}
    path = tmp_path / "problem.json"
    path.write_text(json.dumps(problem), "utf-8")
    return path


def test_solve_prints_for_a_person():
    done = hjsolve("solve", MORSE)
    assert done.returncode == 0, done.stderr.decode()
    assert done.stderr == b""
    text = done.stdout.decode()
    assert text.endswith("\n")
    assert "complete" in text


def test_solve_prints_json_that_is_the_answer_of_the_service(service):
    done = hjsolve("solve", MORSE, "--json")
    assert done.returncode == 0, done.stderr.decode()
    answer = json.loads(done.stdout)
    served = service.post(json.loads(MORSE.read_text("utf-8")), prefer="wait=25").json()
    assert answer == {k: v for k, v in served.items() if k not in ("id", "state", "stage")}


def test_solve_prints_latex():
    done = hjsolve("solve", "--latex", MORSE)
    assert done.returncode == 0, done.stderr.decode()
    assert b"\\" in done.stdout


def test_json_toml_and_standard_input_mean_the_same():
    toml = MORSE.with_suffix(".toml")
    answers = [
        hjsolve("solve", MORSE, "--json").stdout,
        hjsolve("solve", toml, "--json").stdout,
        hjsolve("solve", "-", "--json", given=MORSE.read_bytes()).stdout,
        hjsolve("solve", "-", "--json", given=toml.read_bytes()).stdout,
    ]
    assert answers[0]
    assert len(set(answers)) == 1


def test_a_formula_error_is_shown_with_a_caret(tmp_path):
    path = problem_file(tmp_path, hamiltonian="p_x**2/2 + * x")
    done = hjsolve("solve", path)
    assert done.returncode == 2
    assert done.stdout == b""
    first, formula, caret, *_ = done.stderr.decode().splitlines()
    assert str(path) in first
    assert "/hamiltonian" in first
    assert formula == "    p_x**2/2 + * x"
    assert caret == " " * (4 + 11) + "^"


def test_the_caret_of_a_long_formula_of_several_lines(tmp_path):
    text = "p_x**2/2\n + " + "x + " * 200 + "\x1b[31m* x" + " + x" * 100 + "\n + x"
    done = hjsolve("solve", problem_file(tmp_path, hamiltonian=text))
    assert done.returncode == 2
    _, formula, caret, *_ = done.stderr.decode().splitlines()
    assert "\x1b" not in done.stderr.decode()
    assert len(formula) < 80
    assert formula[caret.index("^")] == "?"


@pytest.mark.parametrize(
    ("content", "says"),
    [
        (b"", "coordinates"),
        (b"{", "line 1"),
        (b"coordinates = [", "TOML"),
        (b"\xff\xfe", "utf-8"),
        (b'{"a": 1, "a": 2}', "twice"),
        (b'{"coordinates": ["x"], "hamiltonian": "p_x**2", "charts": "all"}', "/charts"),
        (b'coordinates = ["x"]\nhamiltonian = "p_x**2/m"\n[parameters]\nm = inf', "/parameters/m"),
        (b'{"coordinates": ["x"], "hamiltonian": "p_x**2", "wrong": 1}', "/wrong"),
        (b'{"a":' * 20_000, "deep"),
        (
            b'{"coordinates": ["x"], "hamiltonian": "p_x", "parameters": {"m": ' + b"9" * 5000,
            "5000",
        ),
    ],
)
def test_bad_input_is_told_and_ends_with_2(content, says):
    done = hjsolve("solve", "-", given=content)
    assert done.returncode == 2
    assert done.stdout == b""
    assert says in done.stderr.decode()
    assert "Traceback" not in done.stderr.decode()


def test_bad_arguments(tmp_path):
    missing = hjsolve("solve", tmp_path / "nothing.json")
    assert missing.returncode == 2
    assert "nothing.json" in missing.stderr.decode()
    for arguments in [(), ("solve",), ("solve", MORSE, "--deadline", "soon"), ("dance",)]:
        assert hjsolve(*arguments).returncode == 2
    assert hjsolve("solve", MORSE, "--deadline", "-1").returncode == 2
    assert hjsolve("solve", MORSE, HJSOLVE_MEMORY_MB="many").returncode == 2
    assert hjsolve("serve", HJSOLVE_WORKER="3").returncode == 2


def odd_file(tmp_path, behaviour):
    return problem_file(
        tmp_path, coordinates=[behaviour], hamiltonian=f"p_{behaviour}**2/2 + {behaviour}"
    )


@pytest.mark.parametrize(
    ("behaviour", "says"),
    [
        ("hang", "longer than 0.7 s"),
        ("hoard", "700 MiB"),
        ("die", "status -9"),
        ("blunder", "nothing here"),
    ],
)
def test_what_was_found_is_printed_when_a_solve_is_ended(tmp_path, behaviour, says):
    done = hjsolve(
        *("--json", "--deadline", "0.7", odd_file(tmp_path, behaviour)),
        module="odd_command",
        HJSOLVE_MEMORY_MB="700",
    )
    assert done.returncode == 1
    assert json.loads(done.stdout)["verdict"]["separability"] == "undecided"
    assert says in done.stderr.decode()
    assert "'integrate'" in done.stderr.decode()


def test_nothing_of_a_refuted_answer_is_printed(tmp_path):
    done = hjsolve("--text", odd_file(tmp_path, "refute"), module="odd_command")
    assert done.returncode == 1
    assert done.stdout == b""
    assert "the derivative of W is not p" in done.stderr.decode()


@pytest.mark.parametrize("end", [signal.SIGKILL, signal.SIGINT, signal.SIGTERM])
def test_a_command_that_is_killed_leaves_no_child(tmp_path, end):
    command = subprocess.Popen(
        [sys.executable, "-P", "-m", "odd_command", "--text", str(odd_file(tmp_path, "hang"))],
        env=environment(),
        stdout=subprocess.DEVNULL,
        stderr=subprocess.DEVNULL,
    )
    assert eventually(lambda: len(descendants(command.pid)) == 1)
    children = descendants(command.pid)
    time.sleep(0.3)
    command.send_signal(end)
    assert command.wait(10) != 0
    assert eventually(lambda: not any(map(alive, children)), 5)


def test_a_solve_loads_no_web_server_and_the_command_not_even_sympy():
    for module, absent in (
        ("api.solve_file", "fastapi, starlette, pydantic, uvicorn, asyncio.unix_events"),
        ("api.command", "sympy, hjsolve, fastapi"),
    ):
        code = f"import sys, {module}\nprint([m for m in {absent.split(', ')} if m in sys.modules])"
        done = subprocess.run(
            [sys.executable, "-P", "-c", code], env=environment(), capture_output=True, check=True
        )
        assert done.stdout.strip() == b"[]", module


def test_the_working_directory_is_not_searched_for_modules(tmp_path):
    (tmp_path / "api").mkdir()
    (tmp_path / "api" / "__init__.py").write_text("raise SystemExit('the wrong one')")
    (tmp_path / "sympy.py").write_text("raise SystemExit('the wrong one')")
    done = hjsolve("solve", MORSE, cwd=tmp_path)
    assert done.returncode == 0, done.stderr.decode()


def test_serve_becomes_the_service(tmp_path):
    running = Service(
        tmp_path / "log", "-P", "-m", "api.command", "serve", "--port", "PORT", workers=1
    )
    try:
        assert running.client.get("/healthz").json()["status"] == "alive"
        assert len(running.descendants()) == 4  # fork server and three workers
    finally:
        running.stop()
    assert running.process.returncode == 0

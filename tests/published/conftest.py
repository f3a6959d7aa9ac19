"""Reading the files of published facts, and the ledger of known failures."""

import json
import sys
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import mpmath
import pytest

HERE = Path(__file__).parent
sys.path.insert(0, str(HERE.parent / "properties"))


def rows(name: str) -> list[Any]:
    """The entries of a file of facts as parameters; known failures are strict xfails."""
    known = json.loads((HERE / "known_failures.json").read_text())
    marked = []
    for row in json.loads((HERE / f"{name}.json").read_text()):
        reason = known.get(f"{name}:{row['id']}")
        marks = [pytest.mark.xfail(reason=reason, strict=True)] if reason else []
        marked.append(pytest.param(row, id=row["id"], marks=marks))
    return marked


def pytest_generate_tests(metafunc: pytest.Metafunc) -> None:
    """A test with an argument named after a file of facts gets one call an entry."""
    for name in ("verdicts", "own_verdicts", "first_integrals", "complete_integrals", "motions"):
        if name in metafunc.fixturenames:
            metafunc.parametrize(name, rows(name))


@pytest.fixture
def forty_digits() -> Iterator[None]:
    """mpmath at 40 digits for one test."""
    with mpmath.workdps(40):
        yield

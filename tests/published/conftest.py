"""Reading the files of published facts, and the ledger of known failures."""

import json
import sys
from collections.abc import Iterator

import mpmath
import pytest
from facts import FACTS, HERE

sys.path.insert(0, str(HERE.parent / "properties"))


def pytest_generate_tests(metafunc: pytest.Metafunc) -> None:
    """A test with an argument named after a file of facts gets one call an entry."""
    for name in FACTS:
        if name in metafunc.fixturenames:
            rows = json.loads((HERE / f"{name}.json").read_text(encoding="utf-8"))
            metafunc.parametrize(name, rows, ids=[row["id"] for row in rows])


def pytest_collection_modifyitems(items: list[pytest.Item]) -> None:
    """Entries of known_failures.json, ``test_file.py::test_name[id]``, are strict xfails."""
    known = json.loads((HERE / "known_failures.json").read_text(encoding="utf-8"))
    for item in items:
        reason = known.get(f"{item.path.name}::{item.name}")
        if reason and item.path.parent == HERE:
            item.add_marker(pytest.mark.xfail(reason=reason, strict=True))


@pytest.fixture
def forty_digits() -> Iterator[None]:
    """mpmath at 40 digits for one test."""
    with mpmath.workdps(40):
        yield

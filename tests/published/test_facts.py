"""The files of facts themselves: complete entries, known fields, a ledger without dead entries."""

import json
import re

import pytest
from facts import FACTS, HERE

REQUEST = {"coordinates", "momenta", "hamiltonian", "parameters", "functions", "domains", "time"}


@pytest.mark.parametrize("name", FACTS)
def test_entries_are_complete(name: str) -> None:
    rows = json.loads((HERE / f"{name}.json").read_text(encoding="utf-8"))
    assert len({row["id"] for row in rows}) == len(rows)
    for row in rows:
        assert set(row["request"]) <= REQUEST, row["id"]
        if name == "own_verdicts":
            assert row["why"]
            continue
        if name == "verdicts":  # whose the verdict is; the source is then that of the system
            assert row["claim_by"] in ("source", "own computation")
        assert row["source"]
        assert row["claim"]
        assert row["citation"] in ("found", "memory")
        assert row["confirmed"] in ("recomputed", "found", "memory")


def test_the_ledger_names_tests_that_exist() -> None:
    known = json.loads((HERE / "known_failures.json").read_text(encoding="utf-8"))
    ids = {
        row["id"]
        for name in FACTS
        for row in json.loads((HERE / f"{name}.json").read_text(encoding="utf-8"))
    }
    for key, reason in known.items():
        match = re.fullmatch(r"(test_\w+\.py)::(test_\w+)\[(.+)\]", key)
        assert match is not None, key
        assert f"def {match[2]}(" in (HERE / match[1]).read_text(encoding="utf-8")
        assert match[3] in ids
        assert reason

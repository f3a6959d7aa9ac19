"""The published Hamiltonians written in a chart are the Cartesian ones transformed."""

import json
from pathlib import Path
from typing import Any

import flint
import pytest
from transformation import difference

ROWS = [
    row
    for row in json.loads((Path(__file__).parent / "verdicts.json").read_text())
    if "original" in row
]
TINY = flint.arb(10) ** -60


@pytest.mark.parametrize("row", ROWS, ids=[row["id"] for row in ROWS])
def test_chart_form_equals_cartesian_form(row: dict[str, Any]) -> None:
    for seed in (1, 2):
        assert difference(row["request"], row["original"], seed) < TINY


def test_a_wrong_form_is_noticed() -> None:
    row = next(row for row in ROWS if row["id"] == "IN-01/polar")
    wrong = {**row["original"], "hamiltonian": row["original"]["hamiltonian"] + " + x/10**9"}
    assert difference(row["request"], wrong, 1) > TINY

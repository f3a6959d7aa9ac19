"""Every sample has its expected verdict, is listed in the README, and twins say the same."""

import json
import tomllib
from pathlib import Path
from typing import Any

import pytest

from hjsolve.reading import read_problem
from hjsolve.separation import detect

SAMPLES = Path(__file__).parents[2] / "samples"
EXPECTED = json.loads((Path(__file__).parent / "samples.json").read_text())
FIELDS = {
    "coordinates", "momenta", "hamiltonian", "parameters", "functions", "domains", "time", "charts",
}  # fmt: skip


def load(path: Path) -> dict[str, Any]:
    text = path.read_text(encoding="utf-8")
    return tomllib.loads(text) if path.suffix == ".toml" else json.loads(text)


def test_every_sample_is_expected_and_listed() -> None:
    files = {p.name for p in SAMPLES.iterdir() if p.suffix in (".json", ".toml")}
    assert files == set(EXPECTED)
    readme = (SAMPLES / "README.md").read_text(encoding="utf-8")
    assert [name for name in files if Path(name).stem not in readme] == []


@pytest.mark.parametrize("name", sorted(EXPECTED))
def test_sample_has_its_verdict(name: str) -> None:
    request = load(SAMPLES / name)
    assert set(request) <= FIELDS
    request.pop("charts", None)
    verdict = detect(read_problem(request))
    assert verdict.separability == EXPECTED[name]["separability"]
    found = {frozenset(str(q) for q in block) for block in verdict.blocks}
    assert found == {frozenset(block) for block in EXPECTED[name]["blocks"]}


@pytest.mark.parametrize("path", sorted(SAMPLES.glob("*.toml")), ids=lambda p: p.stem)
def test_twins_say_the_same(path: Path) -> None:
    assert load(path) == load(path.with_suffix(".json"))

"""Separability verdicts: published ones, and our own, by the solver and by the oracle."""

from typing import Any

import pytest
from oracle import finest_partition, separability

from hjsolve.reading import read_problem
from hjsolve.separation import detect


def judge(row: dict[str, Any]) -> None:
    verdict = detect(read_problem(row["request"]))
    blocks = {frozenset(str(q) for q in block) for block in verdict.blocks}
    assert verdict.separability == row["separability"]
    assert blocks == {frozenset(block) for block in row["blocks"]}
    if "ignorable" in row:
        assert {str(q) for q in verdict.ignorable} == set(row["ignorable"])
    if "direct_sum" in row:
        groups = {frozenset(str(q) for q in group) for group in verdict.direct_sum}
        assert groups == {frozenset(group) for group in row["direct_sum"]}
    assert (verdict.obstruction is None) == (row["separability"] == "complete")


def test_published_verdict(verdicts: dict[str, Any]) -> None:
    judge(verdicts)


def test_own_verdict(own_verdicts: dict[str, Any]) -> None:
    judge(own_verdicts)


def test_word_agrees_with_blocks(verdicts: dict[str, Any]) -> None:
    assert separability({frozenset(b) for b in verdicts["blocks"]}) == verdicts["separability"]


@pytest.mark.slow
def test_oracle_agrees_with_published(verdicts: dict[str, Any]) -> None:
    assert finest_partition(verdicts["request"]) == {frozenset(b) for b in verdicts["blocks"]}


@pytest.mark.slow
def test_oracle_agrees_with_own(own_verdicts: dict[str, Any]) -> None:
    assert finest_partition(own_verdicts["request"]) == {
        frozenset(b) for b in own_verdicts["blocks"]
    }

"""Random systems: the solver's verdict against construction and the independent oracle."""

from collections import Counter

import pytest
from generate import System, system
from oracle import finest_partition

from hjsolve.reading import read_problem
from hjsolve.separation import detect


def outcome(case: System) -> str:
    """``right``, ``undecided`` or ``wrong``; checks the oracle by construction on the way."""
    truth = finest_partition(case.request, seed=case.seed, points=2)
    if not case.coupled:
        assert all(len(block) == 1 for block in truth), case
        assert len(truth) == len(case.request["coordinates"]) + case.timed
    verdict = detect(read_problem(case.request))
    if verdict.separability == "undecided":
        return "undecided"
    blocks = {frozenset(str(q) for q in block) for block in verdict.blocks}
    return "right" if blocks == truth else "wrong"


@pytest.mark.parametrize("seed", range(60))
def test_random_system(seed: int) -> None:
    assert outcome(system(seed)) == "right"


@pytest.mark.slow
def test_a_thousand_random_systems() -> None:
    results = {seed: outcome(system(seed)) for seed in range(1000, 2000)}
    tally = Counter(results.values())
    wrong = [seed for seed, what in results.items() if what == "wrong"]
    undecided = [seed for seed, what in results.items() if what == "undecided"]
    print(f"\n{dict(tally)}; undecided: {undecided}")
    assert wrong == []
    assert len(undecided) <= 10

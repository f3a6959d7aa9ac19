"""Properties: Stäckel systems separate, wraps change nothing, a generic coupling is found."""

import random

from generate import KINETIC, POOL, WRAPS, determinant
from hypothesis import assume, given, settings
from hypothesis import strategies as st
from oracle import Unclear, finest_partition

from hjsolve.reading import read_problem
from hjsolve.separation import detect

SINGLE = st.sampled_from(POOL)
MOVING = st.sampled_from(KINETIC)
RUNS = settings(max_examples=25, deadline=None, derandomize=True)


def kinetic(q: str, moving: str, drift: str, potential: str) -> str:
    return f"({moving.format(p=f'p_{q}', f=f'({drift.format(q=q)})')} + {potential.format(q=q)})"


@st.composite
def staeckel(draw: st.DrawFn, least: int = 2, most: int = 3) -> tuple[list[str], str]:
    """Coordinates and H = det(K | S') / det S with single-coordinate rows."""
    names = [f"q{i}" for i in range(1, draw(st.integers(least, most)) + 1)]
    rows = [[f"({draw(SINGLE).format(q=q)})" for _ in names] for q in names]
    moved = [
        [kinetic(q, draw(MOVING), draw(SINGLE), draw(SINGLE)), *row[1:]]
        for q, row in zip(names, rows, strict=True)
    ]
    return names, f"({determinant(moved)})/({determinant(rows)})"


def blocks(names: list[str], hamiltonian: str) -> set[frozenset[str]]:
    verdict = detect(read_problem({"coordinates": names, "hamiltonian": hamiltonian}))
    assert verdict.separability != "undecided", verdict.limit
    return {frozenset(str(q) for q in block) for block in verdict.blocks}


def truth(names: list[str], hamiltonian: str) -> set[frozenset[str]]:
    """The oracle's partition; a draw with a vanishing determinant is not used."""
    try:
        return finest_partition({"coordinates": names, "hamiltonian": hamiltonian}, points=2)
    except Unclear:
        assume(False)
        raise


@RUNS
@given(staeckel())
def test_staeckel_separates(case: tuple[list[str], str]) -> None:
    names, hamiltonian = case
    assert truth(names, hamiltonian) == {frozenset([q]) for q in names}
    assert blocks(names, hamiltonian) == {frozenset([q]) for q in names}


@RUNS
@given(staeckel(2, 2), st.sampled_from(WRAPS))
def test_a_wrap_changes_nothing(case: tuple[list[str], str], wrap: str) -> None:
    names, hamiltonian = case
    truth(names, hamiltonian)
    assert blocks(names, wrap.format(h=hamiltonian)) == {frozenset([q]) for q in names}


@RUNS
@given(staeckel(), st.integers(0, 18), st.randoms(use_true_random=False))
def test_a_generic_coupling_is_found(
    case: tuple[list[str], str], digits: int, rng: random.Random
) -> None:
    names, hamiltonian = case
    truth(names, hamiltonian)
    a, b = names[0], names[-1]
    powers = rng.randint(1, 4), rng.randint(1, 4)
    coupled = f"{hamiltonian} + 1/10**{digits}*exp({a}**{powers[0]}*{b}**{powers[1]}/3)"
    found = blocks(names, coupled)
    assert found == truth(names, coupled)
    assert any({a, b} <= block for block in found)


@RUNS
@given(st.lists(st.tuples(MOVING, SINGLE, SINGLE), min_size=2, max_size=5))
def test_direct_sums_are_seen(parts: list[tuple[str, str, str]]) -> None:
    names = [f"q{i}" for i in range(1, len(parts) + 1)]
    hamiltonian = " + ".join(kinetic(q, *part) for q, part in zip(names, parts, strict=True))
    verdict = detect(read_problem({"coordinates": names, "hamiltonian": hamiltonian}))
    assert [tuple(map(str, group)) for group in verdict.direct_sum] == [(q,) for q in names]

"""The oracle against cases whose answer is classical."""

import flint
import pytest
from formula import evaluate, parse
from generate import system
from oracle import Unclear, finest_partition, frozen_equations_fit, separability, separates

SPHERICAL = {
    "coordinates": ["r", "theta", "phi"],
    "hamiltonian": "p_r**2 + f(r) + (p_theta**2 + (p_phi**2 + g(phi))/sin(theta)**2)/r**2",
    "functions": ["f", "g"],
    "domains": {"r": "half-line", "theta": "polar-angle"},
}


def partition(text: str) -> set[frozenset[str]]:
    return {frozenset(block.split()) for block in text.split("|")}


@pytest.mark.parametrize(
    ("coordinates", "hamiltonian", "blocks"),
    [
        ("x y", "p_x**2 + p_y**2 + x**2 + y**4", "x|y"),
        ("x y", "p_x**2 + p_y**2 + x**2*y", "x y"),
        ("x y", "p_x**2 + p_y**2 + (x + y)**2 - 2*x*y", "x|y"),
        ("x y", "p_x**2 + p_y**2 + 1e-40*x*y", "x y"),
        ("x y z", "(p_x**2 + p_y**2 + x*y)/(p_z**2 + z**2)", "x y|z"),
        ("x y", "((p_x + y)**2 + (p_y - x)**2)/2", "x y"),
        ("x y", "(p_x**2 + (p_y - x)**2)/2", "x|y"),
        ("x", "p_x**2 - x*cos(t)", "x t"),
        ("x", "(1 + t**2)*(p_x**2 + x**4)", "x|t"),
        ("x y", "sqrt(p_x**2 + p_y**2 + 1) + x + y**2", "x y"),
    ],
)
def test_known_cases(coordinates: str, hamiltonian: str, blocks: str) -> None:
    request = {"coordinates": coordinates.split(), "hamiltonian": hamiltonian}
    assert finest_partition(request) == partition(blocks)


def test_coarsening_need_not_separate() -> None:
    """Spherical coordinates separate, yet {r, phi} | {theta} alone does not (methods)."""
    assert separability(finest_partition(SPHERICAL)) == "complete"
    assert separates(SPHERICAL, [["r"], ["theta"], ["phi"]])
    assert separates(SPHERICAL, [["r"], ["theta", "phi"]])
    assert not separates(SPHERICAL, [["r", "phi"], ["theta"]])


def test_a_missing_momentum_is_unclear() -> None:
    with pytest.raises(Unclear):
        finest_partition({"coordinates": ["x", "y"], "hamiltonian": "p_x**2 + 0*p_y"})


def test_the_reader_binds_as_the_contract_says() -> None:
    value = evaluate(parse("-2^2 + 2**3**0*2 - 1e-1*.5e1", []), {}, {})
    assert value == flint.fmpq(-1, 2)


def test_generated_systems_repeat() -> None:
    assert system(7) == system(7)
    assert system(7) != system(8)


@pytest.mark.parametrize("seed", range(40))
def test_frozen_equations_agree_with_the_block_condition(seed: int) -> None:
    """Two criteria that share only the reader: finite displacements and second derivatives."""
    case = system(seed)
    complete = separability(finest_partition(case.request, points=2)) == "complete"
    assert frozen_equations_fit(case.request) == complete

"""The plain sentences that open a written solution; shared by the terminal and LaTeX."""

from __future__ import annotations

from collections.abc import Sequence

from sympy import Symbol

from hjsolve.records import Solution, Verdict


def listed(names: Sequence[str]) -> str:
    """``x``, ``x and y``, ``x, y and z``."""
    if len(names) < 2:
        return "".join(names)
    return f"{', '.join(names[:-1])} and {names[-1]}"


def verdict_sentences(solution: Solution) -> list[str]:
    """What is known of separability, the verdict first, then what it rests on."""
    verdict = solution.separation.verdict
    coordinates = listed([symbol.name for symbol in solution.hamiltonian.coordinates])
    said = [_verdict(verdict, coordinates)]
    if verdict.ignorable:
        names = [symbol.name for symbol in verdict.ignorable]
        said.append(f"Ignorable: {listed(names)}.")
    if len(verdict.direct_sum) > 1:
        said.append(f"The Hamiltonian is a sum over the groups {_groups(verdict.direct_sum)}.")
    if verdict.obstruction is not None:
        first, second = verdict.obstruction.pair
        point = ", ".join(f"{name} = {value}" for name, value in verdict.obstruction.point)
        said.append(
            f"{first} and {second} are coupled: Levi-Civita's expression is "
            f"{verdict.obstruction.midpoint:.6g} ± {verdict.obstruction.radius:.1g} at {point}."
        )
    if verdict.separability == "undecided":
        said.append(f"Undecided because of this limit: {verdict.limit or 'not recorded'}.")
    elif verdict.proof == "symbolic":
        chance = f", with a chance of error below {verdict.bound:.1g}" if verdict.bound > 0 else ""
        said.append(f"Proof: symbolic{chance}.")
    else:
        said.append(f"Proof: numeric; what counts as zero is below {verdict.bound:.1g}.")
    return said


def _verdict(verdict: Verdict, coordinates: str) -> str:
    match verdict.separability:
        case "complete":
            return f"The Hamilton–Jacobi equation separates completely in {coordinates}."
        case "partial":
            return (
                f"The Hamilton–Jacobi equation separates in part, into the blocks "
                f"{_groups(verdict.blocks)}."
            )
        case "none":
            return f"The Hamilton–Jacobi equation does not separate in {coordinates}."
        case "undecided":
            return f"Whether the Hamilton–Jacobi equation separates in {coordinates} is undecided."


def _groups(groups: Sequence[Sequence[Symbol]]) -> str:
    return listed(["{" + ", ".join(symbol.name for symbol in group) + "}" for group in groups])

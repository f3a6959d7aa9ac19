"""In which orthogonal coordinates does H = ½ pᵀGp + V(x) separate?

The tensors found are solutions of the linear conditions (``tensors``); the rank
proved in balls (``witness``) says that there are no more.  Where the two do not
meet, or a family of systems is not read, the list is not called complete.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence

from hjsolve.charts.exact import Unsure
from hjsolve.charts.placement import taken
from hjsolve.charts.registry import CHARTS
from hjsolve.charts.search.blocks import separable
from hjsolve.charts.search.letters import Letters
from hjsolve.charts.search.planar import place_plane
from hjsolve.charts.search.plane import PlaneReader
from hjsolve.charts.search.proof import solved
from hjsolve.charts.search.solid import SolidReader
from hjsolve.charts.search.systems import Builder
from hjsolve.charts.search.tensor import Tensor, cartesian, plane_row
from hjsolve.charts.search.tensors import concircular
from hjsolve.charts.search.witness import Witness
from hjsolve.charts.space import NotNatural, Space, space
from hjsolve.charts.transform import in_chart
from hjsolve.errors import InputError
from hjsolve.records import Chart, Charts, Check, Hamiltonian, Truth, Verdict

Detect = Callable[[Hamiltonian], Verdict]

NONE = "no orthogonal separable coordinates on this space, for generic values of the parameters"


def search(hamiltonian: Hamiltonian, detect: Detect | None = None) -> Charts:
    """Every orthogonal coordinate system in which H separates, preferred first.

    ``detect`` is the separability detector with which every chart found is
    confirmed; a chart that it refutes is taken out and the list is then not
    called complete.

    Raises:
        nothing: a Hamiltonian the search does not handle gives a list that is
        not complete, with the reason.
    """
    try:
        where = space(hamiltonian)
    except NotNatural as error:
        return Charts((), False, reason=str(error))
    n = where.dimension
    if n < 2:
        return Charts((), False, reason="one degree of freedom needs no coordinates")
    fields = concircular(where.coordinates, where.gram)
    count = len(fields)
    ranges = {
        q: (d.lower, d.upper) for q, d in zip(where.coordinates, hamiltonian.domains, strict=True)
    }
    result = solved(where.coordinates, fields, where.potential, ranges, hamiltonian.functions)
    reasons = [result.reason] if result.reason else []
    found: list[Chart] = []
    if result.basis and n > 3:
        try:
            found = [separable(where, result.basis, search)]
            reasons.append(f"in {n} dimensions one system is looked for, not every one")
        except Unsure as error:
            reasons.append(str(error))
    elif result.basis:
        found, left = read(where, [cartesian(v, where) for v in result.basis])
        reasons += left
    return _judged(where, found, reasons, detect, count, len(result.basis), result.seen)


def read(where: Space, tensors: Sequence[Tensor]) -> tuple[list[Chart], list[str]]:
    """The charts of a solution space, and what was not read."""
    if where.dimension == 2:
        reader = PlaneReader(Letters(taken(where)))
        reader.read([plane_row(t) for t in tensors])
        return [place_plane(where, s) for s in reader.found], reader.left
    solid = SolidReader(Builder(where, Letters(taken(where))))
    solid.read(tensors)
    return solid.found, solid.left


def _proof(count: int, dimension: int, found: bool) -> Check:
    if dimension == 0:
        claim = f"{NONE}: the {count} conditions on a concircular tensor are independent"
    elif not found:
        claim = (
            f"{NONE}: the concircular tensors that go with the potential are exactly {dimension},"
            " and the planes or spheres they leave have none"
        )
    else:
        claim = f"the concircular tensors that go with the potential are exactly {dimension}"
    return Check(claim, Truth.PROVED, "rank in balls at real points")


def _judged(
    where: Space,
    found: Sequence[Chart],
    reasons: list[str],
    detect: Detect | None,
    count: int,
    dimension: int,
    seen: Witness,
) -> Charts:
    """Confirm every chart by the detector, put the preferred first."""
    kept: list[tuple[int, int, Chart]] = []
    preference = [e.family for e in CHARTS if e.dimension == where.dimension]
    checks: list[Check] = []
    for place, chart in enumerate(found):
        carried = in_chart(where.hamiltonian, chart)
        truth = confirmed(carried, detect) if detect else None
        if truth is not None:
            checks.append(
                Check(
                    f"H separates in the {chart.family} coordinates found ({place + 1})",
                    truth,
                    "Levi-Civita's condition in the chart",
                )
            )
        if truth is Truth.REFUTED:
            reasons.append(f"the {chart.family} coordinates found were not confirmed")
            continue
        if truth is Truth.UNDECIDED:
            reasons.append(f"whether H separates in the {chart.family} coordinates is undecided")
        ignorable = sum(q not in carried.expression.free_symbols for q in carried.coordinates)
        rank = preference.index(chart.family) if chart.family in preference else 0
        kept.append((-ignorable, rank, chart))
    kept.sort(key=lambda item: item[:2])
    if not reasons:
        checks.insert(0, _proof(count, dimension, bool(found)))
    return Charts(
        tuple(chart for _, _, chart in kept),
        not reasons,
        count,
        dimension,
        seen.rank,
        seen.points,
        "; ".join(dict.fromkeys(reasons)),
        checks=tuple(checks),
    )


def confirmed(carried: Hamiltonian, detect: Detect) -> Truth:
    """Whether the detector calls H completely separable in a chart."""
    try:
        verdict = detect(carried)
    except InputError:
        return Truth.UNDECIDED
    if verdict.separability == "undecided" or verdict.proof != "symbolic":
        return Truth.UNDECIDED
    return Truth.PROVED if verdict.separability == "complete" else Truth.REFUTED

"""Constants in the form of the literature: how many, how fast, and do they know the base point?

Run by hand: python tests/benchmarks/constants.py [--limit N].  Every separable listed case is
separated three times, each time from another base point of the freezing; the constants are
independent of it when the first integrals come out the same.
"""

from __future__ import annotations

import argparse
import statistics
import time
from functools import partial

from cases import listed

from hjsolve.reading import read_problem
from hjsolve.records import Separation
from hjsolve.separation import decompose, detect, separate, staeckel

OFFSETS = (0, 5, 11)


def integrals(separation: Separation) -> tuple[str, ...]:
    """The first integrals as text, in order."""
    return tuple(str(constant.first_integral) for constant in separation.constants)


def main() -> None:
    """Print one line a case that is not canonical or not independent, then the totals."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--limit", type=int, default=0, help="number of cases, 0 for all")
    limit = parser.parse_args().limit
    rows = [row for row in listed() if row["separability"] == "complete"]
    rows = [row for row in rows if len(row["request"]["coordinates"]) > 1]
    canonical, independent, seconds = 0, 0, []
    for row in rows[: limit or None]:
        hamiltonian = read_problem(row["request"])
        verdict = detect(hamiltonian)
        found = []
        for offset in OFFSETS:
            decompose.leaves = partial(staeckel.leaves, offset=offset)
            start = time.perf_counter()
            found.append(separate(hamiltonian, verdict))
            seconds.append(time.perf_counter() - start)
        same = len({integrals(separation) for separation in found}) == 1
        canonical += found[0].canonical
        independent += same
        if not (found[0].canonical and same):
            print(f"{row['id']}: canonical {found[0].canonical}, independent {same}")
    count = len(rows[: limit or None])
    print(f"{count} cases: {canonical} canonical, {independent} independent of the base point")
    print(f"median {1000 * statistics.median(seconds):.1f} ms, worst {1000 * max(seconds):.0f} ms")


if __name__ == "__main__":
    main()

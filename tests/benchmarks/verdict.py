"""Time of the verdict: warm median and worst case, by degrees of freedom.

Run by hand: python tests/benchmarks/verdict.py [--repeats 5].  Prints a table; the reading of
the text is not counted.  Every verdict is compared with its expectation.
"""

from __future__ import annotations

import argparse
import statistics
import time
from collections import defaultdict
from typing import Any

from cases import large_graph, listed, of_size

from hjsolve.algebra.graph import Graph
from hjsolve.reading import read_problem
from hjsolve.separation import detect


def timed(case: dict[str, Any], repeats: int) -> tuple[float, bool, int]:
    """Median seconds of a warm verdict, whether it is right, and the nodes of the formula."""
    hamiltonian = read_problem(case["request"])
    verdict = detect(hamiltonian)
    seconds = []
    for _ in range(repeats):
        start = time.perf_counter()
        detect(hamiltonian)
        seconds.append(time.perf_counter() - start)
    found = {frozenset(str(q) for q in block) for block in verdict.blocks}
    right = verdict.separability == case["separability"] and found == {
        frozenset(block) for block in case["blocks"]
    }
    return statistics.median(seconds), right, len(Graph([hamiltonian.expression]).nodes)


def main() -> None:
    """Print the table."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--repeats", type=int, default=5)
    repeats = parser.parse_args().repeats
    groups: dict[str, list[tuple[float, bool, int, str]]] = defaultdict(list)
    for case in listed():
        size = len(case["request"]["coordinates"])
        groups[f"listed, {size} dof"].append((*timed(case, repeats), case["id"]))
    for size in (6, 10, 20):
        for case in of_size(size):
            groups[f"made, {size} dof"].append((*timed(case, repeats), case["id"]))
    groups["2000-node graph, 3 dof"].append((*timed(large_graph(), repeats), "graph"))
    print("| cases | count | right | median ms | worst ms | worst case | nodes |")
    print("|---|---|---|---|---|---|---|")
    for name in sorted(groups, key=lambda g: (g.split(",")[0], int(g.split()[-2]))):
        rows = groups[name]
        worst = max(rows)
        right = sum(row[1] for row in rows)
        median = statistics.median(row[0] for row in rows)
        print(
            f"| {name} | {len(rows)} | {right} | {1000 * median:.1f} | {1000 * worst[0]:.1f} "
            f"| {worst[3]} | {worst[2]} |"
        )


if __name__ == "__main__":
    main()

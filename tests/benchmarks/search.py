"""How long the search takes on the published potentials, with every chart confirmed.

Run: python tests/benchmarks/search.py [plane|space]
Prints, for the plane and for space, the number of decisions, how many lists
were proved complete, the median and the worst time, and the slowest five.
"""

import json
import statistics
import sys
import time
from pathlib import Path

from hjsolve.charts import search
from hjsolve.reading import read_problem
from hjsolve.separation import detect

ROWS = Path(__file__).parents[1] / "published" / "searches.json"


def main() -> None:
    """Time every row once, after one search that is not counted."""
    rows = json.loads(ROWS.read_text("utf-8"))
    search(read_problem(rows[0]["request"]), detect)
    for which in sys.argv[1:] or ("plane", "space"):
        taken = []
        complete = 0
        for row in rows:
            if not row["id"].startswith(which):
                continue
            h = read_problem(row["request"])
            began = time.perf_counter()
            complete += search(h, detect).complete
            taken.append((time.perf_counter() - began, row["id"]))
        seconds = [t for t, _ in taken]
        print(
            f"{which}: {len(taken)} decisions, {complete} proved complete, "
            f"median {statistics.median(seconds):.3f} s, worst {max(seconds):.2f} s"
        )
        for t, name in sorted(taken, reverse=True)[:5]:
            print(f"    {t:6.2f} s  {name}")


if __name__ == "__main__":
    main()

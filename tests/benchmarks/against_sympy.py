"""The same verdict cases by plain SymPy and by hjsolve, in one run.

Run by hand (hours without --limit):
    python tests/benchmarks/against_sympy.py --limit 20 --seconds 60 --out table.md

A right answer is the exact partition.  For "none" a failure to peel anything proves nothing,
since it also happens where H separates; it is listed on its own.  A time-out counts as the limit.
"""

from __future__ import annotations

import argparse
import json
import signal
import subprocess
import sys
import time
from collections import Counter
from pathlib import Path
from typing import Any

from cases import listed

from hjsolve.reading import read_problem
from hjsolve.separation import detect

HERE = Path(__file__).parent
METHODS = ("pdsolve", "peel", "cleared")
KINDS = ("complete", "partial", "none")

PATIENCE = 10
"""How many times the limit a process may take by the clock."""


def asked(task: dict[str, Any], seconds: float) -> dict[str, Any]:
    """The answer of sympy_worker.py in a process that is killed when it takes longer.

    The limit is one of processor time, so that a busy machine is not held against it.
    A time-out or a crash is an "error" too; a time-out counts as the limit.
    """
    late = {"error": "time-out", "seconds": seconds, "processor": seconds}
    try:
        run = subprocess.run(
            [sys.executable, str(HERE / "sympy_worker.py")],
            input=json.dumps({**task, "limit": seconds}),
            capture_output=True,
            text=True,
            timeout=PATIENCE * seconds + 5,
            check=True,
            cwd=HERE.parent.parent,
            env={"PYTHONPATH": str(HERE.parent.parent), "PATH": ""},
        )
    except subprocess.TimeoutExpired:
        return late
    except subprocess.CalledProcessError as error:
        if error.returncode == -signal.SIGXCPU:
            return late
        return {"error": "crash", "seconds": 0.0, "processor": 0.0}
    answer: dict[str, Any] = json.loads(run.stdout)
    return answer


def by_sympy(case: dict[str, Any], method: str, seconds: float) -> tuple[str, float]:
    """What came of one method: right, wrong, nothing peeled, time-out or an error's name."""
    if len(case["blocks"]) == 1 and len(case["blocks"][0]) == 1:
        return "right", 0.0
    answer = asked({"request": case["request"], "method": method}, seconds)
    if "error" in answer:
        return answer["error"], answer["seconds"]
    found = {frozenset(block) for block in answer["blocks"]}
    if len(found) == 1:
        return "nothing peeled", answer["seconds"]
    right = found == {frozenset(block) for block in case["blocks"]}
    return ("right" if right else "other partition"), answer["seconds"]


def by_hjsolve(case: dict[str, Any]) -> tuple[str, float]:
    """The same by this program, warm."""
    hamiltonian = read_problem(case["request"])
    detect(hamiltonian)
    start = time.perf_counter()
    verdict = detect(hamiltonian)
    seconds = time.perf_counter() - start
    found = {frozenset(str(q) for q in block) for block in verdict.blocks}
    right = found == {frozenset(block) for block in case["blocks"]}
    if verdict.separability == "undecided":
        return "undecided", seconds
    return ("right" if right else "wrong"), seconds


def chosen(limit: int) -> list[dict[str, Any]]:
    """Up to ``limit`` cases spread over the list; all of them for 0."""
    rows = listed()
    if not limit or limit >= len(rows):
        return rows
    return [rows[k * len(rows) // limit] for k in range(limit)]


def table(results: dict[str, list[tuple[str, str, float]]]) -> str:
    """Markdown: right answers by kind, other outcomes, time and its ratio to ours."""
    ours = sum(seconds for _, _, seconds in results["hjsolve"])
    lines = [
        "| method | complete | partial | none | outcomes | seconds | times ours |",
        "|---|---|---|---|---|---|---|",
    ]
    for method, rows in results.items():
        counts = []
        for kind in KINDS:
            of_kind = [what for k, what, _ in rows if k == kind]
            counts.append(f"{sum(what == 'right' for what in of_kind)} of {len(of_kind)}")
        outcomes = Counter(what for _, what, _ in rows).most_common()
        total = sum(seconds for _, _, seconds in rows)
        lines.append(
            f"| {method} | {' | '.join(counts)} | "
            + ", ".join(f"{what} {count}" for what, count in outcomes)
            + f" | {total:.2f} | {total / ours:.0f} |"
        )
    return "\n".join(lines) + "\n"


def main() -> None:
    """Run all methods on the chosen cases and write the table."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--limit", type=int, default=0, help="number of cases, 0 for all")
    parser.add_argument("--seconds", type=float, default=60.0, help="time limit of one try")
    parser.add_argument("--out", type=Path, help="markdown file to write")
    options = parser.parse_args()
    results: dict[str, list[tuple[str, str, float]]] = {m: [] for m in ("hjsolve", *METHODS)}
    for case in chosen(options.limit):
        results["hjsolve"].append((case["separability"], *by_hjsolve(case)))
        for method in METHODS:
            results[method].append((case["separability"], *by_sympy(case, method, options.seconds)))
        print(case["id"], *(results[m][-1][1] for m in results), sep="; ", file=sys.stderr)
    text = table(results)
    print(text)
    if options.out:
        options.out.write_text(text, encoding="utf-8")


if __name__ == "__main__":
    main()

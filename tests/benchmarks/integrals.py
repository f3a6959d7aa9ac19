"""The published integrals: how many in closed form, how fast, how long; beside SymPy if wanted.

Run by hand: python tests/benchmarks/integrals.py [--suite systems] [--sympy --seconds 60]
[--limit 40].  Times are of the processor.  Each call of ``sympy.integrate`` has a process of its
own, is killed at the limit, and counts as the limit then (an hour for the systems).  Sizes are
operations of a form and its definitions, over all regimes.
"""

from __future__ import annotations

import argparse
import statistics
import sys
import time
from collections import Counter
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path

import sympy as sp
from against_sympy import asked

sys.path.insert(0, str(Path(__file__).parents[1] / "published"))

from quadratures import Case, listed, operations, quadratures, read

from hjsolve.quadrature import integrate
from hjsolve.records import Antiderivative

Integral = tuple[str, str, Case]


@dataclass(frozen=True)
class Row:
    """One integral: its name, the family expected, what came, and the seconds it took."""

    name: str
    family: str
    found: Antiderivative
    seconds: float


def integrals(suite: str) -> Iterator[Integral]:
    """Name, expected family and integral of every entry of a suite."""
    for entry in listed(suite):
        if suite == "integrals":
            yield entry["system"], entry["family"], read(entry)
            continue
        for what, case in quadratures(entry).items():
            yield f"{entry['system']}: {what}", entry["families"][what], case


def by_hjsolve(name: str, family: str, case: Case) -> Row:
    """The integral by this program."""
    start = time.process_time()
    found = integrate(case.integrand, case.variable, case.domain, seconds=30)
    return Row(name, family, found, time.process_time() - start)


def report(rows: list[Row]) -> str:
    """Closed fraction, times and sizes."""
    wanted = [row for row in rows if row.family != "unevaluated"]
    closed = [row for row in wanted if row.found.closed_forms]
    as_told = sum(row.found.family == row.family for row in rows)
    times = sorted((row.seconds, row.name) for row in rows)
    sizes = [(operations(f), row.name) for row in closed for f in row.found.closed_forms]
    lines = [
        f"integrals: {len(rows)}, of the family expected: {as_told}",
        f"elementary and elliptic: {len(wanted)}, in closed form: {len(closed)}"
        f" ({100 * len(closed) / max(len(wanted), 1):.1f} %)",
        f"seconds: median {statistics.median(t for t, _ in times):.3f},"
        f" worst {times[-1][0]:.2f} ({times[-1][1]})",
    ]
    for k, how in enumerate(("written out", "equal parts once")):
        worst = max((size[k], name) for size, name in sizes)
        middle = statistics.median(size[k] for size, _ in sizes)
        lines.append(
            f"operations of {len(sizes)} forms, {how}: median {middle:g},"
            f" longest {worst[0]} ({worst[1]})"
        )
    for row in closed:
        most = max(operations(f)[1] for f in row.found.closed_forms)
        if most > LONG:
            lines.append(f"  more than {LONG}: {row.name}: {most}")
    return "\n".join(lines)


LONG = 300
"""Operations, equal parts counted once, above which a form is listed by name."""


def main() -> None:
    """Print the figures, and the ratio to SymPy where asked for."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--suite", choices=("systems", "integrals"), default="systems")
    parser.add_argument("--limit", type=int, default=0, help="number of integrals, 0 for all")
    parser.add_argument("--sympy", action="store_true", help="sympy.integrate on the same ones")
    parser.add_argument("--seconds", type=float, default=60.0, help="time limit of one call")
    options = parser.parse_args()
    chosen = list(integrals(options.suite))
    if options.limit and options.limit < len(chosen):
        count = len(chosen)
        chosen = [chosen[k * count // options.limit] for k in range(options.limit)]
    rows: list[Row] = []
    kinds: Counter[str] = Counter()
    theirs = 0.0
    for name, family, case in chosen:
        rows.append(by_hjsolve(name, family, case))
        if options.sympy:
            pair = {"integrand": sp.srepr(case.integrand), "variable": sp.srepr(case.variable)}
            answer = asked({"method": "integrate", **pair}, options.seconds)
            kind = answer.get("error") or answer["kind"]
            kinds[kind] += 1
            theirs += answer["processor"]
            times = f"{rows[-1].seconds:.2f}; {kind} {answer['processor']:.2f}"
            print(f"{name}; {times}", file=sys.stderr)
    print(report(rows))
    if options.sympy:
        ours = sum(row.seconds for row in rows)
        print(f"seconds in total: {ours:.1f}, sympy.integrate {theirs:.1f}", end="")
        print(f" ({theirs / ours:.0f} times): " + ", ".join(f"{k} {n}" for k, n in kinds.items()))


if __name__ == "__main__":
    main()

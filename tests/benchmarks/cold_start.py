"""Cold start: the command on a sample against the bare import of SymPy, in one run.

Run by hand: python tests/benchmarks/cold_start.py [SAMPLE] [--repeats 7].
"""

from __future__ import annotations

import argparse
import statistics
import subprocess
import sys
import time
from pathlib import Path

ROOT = Path(__file__).parents[2]


def seconds(command: list[str]) -> float:
    """Wall time of one process."""
    start = time.perf_counter()
    subprocess.run(command, check=True, stdout=subprocess.DEVNULL, cwd=ROOT)
    return time.perf_counter() - start


def main() -> None:
    """Print the two medians and their ratio; the runs alternate."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("sample", nargs="?", default=str(ROOT / "samples" / "penning_trap.json"))
    parser.add_argument("--repeats", type=int, default=7)
    options = parser.parse_args()
    script = Path(sys.executable).parent / "hjsolve"
    if script.exists():
        solve = [str(script), "solve", "--json", options.sample]
    else:
        print("hjsolve is not installed beside this Python: its worker module is run instead")
        solve = [sys.executable, "-m", "api.solve_file", "--json", "--", options.sample]
    bare = [sys.executable, "-c", "import sympy"]
    seconds(solve), seconds(bare)
    pairs = [(seconds(solve), seconds(bare)) for _ in range(options.repeats)]
    ours, theirs = (statistics.median(column) for column in zip(*pairs, strict=True))
    print(f"hjsolve solve: {ours:.3f} s; import sympy: {theirs:.3f} s; ratio {ours / theirs:.2f}")


if __name__ == "__main__":
    main()

"""How long a user waits: `--help`, and `design` on the demo against importing the libraries it stands on.

    python tests/benchmarks/start_up.py

Wall time of whole processes, the least of several runs each, so that a busy machine counts little. Aims: help under
0.4 s; a design at most 1.6 times the bare import.
"""

from __future__ import annotations

import subprocess
import sys
import time
from pathlib import Path

ROOT = Path(__file__).parents[2]
RUNS = 7
BARE = "import pyomo.environ, highspy, pandas, scipy.optimize"


def fastest(*arguments: str) -> float:
    """Least wall time in s of a Python process with these arguments."""
    times = []
    for _ in range(RUNS):
        start = time.perf_counter()
        subprocess.run([sys.executable, *arguments], cwd=ROOT, check=True, stdout=subprocess.DEVNULL)
        times.append(time.perf_counter() - start)
    return min(times)


def main() -> None:
    """Print the times and their ratio."""
    bare = fastest("-c", BARE)
    print(f"trainopt --help        {fastest('-m', 'trainopt', '--help'):6.2f} s   (aim: under 0.40 s)")
    print(f"bare imports           {bare:6.2f} s")
    for name in ("harvest", "harvest-cost", "redundant-guard"):
        seconds = fastest("-m", "trainopt", "design", f"scenarios/{name}.yaml")
        print(f"design {name:16}{seconds:6.2f} s   {seconds / bare:.2f} times the bare imports (aim: at most 1.60)")


if __name__ == "__main__":
    main()

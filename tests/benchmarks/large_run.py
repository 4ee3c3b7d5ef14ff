"""A run of a million rows: time and memory to read, reduce and fit it, against `pandas.read_csv` alone.

Each is measured in a process of its own. Run: python tests/benchmarks/large_run.py [rows]
"""

from __future__ import annotations

import resource
import subprocess
import sys
import tempfile
import time
from pathlib import Path

ROOT = Path(__file__).parents[2]
AREA = 0.0023


def write(path: Path, rows: int) -> None:
    import numpy as np
    import pandas as pd

    rng = np.random.default_rng(0)
    minutes = np.linspace(0.0, 60.0, rows)
    loading = 150.0 * minutes / 60.0
    pressure = 1e-3 * np.exp(0.012 * loading) * 150.0 * (1.0 + 0.02 * rng.standard_normal(rows)) / 0.0689476
    mass = loading * AREA * 1000.0 + 0.05 * rng.standard_normal(rows)
    frame = pd.DataFrame({"time (min)": minutes, "mass (g)": mass - mass[0], "pressure (psi)": pressure})
    frame.to_csv(path, index=False, float_format="%.6f")


def memory() -> float:
    """Peak memory of this process in MB."""
    return resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1e3


def measure(what: str, path: Path) -> None:
    """Time and memory of one way, past what its imports took: seconds, MB, MB of the frame."""
    import pandas as pd

    sys.path.insert(0, str(ROOT))
    if what == "pandas":
        before, start = memory(), time.perf_counter()
        frame = pd.read_csv(path)
        print(time.perf_counter() - start, memory() - before, frame.memory_usage(index=False).sum() / 1e6)
        return
    from tests.bench.lab import RunEntry, fitted

    before, start = memory(), time.perf_counter()
    curve = fitted(RunEntry(path, density=1.0))
    print(time.perf_counter() - start, memory() - before, curve.law)


def main() -> None:
    if len(sys.argv) > 2:
        measure(sys.argv[1], Path(sys.argv[2]))
        return
    rows = int(sys.argv[1]) if len(sys.argv) > 1 else 1_000_000
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "run.csv"
        write(path, rows)
        out = {}
        for what in ("pandas", "trainopt"):
            command = [sys.executable, __file__, what, str(path)]
            out[what] = subprocess.run(command, capture_output=True, text=True, check=True).stdout.split()
    seconds, frame = float(out["pandas"][0]), float(out["pandas"][2])
    ours, peak = float(out["trainopt"][0]), float(out["trainopt"][1])
    print(f"{rows} rows, law found: {out['trainopt'][2]}")
    print(f"pandas.read_csv   {seconds:6.2f} s   {float(out['pandas'][1]):6.0f} MB   frame {frame:.0f} MB")
    print(f"read, reduce, fit {ours:6.2f} s   {peak:6.0f} MB")
    print(f"time over the allowance (3 × pandas + 2 s): {ours / (3.0 * seconds + 2.0):.2f}")
    print(f"memory over the frame: {peak / frame:.2f}")


if __name__ == "__main__":
    main()

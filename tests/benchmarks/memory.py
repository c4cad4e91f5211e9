"""Peak memory of one full-cell grid over its output, in a process of its own."""

from __future__ import annotations

import resource
import subprocess
import sys

import psutil


def measured_peak(count: int, fineness: int, precision: str) -> float:
    """Largest resident memory while the grid is made, less what was there before, over the output."""
    command = [sys.executable, "-m", "tests.benchmarks.memory", str(count), str(fineness), precision]
    done = subprocess.run(command, check=True, capture_output=True, text=True)
    return float(done.stdout)


def main() -> None:
    """Make one grid and print the ratio."""
    from tests.benchmarks.grids import engine_grid
    from tests.benchmarks.sets import cubic_sphere

    count, fineness, precision = int(sys.argv[1]), int(sys.argv[2]), sys.argv[3]
    # Libraries and their threads take what they need at their first call.
    engine_grid(cubic_sphere(32, 3), 32, precision)
    series = cubic_sphere(count, fineness)
    before = psutil.Process().memory_info().rss
    peak_before = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss * 1024
    values = engine_grid(series, count, precision)
    peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss * 1024
    if peak == peak_before:
        raise SystemExit("the grid is too small to show in the peak of this process")
    print((peak - before) / values.nbytes)


if __name__ == "__main__":
    main()

"""Peak memory of one full-cell grid over its output, in a process of its own."""

from __future__ import annotations

import gc
import subprocess
import sys
from pathlib import Path

from tests.benchmarks.gridding import engine_grid
from tests.benchmarks.sets import cubic_sphere


def measured_peak(count: int, fineness: int, precision: str) -> float:
    """Largest resident memory while the grid is made, less what was there before, over the output."""
    command = [sys.executable, "-m", "tests.benchmarks.memory", str(count), str(fineness), precision]
    done = subprocess.run(command, check=True, capture_output=True, text=True)
    return float(done.stdout)


def resident_peak() -> int:
    """Largest resident memory since the last reset, bytes (proc(5), VmHWM)."""
    status = Path("/proc/self/status").read_text()
    return 1024 * next(int(line.split()[1]) for line in status.splitlines() if line.startswith("VmHWM"))


def main() -> None:
    """Make one grid and print the ratio."""
    count, fineness, precision = int(sys.argv[1]), int(sys.argv[2]), sys.argv[3]
    # Libraries and their threads take what they need at their first call.
    engine_grid(cubic_sphere(32, 3), 32, precision)
    series = cubic_sphere(count, fineness)
    gc.collect()
    # Resets the peak to what is resident now (proc(5), clear_refs).
    Path("/proc/self/clear_refs").write_text("5")
    before = resident_peak()
    values = engine_grid(series, count, precision)
    print((resident_peak() - before) / values.nbytes)


if __name__ == "__main__":
    main()

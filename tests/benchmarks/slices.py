"""Slices, profiles and free points of a set of 10⁵ terms, against the other ways to get them."""

from __future__ import annotations

import time

import numpy as np

from engine import sampling
from engine.sampling import Sampling
from engine.series import Series
from engine.synthesis import Demand, Method, fill, plan, result_dtype
from tests.benchmarks.sets import triclinic
from tests.benchmarks.timing import CORES, best

TERMS = 100_000
PLAIN_SAMPLES = 512
"""The plain sum is measured on this many samples and scaled up; whole it would take minutes."""


def engine_sum(series: Series, where: Sampling, method: Method | None = None) -> tuple[np.ndarray, Method]:
    """By the planned method, or the one asked for."""
    chosen = plan(series, where, Demand(threads=CORES), method=method)
    values = np.empty(where.shape, dtype=result_dtype(True, "double"))
    fill(chosen.prepare(), values, threads=CORES)
    return values, chosen.method


def plain_sum(series: Series, positions: np.ndarray) -> np.ndarray:
    """The vectorised direct sum that anyone would write first."""
    phases = 2 * np.pi * positions @ series.indices.T.astype(np.float64)
    return np.cos(phases) @ series.doubled().real - np.sin(phases) @ series.doubled().imag


def main() -> None:
    """Print the table."""
    series = triclinic(TERMS)
    lattice = series.lattice
    edges = [[1.0, 0.13, 0.21], [0.07, 0.9, -0.33]]
    cases: dict[str, Sampling] = {
        "512² slice, aligned": sampling.plane(lattice, [0, 0, 0.37], [1, 0, 0], [0, 1, 0], (512, 512)),
        "512² slice, oblique": sampling.plane(lattice, [0.1, 0.2, 0.3], *edges, (512, 512)),
        "profile, 4096 samples": sampling.line(lattice, [0, 0, 0], [0.7, 0.3, 1.0], 4096),
        "10⁵ free points": sampling.points(lattice, np.random.default_rng(3).random((100_000, 3))),
    }
    print(f"A triclinic set of {2 * series.count - 1:,} terms, seconds, {CORES} threads")
    print("  what                    method      engine   direct (ours)  plain sum*   ×plain   error*")
    for name, where in cases.items():
        _row(name, series, where)
    begin = time.perf_counter()
    engine_sum(series, sampling.full_cell(lattice, (512, 512, 512)))
    print(f"  the full grid of 512³ that holds the aligned slice: {time.perf_counter() - begin:.3f} s")
    print(f"  * on {PLAIN_SAMPLES} of the samples, time scaled up; error relative to the largest |value|")


def _row(name: str, series: Series, where: Sampling) -> None:
    values, method = engine_sum(series, where)
    positions = where.positions().reshape(-1, 3)
    some = np.random.default_rng(4).choice(len(positions), PLAIN_SAMPLES, replace=False)
    times = best(3, engine=lambda: engine_sum(series, where), plain=lambda: plain_sum(series, positions[some]))
    plain = times["plain"] * len(positions) / PLAIN_SAMPLES
    direct = "too slow"
    if not name.endswith("points"):
        direct = f"{best(1, direct=lambda: engine_sum(series, where, 'direct'))['direct']:.4f}"
    error = np.abs(values.reshape(-1)[some] - plain_sum(series, positions[some])).max() / np.abs(values).max()
    print(
        f"  {name:22s} {method:10s} {times['engine']:9.4f} {direct:>13s} {plain:12.2f} "
        f"{plain / times['engine']:9.0f}   {error:.1e}",
        flush=True,
    )


if __name__ == "__main__":
    main()

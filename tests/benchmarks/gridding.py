"""One full-cell grid by the engine, everything from the list of coefficients on."""

from __future__ import annotations

import numpy as np

from engine import sampling
from engine.series import Series
from engine.synthesis import Demand, Precision, fill, plan, result_dtype
from tests.benchmarks.timing import CORES


def engine_grid(series: Series, count: int, precision: Precision) -> np.ndarray:
    """The grid, planned, scattered, transformed."""
    grid = sampling.full_cell(series.lattice, [count] * 3)
    chosen = plan(series, grid, Demand(precision=precision, threads=CORES), method="cascade")
    values = np.empty(grid.shape, dtype=result_dtype(True, precision))
    fill(chosen.prepare(), values, threads=CORES)
    return values

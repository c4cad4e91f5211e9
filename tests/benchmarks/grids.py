"""Full-cell grids against the library transform of the filled half-cube, and against a bare copy.

``filled`` is `scipy.fft.irfftn` with all cores on a half-cube that is filled already; ``from list``
adds filling it from the same list of coefficients, which any user of it has to do. ``engine`` is
everything from the list on: planning, scattering, all stages. ``copy`` copies the output once: no
method can be faster than writing its result.
"""

from __future__ import annotations

import numpy as np
from scipy import fft

from engine.series import Series
from engine.synthesis import Precision, result_dtype
from tests.benchmarks.gridding import engine_grid
from tests.benchmarks.memory import measured_peak
from tests.benchmarks.sets import cubic_sphere
from tests.benchmarks.timing import CORES, best


def half_cube(series: Series, count: int, precision: Precision) -> np.ndarray:
    """The filled half-cube that the library's transform wants."""
    cube = np.zeros((count, count, count // 2 + 1), dtype=result_dtype(False, precision))
    own = series.indices[:, 2] == 0
    cube[tuple((-series.indices[own] % count).T)] = series.values[own].conj()
    cube[tuple((series.indices % count).T)] = series.values
    return cube


def main(counts: tuple[int, ...] = (128, 256, 400)) -> None:
    """Print the table."""
    print("Full-cell grids, seconds; ratios are irfftn/engine; memory is the engine's peak over the output")
    print("  N  spacing  precision   filled  from list   engine     copy   ×filled  ×from list  error    peak/output")
    for count in counts:
        for fineness in (3, 6):
            for precision in ("double", "single"):
                _row(count, fineness, precision)


def _row(count: int, fineness: int, precision: Precision) -> None:
    series = cubic_sphere(count, fineness)
    cube = half_cube(series, count, precision)
    shape = (count,) * 3

    def transform(filled: np.ndarray) -> np.ndarray:
        return fft.irfftn(filled, s=shape, norm="forward", workers=CORES)

    made = engine_grid(series, count, precision)
    times = best(
        5 if count < 400 else 3,
        filled=lambda: transform(cube),
        from_list=lambda: transform(half_cube(series, count, precision)),
        engine=lambda: engine_grid(series, count, precision),
        copy=made.copy,
    )
    reference = transform(cube)
    error = float(np.abs(made - reference).max() / np.abs(reference).max())
    peak = measured_peak(count, fineness, precision)
    print(
        f"{count:4d}  d_min/{fineness}  {precision:9s} {times['filled']:8.4f} {times['from_list']:9.4f} "
        f"{times['engine']:9.4f} {times['copy']:8.4f} {times['filled'] / times['engine']:9.2f} "
        f"{times['from_list'] / times['engine']:11.2f}  {error:.1e} {peak:10.2f}",
        flush=True,
    )


if __name__ == "__main__":
    main()

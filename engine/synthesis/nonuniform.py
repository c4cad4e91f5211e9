"""Non-uniform fast Fourier transforms, through the library finufft (Barnett, Magland & af
Klinteberg, SIAM J. Sci. Comput. 41 (2019) C479). This module alone imports it.

On an affine grid the coefficients are point sources at the frequencies m·e_j of the axes, the
samples are the uniform modes: type 1. At free points the coefficients are the uniform modes: type
2. Non-finite points end the process inside the library, so everything is checked here, always.
"""

from __future__ import annotations

import math
from collections.abc import Callable

import finufft
import numpy as np

from engine.arrays import AnyArray, ComplexArray, FloatArray
from engine.errors import TransformError
from engine.sampling.grids import AffineGrid, FreePoints, wrapped
from engine.series import Series
from engine.synthesis.estimate import Demand, Estimate, Source, rounding, turns_on

MARGIN = 0.1
"""The library's tolerance is a norm over all outputs; the demand is a bound on each."""
ITEM = 16
"""Bytes of a number. The transform runs in double precision even where single is asked for: a
position held in single precision is off by more than the 1e-5 that single promises."""
UPSAMPLING = 2.0
SECONDS_PER_SPREAD = 4.0e-10
SECONDS_PER_BUTTERFLY = 1.5e-9
BLOCK_BYTES = 1 << 28
"""A 3-D grid is computed in blocks of planes whose fine grid takes about this much."""


def estimate(series: Series, sampling: AffineGrid | FreePoints, demand: Demand) -> Estimate:
    """Cost of a non-uniform transform; bytes come from the extents of the fine grid."""
    eps = _eps(demand)
    width = math.ceil(-math.log10(eps)) + 1
    n = series.count
    if isinstance(sampling, FreePoints):
        modes = _mode_box(series)
        fine = math.prod(_fine(count) for count in modes)
        workspace = ITEM * (fine + math.prod(modes)) + sampling.samples * (8 * len(modes) + 88) + n * 64
        spread = sampling.samples * width ** len(modes)
        seconds = _fft_seconds(fine) + spread * SECONDS_PER_SPREAD
    else:
        shape = sampling.shape
        block = _block(shape)
        blocks = -(-shape[0] // block)
        fine = math.prod(_fine(count) for count in (block, *shape[1:]))
        workspace = ITEM * (fine + block * math.prod(shape[1:])) + n * (16 * len(shape) + 112)
        spread = n * width ** len(shape)
        seconds = blocks * (_fft_seconds(fine) + spread * SECONDS_PER_SPREAD)
    return Estimate(
        method="nonuniform",
        seconds=seconds / demand.threads + 3e-4 + n * 1e-7,
        workspace=int(workspace),
        accuracy=max(demand.tolerance, rounding(demand.precision, turns_on(series, sampling))),
    )


def prepare(series: Series, sampling: AffineGrid | FreePoints, demand: Demand) -> Source:
    """A non-uniform transform ready to be computed."""
    if isinstance(sampling, FreePoints):
        return _Points(series, sampling, demand)
    return _Grid(series, sampling, demand)


def _eps(demand: Demand) -> float:
    smallest = 1e-14 if demand.precision == "double" else 1e-6
    return max(demand.tolerance * MARGIN, smallest)


def _fine(count: int) -> int:
    return max(int(UPSAMPLING * count), 32)


def _fft_seconds(size: int) -> float:
    return size * math.log2(max(size, 2)) * SECONDS_PER_BUTTERFLY / 2


def _block(shape: tuple[int, ...]) -> int:
    if len(shape) < 3:
        return shape[0]
    plane = ITEM * math.prod(_fine(count) for count in shape[1:])
    return max(1, min(shape[0], int(BLOCK_BYTES / (UPSAMPLING * plane))))


def _mode_box(series: Series) -> tuple[int, ...]:
    """Extent of the indices along each direction."""
    return tuple(int(count) for count in series.high - series.low + 1)


def _to_circle(turns: FloatArray) -> FloatArray:
    """Turns as radians in [−π, π], contiguous; the library wants nothing outside."""
    return np.ascontiguousarray(2 * np.pi * (turns - np.rint(turns)))


def _run(
    transform: Callable[..., object], points: list[FloatArray], strengths: ComplexArray, **options: object
) -> None:
    for array in (*points, strengths):
        if array.size == 0 or not np.isfinite(array).all():
            raise TransformError("a non-uniform transform was given no points or points that are not finite")
    try:
        transform(*points, strengths, **options)
    except (RuntimeError, MemoryError, ValueError, TypeError) as fault:
        raise TransformError(f"the non-uniform transform failed: {fault}") from fault


class _Grid:
    """Type 1: sources at the frequencies of the coefficients, modes at the samples."""

    def __init__(self, series: Series, sampling: AffineGrid, demand: Demand) -> None:
        indices = series.indices.astype(np.float64)
        self._turns = indices @ sampling.steps.T
        phase = indices @ wrapped(sampling.origin)
        phase = 2 * np.pi * (phase - np.rint(phase))
        values = series.doubled() if series.real else series.values
        self._strengths = values * np.exp(1j * phase)
        self._points = [_to_circle(turns) for turns in self._turns.T]
        self._shape = sampling.shape
        self._real = series.real
        self._eps = _eps(demand)
        self._threads = demand.threads
        self.planes = sampling.shape[0]
        self.block = _block(sampling.shape)
        self.concurrent = False

    def compute(self, start: int, stop: int, out: AnyArray) -> None:
        shape = (stop - start, *self._shape[1:])
        # The library's modes run from −⌊n/2⌋; a phase moves sample 0 of the block there.
        shift = self._turns @ np.array([n // 2 for n in shape], dtype=np.float64)
        shift += start * self._turns[:, 0]
        phase = 2 * np.pi * (shift - np.rint(shift))
        strengths = self._strengths * np.exp(1j * phase)
        result = np.empty(shape, dtype=np.complex128)
        transform = {1: finufft.nufft1d1, 2: finufft.nufft2d1, 3: finufft.nufft3d1}[len(shape)]
        _run(
            transform,
            self._points,
            strengths,
            out=result,
            eps=self._eps,
            isign=1,
            nthreads=self._threads,
            upsampfac=UPSAMPLING,
        )
        out[...] = result.real if self._real else result


class _Points:
    """Type 2: modes at the indices, shifted to the middle of their extent."""

    def __init__(self, series: Series, sampling: FreePoints, demand: Demand) -> None:
        values = series.doubled() if series.real else series.values
        box = _mode_box(series)
        lowest = series.low
        self._modes = np.zeros(box, dtype=np.complex128)
        self._modes[tuple((series.indices - lowest).T)] = values
        self._centre = lowest + np.array([count // 2 for count in box])
        self._fractional = wrapped(sampling.fractional)
        self._real = series.real
        self._eps = _eps(demand)
        self._threads = demand.threads
        self.planes = sampling.samples
        self.block = sampling.samples
        self.concurrent = False

    def compute(self, start: int, stop: int, out: AnyArray) -> None:
        fractional = self._fractional[start:stop]
        points = [_to_circle(turns) for turns in fractional.T]
        result = np.empty(stop - start, dtype=np.complex128)
        transform = {1: finufft.nufft1d2, 2: finufft.nufft2d2, 3: finufft.nufft3d2}[len(points)]
        _run(
            transform,
            points,
            self._modes,
            out=result,
            eps=self._eps,
            isign=1,
            nthreads=self._threads,
            upsampfac=UPSAMPLING,
        )
        shift = fractional @ self._centre.astype(np.float64)
        result = result * np.exp(2j * np.pi * (shift - np.rint(shift)))
        out[...] = result.real if self._real else result

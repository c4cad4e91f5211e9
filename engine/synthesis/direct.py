"""The direct sum: exact to rounding, no grid of modes, best for small work.

On an affine grid exp(2πi m·x) is a product of one factor per axis, so that the sum over the
coefficients is a matrix product; the exponentials cost only the sum of the axes' lengths. A
line is split in two axes of its own, a coarse one and a fine one.
"""

from __future__ import annotations

import math

import numpy as np

from engine.arrays import AnyArray, ComplexArray, FloatArray
from engine.sampling.grids import AffineGrid, FreePoints, wrapped
from engine.series import Series
from engine.synthesis.estimate import Demand, Estimate, Source, result_dtype, rounding, turns_on

CHUNK = 1 << 19
"""Complex numbers in a temporary: a few MiB, so that it stays in cache."""
SECONDS_PER_EXPONENTIAL = 2.0e-8
SECONDS_PER_PRODUCT = 1.5e-10


def estimate(series: Series, sampling: AffineGrid | FreePoints, demand: Demand) -> Estimate:
    """Cost of the direct sum."""
    n = series.count
    number = 8 if series.real else 16
    if isinstance(sampling, FreePoints):
        seconds = n * sampling.samples * 1.5 * SECONDS_PER_EXPONENTIAL
        tile = demand.threads * min(CHUNK, n * sampling.samples)
        held = 0
    else:
        axes = _axis_lengths(sampling.shape)
        rest = math.prod(sampling.shape[1:])
        # The exponentials of the later axes are made anew for each block of planes.
        blocks = -(-axes[0] // _block(rest)) if len(sampling.shape) > 1 else 1
        exponentials = axes[0] + blocks * sum(axes[1:])
        seconds = n * (exponentials * SECONDS_PER_EXPONENTIAL + math.prod(axes) * SECONDS_PER_PRODUCT)
        if len(axes) == 3:
            seconds += n * axes[0] * axes[1] * SECONDS_PER_PRODUCT * 10
        tile = min(CHUNK, n * max(math.prod(axes[:-1]), axes[-1]))
        # The sum of a block, and the product that is added to it.
        block = min(axes[0], _block(rest)) * rest if len(sampling.shape) > 1 else math.prod(axes)
        held = 2 * number * block
    workspace = 128 * (tile + n) + held
    return Estimate(
        method="direct",
        seconds=seconds + 2e-5,
        workspace=workspace,
        accuracy=rounding(demand.precision, turns_on(series, sampling)),
    )


def prepare(series: Series, sampling: AffineGrid | FreePoints, demand: Demand) -> Source:
    """A direct sum ready to be computed."""
    if isinstance(sampling, FreePoints):
        return _Points(series, sampling)
    return _Grid(series, sampling, demand)


def _axis_lengths(shape: tuple[int, ...]) -> tuple[int, ...]:
    if len(shape) > 1:
        return shape
    fine = math.isqrt(shape[0] - 1) + 1 if shape[0] > 1 else 1
    return -(-shape[0] // fine), fine


def _block(rest: int) -> int:
    """Planes of `rest` samples that are computed together."""
    return max(1, CHUNK // rest)


def _phasors(turns: FloatArray) -> ComplexArray:
    """exp(2πi turns), reduced first so that the phase keeps its last digits."""
    reduced = 2 * np.pi * (turns - np.rint(turns))
    result = np.empty(turns.shape, dtype=np.complex128)
    np.cos(reduced, out=result.real)
    np.sin(reduced, out=result.imag)
    return result


class _Points:
    """Free points: one phase per coefficient and point."""

    def __init__(self, series: Series, sampling: FreePoints) -> None:
        self._indices = series.indices.T.astype(np.float64)
        self._values = series.doubled() if series.real else series.values
        self._real = series.real
        self._points = wrapped(sampling.fractional)
        self.planes = sampling.samples
        self.block = max(1, CHUNK // max(1, series.count))
        self.concurrent = True

    def compute(self, start: int, stop: int, out: AnyArray) -> None:
        width = max(1, CHUNK // (stop - start))
        total = np.zeros(stop - start, dtype=np.complex128)
        for low in range(0, self._values.size, width):
            chunk = slice(low, low + width)
            phasors = _phasors(self._points[start:stop] @ self._indices[:, chunk])
            total += phasors @ self._values[chunk]
        out[...] = total.real if self._real else total


class _Grid:
    """Affine grids: one factor per axis, joined by matrix products."""

    def __init__(self, series: Series, sampling: AffineGrid, demand: Demand) -> None:
        indices = series.indices.astype(np.float64)
        values = series.doubled() if series.real else series.values
        self._strengths = values * _phasors(indices @ wrapped(sampling.origin))
        self._turns = indices @ sampling.steps.T
        self._real = series.real
        self._shape = sampling.shape
        self._dtype = result_dtype(series.real, demand.precision)
        self.planes = sampling.shape[0]
        # One plane of a 3-D grid is work enough for a matrix product; lines and planes are
        # done whole up to a size.
        rest = math.prod(sampling.shape[1:])
        self.block = self.planes if len(self._shape) == 1 else _block(rest)
        self.concurrent = False

    def compute(self, start: int, stop: int, out: AnyArray) -> None:
        if len(self._shape) == 1:
            self._line(start, stop, out)
            return
        rows = stop - start
        lengths = (rows, *self._shape[1:])
        leading = math.prod(lengths[:-1])
        total = self._zeros((leading, lengths[-1]))
        width = max(1, CHUNK // max(leading, lengths[-1]))
        for low in range(0, self._strengths.size, width):
            chunk = slice(low, low + width)
            turns = self._turns[chunk]
            left = self._strengths[chunk] * _phasors(np.outer(np.arange(start, stop), turns[:, 0]))
            if len(lengths) == 3:
                middle = _phasors(np.outer(np.arange(lengths[1]), turns[:, 1]))
                left = (left[:, None, :] * middle[None, :, :]).reshape(leading, -1)
            right = _phasors(np.outer(turns[:, -1], np.arange(lengths[-1])))
            self._accumulate(total, left, right)
        out[...] = total.reshape(lengths)

    def _line(self, start: int, stop: int, out: AnyArray) -> None:
        coarse, fine = _axis_lengths((stop - start,))
        total = self._zeros((coarse, fine))
        width = max(1, CHUNK // max(coarse, fine))
        for low in range(0, self._strengths.size, width):
            chunk = slice(low, low + width)
            turns = self._turns[chunk, 0]
            left = self._strengths[chunk] * _phasors(np.outer(start + fine * np.arange(coarse), turns))
            right = _phasors(np.outer(turns, np.arange(fine)))
            self._accumulate(total, left, right)
        out[...] = total.reshape(-1)[: stop - start]

    def _zeros(self, shape: tuple[int, int]) -> FloatArray | ComplexArray:
        return np.zeros(shape) if self._real else np.zeros(shape, dtype=np.complex128)

    def _accumulate(self, total: FloatArray | ComplexArray, left: ComplexArray, right: ComplexArray) -> None:
        if self._real:
            # matmul leaves the fast path for operands with a stride, so the parts are copied.
            total += np.ascontiguousarray(left.real) @ np.ascontiguousarray(right.real)
            total -= np.ascontiguousarray(left.imag) @ np.ascontiguousarray(right.imag)
        else:
            total += left @ right

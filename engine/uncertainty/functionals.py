"""Numbers that are linear in the coefficients, and their covariance.

A value at a point, a derivative, an integral over a region is Q = Σ_G t_G n_G over all G, real for a
real density. Its errors follow exactly to first order: each measurement displaces Q by what its
coefficients, fully correlated, do together.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Protocol

import numpy as np

from engine.arrays import ComplexArray, FloatArray, IntArray
from engine.lattice import Lattice
from engine.sampling.grids import wrapped
from engine.series import Series
from engine.uncertainty.errors import Errors

CHUNK = 1 << 21
"""Factors held at a time."""


class Functional(Protocol):
    """Several numbers, each linear in the coefficients of a real density."""

    @property
    def count(self) -> int:
        """How many numbers: K."""

    def factors(self, lattice: Lattice, indices: IntArray) -> ComplexArray:
        """t_G of each number, with t_{−G} = conj(t_G); indices (N, d) -> (K, N)."""


@dataclass(frozen=True, slots=True)
class PointDerivatives:
    """Values and partial derivatives at points.

    Attributes
    ----------
    positions : float64, shape (M, d)
        Fractional.
    orders : tuple of tuples of int
        Cartesian axes that are derived along: () the value, (0,) ∂/∂x, (0, 1) ∂²/∂x∂y, per Å each.
        Number k of K = M·len(orders) is order k mod len(orders) at point k div len(orders).
    """

    positions: FloatArray
    orders: tuple[tuple[int, ...], ...] = ((),)

    @property
    def count(self) -> int:
        return int(self.positions.shape[0]) * len(self.orders)

    def factors(self, lattice: Lattice, indices: IntArray) -> ComplexArray:
        turns = wrapped(self.positions) @ indices.T
        waves = np.exp(2j * np.pi * turns)
        wavevectors = 1j * lattice.wavevectors(indices)
        multipliers = np.ones((len(self.orders), indices.shape[0]), dtype=np.complex128)
        for row, axes in enumerate(self.orders):
            for axis in axes:
                multipliers[row] *= wavevectors[:, axis]
        return np.asarray((waves[:, None, :] * multipliers[None]).reshape(self.count, indices.shape[0]))


def numbers(series: Series, functional: Functional) -> FloatArray:
    """Q of a real series; shape (K,)."""
    doubled = series.doubled()
    total = np.zeros(functional.count)
    step = max(1, CHUNK // max(functional.count, 1))
    for start in range(0, series.count, step):
        part = slice(start, start + step)
        total += (functional.factors(series.lattice, series.indices[part]) @ doubled[part]).real
    return total


def covariance(
    errors: Errors, functional: Functional, *, factors: FloatArray | None = None, block: int | None = None
) -> FloatArray:
    """Covariance of the numbers of a real density.

    Parameters
    ----------
    errors : Errors
    functional : Functional
        Of K numbers.
    factors : float64, shape (N,), optional
        What each coefficient, in the order of `errors`, is multiplied by beforehand: a window's factors.
    block : int, optional
        Only the covariances within blocks of so many successive numbers are wanted.

    Returns
    -------
    float64
        Shape (K, K), or (K/block, block, block).
    """
    count = functional.count
    size = block or count
    if not count:
        return np.zeros((0, size, size) if block else (0, 0))
    blocks = count // size
    total: FloatArray = np.zeros((blocks, size, size))
    scaled = np.zeros(count)
    shared = np.zeros((count, errors.common.shape[1]))
    weight = np.where(errors.indices.any(axis=1), 2.0, 1.0)
    if factors is not None:
        weight = weight * factors
    along, across = weight * errors.spread(), weight * errors.turned()
    values = weight * errors.values
    shares = weight[:, None] * errors.common
    sideways = bool(errors.across.any())
    for part, starts in _runs(errors, max(1, CHUNK // max(count, 1))):
        made = functional.factors(errors.lattice, errors.indices[part])
        for strengths in (along, across) if sideways else (along,):
            # What one standard deviation of each measurement does to each number.
            moved = np.add.reduceat((made * strengths[part]).real, starts, axis=1).reshape(blocks, size, -1)
            total += np.matmul(moved, moved.transpose(0, 2, 1))
        scaled += (made @ values[part]).real
        shared += (made @ shares[part]).real
    if errors.scale:
        fixed = np.zeros(count)
        if errors.fixed:
            zero = np.zeros((1, errors.lattice.dimension), dtype=np.int64)
            factor = 1.0 if factors is None else float(factors[~errors.indices.any(axis=1)].sum())
            fixed = factor * (functional.factors(errors.lattice, zero)[:, 0] * errors.fixed).real
        common = (errors.scale * (scaled - fixed)).reshape(blocks, size)
        total += common[:, :, None] * common[:, None, :]
    together = shared.reshape(blocks, size, -1)
    total += np.matmul(together, together.transpose(0, 2, 1))
    return total if block else np.asarray(total[0])


def _runs(errors: Errors, step: int) -> Iterator[tuple[slice, IntArray]]:
    """Stretches of whole measurements of about `step` coefficients, and where in each they start."""
    starts = errors.starts
    begin = 0
    while begin < starts.size:
        first = int(starts[begin])
        end = max(int(np.searchsorted(starts, first + step, side="right")) - 1, begin + 1)
        if first + step >= errors.count:
            end = starts.size
        stop = int(starts[end]) if end < starts.size else errors.count
        yield slice(first, stop), starts[begin:end] - first
        begin = end

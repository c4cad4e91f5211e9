"""A real series with its first and second derivatives, at points and on the whole cell.

A jet is the row (n, ∂n/∂x_1 …, ∂²n/∂x_1∂x_1, ∂²n/∂x_1∂x_2 …) along the Cartesian axes, the second
derivatives with the first axis not behind the second: 1 + d + d(d+1)/2 numbers.
"""

from __future__ import annotations

import itertools
import math
from collections.abc import Iterator
from dataclasses import dataclass, field

import numpy as np

from engine.arrays import ComplexArray, FloatArray
from engine.sampling.grids import AffineGrid, FreePoints, wrapped
from engine.series import Series
from engine.synthesis import Demand, Plan, fill, plan

TILE = 1 << 18
"""Phases held at a time by the direct sum."""
SECONDS_PER_PHASE = 3.0e-8
"""Of the direct sum, all derivatives together."""
EXACT = 1e-12
"""Relative accuracy of the sums that decide about convergence."""


def orders_of(dimension: int) -> tuple[tuple[int, ...], ...]:
    """The derivatives of a jet, as the axes that are derived along."""
    axes = range(dimension)
    return ((), *((j,) for j in axes), *itertools.combinations_with_replacement(axes, 2))


@dataclass(frozen=True, slots=True)
class Jets:
    """Values, gradients and Hessians at M points; shapes (M,), (M, d), (M, d, d), per Å and Å²."""

    value: FloatArray
    gradient: FloatArray
    hessian: FloatArray

    @classmethod
    def of(cls, rows: FloatArray, dimension: int) -> Jets:
        """From rows (M, 1 + d + d(d+1)/2)."""
        d = dimension
        hessian = np.empty((rows.shape[0], d, d))
        for column, (i, j) in enumerate(itertools.combinations_with_replacement(range(d), 2), start=1 + d):
            hessian[:, i, j] = hessian[:, j, i] = rows[:, column]
        return cls(rows[:, 0], rows[:, 1 : 1 + d], hessian)


@dataclass(frozen=True, slots=True)
class JetField:
    """A real series that knows its derivatives.

    Attributes
    ----------
    series : Series
        Real.
    components : tuple of Series
        The series of each number of a jet; all hold the same indices.
    sums : tuple of float
        Σ |G|^k |n_G| over all G for k = 0, 1, 2: no value, slope or curvature exceeds them.
    g_max : float
        Largest |G|, Å⁻¹.
    """

    series: Series
    components: tuple[Series, ...]
    sums: tuple[float, float, float]
    g_max: float
    _table: ComplexArray = field(repr=False)

    @classmethod
    def of(cls, series: Series) -> JetField:
        lattice, d = series.lattice, series.lattice.dimension
        waves = lattice.wavevectors(series.indices)
        table = np.empty((series.count, len(orders_of(d))), dtype=np.complex128)
        for column, axes in enumerate(orders_of(d)):
            table[:, column] = series.values * 1j ** len(axes) * np.prod(waves[:, list(axes)], axis=1)
        lengths = np.linalg.norm(waves, axis=1)
        doubled = np.abs(series.doubled())
        sums = (float(doubled.sum()), float(lengths @ doubled), float(lengths**2 @ doubled))
        components = tuple(Series(lattice, series.indices, column, real=True) for column in table.T.copy())
        weights = np.where(series.indices.any(axis=1), 2.0, 1.0)
        return cls(series, components, sums, float(lengths.max()), weights[:, None] * table)

    @property
    def dimension(self) -> int:
        return self.series.lattice.dimension

    def at(self, positions: FloatArray, tolerance: float = EXACT) -> Jets:
        """Jets at fractional positions (M, d), by the cheaper of the direct sum and a transform."""
        return Jets.of(self._rows(positions, tolerance), self.dimension)

    def _rows(self, positions: FloatArray, tolerance: float) -> FloatArray:
        count = positions.shape[0]
        direct = count * self.series.count * SECONDS_PER_PHASE
        if count and direct > 0.02:
            points, demand = FreePoints(positions), Demand(tolerance=tolerance)
            plans = [plan(part, points, demand, method="nonuniform") for part in self.components]
            if sum(one.chosen.seconds for one in plans) < direct:
                made = np.empty((len(plans), count))
                for one, row in zip(plans, made, strict=True):
                    fill(one.prepare(), row, threads=1)
                return made.T
        return self._direct(positions)

    def _direct(self, positions: FloatArray) -> FloatArray:
        made = np.zeros((positions.shape[0], self._table.shape[1]))
        places = wrapped(positions)
        indices = self.series.indices.T.astype(np.float64)
        width = max(1, min(TILE, self.series.count))
        height = max(1, TILE // width)
        real, imag = np.ascontiguousarray(self._table.real), np.ascontiguousarray(self._table.imag)
        for top in range(0, positions.shape[0], height):
            rows = slice(top, top + height)
            for left in range(0, self.series.count, width):
                part = slice(left, left + width)
                turns = places[rows] @ indices[:, part]
                phase = 2 * np.pi * (turns - np.rint(turns))
                made[rows] += np.cos(phase) @ real[part] - np.sin(phase) @ imag[part]
        return made

    def plans(self, grid: AffineGrid) -> tuple[Plan, ...]:
        """The sums of jets and third derivatives on a grid of the whole cell, costed."""
        waves = 1j * self.series.lattice.wavevectors(self.series.indices)
        thirds = (
            Series(self.series.lattice, self.series.indices, values, real=True)
            for values in (
                math.sqrt(_arrangements(axes)) * self.series.values * np.prod(waves[:, list(axes)], axis=1)
                for axes in thirds_of(self.dimension)
            )
        )
        return tuple(plan(part, grid, Demand(), method="cascade") for part in (*self.components, *thirds))


@dataclass(frozen=True, slots=True)
class Block:
    """Planes start … stop − 1 of a grid: jets at their samples, and the norms of the third derivatives, (samples,).

    The norm is (Σ_ijk (∂³n/∂x_i∂x_j∂x_k)²)^½, which no third derivative along a direction exceeds.
    """

    start: int
    stop: int
    jets: Jets
    third: FloatArray


def blocks(plans: tuple[Plan, ...], grid: AffineGrid) -> Iterator[Block]:
    """Jets and third derivatives on a grid, a block of planes at a time."""
    d = len(grid.shape)
    first = len(orders_of(d))
    sources = [one.prepare() for one in plans]
    planes, step = sources[0].planes, sources[0].block
    for start in range(0, planes, step):
        stop = min(start + step, planes)
        made = np.empty((len(sources), stop - start, *grid.shape[1:]))
        for source, part in zip(sources, made, strict=True):
            source.compute(start, stop, part)
        rows = made.reshape(len(sources), -1)
        yield Block(start, stop, Jets.of(rows[:first].T, d), np.linalg.norm(rows[first:], axis=0))


def thirds_of(dimension: int) -> tuple[tuple[int, ...], ...]:
    """The third derivatives, as the axes that are derived along."""
    return tuple(itertools.combinations_with_replacement(range(dimension), 3))


def _arrangements(axes: tuple[int, ...]) -> int:
    return len(set(itertools.permutations(axes)))

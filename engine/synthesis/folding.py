"""Grids that are commensurate with the lattice, where a plain Fourier transform is exact.

A step vector e_j is commensurate when N_j e_j is a lattice vector T_j. Then m·e_j = (m·T_j)/N_j,
and at the samples the index m·T_j counts only modulo N_j: folding it is exact, however coarse the
grid. The whole cell is the case T_j = a_j; planes and lines of the cell, lattice planes in simple
settings, other settings of the cell and blocks of several cells are further ones.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from fractions import Fraction

import numpy as np

from engine.arrays import ComplexArray, IntArray
from engine.sampling.grids import AffineGrid, wrapped
from engine.series import Series

LARGEST = 1 << 20
"""Longest transform that is looked for along one axis."""


@dataclass(frozen=True, slots=True)
class Fold:
    """The lattice vectors T_j (rows, shape (p, d)) and the lengths N_j (p of them)."""

    translations: IntArray
    lengths: tuple[int, ...]


@dataclass(frozen=True, slots=True)
class Modes:
    """Folded coefficients of a p-dimensional transform.

    Attributes
    ----------
    indices : int64, shape (N, p)
        Centred: between −N_j/2 and N_j/2. For a real series the last one is not negative.
    values : complex128, shape (N,)
    distinct : bool
        Whether all rows of ``indices`` are known to differ.
    zero : complex
        The value of the term m = 0, which other terms may have been folded onto.
    """

    indices: IntArray
    values: ComplexArray
    distinct: bool
    zero: complex


def find_fold(grid: AffineGrid) -> Fold | None:
    """The fold of a commensurate grid, else None."""
    translations, lengths = [], []
    for step in grid.steps:
        fractions = [Fraction(float(x)).limit_denominator(LARGEST) for x in step]
        length = math.lcm(*(fraction.denominator for fraction in fractions))
        exact = all(abs(float(fraction) - x) <= 4 * math.ulp(x) for fraction, x in zip(fractions, step, strict=True))
        if not exact or length > LARGEST:
            return None
        translations.append([_reduced(int(fraction * length), length) for fraction in fractions])
        lengths.append(length)
    return Fold(np.array(translations, dtype=np.int64), tuple(lengths))


def _reduced(translation: int, length: int) -> int:
    """A translation counts modulo the length; a long one times an index would leave the integers' range."""
    return translation if abs(translation) <= length else translation % length


def fold(series: Series, grid: AffineGrid, found: Fold) -> Modes:
    """Fold a series; the origin of the grid goes into the values as a phase."""
    values = series.values
    if grid.origin.any():
        turns = series.indices @ wrapped(grid.origin)
        values = values * np.exp(2j * np.pi * (turns - np.rint(turns)))
    d = series.lattice.dimension
    if np.array_equal(found.translations, np.eye(d, dtype=np.int64)):
        indices, distinct = series.indices, True
    else:
        indices = series.indices @ found.translations.T
        distinct = len(found.lengths) == d and round(np.linalg.det(found.translations)) != 0
    columns, changed = [], False
    for column, (low, high), length in zip(indices.T, _extents(series, indices), found.lengths, strict=True):
        # At a length that is even, −N/2 and N/2 are the same sample frequency.
        distinct = distinct and 2 * max(high, -low) < length
        if max(high, -low) > length // 2:
            column = np.mod(column, length)
            column = np.where(column > length // 2, column - length, column)
            changed = True
        columns.append(column)
    if series.real:
        # Folding and a change of axes may leave the other one of a pair ±m.
        backward = columns[-1] < 0 if changed or indices is not series.indices else np.zeros(1, np.bool_)
        if backward.any():
            columns = [np.where(backward, -column, column) for column in columns]
            values = np.where(backward, values.conj(), values)
            changed = True
    return Modes(np.stack(columns, axis=1) if changed else indices, values, distinct, series.zero_term)


def _extents(series: Series, indices: IntArray) -> list[tuple[int, int]]:
    if indices is series.indices:
        return [(int(low), int(high)) for low, high in zip(series.low, series.high, strict=True)]
    return [(int(column.min(initial=0)), int(column.max(initial=0))) for column in indices.T]

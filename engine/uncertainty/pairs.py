"""The variance of a field as a Fourier series.

The contribution of one measurement is a short sum X(r) = Σ a_G exp(iG·r) over its coefficients, and the
square of such a sum is a series on the sums and differences of two G. Added over all measurements
they are the series of the variance: one more synthesis on the same samples gives it everywhere
(conventions of Cruickshank & Rollett, Acta Cryst. 6 (1953) 705, for coefficients related by symmetry).
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from engine.arrays import ComplexArray, IntArray
from engine.series import Series
from engine.uncertainty.errors import Errors

CHUNK = 1 << 16
"""Coefficients treated at a time, so that what they need stays in the processor's cache."""
DENSE_ALWAYS = 1 << 22
"""Sums of pairs are added up in a table of all indices up to this many; beyond, only where the pairs fill it."""
BYTES_PER_PAIR = 96
"""Of pairs that are sorted instead: keys and strengths, their copies in order, and the sums."""


@dataclass(frozen=True, slots=True)
class PairEstimate:
    """Cost of a variance series, before anything is allocated.

    Attributes
    ----------
    pairs : int
    terms : int
        Bound of the terms of the series.
    workspace : int
        Bytes at the peak, the series among them.
    dense : bool
        Whether a table of all indices is used.
    """

    pairs: int
    terms: int
    workspace: int
    dense: bool


def estimate(errors: Errors) -> PairEstimate:
    """What the series of a variance will cost."""
    sizes = _sizes(errors)
    pairs = int(2 * np.sum(sizes * (sizes // 2 + 1)))
    table = int(_strides(errors)[1]) + 1
    dense = table <= max(DENSE_ALWAYS, pairs)
    terms = min(table, pairs + 1)
    row = 8 * errors.lattice.dimension + 16
    held = table * 17 if dense else pairs * BYTES_PER_PAIR
    return PairEstimate(pairs, terms, held + 3 * terms * row, dense)


def variance_series(errors: Errors, first: tuple[ComplexArray, ...], second: tuple[ComplexArray, ...]) -> Series:
    """Series of Σ_o X_o(r) Y_o(r) over all measurements and all kinds of error.

    Parameters
    ----------
    first, second : tuples of complex128, each of shape (N,)
        For each kind of error the strengths a_G of one standard deviation, in the order of
        `errors`. For a real density X(r) = 2 Re Σ a_G exp(iG·r) (the zero term once), and the
        product is X·Y; for a complex one X(r) is the sum itself and the product Re(X·conj Y).
    """
    strides, top = _strides(errors)
    keys = errors.indices @ strides
    found = _Table(int(top) + 1) if estimate(errors).dense else _Pile()
    # A zero term written as half of itself and half of its mate is like all others.
    share = np.where(errors.indices.any(axis=1), 1.0, 0.5) if errors.real else np.full(errors.count, 1.0)
    for one, other in zip(first, second, strict=True):
        same = one is other
        left = one * share
        right = left if same else other * share
        for members in _members(errors):
            _add_squares(found, keys[members], left[members], right[members], errors.real, same)
    distinct, values = found.sums()
    values[distinct == 0] = 2 * values[distinct == 0].real
    if not errors.real:
        values *= 0.5
    return Series(errors.lattice, _unpacked(distinct, strides, errors), values, real=True)


def _add_squares(
    found: _Table | _Pile, keys: IntArray, left: ComplexArray, right: ComplexArray, real: bool, same: bool
) -> None:
    """Sums and differences of all pairs within measurements of s coefficients each; arrays (s, n).

    Partners are brought side by side by rotating the rows. A product of equal factors needs half of
    the rotations: (k, l) and (l, k) give the same term.
    """
    size = keys.shape[0]
    for offset in range(size // 2 + 1 if same else size):
        weight = 1.0 if not same or offset in (0, size / 2) else 2.0
        other_keys, other = np.roll(keys, -offset, axis=0), np.roll(right, -offset, axis=0)
        scaled = weight * left
        if real:
            found.add(keys + other_keys, scaled * other)
        found.add(keys - other_keys, scaled * other.conj())


class _Table:
    """Sums by key in an array of all keys; key and −key are mates."""

    def __init__(self, size: int) -> None:
        self._values = np.zeros(size, dtype=np.complex128)

    def add(self, keys: IntArray, values: ComplexArray) -> None:
        backward = keys < 0
        np.add.at(self._values, np.abs(keys).ravel(), np.where(backward, values.conj(), values).ravel())

    def sums(self) -> tuple[IntArray, ComplexArray]:
        """Keys that hold something, ascending, and their sums."""
        distinct = np.flatnonzero(self._values)
        return distinct, self._values[distinct]


class _Pile:
    """Sums by key where keys are few and far between."""

    def __init__(self) -> None:
        self._keys: list[IntArray] = []
        self._values: list[ComplexArray] = []

    def add(self, keys: IntArray, values: ComplexArray) -> None:
        backward = keys < 0
        self._keys.append(np.abs(keys).ravel())
        self._values.append(np.where(backward, values.conj(), values).ravel())

    def sums(self) -> tuple[IntArray, ComplexArray]:
        """Keys, ascending, and their sums."""
        keys, values = np.concatenate(self._keys), np.concatenate(self._values)
        distinct, place = np.unique(keys, return_inverse=True)
        total = np.zeros(distinct.size, dtype=np.complex128)
        np.add.at(total, place, values)
        return distinct, total


def _sizes(errors: Errors) -> IntArray:
    return np.asarray(np.diff(errors.starts, append=errors.count))


def _members(errors: Errors) -> Iterator[IntArray]:
    """Rows (s, n) of n measurements of s coefficients each, a bounded number at a time."""
    sizes = _sizes(errors)
    for size in np.unique(sizes):
        starts = errors.starts[sizes == size]
        step = max(1, CHUNK // int(size))
        for begin in range(0, starts.size, step):
            yield starts[begin : begin + step] + np.arange(size)[:, None]


def _strides(errors: Errors) -> tuple[IntArray, int]:
    """Weights that make one whole number of a sum of two rows of indices, and the largest of these numbers.

    The last index weighs most, so that of a pair ±m the one that faces forward has the positive number.
    """
    reach = [2 * int(np.abs(column).max(initial=0)) for column in errors.indices.T]
    strides, base = [], 1
    for extent in reach:
        strides.append(base)
        base *= 2 * extent + 1
    return np.array(strides, dtype=np.int64), (base - 1) // 2


def _unpacked(keys: IntArray, strides: IntArray, errors: Errors) -> IntArray:
    reach = np.array([2 * int(np.abs(column).max(initial=0)) for column in errors.indices.T], dtype=np.int64)
    rest = keys + int(reach @ strides)
    made = np.empty((keys.size, strides.size), dtype=np.int64, order="F")
    for axis in range(strides.size - 1, -1, -1):
        quotient = rest // strides[axis]
        rest = rest - quotient * strides[axis]
        made[:, axis] = quotient - reach[axis]
    return made

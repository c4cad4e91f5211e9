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
from engine.errors import InputError, TooLargeError
from engine.series import Series
from engine.uncertainty.errors import Errors

CHUNK = 1 << 16
"""Coefficients treated at a time, so that what they need stays in the processor's cache."""
ROOM_PER_PAIR = 5
"""Sums of pairs are added up in a table of all indices where it has at most so many for each pair; where pairs are few
and far between, sorting them takes less time and memory."""
BYTES_PER_PAIR = 72
"""Of pairs that are sorted instead: keys and strengths, the keys in order, and where each came from."""
BYTES_PER_CHUNK = 14 << 20
"""Of the coefficients treated at a time: their keys and strengths, rotated, and the products."""


@dataclass(frozen=True, slots=True)
class PairEstimate:
    """Cost of a variance series, before anything is allocated.

    Attributes
    ----------
    pairs : int
    dense : bool
        Whether a table of all indices is used. How many of its sums are not zero shows when it is filled; of sorted
        pairs there is one term each at most.
    held : int
        Bytes of all but the terms, at the peak.
    term : int
        Bytes of a term.
    """

    pairs: int
    dense: bool
    held: int
    term: int

    @property
    def least(self) -> int:
        """Bytes at the peak that are known beforehand."""
        return self.held if self.dense else self.at_peak(self.pairs)

    def at_peak(self, terms: int) -> int:
        """Bytes at the peak of a series of so many terms."""
        return self.held + terms * self.term


def estimate(errors: Errors, *, kinds: int = 2, same: bool = True) -> PairEstimate:
    """What the series of a variance will cost; of a covariance of two different fields where not `same`.

    Raises
    ------
    InputError
        Indices so large that their sums would not fit 64 bits as one number.
    """
    sizes = _sizes(errors)
    # Of the differences those of a coefficient with itself are added up at once.
    ordered = sizes * (sizes - 1)
    differences = ordered // 2 if same else ordered
    pairs = int(np.sum(differences + (sizes * sizes - (ordered - differences) if errors.real else 0)))
    table = int(_strides(errors)[1]) + 1
    dense = table <= ROOM_PER_PAIR * pairs
    held = 16 * table if dense else pairs * BYTES_PER_PAIR
    strengths = errors.count * (8 + 16 * kinds * (1 if same else 2))
    chunk = min(BYTES_PER_CHUNK, BYTES_PER_CHUNK * errors.count // CHUNK + (1 << 16))
    # Keys and strengths, indices, and what is left of a key while it is divided; sorted pairs are given up before.
    term = 24 + 8 * errors.lattice.dimension + 32 if dense else 24
    return PairEstimate(pairs, dense, held + strengths + chunk, term)


def variance_series(
    errors: Errors,
    first: tuple[ComplexArray, ...],
    second: tuple[ComplexArray, ...],
    *,
    max_bytes: int | None = None,
) -> Series:
    """Series of Σ_o X_o(r) Y_o(r) over all measurements and all kinds of error.

    Parameters
    ----------
    first, second : tuples of complex128, each of shape (N,)
        For each kind of error the strengths a_G of one standard deviation, in the order of
        `errors`. For a real density X(r) = 2 Re Σ a_G exp(iG·r) (the zero term once), and the
        product is X·Y; for a complex one X(r) is the sum itself and the product Re(X·conj Y).
    max_bytes : int, optional
        Bound of what is held on the way, the series among it.

    Raises
    ------
    TooLargeError
        More would be needed.
    """
    same = all(one is other for one, other in zip(first, second, strict=True))
    cost = estimate(errors, kinds=len(first), same=same)
    _require(cost.least, cost.pairs, max_bytes)
    strides, top = _strides(errors)
    keys = errors.indices @ strides
    # A zero term written as half of itself and half of its mate is like all others.
    share = np.where(errors.indices.any(axis=1), 1.0, 0.5) if errors.real else np.full(errors.count, 1.0)
    left = np.stack(first)
    left *= share
    right = left
    if not same:
        right = np.stack(second)
        right *= share
    found = _Table(int(top) + 1) if cost.dense else _Pile()
    for members in _members(errors):
        _add_products(found, keys[members], left[:, members], right[:, members], errors.real, same)
    del left, right, keys
    if isinstance(found, _Table):
        _require(cost.at_peak(found.count()), cost.pairs, max_bytes)
    distinct, values = found.sums()
    values[distinct == 0] = 2 * values[distinct == 0].real
    if not errors.real:
        values *= 0.5
    return Series(errors.lattice, _unpacked(distinct, strides, errors), values, real=True)


def _require(needed: int, pairs: int, max_bytes: int | None) -> None:
    if max_bytes is not None and needed > max_bytes:
        raise TooLargeError(
            "uncertainty",
            f"needs {needed / 2**20:,.0f} MiB for the {pairs:,} pairs of related coefficients, more than the "
            f"{max(max_bytes, 0) / 2**20:,.0f} MiB that are left of the limit",
            "leave it out, ask for a coarser resolution, or raise the limit",
        )


def _add_products(
    found: _Table | _Pile, keys: IntArray, left: ComplexArray, right: ComplexArray, real: bool, same: bool
) -> None:
    """Sums and differences of all pairs within n measurements of s coefficients each; arrays (s, n), (kinds, s, n).

    Partners are brought side by side by rotating the rows. A product of equal factors needs half of
    the rotations: (k, l) and (l, k) give the same term.
    """
    size = keys.shape[0]
    for offset in range(size // 2 + 1 if same else size):
        halved = same and offset > 0
        # Half a turn brings every pair together twice.
        rows = size // 2 if halved and 2 * offset == size else size
        ours, own_keys = left[:, :rows], keys[:rows]
        if halved:
            ours = 2 * ours
        partners = np.roll(right, -offset, axis=1)[:, :rows]
        other_keys = np.roll(keys, -offset, axis=0)[:rows]
        if real:
            found.add(own_keys + other_keys, _products(ours, partners))
        products = _products(ours, partners.conj())
        if offset:
            found.add(own_keys - other_keys, products)
        else:
            found.add(np.zeros(1, dtype=np.int64), products.sum(keepdims=True))


def _products(left: ComplexArray, right: ComplexArray) -> ComplexArray:
    """Σ over the kinds of error; (kinds, s, n) -> (s, n)."""
    made = left[0] * right[0]
    for one, other in zip(left[1:], right[1:], strict=True):
        made += one * other
    return np.asarray(made)


class _Table:
    """Sums by key in an array of all keys; key and −key are mates."""

    def __init__(self, size: int) -> None:
        self._values = np.zeros(size, dtype=np.complex128)

    def add(self, keys: IntArray, values: ComplexArray) -> None:
        backward = keys < 0
        np.add.at(self._values, np.abs(keys).ravel(), np.where(backward, values.conj(), values).ravel())

    def count(self) -> int:
        """Keys that hold something."""
        return int(np.count_nonzero(self._values))

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
        self._keys.clear()
        self._values.clear()
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
    if base // 2 > np.iinfo(np.int64).max:
        raise InputError("indices", f"reach ±{max(reach) // 2} along several axes", "check the indices and the cell")
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

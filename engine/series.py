"""The bare thing the synthesis sums: indices and complex strengths on a lattice."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np

from engine.arrays import BoolArray, ComplexArray, IntArray
from engine.lattice import Lattice


@dataclass(frozen=True, slots=True)
class Series:
    """n(r) = Σ v exp(2πi m·x).

    Where ``real`` is true only one of each pair ±m is held (the one whose last index other
    than zero is positive) and the sum is v_0 + 2 Re Σ' v exp(2πi m·x).

    Attributes
    ----------
    lattice : Lattice
    indices : int64, shape (N, d)
        Distinct rows.
    values : complex128, shape (N,)
    real : bool
    low, high : int64, shape (d,)
        Extents of the indices; zero where there are none.
    """

    lattice: Lattice
    indices: IntArray
    values: ComplexArray
    real: bool
    low: IntArray = field(init=False, repr=False)
    high: IntArray = field(init=False, repr=False)

    def __post_init__(self) -> None:
        # Every estimate and every transform asks for the extents; finding them reads all indices.
        columns = self.indices.T if self.count else np.zeros((self.lattice.dimension, 1), np.int64)
        object.__setattr__(self, "low", np.array([column.min() for column in columns]))
        object.__setattr__(self, "high", np.array([column.max() for column in columns]))

    @property
    def count(self) -> int:
        """Number of coefficients held."""
        return int(self.values.size)

    @property
    def zero_term(self) -> complex:
        """The value at m = 0, zero where it is absent: the mean over the cell."""
        candidates = np.flatnonzero(self.indices[:, 0] == 0)
        at_zero = candidates[~self.indices[candidates].any(axis=1)]
        return complex(self.values[at_zero].sum())

    def doubled(self) -> ComplexArray:
        """Values such that Σ Re(v exp(2πi m·x)) is the sum of a real series."""
        return np.where(self.indices.any(axis=1), 2.0, 1.0) * self.values

    def complete(self) -> Series:
        """The same series with both of each pair ±m written out."""
        if not self.real:
            return self
        others = self.indices.any(axis=1)
        return Series(
            self.lattice,
            np.concatenate([self.indices, -self.indices[others]]),
            np.concatenate([self.values, self.values[others].conj()]),
            real=False,
        )


def faces_backward(indices: IntArray) -> BoolArray:
    """Rows whose last index other than zero is negative; (N, d) -> (N,).

    Of a pair ±m exactly one faces backward; the zero term does not.
    """
    backward = indices[:, 0] < 0
    for column in indices.T[1:]:
        backward = np.where(column == 0, backward, column < 0)
    return np.asarray(backward)

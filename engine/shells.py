"""Shells of resolution that hold equal numbers of reflections."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from engine.arrays import FloatArray, IntArray, as_count
from engine.errors import InputError
from engine.lattice import Lattice

_WORTH_A_SHELL = 50
"""Reflections a shell should hold where the caller does not say how many shells to make."""
_MOST_UNASKED = 10
_EQUAL = 1e-9
"""Relative difference of |G| that rounding explains: such reflections have equal spacings."""


@dataclass(frozen=True, slots=True)
class Shells:
    """Intervals of |G|, from low to high resolution.

    Attributes
    ----------
    starts : float64, shape (S,)
        Lower bound of |G| of each, Å⁻¹; reflections of equal |G| are never parted.
    """

    starts: FloatArray

    @property
    def count(self) -> int:
        """Shells."""
        return int(self.starts.size)

    def of(self, lattice: Lattice, indices: IntArray) -> IntArray:
        """The shell of each reflection; what lies below the first belongs to it; (N, d) -> (N,)."""
        place = np.searchsorted(self.starts, lattice.magnitudes(indices), side="right") - 1
        return np.maximum(place, 0)


def equal_shells(lattice: Lattice, indices: IntArray, count: int | None = None) -> Shells:
    """Shells with equal numbers of the given reflections, as far as equal spacings allow.

    Parameters
    ----------
    lattice : Lattice
    indices : int64, shape (M, d)
    count : int, optional
        Without it as many as hold 50 reflections each, 1 to 10. Fewer come out where many
        reflections have equal spacings.

    Raises
    ------
    InputError
        More shells than reflections, or no reflections.
    """
    size = len(indices)
    if not size:
        raise InputError("indices", "hold no reflections", "give at least one that is not absent")
    wanted = min(_MOST_UNASKED, max(1, size // _WORTH_A_SHELL)) if count is None else as_count(count, "shells")
    if wanted > size:
        raise InputError("shells", f"= {wanted} exceeds the number of unique reflections, {size}", "ask for fewer")
    ranked = np.sort(lattice.magnitudes(indices))
    starts = ranked[(np.arange(wanted) * size) // wanted]
    apart = np.concatenate([[True], np.diff(starts) > _EQUAL * starts[1:]])
    return Shells(starts[apart] * (1 - _EQUAL))

"""The reflections that a cell and its group make possible within a resolution."""

from __future__ import annotations

import math

import numpy as np

from engine.arrays import IntArray, as_positive
from engine.errors import InputError, TooLargeError
from engine.lattice import Lattice
from engine.symmetry.group import Group
from engine.symmetry.metric import METRIC_TOLERANCE, check_metric
from engine.symmetry.reflections import Packing, classify, rotations_up_to_sign

MOST_CANDIDATES = 2**28
"""Indices looked at, at most: a minute's work."""
MARGIN = 1e-9
"""Relative; a limit typed with a few digits must not cut the very reflection it was read from."""
_BLOCK = 1 << 15
"""Candidates looked at at a time."""


def unique_reflections(
    lattice: Lattice,
    group: Group,
    d_min: float,
    d_max: float | None = None,
    *,
    friedel: bool,
    metric_tolerance: float = METRIC_TOLERANCE,
) -> IntArray:
    """One index of each orbit that is not systematically absent, with d_min ≤ d ≤ d_max.

    Representatives as `engine.symmetry.orbits` chooses them, in the same order; the zero term
    is not among them.

    Parameters
    ----------
    lattice : Lattice
    group : Group
    d_min, d_max : float
        Å.
    friedel : bool
        Whether Friedel mates count as one.

    Returns
    -------
    int64, shape (M, d)

    Raises
    ------
    InputError
        A cell without the group's symmetry, limits that are not lengths or exclude each other.
    TooLargeError
        More than 2²⁸ indices would have to be looked at.
    """
    check_metric(lattice, group, metric_tolerance)
    low = as_positive(d_min, "d_min", "Å") * (1 - MARGIN)
    high = math.inf if d_max is None else as_positive(d_max, "d_max", "Å") * (1 + MARGIN)
    if low > high:
        raise InputError("d_min", f"= {d_min:g} Å exceeds d_max = {d_max:g} Å", "exchange the two")
    # h_j = a_j·G/2π, so |h_j| ≤ |a_j|/d.
    reach = [int(length / low) for length in lattice.lengths.tolist()]
    candidates = math.prod(2 * n + 1 for n in reach)
    if candidates > MOST_CANDIDATES:
        raise TooLargeError(
            "d_min", f"= {d_min:g} Å asks for {candidates:.2g} indices to be looked at", "give a larger d_min"
        )
    packing = Packing.of(np.array([reach], dtype=np.int64), group)
    chosen = rotations_up_to_sign(group) if friedel else group.cosets
    columns = packing.columns(group.rotations[chosen])
    # With the mates joined a representative has its last index at 0 or above.
    lowest = np.array([-n for n in reach[:-1]] + [0 if friedel else -reach[-1]])
    shape = [n - start + 1 for n, start in zip(reach, lowest.tolist(), strict=True)]
    found = []
    for start in range(0, math.prod(shape), _BLOCK):
        flat = np.arange(start, min(start + _BLOCK, math.prod(shape)))
        rows = np.stack(np.unravel_index(flat, shape), axis=1) + lowest
        rows = rows[rows.any(axis=1)]
        spacing = lattice.spacings(rows)
        rows = rows[(spacing >= low) & (spacing <= high)]
        keys = rows @ columns
        largest = (np.abs(keys) if friedel else keys).max(axis=1)
        found.append(rows[largest == rows @ packing.weights])
    unique = np.concatenate(found)
    unique = unique[~classify(unique, group).absent]
    return np.asfortranarray(unique[np.argsort(unique @ packing.weights)])

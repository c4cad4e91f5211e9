"""Whether a cell has the symmetry that a group demands of it."""

from __future__ import annotations

import numpy as np

from engine.arrays import as_positive
from engine.errors import InputError
from engine.lattice import Lattice
from engine.symmetry.group import Group

METRIC_TOLERANCE = 2e-3
"""Default largest deviation of the metric: edges that differ by 0.1 %, or an angle by 0.11°."""


def check_metric(lattice: Lattice, group: Group, tolerance: float = METRIC_TOLERANCE) -> None:
    """Refuse a cell whose lengths and angles an operation would change.

    With the metric G_ij = a_i·a_j an operation keeps lengths when Rᵀ G R = G (International
    Tables for Crystallography A, chapter 1.5). The deviation is the largest
    |Rᵀ G R − G|_ij / √(G_ii G_jj): twice the relative difference of two edges, or the
    difference of two cosines.

    Raises
    ------
    InputError
        Lattice and group differ in dimension, or an operation deviates by more than
        `tolerance`; the worst is named.
    """
    if lattice.dimension != group.dimension:
        raise InputError(
            "group",
            f"{group.name} has dimension {group.dimension} where the lattice has {lattice.dimension}",
            "give a group of the lattice's dimension",
        )
    as_positive(tolerance, "tolerance", "relative")
    metric = lattice.vectors @ lattice.vectors.T
    carried = group.rotations.transpose(0, 2, 1) @ metric @ group.rotations
    deviation = (np.abs(carried - metric) / np.outer(lattice.lengths, lattice.lengths)).max(axis=(1, 2))
    worst = int(np.argmax(deviation))
    if deviation[worst] > tolerance:
        raise InputError(
            "lattice",
            f"the cell does not have the symmetry of {group.name}: the operation '{group.operations[worst]}' "
            f"changes its metric by {deviation[worst]:.2g} where {tolerance:.2g} is allowed",
            "correct the cell or its axes, or give a group that the cell can have",
        )

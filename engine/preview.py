"""A low-resolution first version of a density in the whole cell."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np

from engine.arrays import as_count
from engine.coefficients import CoefficientSet
from engine.sampling import AffineGrid, full_cell

SAMPLES_PER_SPACING = 2.5
"""Samples across the smallest spacing summed: 2 would do for the values, a little more for the eye."""


def preview(coefficients: CoefficientSet, grid: AffineGrid, most: int) -> tuple[CoefficientSet, AffineGrid]:
    """The set cut to a coarser resolution, and a grid of the whole cell that suits it.

    Parameters
    ----------
    grid : AffineGrid
        The grid of the whole cell that is wanted in the end.
    most : int
        Samples of the preview, at least 8. A grid that has no more is left as it is, and so is the set.

    Returns
    -------
    (CoefficientSet, AffineGrid)
        The set's history says what was cut.

    Raises
    ------
    InputError
        `most` is too small.
    """
    most = as_count(most, "preview", least=8)
    if math.prod(grid.shape) <= most:
        return coefficients, grid
    shape = _shrunk(grid.shape, most)
    spacing = float((coefficients.lattice.lengths / np.array(shape)).max())
    limits = coefficients.resolution()
    told = f"low-resolution preview: {' × '.join(map(str, shape))} of {' × '.join(map(str, grid.shape))} samples"
    if limits is None:
        return replace(coefficients, history=(*coefficients.history, told)), full_cell(coefficients.lattice, shape)
    # The terms of the largest spacing stay, however coarse the grid.
    cut = min(max(limits[0], SAMPLES_PER_SPACING * spacing), limits[1])
    kept = coefficients.within(d_min=cut)
    told += f", {kept.count} of {coefficients.count} coefficients, those with d of at least {cut:.3g} Å"
    return replace(kept, history=(*kept.history, told)), full_cell(coefficients.lattice, shape)


def _shrunk(shape: tuple[int, ...], most: int) -> list[int]:
    """Counts in the same proportion, as far as whole numbers allow, whose product is at most `most`."""
    made = [1] * len(shape)
    left, room = math.prod(shape), float(most)
    order = np.argsort(shape, kind="stable").tolist()
    for number, axis in enumerate(order):
        shrink = (room / left) ** (1 / (len(order) - number))
        # The margin keeps a count that is whole up to rounding.
        made[axis] = max(1, math.floor(shape[axis] * shrink * (1 + 1e-12)))
        room /= made[axis]
        left //= shape[axis]
    return made

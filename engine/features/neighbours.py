"""Neighbours: all extrema, their equivalents and translates within a distance of one."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from scipy.spatial import cKDTree

from engine.arrays import as_positive
from engine.errors import InputError, TooLargeError
from engine.features.extrema import Extrema
from engine.features.geometry import Distances, as_rows, coordinates_of, joined, translations_within
from engine.features.sites import orbit

MOST_IMAGES = 20_000_000
"""Positions that neighbours are looked for among."""


def neighbours(extrema: Extrema, cutoff: float, *, rows: Sequence[int] | None = None) -> Distances:
    """All distances up to a cutoff from listed extrema to all listed ones, their equivalents and translates.

    Sorted by the first extremum, then by distance. Each contact is listed from both its ends.

    Parameters
    ----------
    extrema : Extrema
        Found in the whole cell: those of a region have neighbours that were not looked for.
    cutoff : float
        Å.
    rows : sequence of int, optional
        Extrema whose neighbours are wanted; all by default.

    Raises
    ------
    InputError
        A cutoff that is not a positive length, extrema of a region, or a row that is not there.
    TooLargeError
        The cutoff reaches over too many cells.
    """
    reach = as_positive(cutoff, "cutoff", "Å")
    if extrema.region is not None:
        raise InputError("extrema", "are those of a region", "search the whole cell")
    lattice, d = extrema.coefficients.lattice, extrema.coefficients.lattice.dimension
    centres = np.arange(extrema.count) if rows is None else as_rows(extrema, np.reshape(rows, (-1, 1)), 1, "rows")[:, 0]
    group = extrema.group
    if group is None:
        of, operation, places = np.arange(extrema.count), np.zeros(extrema.count, dtype=np.int64), extrema.fractional
    else:
        of, operation, places = orbit(lattice, group, extrema.fractional)
    margin = reach * np.linalg.norm(lattice.reciprocal, axis=1) / (2 * np.pi)
    layers = np.floor(margin).astype(np.int64) + 1
    images = len(places) * float(np.prod(2.0 * layers + 1))
    if images > MOST_IMAGES:
        raise TooLargeError(
            "cutoff", f"of {reach:g} Å reaches to {images:,.0f} positions", "give a smaller cutoff or fewer extrema"
        )
    shifts = translations_within(layers)
    moved = places[:, None] + shifts
    near = np.all((moved >= -margin - 1e-9) & (moved <= 1 + margin + 1e-9), axis=2)
    image, _ = np.nonzero(near)
    positions = moved[near]
    found = cKDTree(lattice.to_cartesian(extrema.fractional[centres])).sparse_distance_matrix(
        cKDTree(lattice.to_cartesian(positions)), reach * (1 + 1e-12), output_type="ndarray"
    )
    # A position is no neighbour of its own; distances between distinct ones are far above rounding.
    found = found[found["v"] > 1e-6]
    order = np.lexsort((found["j"], np.round(found["v"], 9), found["i"]))
    first, end = centres[found["i"][order]], found["j"][order].astype(np.int64)
    image = image[end]
    second = of[image]
    if group is None:
        rotations, translations, denominator = np.eye(d, dtype=np.int64)[None], np.zeros((1, d), dtype=np.int64), 1
    else:
        rotations, translations, denominator = group.rotations, group.numerators, group.denominator
    chosen = operation[image]
    carried = np.einsum("kij,kj->ki", rotations[chosen], extrema.fractional[second])
    whole = np.rint(positions[end] - carried - translations[chosen] / denominator).astype(np.int64)
    words = tuple(
        coordinates_of(rotation, shift, denominator)
        for rotation, shift in zip(rotations[chosen], translations[chosen] + denominator * whole, strict=True)
    )
    columns = lattice.vectors.T
    turned = columns @ rotations @ np.linalg.inv(columns)
    vector = lattice.to_cartesian(positions[end] - extrema.fractional[first])
    return joined(extrema, first, second, turned[chosen], vector, words)

"""The response of a set to a point: how wide a point becomes along each direction, how deep it ripples.

The response R(r) = Σ w_G cos(G·r), Σ w_G = 1, is what the series makes of a point of unit weight at
the origin (James, The Optical Principles of the Diffraction of X-rays, 1948, for a complete sphere).
Near its peak R = 1 − ½ rᵀ M r with M = Σ w G Gᵀ: the eigenvectors of M are the directions along which
the set resolves best and worst.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from engine.arrays import FloatArray
from engine.resolution.ripple import deepest
from engine.resolution.widths import full_width
from engine.series import Series

PARALLEL = 1e-9
"""Components along a direction that are smaller than this part of the largest |G| are zero."""
DEGENERATE = 1e-6
"""Relative difference below which two principal moments are one; their directions are then the
nearest to the Cartesian axes."""


@dataclass(frozen=True, slots=True, kw_only=True)
class PointResponse:
    """What a series makes of a point.

    Attributes
    ----------
    directions : float64, shape (p, d)
        Cartesian unit vectors along the principal directions of resolution, sharpest first.
    widths : float64, shape (p,)
        Full width at half maximum of the response along each, Å. Infinite where the response does
        not fall to half within the half of the cell's extent along the direction (a direction
        along which nothing varies, or hardly).
    ripple : float
        Most negative value of the response found, its value at the origin being 1; 0 where none
        is negative.
    ripple_at : float or None
        Distance of that value from the nearest lattice point, Å; None where none is negative.
    searched : str
        The region in which the ripple was looked for, in words.
    """

    directions: FloatArray
    widths: FloatArray
    ripple: float
    ripple_at: float | None
    searched: str

    def width_along(self, direction: FloatArray) -> float:
        """Full width (Å) along any direction, shape (d,), of the ellipsoid with these widths as axes."""
        unit = direction / np.linalg.norm(direction)
        inverse = float(np.linalg.norm(self.directions @ unit / self.widths))
        return 1 / inverse if inverse > 0 else math.inf


def point_response(series: Series) -> PointResponse | None:
    """Widths and ripple of the response of a set.

    Parameters
    ----------
    series : Series
        Of the field ``response``: real strengths. Of a set without all Friedel mates, whose
        response is complex, the real part is meant throughout.

    Returns
    -------
    PointResponse or None
        None where there is no term but the zero term.

    Notes
    -----
    A width is that of the first fall to half. It is found on the sum itself; where there are many
    terms a first value comes from bins of their components along the direction.

    The ripple is searched on samples: over the whole cell, five to the shortest period along each
    axis, where these are at most 40 000; else in a box around the origin along the principal
    directions, out to three of the shortest periods along each or one and a half widths, where that is
    more. Inversion takes half of either. From the lowest samples it is followed to the bottom on
    the series itself. A deeper one outside the box is possible where the set is very irregular.
    """
    weights = np.asarray(series.doubled().real if series.real else series.values.real)
    total = float(weights.sum())
    if not series.indices.any() or total == 0:
        return None
    if total != 1:
        series = Series(series.lattice, series.indices, series.values / total, series.real)
        weights = weights / total
    waves = series.lattice.wavevectors(series.indices)
    directions = principal_directions(weights, waves)
    components = np.abs(directions @ waves.T)
    components[components <= PARALLEL * components.max()] = 0.0
    reach = 0.5 * np.abs(directions @ series.lattice.vectors.T).sum(axis=1)
    widths = np.array(
        [
            full_width(series, weights, one, direction, limit)
            for one, direction, limit in zip(components, directions, reach.tolist(), strict=True)
        ]
    )
    found = deepest(series, weights, waves, directions, widths, components.max(axis=1))
    order = np.argsort(widths, kind="stable")
    return PointResponse(
        directions=directions[order],
        widths=widths[order],
        ripple=found.value,
        ripple_at=found.distance,
        searched=found.searched,
    )


def principal_directions(weights: FloatArray, waves: FloatArray) -> FloatArray:
    """Eigenvectors of Σ|w| G Gᵀ as rows, the largest moment first; (N,), (N, d) -> (d, d).

    Where moments agree, the directions nearest to the Cartesian axes; the largest component of
    each is positive.
    """
    second = (waves * np.abs(weights)[:, None]).T @ waves
    moments, vectors = np.linalg.eigh(second)
    moments, rows = moments[::-1], vectors.T[::-1].copy()
    start = 0
    while start < moments.size:
        stop = start + 1
        while stop < moments.size and moments[start] - moments[stop] <= DEGENERATE * moments[0]:
            stop += 1
        if stop - start > 1:
            rows[start:stop] = _upright(rows[start:stop])
        start = stop
    largest = np.take_along_axis(rows, np.abs(rows).argmax(axis=1)[:, None], axis=1)
    return np.asarray(rows * np.sign(largest))


def _upright(rows: FloatArray) -> FloatArray:
    """An orthonormal basis of the span of orthonormal rows, near the Cartesian axes."""
    made: list[FloatArray] = []
    for _ in range(rows.shape[0]):
        # What of each axis lies in the span and is not yet taken.
        axes = rows.T @ rows
        for one in made:
            axes = axes - np.outer(axes @ one, one)
        lengths = np.linalg.norm(axes, axis=1)
        chosen = int(np.argmax(lengths > lengths.max() - 1e-6))
        made.append(axes[chosen] / lengths[chosen])
    return np.array(made)

"""Where the samples of a plane lie in a picture of true shape, and where it cuts the unit cells.

A plane is described by two numbers s_1, s_2 that count samples along its axes; in the picture they
become Å along the first axis and Å perpendicular to it.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from engine.arrays import AnyArray, FloatArray
from engine.lattice import Lattice
from engine.sampling import AffineGrid

MOST_OUTLINES = 120
"""Lines of cell outlines in one picture; beyond, they would hide what they frame."""
SQUARE = 1e-4
"""Tangent up to which an angle is called right: edges are typed with a few digits."""
WHOLE = 1e-7
"""Largest distance from a whole number that counts as rounding, in cell edges."""


@dataclass(frozen=True, slots=True)
class Plane:
    """A sampled plane laid flat.

    Attributes
    ----------
    origin : float64, shape (d,)
        Fractional position of sample (0, 0).
    steps : float64, shape (2, d)
        Fractional.
    flat_origin : float64, shape (2,)
        Picture coordinates of sample (0, 0), Å.
    flat_steps : float64, shape (2, 2)
        The steps in picture coordinates as rows, Å; the first along +x, the second upwards.
    spans : ((float, float), (float, float))
        First and last s_1, first and last s_2 that the picture shows.
    """

    origin: FloatArray
    steps: FloatArray
    flat_origin: FloatArray
    flat_steps: FloatArray
    spans: tuple[tuple[float, float], tuple[float, float]]

    def flatten(self, counts: FloatArray) -> FloatArray:
        """Picture coordinates (Å) of points s_1, s_2; (..., 2) -> (..., 2)."""
        return np.asarray(self.flat_origin + counts @ self.flat_steps)

    def corners(self) -> FloatArray:
        """Of the window, in picture coordinates, counterclockwise; (4, 2)."""
        (left, right), (low, high) = self.spans
        return self.flatten(np.array([[left, low], [right, low], [right, high], [left, high]]))

    @property
    def oblique(self) -> bool:
        """Whether the axes meet at another angle than 90°."""
        return bool(abs(self.flat_steps[1, 0]) > SQUARE * abs(self.flat_steps[1, 1]))

    @property
    def angle(self) -> float:
        """Between the axes, degrees."""
        return math.degrees(math.atan2(self.flat_steps[1, 1], self.flat_steps[1, 0]))


def close(values: AnyArray, steps: FloatArray) -> AnyArray:
    """Repeat the first samples at the end of each axis that spans whole translations of the lattice.

    The density there is the same by periodicity, and a picture of one period then shows its far edge.

    Parameters
    ----------
    values : array, shape (N_1, …)
    steps : float64, shape (p, d)
        Fractional step along each of the first p axes.
    """
    for axis, step in enumerate(steps):
        if spans_period(step, values.shape[axis]):
            first = np.take(values, [0], axis=axis)
            values = np.concatenate([values, first], axis=axis)
    return values


def spans_period(step: FloatArray, count: int) -> bool:
    """Whether `count` fractional steps make a translation of the lattice."""
    whole = step * count
    return bool(np.all(np.abs(whole - np.rint(whole)) < WHOLE))


def lay_flat(
    lattice: Lattice,
    grid: AffineGrid,
    axes: tuple[int, int],
    shape: tuple[int, int],
    origin: FloatArray | None = None,
) -> Plane:
    """The plane that two axes of a grid span, of `shape` samples, from `origin` (default: the grid's)."""
    steps = grid.steps[list(axes)]
    first, second = lattice.to_cartesian(steps)
    length = float(np.linalg.norm(first))
    along = float(second @ first) / length
    up = math.sqrt(max(float(second @ second) - along**2, 0.0))
    if abs(along) < 1e-12 * up:
        along = 0.0
    flat = np.array([[length, 0.0], [along, up]])
    start = np.array([grid.starts[axis] for axis in axes])
    unit = flat / np.linalg.norm(flat, axis=1)[:, None]
    spans = [(0.0, count - 1.0) if count > 1 else (-0.5, 0.5) for count in shape]
    return Plane(grid.origin if origin is None else origin, steps, np.asarray(start @ unit), flat, (spans[0], spans[1]))


def outlines(plane: Plane) -> list[FloatArray] | None:
    """Where the faces x_j = whole number of the unit cells cut the window, in picture coordinates.

    Returns
    -------
    list of float64, each of shape (M_j, 2, 2)
        Per direct vector j, M_j lines by their two ends; none for faces parallel to the plane. None
        if there are more than MOST_OUTLINES in all.
    """
    found = []
    (left, right), (low, high) = plane.spans
    window = np.array([[left, low], [right, low], [right, high], [left, high]])
    total = 0
    for start, slope in zip(plane.origin, plane.steps.T, strict=True):
        across = window @ slope
        if np.ptp(across) < WHOLE:
            found.append(np.zeros((0, 2, 2)))
            continue
        bottom = math.ceil(start + float(across.min()) - WHOLE)
        top = math.floor(start + float(across.max()) + WHOLE)
        total += max(top - bottom + 1, 0)
        if total > MOST_OUTLINES:
            return None
        found.append(plane.flatten(_cut(np.arange(bottom, top + 1) - start, slope, plane.spans)))
    return found


def _cut(levels: FloatArray, slope: FloatArray, spans: tuple[tuple[float, float], tuple[float, float]]) -> FloatArray:
    """Ends of the lines slope·s = level inside the window; levels (M,) -> (≤ M, 2, 2).

    A line is s = level slope/|slope|² + t v with v across the slope; the window bounds t twice.
    """
    # Steps differ in length: work in fractions of the window, where both sides are 1 long.
    low = np.array([span[0] for span in spans])
    extent = np.array([span[1] - span[0] for span in spans])
    levels, slope = levels - slope @ low, slope * extent
    foot = levels[:, None] * slope / (slope @ slope)
    across = np.array([-slope[1], slope[0]])
    first, last = np.full(levels.size, -np.inf), np.full(levels.size, np.inf)
    for axis in range(2):
        if abs(across[axis]) < 1e-12 * np.abs(across).max():
            continue
        bounds = np.sort((np.array([0.0, 1.0]) - foot[:, axis, None]) / across[axis], axis=1)
        first, last = np.maximum(first, bounds[:, 0]), np.minimum(last, bounds[:, 1])
    kept = last - first > 1e-9 * float(np.max(last - first, initial=0.0))
    ends = np.stack([first, last], axis=1)[kept]
    return np.asarray(low + extent * (foot[kept][:, None, :] + ends[..., None] * across))


def round_length(limit: float) -> float:
    """The longest of 1, 2, 5 × 10ⁿ not above `limit`."""
    power = 10.0 ** math.floor(math.log10(limit))
    return max(digit * power for digit in (1, 2, 5) if digit * power <= limit * (1 + 1e-9))

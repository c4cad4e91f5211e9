"""Where a density is wanted: affine grids and free points, as plain data."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from engine.arrays import FloatArray
from engine.lattice import Lattice


@dataclass(frozen=True, slots=True)
class Axis:
    """One axis of a grid: sample s lies at start + s·step (Å along the axis).

    Attributes
    ----------
    label : str
    start, step : float
        Å.
    count : int
    direction : float64, shape (d,)
        Cartesian unit vector along which the coordinate grows.
    """

    label: str
    start: float
    step: float
    count: int
    direction: FloatArray

    def coordinates(self) -> FloatArray:
        """Å along the axis, shape (count,)."""
        return np.asarray(self.start + self.step * np.arange(self.count), dtype=np.float64)


@dataclass(frozen=True, slots=True)
class AffineGrid:
    """Samples at x = origin + Σ_j s_j steps_j, s_j = 0 … shape_j − 1, fractional.

    Attributes
    ----------
    origin : float64, shape (d,)
        Fractional position of the sample 0.
    steps : float64, shape (p, d)
        One to three step vectors as rows, fractional.
    shape : tuple of int
        p counts, in the order of the steps.
    labels : tuple of str
        A name for each axis.
    starts : tuple of float
        The axis coordinate of sample 0, Å.
    """

    origin: FloatArray
    steps: FloatArray
    shape: tuple[int, ...]
    labels: tuple[str, ...]
    starts: tuple[float, ...]

    @property
    def samples(self) -> int:
        return math.prod(self.shape)

    def axes(self, lattice: Lattice) -> tuple[Axis, ...]:
        """The axes in Å."""
        described = []
        for label, start, count, step in zip(self.labels, self.starts, self.shape, self.steps, strict=True):
            vector = lattice.to_cartesian(step)
            length = float(np.linalg.norm(vector))
            direction = vector / length if length else vector
            described.append(Axis(label, start, length, count, direction))
        return tuple(described)

    def positions(self) -> FloatArray:
        """Fractional positions of all samples, shape (*shape, d)."""
        mesh = np.meshgrid(*(np.arange(n) for n in self.shape), indexing="ij")
        return self.origin + np.stack(mesh, axis=-1) @ self.steps


@dataclass(frozen=True, slots=True)
class FreePoints:
    """Samples at positions of the caller's choice; fractional, float64, shape (M, d)."""

    fractional: FloatArray

    @property
    def shape(self) -> tuple[int, ...]:
        return (int(self.fractional.shape[0]),)

    @property
    def samples(self) -> int:
        return int(self.fractional.shape[0])

    def positions(self) -> FloatArray:
        """Fractional positions, shape (M, d)."""
        return self.fractional


Sampling = AffineGrid | FreePoints


def wrapped(fractional: FloatArray) -> FloatArray:
    """The same positions in the cells nearest the origin, −½ ≤ x ≤ ½.

    Subtracting a whole number is exact, so that phases m·x lose nothing; taken far from the origin
    they would lose a digit for every factor of ten.
    """
    return fractional - np.rint(fractional)

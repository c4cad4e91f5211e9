"""Averages of a density over a region around each sample, in closed form.

An average multiplies each coefficient by the transform of its region; nothing is added up on a
grid. A lateral average is the limit of an endless layer: it keeps the coefficients whose G is
perpendicular to the layer and drops all others.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Protocol

import numpy as np
from numpy.typing import ArrayLike
from scipy import special

from engine.arrays import BoolArray, FloatArray, IntArray, as_indices, as_matrix, as_positive
from engine.errors import InputError
from engine.lattice import Lattice


class Average(Protocol):
    """A region that a density is averaged over."""

    def factors(self, lattice: Lattice, indices: IntArray) -> FloatArray:
        """Transform of the region, 1 at G = 0; indices (N, d) -> (N,)."""

    def describe(self) -> str:
        """The average in words."""


@dataclass(frozen=True, slots=True)
class LateralAverage:
    """Over all directions perpendicular to the reciprocal-lattice vector with these indices."""

    normal: IntArray

    def factors(self, lattice: Lattice, indices: IntArray) -> FloatArray:
        return np.where(along(self.normal, indices), 1.0, 0.0)

    def describe(self) -> str:
        return f"averaged over all directions perpendicular to the normal of {_words(self.normal)}"


@dataclass(frozen=True, slots=True)
class SlabAverage:
    """Over a distance (Å) along the normal of a lattice plane, centred on each sample."""

    normal: IntArray
    thickness: float

    def factors(self, lattice: Lattice, indices: IntArray) -> FloatArray:
        direction = lattice.wavevectors(self.normal[None, :])[0]
        direction = direction / np.linalg.norm(direction)
        phase = lattice.wavevectors(indices) @ direction * self.thickness
        return np.asarray(np.sinc(phase / (2 * np.pi)))

    def describe(self) -> str:
        return f"averaged over {self.thickness:g} Å along the normal of {_words(self.normal)}"


@dataclass(frozen=True, slots=True)
class BoxAverage:
    """Over a parallelepiped centred on each sample; edges are rows of fractional vectors.

    With fewer edges than dimensions the region is a parallelogram or a segment.
    """

    edges: FloatArray

    def factors(self, lattice: Lattice, indices: IntArray) -> FloatArray:
        return np.asarray(np.prod(np.sinc(indices @ self.edges.T), axis=1))

    def describe(self) -> str:
        rows = "; ".join(" ".join(f"{x:g}" for x in edge) for edge in self.edges)
        return f"averaged over the box with the fractional edges {rows}"


@dataclass(frozen=True, slots=True)
class BallAverage:
    """Over an interval, disc or ball of the given radius (Å), by the lattice's dimension.

    Transforms sin x/x, 2 J_1(x)/x and 3 (sin x − x cos x)/x³ with x = |G| R.
    """

    radius: float

    def factors(self, lattice: Lattice, indices: IntArray) -> FloatArray:
        x = lattice.magnitudes(indices) * self.radius
        if lattice.dimension == 1:
            return np.asarray(np.sinc(x / np.pi))
        safe = np.where(x > 0, x, 1.0)
        if lattice.dimension == 2:
            return np.where(x > 0, 2 * special.j1(safe) / safe, 1.0)
        # j_1(x) = sin x/x² − cos x/x, free of the cancellation of the spelt-out form.
        return np.where(x > 0, 3 * special.spherical_jn(1, safe) / safe, 1.0)

    def describe(self) -> str:
        return f"averaged over a radius of {self.radius:g} Å"


def lateral(lattice: Lattice, normal: ArrayLike) -> LateralAverage:
    """Lateral average for profiles along the normal of (hkl).

    Raises
    ------
    InputError
        The indices do not name a lattice plane.
    """
    return LateralAverage(as_indices(normal, lattice.dimension, "normal"))


def slab(lattice: Lattice, normal: ArrayLike, thickness: float) -> SlabAverage:
    """Average over a slab of the given thickness (Å) parallel to (hkl).

    Raises
    ------
    InputError
        The indices do not name a lattice plane, or the thickness is not a positive length.
    """
    indices = as_indices(normal, lattice.dimension, "normal")
    return SlabAverage(indices, as_positive(thickness, "thickness", "Å"))


def box(lattice: Lattice, edges: ArrayLike) -> BoxAverage:
    """Average over a box with the given edges (fractional, 1 to d rows).

    Raises
    ------
    InputError
        The edges are not finite, or more than the lattice has dimensions.
    """
    rows = as_matrix(edges, (-1, lattice.dimension), "edges")
    if rows.shape[0] > lattice.dimension:
        raise InputError("edges", f"are {rows.shape[0]}", f"give at most {lattice.dimension}")
    return BoxAverage(rows)


def ball(radius: float) -> BallAverage:
    """Average over an interval, disc or ball of the given radius (Å).

    Raises
    ------
    InputError
        The radius is not a positive length.
    """
    return BallAverage(as_positive(radius, "radius", "Å"))


def along(normal: IntArray, indices: IntArray) -> BoolArray:
    """Whether each G is parallel to that of `normal` (or zero), decided in whole numbers."""
    # Every 2×2 minor of (m, normal) vanishes exactly when m is a multiple of normal.
    parallel = np.ones(indices.shape[0], dtype=np.bool_)
    for i in range(normal.size):
        for j in range(i):
            parallel &= indices[:, i] * normal[j] == indices[:, j] * normal[i]
    return parallel


def _words(indices: IntArray) -> str:
    return "(" + " ".join(str(int(index)) for index in indices) + ")"

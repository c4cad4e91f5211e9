"""A mesh of triangles, and what can be measured on it."""

from __future__ import annotations

from dataclasses import dataclass
from typing import cast

import numpy as np
from numpy.typing import NDArray

from engine.arrays import BoolArray, FloatArray, IntArray

CHUNK = 1 << 17
"""Triangles measured at a time."""

Triangles = NDArray[np.int32]


@dataclass(frozen=True, slots=True)
class Mesh:
    """Triangles over shared vertices.

    Seen from where the normals point, the corners of a triangle run anticlockwise.

    Attributes
    ----------
    vertices : float64, shape (V, 3)
        Cartesian, Å.
    normals : float64, shape (V, 3)
        Of length 1.
    triangles : int32, shape (T, 3)
        Numbers of vertices.
    caps : bool, shape (T,)
        Triangles that close the mesh in the faces of its region.
    """

    vertices: FloatArray
    normals: FloatArray
    triangles: Triangles
    caps: BoolArray

    def area(self) -> float:
        """Of the surface without its caps, Å²."""
        return self._area(~self.caps)

    def cap_area(self) -> float:
        """Å²."""
        return self._area(self.caps)

    def volume(self) -> float:
        """What a mesh without boundary encloses, Å³, by the divergence theorem: ∮ r·dA / 3.

        Of a mesh with a boundary the number has no meaning.
        """
        # Counted from a point near by, or large numbers would cancel.
        centre = self.vertices.mean(axis=0)
        total = 0.0
        for start in range(0, len(self.triangles), CHUNK):
            first, second, third = self._corners(slice(start, start + CHUNK))
            total += float(np.einsum("ij,ij->", first - centre, np.cross(second - centre, third - centre)))
        return total / 6

    def unpaired_edges(self) -> int:
        """Edges that are not shared by exactly two triangles of one sense: 0 where the mesh is closed.

        Each edge counts that one triangle runs along in one direction and none, or more than one, in the other.
        """
        forth, back = (self._edges(turned) for turned in (False, True))
        known, counts = np.unique(forth, return_counts=True)
        alone = known.size - np.intersect1d(known, back, assume_unique=False).size
        return int(alone + np.count_nonzero(counts > 1))

    def _edges(self, turned: bool) -> IntArray:
        corners = self.triangles.astype(np.int64)
        size = len(self.vertices)
        first, second = corners, corners[:, [1, 2, 0]]
        if turned:
            first, second = second, first
        return (first * size + second).reshape(-1)

    def _area(self, chosen: BoolArray) -> float:
        rows = np.flatnonzero(chosen)
        total = 0.0
        for start in range(0, rows.size, CHUNK):
            first, second, third = self._corners(rows[start : start + CHUNK])
            total += float(np.linalg.norm(np.cross(second - first, third - first), axis=1).sum())
        return total / 2

    def _corners(self, rows: slice | IntArray) -> tuple[FloatArray, FloatArray, FloatArray]:
        corners = self.vertices[self.triangles[rows]]
        return cast("tuple[FloatArray, FloatArray, FloatArray]", tuple(np.moveaxis(corners, 1, 0)))

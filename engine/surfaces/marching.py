"""Marching cubes: from a field on a grid to a mesh.

Which triangles lie in a cube of eight samples is decided by the library scikit-image, after Lewiner,
Lopes, Vieira & Tavares, J. Graphics Tools 8 (2003) 1, whose surfaces have no holes. Where a vertex lies on
its edge is computed here, in double precision.
"""

from __future__ import annotations

import itertools
from dataclasses import dataclass

import numpy as np

from engine.arrays import AnyArray, BoolArray, FloatArray, IntArray
from engine.surfaces.mesh import Mesh, Triangles
from engine.surfaces.volume import Above

BYTES_PER_TRIANGLE = 200
"""Memory of a mesh while it is made, the library's included."""


@dataclass(frozen=True, slots=True)
class Samples:
    """A field on the samples of a region.

    Attributes
    ----------
    values : float array, shape (n_1, n_2, n_3)
    wrapped : tuple of bool
        Axes along which the field repeats after n_j samples.
    origin : float64, shape (3,)
        Cartesian position of the sample 0, Å.
    steps : float64, shape (3, 3)
        Cartesian step vectors as rows, Å.
    nearest : float
        Fraction of a step that vertices keep away from samples.
    """

    values: AnyArray
    wrapped: tuple[bool, ...]
    origin: FloatArray
    steps: FloatArray
    nearest: float

    @property
    def last(self) -> IntArray:
        """Number of the far plane along each axis."""
        return np.array([n - 1 + wrap for n, wrap in zip(self.values.shape, self.wrapped, strict=True)])

    def at(self, places: IntArray) -> FloatArray:
        """Values at grid places, shape (M, 3), each from 0 to `last`."""
        rows = [column % n for column, n in zip(places.T, self.values.shape, strict=True)]
        return np.asarray(self.values[rows[0], rows[1], rows[2]], dtype=np.float64)

    def slopes(self, places: IntArray) -> FloatArray:
        """Cartesian gradients at grid places, (M, 3) -> (M, 3), by differences of the neighbours."""
        by_step = np.empty(places.shape)
        for axis, (wrap, last) in enumerate(zip(self.wrapped, self.last.tolist(), strict=True)):
            up, down = places.copy(), places.copy()
            up[:, axis] += 1
            down[:, axis] -= 1
            if not wrap:
                np.minimum(up[:, axis], last, out=up[:, axis])
                np.maximum(down[:, axis], 0, out=down[:, axis])
            by_step[:, axis] = (self.at(up) - self.at(down)) / (up - down)[:, axis]
        # r = r_0 + s·steps, so ∂n/∂s = steps·∇n.
        return np.asarray(np.linalg.solve(self.steps, by_step.T).T)

    def positions(self, places: FloatArray) -> FloatArray:
        """Cartesian, Å."""
        return np.asarray(self.origin + places @ self.steps)


def march(samples: Samples, level: float, found: Above) -> Mesh:
    """The surface at a level.

    Parameters
    ----------
    samples : Samples
    level : float
        Within the range of the samples.
    found : Above
        Their signed volume at that level.
    """
    # An optional package, and slow to load.
    from skimage.measure import marching_cubes

    corners, triangles, _, _ = marching_cubes(found.signed, 0.0)  # type: ignore[no-untyped-call]
    places = corners.astype(np.float64) - found.padding
    del corners
    lower = np.floor(places).astype(np.int64)
    between = places != lower
    last = samples.last
    outside = ((lower < 0) | (lower + between > last)).any(axis=1)
    on_edge = between.sum(axis=1) == 1
    np.clip(places, 0, last, out=places)
    normals = np.empty_like(places)
    _edges(samples, level, places, normals, lower, between, on_edge & ~outside)
    _middles(samples, places, normals, lower, ~on_edge & ~outside)
    _faces(samples, places, normals, outside)
    caps = outside[triangles].any(axis=1)
    if found.padding:
        triangles, kept = _joined(triangles, places, last, on_edge & outside)
        triangles, caps = triangles[kept], caps[kept]
    if np.linalg.det(samples.steps) > 0:
        # The library turns them the other way round.
        triangles = triangles[:, ::-1]
    used = np.zeros(len(places), dtype=bool)
    used[triangles] = True
    renumbered = (np.cumsum(used) - 1).astype(np.int32)
    mesh = Mesh(
        samples.positions(places[used]), normals[used], np.ascontiguousarray(renumbered[triangles]), np.asarray(caps)
    )
    return _with_every_normal(mesh)


def _edges(
    samples: Samples,
    level: float,
    places: FloatArray,
    normals: FloatArray,
    lower: IntArray,
    between: BoolArray,
    chosen: BoolArray,
) -> None:
    """Vertices on the edges of the grid: where the straight line between two samples has the level."""
    rows = np.flatnonzero(chosen)
    first = lower[rows]
    second = first + between[rows]
    low, high = samples.at(first), samples.at(second)
    # A sample that counts as above the level by its error may have the value of its neighbour.
    share = np.full(rows.size, 0.5)
    np.divide(level - low, high - low, out=share, where=high != low)
    share = np.clip(share, samples.nearest, 1 - samples.nearest)[:, None]
    places[rows] = first + share * between[rows]
    normals[rows] = -((1 - share) * samples.slopes(first) + share * samples.slopes(second))


def _middles(samples: Samples, places: FloatArray, normals: FloatArray, lower: IntArray, chosen: BoolArray) -> None:
    """Vertices that the library places inside a cube, in the middle of its other vertices."""
    rows = np.flatnonzero(chosen)
    inside = places[rows] - lower[rows]
    total = np.zeros((rows.size, 3))
    for corner in itertools.product((0, 1), repeat=3):
        weights = np.where(corner, inside, 1 - inside).prod(axis=1)
        total -= weights[:, None] * samples.slopes(lower[rows] + np.array(corner))
    normals[rows] = total


def _faces(samples: Samples, places: FloatArray, normals: FloatArray, chosen: BoolArray) -> None:
    """Vertices of caps: the normals of the faces that they lie in."""
    rows = np.flatnonzero(chosen)
    # A face is where the place along one axis is constant, so its normal is the gradient of that.
    outward = np.linalg.inv(samples.steps).T
    outward /= np.linalg.norm(outward, axis=1)[:, None]
    sides = (places[rows] == samples.last).astype(np.float64) - (places[rows] == 0)
    normals[rows] = sides @ outward


def _joined(
    triangles: Triangles, places: FloatArray, last: IntArray, on_samples: BoolArray
) -> tuple[Triangles, BoolArray]:
    """Triangles with one vertex for each sample of a cap, and which of them have three different corners.

    On an edge of the region two, at a corner three vertices fall on one sample.
    """
    rows = np.flatnonzero(on_samples)
    strides = np.array([(last[1] + 1) * (last[2] + 1), last[2] + 1, 1])
    keys = np.rint(places[rows]).astype(np.int64) @ strides
    _, first, inverse = np.unique(keys, return_index=True, return_inverse=True)
    numbers = np.arange(len(places), dtype=np.int32)
    numbers[rows] = rows[first][inverse]
    made = numbers[triangles]
    a, b, c = made.T
    return made, np.asarray((a != b) & (b != c) & (c != a))


def _with_every_normal(mesh: Mesh) -> Mesh:
    """With normals of length 1; where a gradient vanishes, that of the triangles round the vertex."""
    normals = mesh.normals
    lengths = np.linalg.norm(normals, axis=1)
    flat = ~(lengths > 0)
    if flat.any():
        rows = np.flatnonzero(flat[mesh.triangles].any(axis=1))
        first, second, third = np.moveaxis(mesh.vertices[mesh.triangles[rows]], 1, 0)
        areas = np.cross(second - first, third - first)
        for corner in mesh.triangles[rows].T:
            np.add.at(normals, corner, np.where(flat[corner][:, None], areas, 0.0))
        lengths = np.linalg.norm(normals, axis=1)
    normals /= lengths[:, None]
    return mesh

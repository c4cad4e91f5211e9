"""Regions that features are looked for in: parallelepipeds and balls, anywhere in the crystal."""

from __future__ import annotations

import itertools
from dataclasses import dataclass
from typing import Protocol

import numpy as np
from numpy.typing import ArrayLike

from engine.arrays import BoolArray, FloatArray, IntArray, as_positive
from engine.errors import InputError
from engine.lattice import FLATTEST, Lattice
from engine.sampling.positions import Coordinates, as_fractional, as_fractional_rows

MOST_CELLS = 100_000
"""Cells that a region may reach into."""
EDGE = 1e-9
"""Fraction of an edge by which a position may lie before the near face of a box and still be inside."""
PORTION = 1 << 20
"""Positions tried at a time."""


class Region(Protocol):
    """A part of space; positions are fractional."""

    def contains(self, lattice: Lattice, fractional: FloatArray, margin: float = 0.0) -> BoolArray:
        """Whether positions (..., d) lie inside, or within about `margin` (Å) of it; (...)."""

    def bounds(self, lattice: Lattice) -> tuple[FloatArray, FloatArray]:
        """Least and greatest fractional coordinates, each (d,)."""

    def describe(self) -> str:
        """The region in words."""


@dataclass(frozen=True, slots=True)
class BoxRegion:
    """x = origin + Σ u_j edges_j, 0 ≤ u_j < 1; fractional, shapes (d,) and (d, d)."""

    origin: FloatArray
    edges: FloatArray

    def contains(self, lattice: Lattice, fractional: FloatArray, margin: float = 0.0) -> BoolArray:
        across = np.linalg.norm(np.linalg.inv(lattice.to_cartesian(self.edges)), axis=0) * margin
        u = (fractional - self.origin) @ np.linalg.inv(self.edges)
        return np.asarray(np.all((u >= -EDGE - across) & (u < 1 - EDGE + across), axis=-1))

    def bounds(self, lattice: Lattice) -> tuple[FloatArray, FloatArray]:
        corners = self.origin + np.array(list(itertools.product((0.0, 1.0), repeat=self.origin.size))) @ self.edges
        return corners.min(axis=0), corners.max(axis=0)

    def describe(self) -> str:
        edges = "; ".join(" ".join(f"{x:g}" for x in edge) for edge in self.edges)
        return f"the box at {' '.join(f'{x:g}' for x in self.origin)} with the fractional edges {edges}"


@dataclass(frozen=True, slots=True)
class BallRegion:
    """Positions within a radius (Å) of a centre (fractional, shape (d,))."""

    centre: FloatArray
    radius: float

    def contains(self, lattice: Lattice, fractional: FloatArray, margin: float = 0.0) -> BoolArray:
        distance = np.linalg.norm(lattice.to_cartesian(fractional - self.centre), axis=-1)
        return np.asarray(distance <= self.radius * (1 + EDGE) + margin)

    def bounds(self, lattice: Lattice) -> tuple[FloatArray, FloatArray]:
        reach = self.radius * np.linalg.norm(lattice.reciprocal, axis=1) / (2 * np.pi)
        return self.centre - reach, self.centre + reach

    def describe(self) -> str:
        return f"{self.radius:g} Å around {' '.join(f'{x:g}' for x in self.centre)}"


def box_region(
    lattice: Lattice, origin: ArrayLike, edges: ArrayLike, *, coordinates: Coordinates = "fractional"
) -> BoxRegion:
    """A parallelepiped from its origin and its d edges; half open, so that boxes side by side share nothing.

    Raises
    ------
    InputError
        Not d finite edges that span a volume.
    """
    start = as_fractional(lattice, origin, coordinates, "origin")
    rows = as_fractional_rows(lattice, edges, coordinates, "edges")
    if rows.shape[0] != lattice.dimension:
        raise InputError("edges", f"are {rows.shape[0]}", f"give {lattice.dimension}, one per dimension of the lattice")
    cartesian = lattice.to_cartesian(rows)
    product = float(np.prod(np.linalg.norm(cartesian, axis=1)))
    if not abs(float(np.linalg.det(cartesian))) > FLATTEST * product:
        raise InputError("edges", "span no volume or hardly any", "give edges that span a region")
    return BoxRegion(start, rows)


def ball_region(
    lattice: Lattice, centre: ArrayLike, radius: float, *, coordinates: Coordinates = "fractional"
) -> BallRegion:
    """An interval, disc or ball, by the lattice's dimension.

    Raises
    ------
    InputError
        The centre is not d finite numbers, or the radius not a positive length.
    """
    return BallRegion(as_fractional(lattice, centre, coordinates, "centre"), as_positive(radius, "radius", "Å"))


def images_inside(
    region: Region, lattice: Lattice, fractional: FloatArray, margin: float = 0.0
) -> tuple[IntArray, FloatArray]:
    """Lattice translates of positions (M, d) that lie in a region: rows (K,) and positions (K, d), row by row.

    Raises
    ------
    InputError
        The region reaches into too many cells.
    """
    low, high = region.bounds(lattice)
    reach = margin * np.linalg.norm(lattice.reciprocal, axis=1) / (2 * np.pi)
    home = fractional - np.floor(fractional)
    first = np.floor(low - reach - 1e-6).astype(np.int64) - 1
    counts = np.floor(high + reach + 1e-6).astype(np.int64) - first + 1
    if float(np.prod(counts.astype(np.float64))) > MOST_CELLS:
        raise InputError("region", f"reaches into more than {MOST_CELLS} cells", "give a smaller region")
    shifts = first + np.stack(np.unravel_index(np.arange(int(np.prod(counts))), counts), axis=-1)
    rows, places = [np.zeros(0, dtype=np.int64)], [np.zeros((0, lattice.dimension))]
    step = max(1, PORTION // len(shifts))
    for start in range(0, len(home), step):
        tried = home[start : start + step, None] + shifts
        row, shift = np.nonzero(region.contains(lattice, tried, margin))
        rows.append(row + start)
        places.append(tried[row, shift])
    return np.concatenate(rows), np.concatenate(places)

"""The parallelepiped that a surface is looked for in: a whole cell, or a box."""

from __future__ import annotations

import itertools
import math
from dataclasses import dataclass, replace

import numpy as np
from scipy import fft

from engine.arrays import FloatArray
from engine.errors import InputError
from engine.lattice import Lattice
from engine.sampling.grids import AffineGrid

FEWEST = 4
"""Divisions of an edge below which a grid is not made coarser."""
WHOLE = 1e-9
"""An edge this near a lattice translation, in cells, is taken as one."""
NEAREST = 1e-4
"""No vertex of a mesh is nearer to a sample than this fraction of a step: no triangle vanishes."""
ULPS = 8
"""Nor nearer than so many last places of its coordinates in single precision."""
MOST_NEAREST = 0.05
"""Where that would be more than this fraction of a step, single precision cannot hold the mesh."""


@dataclass(frozen=True, slots=True)
class Region:
    """A parallelepiped divided evenly along its three edges; the surface reaches all its faces.

    Attributes
    ----------
    origin : float64, shape (3,)
        Fractional.
    edges : float64, shape (3, 3)
        As rows, fractional.
    divisions : tuple of int
        Steps along each edge: one fewer than planes of samples, both faces counted.
    labels : tuple of str
        A name for each edge.
    """

    origin: FloatArray
    edges: FloatArray
    divisions: tuple[int, ...]
    labels: tuple[str, ...]

    @classmethod
    def of(cls, sampling: AffineGrid, *, include_end: bool = False) -> Region:
        """The region that a grid samples.

        Parameters
        ----------
        include_end : bool
            Whether the grid's last samples lie on the far faces; else they lie one step before them, as
            those of a whole cell do.

        Raises
        ------
        InputError
            The grid has not three axes in three dimensions.
        """
        if sampling.steps.shape != (3, 3):
            raise InputError(
                "cell",
                f"spans {sampling.steps.shape[1]} dimensions, in which a level has no surface",
                "give a crystal's cell; for planes and lines ask for a slice or a profile",
            )
        divisions = tuple(count - include_end for count in sampling.shape)
        edges = sampling.steps * np.array(divisions)[:, None]
        whole = np.rint(edges)
        exact = (np.abs(edges - whole) <= WHOLE).all(axis=1)
        edges = np.where(exact[:, None], whole, edges)
        return cls(sampling.origin, edges, divisions, sampling.labels)

    @property
    def wrapped(self) -> tuple[bool, ...]:
        """Along which edges the field repeats, so that the far face is a copy of the near one."""
        return tuple(bool((edge == np.rint(edge)).all()) for edge in self.edges)

    @property
    def planes(self) -> tuple[int, ...]:
        """Planes of samples along each edge, both faces counted."""
        return tuple(count + 1 for count in self.divisions)

    def sampling(self) -> AffineGrid:
        """The samples to compute: a far face that repeats the near one is left out."""
        shape = tuple(count + (not wrapped) for count, wrapped in zip(self.divisions, self.wrapped, strict=True))
        return AffineGrid(self.origin, self._steps(), shape, self.labels, (0.0, 0.0, 0.0))

    def steps(self, lattice: Lattice) -> FloatArray:
        """Cartesian step vectors as rows, Å."""
        return lattice.to_cartesian(self._steps())

    def spacing(self, lattice: Lattice) -> tuple[float, ...]:
        """Lengths of the steps, Å."""
        return tuple(math.hypot(*step) for step in self.steps(lattice).tolist())

    def volume(self, lattice: Lattice) -> float:
        """Å³."""
        return abs(float(np.linalg.det(lattice.to_cartesian(self.edges))))

    def nearest(self, lattice: Lattice) -> float:
        """Fraction of a step that the vertices of a mesh keep away from samples.

        Raises
        ------
        InputError
            The steps are too short for coordinates of that size in single precision.
        """
        corners = self.origin + np.array(list(itertools.product((0.0, 1.0), repeat=3))) @ self.edges
        place = float(np.spacing(np.float32(np.abs(lattice.to_cartesian(corners)).max())))
        share = ULPS * place / min(self.spacing(lattice))
        if share > MOST_NEAREST:
            raise InputError(
                "origin",
                f"lies so far out that coordinates of single precision are {place:.2g} Å apart there, too far for "
                f"steps of {min(self.spacing(lattice)):.2g} Å",
                "choose a region nearer to the origin, or longer steps",
            )
        return max(NEAREST, share)

    def coarser(self, factor: float) -> Region:
        """The same region in steps longer by `factor` or more; in the same steps where none can be made longer."""
        return replace(
            self, divisions=tuple(_fewer(n, factor, w) for n, w in zip(self.divisions, self.wrapped, strict=True))
        )

    def _steps(self) -> FloatArray:
        return np.asarray(self.edges / np.array(self.divisions)[:, None])


def _fewer(count: int, factor: float, wrapped: bool) -> int:
    wanted = max(math.floor(count / factor), 1)
    if wrapped:
        wanted = int(fft.prev_fast_len(wanted, real=True))
    return min(count, max(FEWEST, wanted))

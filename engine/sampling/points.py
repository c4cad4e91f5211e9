"""Free points."""

from __future__ import annotations

from numpy.typing import ArrayLike

from engine.lattice import Lattice
from engine.sampling.grids import FreePoints
from engine.sampling.positions import Coordinates, as_fractional_rows


def points(lattice: Lattice, positions: ArrayLike, *, coordinates: Coordinates = "fractional") -> FreePoints:
    """Samples at the given positions, shape (M, d).

    Raises
    ------
    InputError
        Not rows of d finite numbers, or none at all.
    """
    return FreePoints(as_fractional_rows(lattice, positions, coordinates, "positions"))

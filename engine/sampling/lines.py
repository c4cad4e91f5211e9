"""Lines: between two points, along a lattice direction, along the normal of a lattice plane."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import ArrayLike

from engine.arrays import FloatArray, as_count, as_indices, as_positive
from engine.lattice import Lattice
from engine.sampling.grids import AffineGrid
from engine.sampling.positions import Coordinates, as_fractional, refuse_null


def line(
    lattice: Lattice,
    start: ArrayLike,
    end: ArrayLike,
    samples: int,
    *,
    include_end: bool = True,
    coordinates: Coordinates = "fractional",
) -> AffineGrid:
    """Evenly spaced samples from `start` to `end`.

    Parameters
    ----------
    start, end : array_like, shape (d,)
        Fractional, or Cartesian in Å.
    samples : int
    include_end : bool
        Whether the last sample falls on `end`, or one step before it.

    Raises
    ------
    InputError
        The points coincide or are not finite, or too few samples.
    """
    origin = as_fractional(lattice, start, coordinates, "from")
    span = as_fractional(lattice, end, coordinates, "to") - origin
    refuse_null(span, "to")
    return _line(origin, span, as_count(samples, "samples", least=2), include_end)


def lattice_line(
    lattice: Lattice,
    direction: ArrayLike,
    samples: int,
    *,
    origin: ArrayLike | None = None,
    include_end: bool = True,
    coordinates: Coordinates = "fractional",
) -> AffineGrid:
    """One translation [uvw] along a lattice direction, from `origin` (default: the cell's).

    Raises
    ------
    InputError
        The direction is not integer or zero, or too few samples.
    """
    span = as_indices(direction, lattice.dimension, "along").astype(np.float64)
    start = _origin(lattice, origin, coordinates)
    return _line(start, span, as_count(samples, "samples", least=2), include_end)


def normal_line(
    lattice: Lattice,
    normal: ArrayLike,
    samples: int,
    *,
    length: float | None = None,
    origin: ArrayLike | None = None,
    include_end: bool = True,
    coordinates: Coordinates = "fractional",
) -> AffineGrid:
    """Samples along the normal of the lattice planes (hkl).

    Parameters
    ----------
    normal : array_like, shape (d,)
        Indices of the planes.
    length : float, optional
        Å; by default one repeat, the spacing of the planes with the indices divided by
        their greatest common divisor.

    Raises
    ------
    InputError
        The indices name no plane, the length is not positive, or too few samples.
    """
    indices = as_indices(normal, lattice.dimension, "normal_to")
    primitive = indices // math.gcd(*(int(index) for index in indices))
    wavevector = lattice.wavevectors(primitive[None, :])[0]
    magnitude = float(np.linalg.norm(wavevector))
    extent = 2 * math.pi / magnitude if length is None else as_positive(length, "length", "Å")
    span = lattice.to_fractional(wavevector / magnitude * extent)
    start = _origin(lattice, origin, coordinates)
    return _line(start, span, as_count(samples, "samples", least=2), include_end)


def _origin(lattice: Lattice, origin: ArrayLike | None, coordinates: Coordinates) -> FloatArray:
    if origin is None:
        return np.zeros(lattice.dimension)
    return as_fractional(lattice, origin, coordinates, "origin")


def _line(origin: FloatArray, span: FloatArray, samples: int, include_end: bool) -> AffineGrid:
    steps = span / (samples - 1 if include_end else samples)
    return AffineGrid(origin, steps[None, :], (samples,), ("distance",), (0.0,))

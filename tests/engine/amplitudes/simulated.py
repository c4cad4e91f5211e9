"""Reflections whose true intensities are drawn from Wilson's distributions, with known scale and B.

The distributions are drawn from numpy's own generators: exponential (acentric), χ² with one degree
of freedom (centric), the mean of two exponentials (perfect twin).
"""

from __future__ import annotations

import numpy as np

from engine.lattice import Lattice
from engine.reflections import Reflections

CELL = Lattice.from_parameters(11.3, 14.9, 18.4, 82.0, 97.0, 106.0)


def half_sphere(lattice=CELL, d_min=1.5, d_max=np.inf):
    """Indices of one of each Friedel pair with d_min ≤ d < d_max, shape (N, d)."""
    reach = [int(length / d_min) + 1 for length in lattice.lengths]
    grid = np.meshgrid(*[np.arange(-n, n + 1) for n in reach], indexing="ij")
    indices = np.stack([axis.ravel() for axis in grid], axis=1).astype(np.int64)
    # Forward: the last index other than zero is positive.
    last = np.zeros(len(indices), dtype=np.int64)
    for column in indices.T:
        last = np.where(column != 0, column, last)
    indices = indices[last > 0]
    spacing = lattice.spacings(indices)
    return indices[(spacing >= d_min) & (spacing < d_max)]


def reflections(indices, observed, sigma=None, *, lattice=CELL, quantity="intensity", scale="arbitrary"):
    """A set with the rows numbered from 0."""
    return Reflections(
        lattice=lattice,
        indices=np.asarray(indices, dtype=np.int64),
        quantity=quantity,
        observed=np.asarray(observed, dtype=float),
        sigma=None if sigma is None else np.asarray(sigma, dtype=float),
        phase=None,
        phase_sigma=None,
        merit=None,
        row=np.arange(len(observed)),
        scale=scale,
    )


def stack(observed, sigma=None, *, period=60.0, **more):
    """Orders 1, 2, … of a layer stack."""
    return reflections(
        np.arange(1, len(observed) + 1)[:, None], observed, sigma, lattice=Lattice.from_period(period), **more
    )


def wilson_z(rng, centric):
    """z of unit mean, exponential or χ²₁; bool (N,) -> (N,)."""
    return np.where(centric, rng.normal(size=centric.size) ** 2, rng.exponential(size=centric.size))


def twinned_z(rng, size):
    """z of a perfect twin of acentric crystals."""
    return 0.5 * (rng.exponential(size=size) + rng.exponential(size=size))

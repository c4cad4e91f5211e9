"""Coefficient sets of a stated size for the benchmarks; random values, seeded."""

from __future__ import annotations

import numpy as np

from engine.arrays import IntArray
from engine.lattice import Lattice
from engine.series import Series
from tests.samples import half_within


def cubic_sphere(count: int, fineness: int) -> Series:
    """All indices with d ≥ d_min, of a cubic cell that `count` steps of d_min/fineness divide."""
    radius = count // fineness
    axis = np.arange(-radius, radius + 1)
    h, k, l = np.meshgrid(axis, axis, np.arange(radius + 1), indexing="ij")
    inside = (h**2 + k**2 + l**2 <= radius**2) & ((l > 0) | (k > 0) | ((k == 0) & (h >= 0)))
    lattice = Lattice.from_parameters(*[0.3 * count] * 3, 90, 90, 90)
    return _random(lattice, np.stack([h[inside], k[inside], l[inside]], axis=1))


def triclinic(count: int) -> Series:
    """About `count` terms, both of each Friedel pair counted, of a triclinic cell out to 1 Å."""
    # Terms in a sphere: (4π/3) V / d³.
    edge = (count * 3 / (4 * np.pi) / 0.87) ** (1 / 3)
    lattice = Lattice.from_parameters(0.9 * edge, edge, 1.1 * edge, 80, 95, 110)
    return _random(lattice, half_within(lattice, 1.0))


def _random(lattice: Lattice, indices: IntArray) -> Series:
    generator = np.random.default_rng(20)
    values = generator.normal(size=len(indices)) + 1j * generator.normal(size=len(indices))
    values[~indices.any(axis=1)] = 1.0
    return Series(lattice, np.asfortranarray(indices), values, real=True)

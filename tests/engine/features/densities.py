"""Sets with known extrema, and plain derivatives of their sums; nothing here is the engine's."""

from __future__ import annotations

import itertools
from dataclasses import replace

import numpy as np

from engine import Columns, assemble
from tests.engine.symmetry.crystals import atoms_of, cell_of, structure_factors
from tests.strategies import LATTICES, listing

SMALL = {1: (9,), 2: (3, 4), 3: (1, 2, 2)}
"""Largest indices of small random sets."""
EVERY = {1: ("maximum", "minimum"), 2: ("maximum", "minimum", "saddle"), 3: ("maximum", "minimum", "saddle")}


def random_set(dimension, seed, reach=None, **more):
    """A set of random coefficients with no symmetry, and its complete list."""
    made = listing(LATTICES[dimension], seed=seed, reach=reach or SMALL[dimension])
    return replace(made.coefficients(), **more), made


def sphere(lattice, d_min):
    """All indices with d ≥ d_min, zero among them."""
    reach = [int(length / d_min) + 2 for length in lattice.lengths]
    every = np.array(list(itertools.product(*(range(-n, n + 1) for n in reach))), dtype=np.int64)
    lengths = np.linalg.norm(every @ np.linalg.inv(lattice.vectors).T, axis=1)
    return every[lengths <= 1 / d_min], lengths[lengths <= 1 / d_min]


def gaussian_atoms(lattice, positions, strengths, b, d_min, sigma=None):
    """Gaussian atoms: F = Σ f exp(−B s²) exp(2πi h·x), all with d ≥ d_min; σ of F the same for all."""
    indices, inverse = sphere(lattice, d_min)
    factors = structure_factors(indices, np.asarray(strengths), np.asarray(positions)) * np.exp(-b * inverse**2 / 4)
    return assemble(
        lattice,
        Columns(
            indices=tuple(indices.T),
            real=factors.real,
            imag=factors.imag,
            sigma=None if sigma is None else np.full(len(factors), float(sigma)),
        ),
        values="structure_factor",
    )


def symmetric_set(group, seed=0, d_min=1.8, volume=6.0, sigma=0.5, count=1):
    """Gaussian atoms at general positions and their equivalents; the set knows its group."""
    lattice = cell_of(group, seed, volume_per_axis=volume)
    strengths, positions = atoms_of(group, count, seed)
    made = gaussian_atoms(lattice, positions, strengths, 6.0, d_min, sigma)
    # Absent ones are zero but for rounding: they have no phase that an error could follow.
    present = np.abs(made.values) > 1e-10 * np.abs(made.values).max()
    return replace(made.select(present), group=group)


def plain_jet(made, x):
    """Value, gradient and Hessian at one fractional position, by a plain sum over the complete list."""
    waves = 2 * np.pi * made.indices @ np.linalg.inv(made.lattice.vectors).T
    terms = made.values * np.exp(2j * np.pi * (made.indices @ x))
    hessian = -np.einsum("n,ni,nj->ij", terms, waves, waves).real
    return terms.sum().real, (1j * terms @ waves).real, hessian


def complete(coefficients):
    """Indices and values of both of each Friedel pair of a set."""
    others = coefficients.indices.any(axis=1)
    indices = np.concatenate([coefficients.indices, -coefficients.indices[others]])
    return indices, np.concatenate([coefficients.values, coefficients.values[others].conj()])


def apart(lattice, first, second):
    """Distances (Å) from each of first to each of second, over 3^d neighbouring cells; (M, K)."""
    gap = np.asarray(first)[:, None] - np.asarray(second)[None]
    gap = gap - np.rint(gap)
    cells = np.array(list(itertools.product((-1, 0, 1), repeat=lattice.dimension)))
    return np.linalg.norm((gap[:, :, None] + cells) @ lattice.vectors, axis=3).min(axis=2)


def newton(indices, values, lattice, start, steps=6):
    """Positions of critical points near `start` (M, d) for draws of values (D, N) of a complete list: (D, M, d)."""
    waves = 2 * np.pi * indices @ np.linalg.inv(lattice.vectors).T
    place = np.broadcast_to(start, (len(values), *start.shape)).copy()
    back = np.linalg.inv(lattice.vectors)
    for _ in range(steps):
        terms = values[:, None] * np.exp(2j * np.pi * (place @ indices.T))
        gradient = (1j * terms @ waves).real
        products = (waves[:, :, None] * waves[:, None, :]).reshape(len(waves), -1)
        hessian = -(terms @ products).real.reshape(*gradient.shape, -1)
        place -= np.linalg.solve(hessian, gradient[..., None])[..., 0] @ back
    return place

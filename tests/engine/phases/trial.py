"""Structures and plain sums that the tests of phases share; nothing of the engine's arithmetic."""

from __future__ import annotations

import cmath
import itertools
import math

import numpy as np

from engine.lattice import Lattice
from engine.reflections import Reflections

CELL = (11.3, 12.1, 13.4, 82.0, 97.0, 103.0)
"""A triclinic cell, Å and degrees."""
SCREWS = (
    np.array([np.eye(3), np.diag([-1, -1, 1]), np.diag([-1, 1, -1]), np.diag([1, -1, -1])]),
    np.array([[0, 0, 0], [0.5, 0, 0.5], [0, 0.5, 0.5], [0.5, 0.5, 0]]),
)
"""Operations of P2₁2₁2₁, International Tables A No. 19."""
INVERSION = (np.array([np.eye(3), -np.eye(3)]), np.zeros((2, 3)))


def sphere(lattice, d_min, *, half=True):
    """All indices but zero with d ≥ d_min; one of each pair ±h where `half`."""
    reach = [int(length / d_min) + 1 for length in lattice.lengths]
    every = np.array(list(itertools.product(*(range(-n, n + 1) for n in reach))), dtype=np.int64)
    every = every[every.any(axis=1)]
    if half:
        every = every[[next(x for x in reversed(row) if x) > 0 for row in every.tolist()]]
    return every[2 * np.pi / np.linalg.norm(every @ lattice.reciprocal, axis=1) >= d_min]


def scattered(count, seed, lattice, apart=1.2):
    """Fractional positions at random, no two closer than `apart` Å, images counted."""
    rng = np.random.default_rng(seed)
    kept = np.empty((0, 3))
    while len(kept) < count:
        new = rng.random(3)
        gap = kept - new
        if not np.any(np.linalg.norm((gap - np.rint(gap)) @ lattice.vectors, axis=1) < apart):
            kept = np.concatenate([kept, new[None]])
    return kept


def plain_factors(indices, s, atoms, form_factor):
    """F(h) = Σ f o exp(−B s²) exp(+2πi h·x), term by term; atoms (name, x, occupancy, B)."""
    tables = {name: form_factor(name, s) for name in {atom[0] for atom in atoms}}
    made = []
    for row, (h, one) in enumerate(zip(indices.tolist(), s.tolist(), strict=True)):
        total = 0j
        for name, x, occupancy, b in atoms:
            turns = math.fsum(i * float(c) for i, c in zip(h, x, strict=True))
            total += tables[name][row] * occupancy * math.exp(-b * one * one) * cmath.exp(2j * math.pi * turns)
        made.append(total)
    return np.array(made)


def whole_cell(position, rotations, translations):
    """Distinct images of a position in the cell, one by one."""
    found = []
    for r, t in zip(rotations, translations, strict=True):
        image = np.mod(r @ position + t, 1.0)
        if all(np.abs((image - other) - np.rint(image - other)).max() > 1e-4 for other in found):
            found.append(image)
    return found


def classes(indices, rotations, translations):
    """(centric, ε) of each reflection for operations without centring: conventions, section 3."""
    centric, epsilon = [], []
    for h in indices:
        images = [tuple(h @ r) for r in rotations]
        centric.append(tuple(-h) in images)
        epsilon.append(sum(image == tuple(h) for image in images))
    return np.array(centric), np.array(epsilon, dtype=np.float64)


def measured(lattice, indices, amplitude, *, sigma=None, scale="absolute", quantity="amplitude"):
    """Reflections without phases."""
    return Reflections(
        lattice=lattice,
        indices=indices,
        quantity=quantity,
        observed=np.asarray(amplitude, dtype=np.float64),
        sigma=sigma,
        phase=None,
        phase_sigma=None,
        merit=None,
        row=np.arange(len(indices)),
        scale=scale,
    )


def triclinic():
    return Lattice.from_parameters(*CELL)

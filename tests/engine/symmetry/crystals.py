"""What the tests of symmetry share: cells, plain structure factors, plain orbits.

Nothing here uses the engine's symmetry beyond the bare matrices of a group, and those are
compared with the library's database in tests/external/test_space_groups.py.
"""

from __future__ import annotations

import itertools

import numpy as np

from engine import Lattice
from engine.reflections import Reflections


def cell_of(group, seed=0, volume_per_axis=9.0):
    """A lattice with the group's symmetry and no more: the mean of Rᵀ G R over the operations."""
    d = group.dimension
    rng = np.random.default_rng(seed)
    rough = np.eye(d) * volume_per_axis * rng.uniform(0.8, 1.25, d) + rng.uniform(-1, 1, (d, d))
    metric = rough @ rough.T
    return Lattice.from_vectors(np.linalg.cholesky(np.mean([r.T @ metric @ r for r in group.rotations], axis=0)))


def atoms_of(group, count=3, seed=0):
    """Every image of `count` atoms at general positions: strengths (n,), fractional (n, d)."""
    rng = np.random.default_rng(seed)
    sites, strengths = rng.random((count, group.dimension)), rng.uniform(5, 20, count)
    images = [r @ x + t for x in sites for r, t in zip(group.rotations, group.translations, strict=True)]
    return np.repeat(strengths, group.order), np.array(images)


def structure_factors(indices, strengths, positions):
    """F(h) = Σ f exp(2πi h·x), the sum written out."""
    return np.exp(2j * np.pi * (np.asarray(indices) @ positions.T)) @ strengths


def indices_within(reach, zero=False):
    """All indices out to the reach of each axis; (N, d)."""
    every = np.array(list(itertools.product(*(range(-n, n + 1) for n in reach))), dtype=np.int64)
    return every if zero else every[every.any(axis=1)]


def plain_orbit(h, group, friedel):
    """The set of equivalents of one reflection, tuple by tuple."""
    made = set(map(tuple, (h @ group.rotations).tolist()))
    return made | {tuple(-v for v in m) for m in made} if friedel else made


def plain_asymmetric(indices, group, friedel):
    """One index of each orbit that is not absent, found one by one, whichever comes first."""
    met, kept = set(), []
    for h in indices:
        if tuple(h.tolist()) in met:
            continue
        met |= plain_orbit(h, group, friedel)
        if not plain_absent(h, group):
            kept.append(h)
    return np.array(kept, dtype=np.int64)


def plain_absent(h, group):
    """Some operation keeps h and moves its phase; translations are multiples of 1/24."""
    for r, t in zip(group.rotations, group.translations, strict=True):
        turns = float(h @ t)
        if np.array_equal(h @ r, h) and abs(turns - round(turns)) > 0.01:
            return True
    return False


def reflections_of(lattice, indices, values=None, *, observed=None, sigma=None, quantity="amplitude", **columns):
    """Reflections with the amplitudes and phases of complex values, or with given strengths."""
    indices = np.asfortranarray(np.asarray(indices, dtype=np.int64).reshape(-1, lattice.dimension))
    phase = None if values is None else np.angle(values)
    observed = np.abs(values) if observed is None else np.asarray(observed, dtype=np.float64)
    made = {"phase": phase, "phase_sigma": None, "merit": None, "row": np.arange(len(indices)), "scale": "arbitrary"}
    return Reflections(
        lattice=lattice,
        indices=indices,
        quantity=quantity,
        observed=observed,
        sigma=None if sigma is None else np.broadcast_to(np.asarray(sigma, dtype=np.float64), observed.shape).copy(),
        **(made | columns),
    )


def complex_of(reflections):
    """F of reflections that carry amplitude and phase."""
    return reflections.observed * np.exp(1j * reflections.phase)

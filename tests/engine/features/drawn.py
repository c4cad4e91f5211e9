"""Sets with uncertainties and draws of their errors, in plain numpy.

An error of an amplitude along the phasor and one of the phase across it, of each Friedel pair by
itself: nothing of the engine's propagation is used.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from tests.strategies import LATTICES, listing


def measured(dimension, *, seed=3, relative=0.02, phase=0.01, reach=None, zero=True, scale=1.0):
    """A random set with σ's of amplitudes and phases."""
    made = listing(LATTICES[dimension], seed=seed, reach=reach, zero=zero).coefficients(unit="e/Å³")
    return uncertain(replace(made, values=made.values * scale), relative=relative, phase=phase, seed=seed)


def uncertain(coefficients, *, relative=0.02, phase=0.01, seed=1):
    """The set with σ's, different from term to term, none of the zero term."""
    rng = np.random.default_rng(seed)
    waves = coefficients.indices.any(axis=1)
    size = np.abs(coefficients.values).mean()
    return replace(
        coefficients,
        sigma=np.where(waves, relative * size * rng.uniform(0.5, 1.5, coefficients.count), 0.0),
        phase_sigma=np.where(waves, phase * rng.uniform(0.5, 1.5, coefficients.count), 0.0),
    )


def draws(coefficients, count, seed=7):
    """Values of the coefficients with errors, shape (count, N)."""
    rng = np.random.default_rng(seed)
    shape = (count, coefficients.count)
    amplitude = np.abs(coefficients.values) + coefficients.sigma * rng.normal(size=shape)
    phase = np.angle(coefficients.values) + coefficients.phase_sigma * rng.normal(size=shape)
    return amplitude * np.exp(1j * phase)


def doubled(coefficients):
    """Indices and weights such that n = Re Σ weight·value·exp(2πi m·x)."""
    return coefficients.indices, np.where(coefficients.indices.any(axis=1), 2.0, 1.0)

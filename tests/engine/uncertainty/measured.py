"""Measured sets with their symmetry, and what a change of each measured value does to a sum of cosines.

The sums are plain NumPy over the expanded reflections; nothing of `engine.uncertainty` is used here.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from engine import CoefficientSet, Lattice
from engine.phases import coefficient_set
from engine.reflections import Reflections
from engine.symmetry import Group, classify, expand, plane_group, space_group, stack_group, unique_reflections

TRICLINIC = Lattice.from_parameters(5, 6, 7, 80, 95, 100)
ORTHORHOMBIC = Lattice.from_parameters(5, 6, 7, 90, 90, 90)
CUBIC = Lattice.from_parameters(6, 6, 6, 90, 90, 90)
GENERAL = [[0.13, 0.41, 0.22], [0.07, 0.31, 0.83], [0.62, 0.19, 0.47]]


@dataclass(frozen=True, eq=False)
class Measured:
    """An asymmetric set of M reflections, and the full set that symmetry makes of it."""

    group: Group
    reflections: Reflections
    real: bool
    mean: float | None
    scale_sigma: float
    centric: np.ndarray

    @property
    def lattice(self) -> Lattice:
        return self.reflections.lattice

    def full(self, turned: float = 0.0) -> Reflections:
        """All equivalents; the phases of acentric reflections turned beforehand, radians."""
        phase = self.reflections.phase + np.where(self.centric, 0.0, turned)
        return expand(replace(self.reflections, phase=phase), self.group, friedel=self.real).reflections

    def coefficients(self, amplitude=None, phase=None) -> CoefficientSet:
        """The engine's set, or that of other amplitudes (of any sign) and phases."""
        given = self.reflections
        if amplitude is not None:
            phase = given.phase if phase is None else phase
            phase = np.where(amplitude < 0, phase + np.pi, phase)
            given = replace(given, observed=np.abs(amplitude), phase=phase)
        full = expand(given, self.group, friedel=self.real).reflections
        made = coefficient_set(full, mean=self.mean, density="real" if self.real else "complex")
        return replace(made, group=self.group, scale_sigma=self.scale_sigma)

    def sums(self, positions, multiply=None, *, turned=0.0, phaseless=False) -> np.ndarray:
        """What each reflection, with an amplitude of 1, adds to the field at each position: (M, K).

        `multiply` gives the factor on n_m from the indices m, (N, d) -> (N,).
        """
        full = self.full(turned)
        m = -full.indices
        factors = np.ones(len(m)) if multiply is None else multiply(m)
        phase = np.zeros(len(m)) if phaseless else full.phase
        waves = np.exp(1j * (phase[:, None] + 2 * np.pi * m @ np.asarray(positions, dtype=float).T))
        waves = waves * factors[:, None] / self.lattice.volume
        if self.real:
            waves = np.where(m.any(axis=1), 2.0, 1.0)[:, None] * waves.real
        made = np.zeros((self.reflections.count, waves.shape[1]), dtype=waves.dtype)
        np.add.at(made, full.row, waves)
        return made


def measured(
    group,
    lattice,
    d_min,
    *,
    seed=0,
    sigma=0.1,
    phase_sigma=None,
    kappa=None,
    real=True,
    mean=None,
    zero=False,
    scale_sigma=0.0,
) -> Measured:
    """Random reflections with σ = `sigma` times the amplitude times a number from 0.5 to 1.5.

    `phase_sigma` (radians) and `kappa` (of von Mises distributions; figures of merit are made of it) are varied
    alike from reflection to reflection.
    """
    rng = np.random.default_rng(seed)
    unique = unique_reflections(lattice, group, d_min, friedel=real)
    if zero:
        unique = np.asfortranarray(np.concatenate([unique, np.zeros((1, lattice.dimension), dtype=np.int64)]))
    count = len(unique)
    kinds = classify(unique, group)
    centric = kinds.centric if real else np.zeros(count, dtype=bool)
    restricted = kinds.restricted_phase + np.pi * rng.integers(0, 2, count)
    phase = np.where(centric, restricted, rng.uniform(-np.pi, np.pi, count))
    amplitude = rng.exponential(10, count) + 2
    vary = rng.uniform(0.5, 1.5, (3, count))
    merit = None
    if kappa is not None:
        from scipy.special import ive

        kappas = kappa * vary[2]
        merit = np.where(centric, np.tanh(kappas), ive(1, kappas) / ive(0, kappas))
    reflections = Reflections(
        lattice=lattice,
        indices=unique,
        quantity="amplitude",
        observed=amplitude,
        sigma=None if sigma is None else sigma * vary[0] * amplitude,
        phase=phase,
        phase_sigma=None if phase_sigma is None else phase_sigma * vary[1],
        merit=merit,
        row=np.arange(count),
        scale="arbitrary",
    )
    return Measured(group, reflections, real, mean, scale_sigma, centric)


def drawn(given: Measured, count: int, seed=1):
    """`count` draws of the amplitudes and of the phases' deviations: (count, M) each.

    Deviations follow wrapped normal distributions where phases have a σ, those of von Mises where they have figures
    of merit; centric reflections change sign with the probability that has the same ⟨cos δ⟩.
    """
    from engine.phases import concentration_of_merit

    rng = np.random.default_rng(seed)
    r = given.reflections
    shape = (count, r.count)
    amplitude = np.tile(r.observed, (count, 1))
    if r.sigma is not None:
        amplitude = amplitude + r.sigma * rng.normal(size=shape)
    if r.phase_sigma is not None:
        deviation = r.phase_sigma * rng.normal(size=shape)
        resultant = np.exp(-(r.phase_sigma**2) / 2)
    elif r.merit is not None:
        deviation = rng.vonmises(0.0, np.broadcast_to(concentration_of_merit(r.merit), shape))
        resultant = r.merit
    else:
        return amplitude, np.zeros(shape)
    flipped = np.where(rng.random(shape) < (1 - resultant) / 2, np.pi, 0.0)
    return amplitude, np.where(given.centric, flipped, deviation)


def simulated(given: Measured, amplitude, deviation, positions, multiply=None) -> np.ndarray:
    """The field of every draw, the zero term left aside: (draws, K)."""
    straight = given.sums(positions, multiply)
    made = (amplitude * np.cos(deviation)) @ straight
    if deviation.any():
        made = made + (amplitude * np.where(given.centric, 0, np.sin(deviation))) @ given.sums(
            positions, multiply, turned=np.pi / 2
        )
    return made


def assert_spread(draws, sigma, deviations=5.0, allowance=0.0):
    """The draws' standard deviations are σ, within so many of the standard errors that their number leaves.

    The relative standard error of a standard deviation is √((β − 1)/4N), β the kurtosis: 1/√(2N) for normal draws.
    """
    draws = draws.reshape(len(draws), -1)
    sigma = np.asarray(sigma, dtype=float).reshape(-1)
    apart = np.abs(draws - draws.mean(axis=0)) ** 2
    variance = apart.mean(axis=0)
    # A field that does not vary at a point of high symmetry.
    still = variance <= 1e-24 * variance.max()
    assert not still.all()
    # The root magnifies what rounding leaves of nothing.
    assert np.all(sigma[still] <= 1e-6 * sigma.max())
    kurtosis = (apart**2).mean(axis=0)[~still] / variance[~still] ** 2
    error = np.sqrt((kurtosis - 1) / (4 * len(draws)))
    ratio = np.sqrt(variance[~still]) / sigma[~still]
    assert np.all(np.abs(ratio - 1) < deviations * error + allowance), (ratio, error)


def crystals():
    """Name -> group, lattice, d_min, positions: general ones, then those on symmetry elements."""
    x = 0.17
    hexagonal = Lattice.from_planar_parameters(9, 9, 120)
    return {
        "P1": (space_group("P1"), TRICLINIC, 2.6, GENERAL),
        "P-1": (space_group("P-1"), TRICLINIC, 2.6, [*GENERAL, [0, 0, 0], [0.5, 0, 0.5]]),
        "P212121": (space_group("P212121"), ORTHORHOMBIC, 1.9, [*GENERAL, [0.25, 0, 0.3]]),
        "P41212": (
            space_group("P41212"),
            Lattice.from_parameters(6, 6, 7, 90, 90, 90),
            1.6,
            [*GENERAL, [0.19, 0.19, 0]],
        ),
        "Pa-3": (space_group("Pa-3"), CUBIC, 1.1, [*GENERAL, [0, 0, 0], [0.5, 0.5, 0.5], [x, x, x]]),
        "Pm-3m": (
            space_group("Pm-3m"),
            CUBIC,
            1.0,
            [*GENERAL, [0, 0, 0], [x, x, x], [x, 0, 0], [x, x, 0], [0.5, 0, 0]],
        ),
        "p2gg": (plane_group("p2gg"), Lattice.from_planar_parameters(9, 12, 90), 1.4, [[0.13, 0.41], [0, 0], [0.5, 0]]),
        "p3": (plane_group("p3"), hexagonal, 1.3, [[0.13, 0.41], [0, 0], [1 / 3, 2 / 3]]),
        "p6mm": (plane_group("p6mm"), hexagonal, 1.0, [[0.13, 0.41], [0, 0], [1 / 3, 2 / 3], [0.5, 0], [x, 2 * x]]),
        "stack": (stack_group("1"), Lattice.from_period(30), 1.6, [[0.13], [0.4], [0.77]]),
        "centred stack": (stack_group("-1"), Lattice.from_period(30), 1.6, [[0.13], [0], [0.5]]),
    }


CRYSTALS = crystals()

"""Figure of merit, best phase and best coefficient of phase probabilities.

The centroid of a distribution, ⟨exp(iφ)⟩ = m exp(iφ_best), gives the figure of merit m and the best
phase; m|F| exp(iφ_best) is the coefficient with the least mean square error in the map, and
|F|²(1 − m²) the power it leaves out (Blow & Crick, Acta Cryst. 12 (1959) 794).
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import ArrayLike

from engine.arrays import ComplexArray, FloatArray, IntArray, as_matrix, as_vector, refuse_rows
from engine.errors import InputError
from engine.phases.concentration import SigmaMeaning, merit_of_concentration, sigma_of_merit
from engine.phases.distributions import PhaseDistribution, relative
from engine.reflections import Reflections

SHARPEST = 1.0e6
"""Largest curvature √(A²+B²) + 4√(C²+D²) that is integrated: a peak of a milliradian."""
CHUNK = 1 << 20
"""Probabilities held at a time."""


@dataclass(frozen=True, slots=True, kw_only=True)
class PhaseSummary:
    """Centroids of phase distributions.

    Attributes
    ----------
    phase : float64, shape (N,)
        Best phase φ_best, radians in −π…π; NaN where m = 0, no phase being better than another.
    merit : float64, shape (N,)
        m = |⟨exp(iφ)⟩|, 0…1.
    """

    phase: FloatArray
    merit: FloatArray

    def phase_sigma(self, meaning: SigmaMeaning = "circular") -> FloatArray:
        """Standard deviation of the phase, radians, infinite where m = 0; see `sigma_of_merit`."""
        return sigma_of_merit(self.merit, meaning)

    def best(self, amplitude: FloatArray) -> ComplexArray:
        """Best coefficients m|F| exp(iφ_best); amplitude (N,) -> (N,)."""
        return np.asarray(self.merit * amplitude * np.exp(1j * np.where(self.merit > 0, self.phase, 0.0)))

    def unused_power(self, amplitude: FloatArray) -> FloatArray:
        """|F|²(1 − m²), what the best coefficients leave out of the map; (N,) -> (N,)."""
        return np.asarray(amplitude**2 * (1 - self.merit) * (1 + self.merit))

    def applied(self, reflections: Reflections) -> Reflections:
        """The reflections with these phases, figures of merit and circular σ (NaN where m = 0).

        Raises
        ------
        InputError
            The numbers of reflections differ.
        """
        if reflections.count != self.merit.size:
            raise InputError(
                "phases", f"are {self.merit.size} for {reflections.count} reflections", "give one for each reflection"
            )
        sigma = self.phase_sigma()
        return replace(
            reflections, phase=self.phase, merit=self.merit, phase_sigma=np.where(np.isfinite(sigma), sigma, np.nan)
        )


def summarize(distribution: PhaseDistribution) -> PhaseSummary:
    """Centroids of Hendrickson–Lattman distributions.

    Notes
    -----
    Where C = D = 0 in closed form; for a centric reflection from its two phases; else by the
    trapezoidal rule on the circle, which for a smooth periodic function errs less than any power
    of the step (Trefethen & Weideman, SIAM Rev. 56 (2014) 385), with enough angles for the
    sharpest peak. Accurate to 1e-13, and 1e-16 times the largest coefficient beyond 1000.

    Raises
    ------
    InputError
        Coefficients too large to integrate (see `SHARPEST`).
    """
    c = distribution.coefficients
    centric = distribution.centric
    simple = ~centric & (c[:, 2] == 0) & (c[:, 3] == 0)
    centroid = np.zeros(centric.size, dtype=np.complex128)
    fixed = distribution.restricted[centric]
    # The terms in 2φ are the same for both phases.
    lean = c[centric, 0] * np.cos(fixed) + c[centric, 1] * np.sin(fixed)
    centroid[centric] = np.tanh(lean) * np.exp(1j * fixed)
    length = np.hypot(c[simple, 0], c[simple, 1])
    centroid[simple] = merit_of_concentration(length) * np.exp(1j * np.arctan2(c[simple, 1], c[simple, 0]))
    # With A = B = 0 the distribution repeats after half a turn and the centroid is zero.
    rest = ~centric & ~simple & ((c[:, 0] != 0) | (c[:, 1] != 0))
    if rest.any():
        centroid[rest] = _integrate(c[rest], np.flatnonzero(rest))
    return _summary(centroid, np.zeros(centric.size))


def summarize_table(table: ArrayLike, angles: ArrayLike) -> PhaseSummary:
    """Centroids of tabulated phase probabilities.

    Parameters
    ----------
    table : float, shape (N, K)
        Probability at each angle, up to a factor for each row. A centric reflection has zero
        everywhere but at its two phases.
    angles : float, shape (K,)
        Radians, rising in equal steps 2π/K, one whole turn in all.

    Raises
    ------
    InputError
        Wrong shape, not finite, negative, a row of zeros, angles not equally spaced.
    """
    phi = as_vector(angles, np.asarray(angles).size, "angles")
    given = as_matrix(table, (-1, phi.size), "table")
    step = 2 * np.pi / phi.size
    if phi.size < 2 or np.any(np.abs(np.diff(phi) - step) > 1e-3 * step):
        raise InputError(
            "angles",
            "are not equally spaced over one turn",
            "give K rising angles 2π/K apart, the first not again as the last",
        )
    refuse_rows(given.min(axis=1) < 0, "table", "holds a negative probability", "give probabilities of 0 or more")
    largest = given.max(axis=1, keepdims=True)
    refuse_rows(largest[:, 0] == 0, "table", "is zero throughout", "give at least one probability above 0")
    scaled = given / largest
    centroid = scaled @ np.exp(1j * phi) / scaled.sum(axis=1)
    return _summary(centroid, np.full(given.shape[0], phi.size * np.finfo(np.float64).eps))


def _summary(centroid: ComplexArray, floor: FloatArray) -> PhaseSummary:
    """The centroid in polar form; up to `floor` it is the rounding of a sum that vanishes."""
    length = np.abs(centroid)
    none = length <= floor
    # A sum of K unit vectors may be longer than K by its rounding.
    merit = np.where(none, 0.0, np.minimum(length, 1.0))
    return PhaseSummary(phase=np.where(none, np.nan, np.angle(centroid)), merit=merit)


def _integrate(coefficients: FloatArray, rows: IntArray) -> ComplexArray:
    """⟨exp(iφ)⟩ by the trapezoidal rule; rows of like sharpness share their angles."""
    curvature = np.hypot(coefficients[:, 0], coefficients[:, 1]) + 4 * np.hypot(coefficients[:, 2], coefficients[:, 3])
    sharp = curvature > SHARPEST
    if sharp.any():
        raise InputError.for_rows(
            "coefficients",
            rows[sharp],
            "are too large to be phase information",
            f"give √(A²+B²) + 4√(C²+D²) of at most {SHARPEST:g}",
        )
    # The K-th harmonic of a peak of curvature κ is exp(−K²/2κ) of its mean: 10√κ angles leave e⁻⁵⁰.
    power = np.ceil(np.log2(10 * np.sqrt(curvature) + 40)).astype(np.int64)
    centroid = np.empty(curvature.size, dtype=np.complex128)
    for exponent in np.unique(power).tolist():
        members = np.flatnonzero(power == exponent)
        angles = np.arange(2**exponent) * (2 * np.pi / 2**exponent)
        unit = np.exp(1j * angles)
        for part in np.array_split(members, -(-members.size * angles.size // CHUNK)):
            weight = relative(coefficients[part], angles)
            centroid[part] = weight @ unit / weight.sum(axis=1)
    return centroid

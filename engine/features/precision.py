"""Standard uncertainties of extrema: heights, positions, and what is made of several positions.

A small change δn of a density moves a critical point by δr = −H⁻¹ ∇δn, so that the covariance of its
position is H⁻¹ C H⁻¹ with C that of the gradient there (Cruickshank, Acta Cryst. 2 (1949) 65). Its value
changes by δn, the gradient being zero.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from engine.arrays import ComplexArray, FloatArray, IntArray
from engine.fields import Multipliers
from engine.lattice import Lattice
from engine.sampling.grids import wrapped
from engine.uncertainty.errors import Errors, errors_of
from engine.uncertainty.functionals import PointDerivatives, covariance

PORTION = 512
"""Points, or numbers, whose covariances are computed together."""


@dataclass(frozen=True, slots=True)
class Uncertain:
    """The errors of a field: those of its coefficients, and the factors (N,) that make the field of them."""

    errors: Errors
    factors: FloatArray

    @classmethod
    def of(cls, made: Multipliers) -> Uncertain | None:
        """None where the set has no uncertainties."""
        used = made.used
        if used.sigma is None and used.phase_sigma is None and used.merit is None and not used.scale_sigma:
            return None
        errors = errors_of(used)
        # Of a scalar field the factors are real.
        return cls(errors, np.asarray(made.factors[0][errors.order].real, dtype=np.float64))


@dataclass(frozen=True, slots=True)
class Displacements:
    """Numbers that are linear in the gradients at several points each.

    Attributes
    ----------
    positions : float64, shape (P, d)
        Fractional.
    points : int64, shape (K, T)
        The points that each number depends on.
    weights : float64, shape (K, T, d)
        Number k is Σ_t weights_kt · ∇n(points_kt).
    """

    positions: FloatArray
    points: IntArray
    weights: FloatArray

    @property
    def count(self) -> int:
        return int(self.points.shape[0])

    def factors(self, lattice: Lattice, indices: IntArray) -> ComplexArray:
        needed, local = np.unique(self.points, return_inverse=True)
        waves = np.exp(2j * np.pi * (wrapped(self.positions[needed]) @ indices.T))
        wavevectors = lattice.wavevectors(indices).T
        made = np.zeros((self.count, indices.shape[0]), dtype=np.complex128)
        for point, weight in zip(local.reshape(self.points.shape).T, self.weights.transpose(1, 0, 2), strict=True):
            made += (weight @ wavevectors) * waves[point]
        return np.asarray(1j * made)


def point_covariances(uncertain: Uncertain, positions: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Variance of the value, and covariance of the gradient, at fractional positions (M, d): (M,), (M, d, d)."""
    count, d = positions.shape
    orders = ((), *((axis,) for axis in range(d)))
    made = np.zeros((count, 1 + d, 1 + d))
    for start in range(0, count, PORTION):
        part = positions[start : start + PORTION]
        made[start : start + PORTION] = covariance(
            uncertain.errors, PointDerivatives(part, orders), factors=uncertain.factors, block=1 + d
        )
    return made[:, 0, 0], made[:, 1:, 1:]


def displacement_variances(
    uncertain: Uncertain, positions: FloatArray, points: IntArray, weights: FloatArray
) -> FloatArray:
    """Variances of the numbers of `Displacements`; shape (K,)."""
    made = np.zeros(len(points))
    for start in range(0, len(points), PORTION):
        part = slice(start, start + PORTION)
        wanted = Displacements(positions, points[part], weights[part])
        made[part] = covariance(uncertain.errors, wanted, factors=uncertain.factors, block=1)[:, 0, 0]
    return made

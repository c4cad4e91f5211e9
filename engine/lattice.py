"""Lattices of dimension 1 (layer stack), 2 (planar lattice) and 3 (crystal).

Direct vectors a_j are the rows of ``vectors`` (Å); reciprocal vectors g_i the rows of
``reciprocal`` (Å⁻¹), with g_i · a_j = 2π δ_ij. A position is r = Σ x_j a_j with fractional x,
a reciprocal-lattice vector G = Σ m_i g_i with integer m, so that G·r = 2π m·x.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import ArrayLike

from engine.arrays import FloatArray, IntArray, as_matrix, as_positive
from engine.errors import InputError

SHORTEST = 0.1
LONGEST = 1.0e7
"""Lengths of a direct vector that are believed, Å: below an atom's core, above a millimetre,
a unit has been mistaken."""
FLATTEST = 1.0e-3
"""Smallest believed ratio of the cell's volume to the product of its edge lengths."""


@dataclass(frozen=True, slots=True)
class Lattice:
    """A right-handed lattice; make one with a ``from_...`` constructor.

    Attributes
    ----------
    vectors : float64, shape (d, d)
        Direct vectors as rows, Å, in Cartesian coordinates.
    reciprocal : float64, shape (d, d)
        Reciprocal vectors as rows, Å⁻¹, including the factor 2π.
    volume : float
        Cell volume in Å^d: the period, the cell's area, or its volume.
    """

    vectors: FloatArray
    reciprocal: FloatArray = field(repr=False)
    volume: float

    @property
    def dimension(self) -> int:
        """1, 2 or 3."""
        return int(self.vectors.shape[0])

    @property
    def lengths(self) -> FloatArray:
        """Lengths of the direct vectors, Å, shape (d,)."""
        return np.asarray(np.linalg.norm(self.vectors, axis=1), dtype=np.float64)

    @classmethod
    def from_vectors(cls, vectors: ArrayLike) -> Lattice:
        """Lattice from its direct vectors, rows of a 1×1, 2×2 or 3×3 matrix, Å.

        Raises
        ------
        InputError
            Not square, not finite, lengths out of range, (nearly) linearly dependent, or
            left-handed.
        """
        # A copy: the lattice is for ever, the caller's array is not.
        matrix = as_matrix(vectors, (-1, -1), "vectors").copy()
        d = matrix.shape[0]
        if d > 3 or matrix.shape[1] != d:
            raise InputError("vectors", "is not a 1×1, 2×2 or 3×3 matrix", "give one row per direct vector")
        lengths = [math.hypot(*row) for row in matrix.tolist()]
        for row, length in enumerate(lengths):
            _check_length(length, ("vectors", row))
        volume = float(np.linalg.det(matrix))
        flatness = abs(volume) / float(np.prod(lengths))
        if flatness < FLATTEST:
            raise InputError(
                "vectors",
                f"are linearly dependent or nearly so (volume over product of lengths {flatness:.2g})",
                "give vectors that span a cell",
            )
        if volume < 0:
            raise InputError(
                "vectors",
                "form a left-handed set, in which the sign of every phase would be ambiguous",
                "reverse one vector or exchange two, and change the indices in the same way",
            )
        matrix.setflags(write=False)
        reciprocal = np.asarray(2 * math.pi * np.linalg.inv(matrix).T, dtype=np.float64)
        reciprocal.setflags(write=False)
        return cls(matrix, reciprocal, volume)

    @classmethod
    def from_period(cls, period: float) -> Lattice:
        """Layer stack with the given period, Å.

        Raises
        ------
        InputError
            The period is not a finite length in the believed range.
        """
        _check_length(as_positive(period, "period", "Å"), ("period",))
        return cls.from_vectors([[float(period)]])

    @classmethod
    def from_planar_parameters(cls, a: float, b: float, gamma: float) -> Lattice:
        """Planar lattice from two lengths (Å) and the angle between them (degrees).

        Raises
        ------
        InputError
            A length or the angle is out of range.
        """
        for name, length in (("a", a), ("b", b)):
            _check_length(as_positive(length, name, "Å"), (name,))
        cosine, sine = _cos_sin(_check_angle(gamma, "gamma"))
        if sine < FLATTEST:
            raise InputError("gamma", f"of {gamma}° spans no area", "give an angle well inside 0 and 180")
        return cls.from_vectors([[a, 0.0], [b * cosine, b * sine]])

    @classmethod
    def from_parameters(cls, a: float, b: float, c: float, alpha: float, beta: float, gamma: float) -> Lattice:
        """Crystal lattice from lengths (Å) and angles (degrees).

        a_1 lies along Cartesian x and a_2 in the xy plane (International Tables for
        Crystallography B, chapter 1.1).

        Raises
        ------
        InputError
            A length or angle is out of range, or the three angles cannot meet in one corner.
        """
        for name, length in (("a", a), ("b", b), ("c", c)):
            _check_length(as_positive(length, name, "Å"), (name,))
        cos_alpha, _ = _cos_sin(_check_angle(alpha, "alpha"))
        cos_beta, _ = _cos_sin(_check_angle(beta, "beta"))
        cos_gamma, sin_gamma = _cos_sin(_check_angle(gamma, "gamma"))
        squared = 1 - cos_alpha**2 - cos_beta**2 - cos_gamma**2 + 2 * cos_alpha * cos_beta * cos_gamma
        if squared <= FLATTEST**2:
            raise InputError(
                "alpha",
                f"= {alpha}° with beta = {beta}° and gamma = {gamma}° cannot meet in one corner of a cell",
                "make each angle smaller than the sum of the other two, and the three less than 360 together",
            )
        c_y = c * (cos_alpha - cos_beta * cos_gamma) / sin_gamma
        c_z = c * math.sqrt(squared) / sin_gamma
        return cls.from_vectors([[a, 0.0, 0.0], [b * cos_gamma, b * sin_gamma, 0.0], [c * cos_beta, c_y, c_z]])

    def wavevectors(self, indices: IntArray) -> FloatArray:
        """Cartesian G = Σ m_i g_i, Å⁻¹; indices (N, d) -> (N, d)."""
        # Whole numbers times floating ones would be multiplied without the linear-algebra library.
        return np.asarray(indices.astype(np.float64) @ self.reciprocal)

    def magnitudes(self, indices: IntArray) -> FloatArray:
        """|G| = q in Å⁻¹; indices (N, d) -> (N,)."""
        return np.asarray(np.linalg.norm(self.wavevectors(indices), axis=1), dtype=np.float64)

    def spacings(self, indices: IntArray) -> FloatArray:
        """d = 2π/|G| in Å, infinite for the zero term; indices (N, d) -> (N,)."""
        with np.errstate(divide="ignore"):
            return np.asarray(2 * math.pi / self.magnitudes(indices))

    def sine_over_wavelength(self, indices: IntArray) -> FloatArray:
        """s = sin θ/λ = |G|/4π in Å⁻¹; indices (N, d) -> (N,)."""
        return self.magnitudes(indices) / (4 * math.pi)

    def to_cartesian(self, fractional: FloatArray) -> FloatArray:
        """r = Σ x_j a_j, Å; (..., d) -> (..., d)."""
        return np.asarray(fractional @ self.vectors)

    def to_fractional(self, cartesian: FloatArray) -> FloatArray:
        """x_j = g_j · r / 2π; (..., d) -> (..., d)."""
        return np.asarray(cartesian @ self.reciprocal.T / (2 * math.pi))


def _check_length(length: float, path: tuple[str | int, ...]) -> None:
    if not SHORTEST <= length <= LONGEST:
        raise InputError(
            path,
            f"is {length:g} Å long",
            f"give lengths in Å, between {SHORTEST:g} and {LONGEST:g}",
        )


def _check_angle(angle: float, name: str) -> float:
    value = as_positive(angle, name, "degrees")
    if value >= 180:
        raise InputError(name, f"is {value:g}°", "give degrees between 0 and 180, both excluded")
    return value


def _cos_sin(angle: float) -> tuple[float, float]:
    # 90° and 120° are exact in every cell that has them; libm's cosine of π/2 is 6e-17.
    if angle == 90:
        return 0.0, 1.0
    radians = math.radians(angle)
    if angle in (60, 120):
        return math.copysign(0.5, 90 - angle), math.sin(radians)
    return math.cos(radians), math.sin(radians)

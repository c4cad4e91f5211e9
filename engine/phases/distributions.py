"""What is known of phases: the probabilities of Hendrickson and Lattman.

Any phase information is a density P(φ) ∝ exp(A cos φ + B sin φ + C cos 2φ + D sin 2φ), and that of
independent sources is combined by adding coefficients (Hendrickson & Lattman, Acta Cryst. B26
(1970) 136). `engine.phases.summary` gives their figures of merit and best coefficients.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import ArrayLike

from engine.arrays import BoolArray, FloatArray, as_matrix, as_vector, refuse_rows
from engine.errors import InputError

OFF_RESTRICTION = 0.02
"""How far a phase given for a centric reflection may lie from the two it can have, radians: the
rounding of a phase printed in whole degrees."""


@dataclass(frozen=True, slots=True, kw_only=True)
class PhaseDistribution:
    """Phase probabilities of N reflections, P(φ) ∝ exp(A cos φ + B sin φ + C cos 2φ + D sin 2φ).

    Attributes
    ----------
    coefficients : float64, shape (N, 4)
        A, B, C, D; finite.
    restricted : float64, shape (N,)
        For a centric reflection one of its two possible phases, radians, the other being π
        further; NaN for an acentric one.
    """

    coefficients: FloatArray
    restricted: FloatArray

    @property
    def centric(self) -> BoolArray:
        """Where only two phases are possible, shape (N,)."""
        return ~np.isnan(self.restricted)

    def shifted(self, shift: ArrayLike) -> PhaseDistribution:
        """The distribution of φ + δ.

        A density moved by t has δ = 2π h·t; the reflection hR of an operation x' = Rx + t has
        δ = −2π h·t.

        Parameters
        ----------
        shift : float, shape (N,)
            δ in radians.

        Raises
        ------
        InputError
            Not finite or not N numbers.
        """
        delta = as_vector(shift, self.restricted.size, "shift")
        once = (self.coefficients[:, 0] + 1j * self.coefficients[:, 1]) * np.exp(1j * delta)
        twice = (self.coefficients[:, 2] + 1j * self.coefficients[:, 3]) * np.exp(2j * delta)
        return PhaseDistribution(
            coefficients=np.stack([once.real, once.imag, twice.real, twice.imag], axis=1),
            restricted=self.restricted + delta,
        )

    def mates(self) -> PhaseDistribution:
        """The distribution of −φ, which a real density has at −h: B and D change sign."""
        return PhaseDistribution(coefficients=self.coefficients * [1.0, -1.0, 1.0, -1.0], restricted=-self.restricted)


def hendrickson_lattman(coefficients: ArrayLike, restricted: ArrayLike | None = None) -> PhaseDistribution:
    """Phase probabilities from their four coefficients.

    Parameters
    ----------
    coefficients : float, shape (N, 4)
        A, B, C, D.
    restricted : float, shape (N,), optional
        One of the two possible phases of a centric reflection, radians; NaN for an acentric
        one. All acentric by default.

    Raises
    ------
    InputError
        Wrong shape, a coefficient or a restricted phase that is not finite (NaN aside).
    """
    given = as_matrix(coefficients, (-1, 4), "coefficients").copy()
    return PhaseDistribution(coefficients=given, restricted=_restriction(restricted, given.shape[0]))


def von_mises(phase: ArrayLike, concentration: ArrayLike, restricted: ArrayLike | None = None) -> PhaseDistribution:
    """Phases with one most probable value: A = κ cos φ, B = κ sin φ, C = D = 0.

    Parameters
    ----------
    phase : float, shape (N,)
        Most probable phases, radians.
    concentration : float, shape (N,)
        κ, as `concentration_of_merit` and `concentration_of_sigma` give it.
    restricted : float, shape (N,), optional
        See `hendrickson_lattman`.

    Raises
    ------
    InputError
        Wrong shape; a phase that is not finite, or of a centric reflection and not one of its
        two; κ negative or infinite, a certain phase having no coefficients.
    """
    flat = np.asarray(phase)
    phi = as_vector(phase, flat.size, "phase")
    kappa = np.asarray(concentration, dtype=np.float64)
    refuse_rows(~((kappa >= 0) & np.isfinite(kappa)), "concentration", "is negative or not finite", _UNCERTAIN)
    kappa = as_vector(kappa, phi.size, "concentration")
    fixed = _restriction(restricted, phi.size)
    off = np.abs(np.sin(phi - np.where(np.isnan(fixed), phi, fixed)))
    refuse_rows(
        off > OFF_RESTRICTION,
        "phase",
        "is not one of the two phases of a centric reflection",
        "check the symmetry and the origin, or correct the phase",
    )
    zero = np.zeros_like(phi)
    return PhaseDistribution(
        coefficients=np.stack([kappa * np.cos(phi), kappa * np.sin(phi), zero, zero], axis=1), restricted=fixed
    )


def combine(sources: Sequence[PhaseDistribution]) -> PhaseDistribution:
    """The product of the probabilities of independent sources: their coefficients added.

    Raises
    ------
    InputError
        No source, different numbers of reflections, or restrictions that contradict each other.
    """
    if not sources:
        raise InputError("sources", "is empty", "give at least one source of phases")
    first = sources[0]
    for number, source in enumerate(sources):
        if source.restricted.size != first.restricted.size:
            raise InputError(
                ("sources", number),
                f"has {source.restricted.size} reflections where the first has {first.restricted.size}",
                "give the same reflections in the same order",
            )
        both = source.centric & first.centric
        apart = np.abs(np.sin(np.where(both, source.restricted - first.restricted, 0.0)))
        refuse_rows(
            (source.centric != first.centric) | (apart > OFF_RESTRICTION),
            "sources",
            f"0 and {number} restrict the phase differently",
            "give all sources the same symmetry and origin",
        )
    return replace(first, coefficients=np.sum([source.coefficients for source in sources], axis=0))


def probabilities(distribution: PhaseDistribution, angles: ArrayLike) -> FloatArray:
    """P at the given angles, each row divided by its sum over them.

    Parameters
    ----------
    distribution : PhaseDistribution
        Of N reflections. A centric one is treated as if its phase were free.
    angles : float, shape (K,)
        Radians.

    Returns
    -------
    float64, shape (N, K)

    Raises
    ------
    InputError
        The angles are not a row of finite numbers.
    """
    phi = as_vector(angles, np.asarray(angles).size, "angles")
    table = relative(distribution.coefficients, phi)
    return np.asarray(table / table.sum(axis=1, keepdims=True))


_UNCERTAIN = "give a finite κ of 0 or more, that is a figure of merit below 1 and σ above 0"


def _restriction(restricted: ArrayLike | None, size: int) -> FloatArray:
    if restricted is None:
        return np.full(size, np.nan)
    given = np.array(restricted, dtype=np.float64)
    as_vector(np.where(np.isnan(given), 0.0, given), size, "restricted")
    return given


def relative(coefficients: FloatArray, angles: FloatArray) -> FloatArray:
    """P over its largest value at the angles, so that nothing overflows; (N, 4), (K,) -> (N, K)."""
    waves = np.stack([np.cos(angles), np.sin(angles), np.cos(2 * angles), np.sin(2 * angles)])
    exponent = coefficients @ waves
    exponent -= exponent.max(axis=1, keepdims=True)
    return np.asarray(np.exp(exponent, out=exponent))

"""How strong a term of a density is to be expected, measured or not."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from engine.arrays import FloatArray, IntArray, as_positive
from engine.coefficients import CoefficientSet
from engine.errors import InputError
from engine.scattering import (
    FORM_FACTOR_LIMIT,
    Composition,
    Probe,
    form_factors,
    scattering_lengths,
    sum_of_squares,
)
from engine.symmetry.reflections import classify

UNITS: dict[str, tuple[Probe, float]] = {
    "e/Å³": ("xray", 1.0),
    "fm/Å³": ("neutron", 1.0),
    "10⁻⁶ Å⁻²": ("neutron", 10.0),
}
"""Units of density that a composition can be turned into: probe, and the unit's number in 1/Å³ of F."""
VANISHING = 36.0
"""Exponent of a Gaussian where it has vanished: exp(−36) = 2e-16."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Envelope:
    """Expected root mean square |n_G|, and a bound of it; make one with a ``from_...`` constructor.

    Attributes
    ----------
    b : float
        B of exp(−B s²), Å².
    amplitude : float or None
        Of a bound: its value at s = 0, in the density's unit.
    content : Composition or None
    units : float
        Of a composition: formula units in a cell.
    """

    b: float
    amplitude: float | None = None
    content: Composition | None = None
    units: float = 1.0

    @classmethod
    def from_bound(cls, amplitude: float, b: float) -> Envelope:
        """|n_G| = amplitude · exp(−B s²): taken for the rms as well as for the bound.

        Parameters
        ----------
        amplitude : float
            In the density's unit.
        b : float
            B, Å².

        Raises
        ------
        InputError
            One of the two is not above zero.
        """
        return cls(b=as_positive(b, "b", "Å²"), amplitude=as_positive(amplitude, "amplitude", "the density's unit"))

    @classmethod
    def from_composition(cls, content: Composition, b: float, *, units: float = 1.0) -> Envelope:
        """⟨|F|²⟩ = ε Σ_j f_j² exp(−2B s²) of atoms at random (Wilson, Acta Cryst. 2 (1949) 318).

        Of a crystal alone: a profile or a projection is averaged over an area or a thickness whose
        content would have to be known. X-rays or neutrons by the unit of the density.

        Parameters
        ----------
        content : Composition
            One formula unit.
        b : float
            Overall B, Å².
        units : float
            Formula units in a cell.

        Raises
        ------
        InputError
            A number is not above zero.
        """
        return cls(b=as_positive(b, "b", "Å²"), content=content, units=as_positive(units, "units", "formula units"))

    def check(self, coefficients: CoefficientSet) -> None:
        """Refuse a composition that cannot be turned into the unit of a set's density.

        Raises
        ------
        InputError
            The lattice is not a crystal's, or the unit is not one of a density of electrons or
            scattering lengths.
        """
        if self.content is None:
            return
        if coefficients.lattice.dimension != 3:
            raise InputError(
                "composition",
                "gives the strength of a crystal's terms only: those of a profile or a projection depend on the area "
                "or the thickness that is averaged over",
                "give a bound, amplitude and b",
            )
        if coefficients.unit not in UNITS:
            raise InputError(
                "composition",
                f"cannot be turned into the density's unit, {coefficients.unit}",
                f"give a bound, amplitude and b, or a density in {', '.join(UNITS)}",
            )

    def rms(self, coefficients: CoefficientSet, indices: IntArray) -> FloatArray:
        """Root mean square |n_G| of terms that the set's group does not forbid; indices (M, d) -> (M,).

        With the weight ε, and larger by the root of the number of lattice points in a centred cell,
        whose forbidden terms leave their share to the others.
        """
        square = self.mean_square(coefficients, coefficients.lattice.sine_over_wavelength(indices))
        group = coefficients.group
        if self.content is not None and group is not None:
            square = square * classify(indices, group).epsilon * len(group.centring)
        return np.sqrt(square)

    def mean_square(self, coefficients: CoefficientSet, s: FloatArray) -> FloatArray:
        """⟨|n_G|²⟩ over all terms at s (Å⁻¹), forbidden ones among them; (M,) -> (M,)."""
        if self.content is None:
            return np.asarray(self.bound_at(coefficients, s) ** 2)
        probe, scale = self._scale(coefficients)
        sums = sum_of_squares(self.content, s, units=self.units, probe=probe)
        return np.asarray(sums * np.exp(-2 * self.b * s**2) * scale**2)

    def bound_at(self, coefficients: CoefficientSet, s: FloatArray) -> FloatArray:
        """Largest |n_G| possible at s (Å⁻¹): all atoms in phase, or the bound; (M,) -> (M,)."""
        fall = np.exp(-self.b * s**2)
        if self.content is None:
            return np.asarray((self.amplitude or 0.0) * fall)
        probe, scale = self._scale(coefficients)
        counts = np.asarray(self.content.counts) * self.units
        if probe == "neutron":
            return np.asarray(float(counts @ np.abs(scattering_lengths(self.content.species))) * fall * scale)
        return np.asarray(counts @ np.abs(form_factors(self.content.species, s)) * fall * scale)

    def s_end(self, coefficients: CoefficientSet) -> float:
        """s (Å⁻¹) beyond which nothing is expected: the strength has vanished, or no form factor is known."""
        vanished = math.sqrt(VANISHING / self.b)
        if self.content is None or self._scale(coefficients)[0] == "neutron":
            return vanished
        return min(vanished, FORM_FACTOR_LIMIT)

    def describe(self) -> str:
        """The envelope in words."""
        if self.content is None:
            return f"missing terms are taken as strong as {self.amplitude:g}·exp(−{self.b:g} Å² s²), rms and largest"
        return (
            f"missing terms are taken as strong as those of atoms at random, {self.units:g} × {self.content.formula} "
            f"in the cell with B = {self.b:g} Å²; the largest as that of all atoms in phase"
        )

    def _scale(self, coefficients: CoefficientSet) -> tuple[Probe, float]:
        probe, number = UNITS[coefficients.unit]
        return probe, number / coefficients.lattice.volume

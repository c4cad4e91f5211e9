"""From recorded intensities to |F|²: factors of the geometry of a measurement.

A recorded integrated intensity is |F|² times a factor for each effect, all functions of the glancing
angle θ with sin θ = λ|G|/4π. ``correct`` divides by those the caller names, and by no other.
A factor common to all reflections is left to the scale.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Literal, get_args

import numpy as np
from numpy.typing import ArrayLike
from scipy import special

from engine.amplitudes.checks import as_weights, require_intensities, require_no_zero_term
from engine.arrays import FloatArray, as_choice, as_positive
from engine.errors import InputError
from engine.reflections import Reflections

LorentzKind = Literal["rotation", "powder", "film_whole_arc", "film_part_of_arc"]
BeamProfile = Literal["uniform", "gaussian"]

CM_PER_UM = 1e-4
FWHM_PER_SIGMA = 2 * math.sqrt(2 * math.log(2))


@dataclass(frozen=True, slots=True)
class Lorentz:
    """Time and angle for which a reflection reflects.

    ``rotation``: 1/sin 2θ, a single crystal turned steadily about an axis perpendicular to the
    plane of incidence. ``powder``: 1/(sin²θ cos θ), a fixed piece of the ring of a powder without
    texture. (International Tables for Crystallography C, chapter 6.2.)

    An oriented film in symmetric reflection, whose layers are spread about the surface in a
    mosaic: ``film_whole_arc``, 1/sin 2θ, where the whole mosaic spread is received or rocked
    through; ``film_part_of_arc``, 1/(sin θ sin 2θ), where the detector receives a fixed width of
    an arc whose length grows with |G|. For layer stacks at small angles they are the corrections
    by h and h² of Blaurock & Worthington, Biophys. J. 6 (1966) 305.
    """

    kind: LorentzKind

    def __post_init__(self) -> None:
        as_choice(self.kind, get_args(LorentzKind), "kind")

    def factors(self, theta: FloatArray) -> FloatArray:
        """The factor at θ in radians; (N,) -> (N,)."""
        if self.kind in ("rotation", "film_whole_arc"):
            return 1 / np.sin(2 * theta)
        if self.kind == "powder":
            return 1 / (np.sin(theta) ** 2 * np.cos(theta))
        return 1 / (np.sin(theta) * np.sin(2 * theta))

    def describe(self) -> str:
        """The correction in words."""
        formula = {
            "rotation": "a crystal in rotation, 1/sin 2θ",
            "powder": "a powder, 1/(sin²θ cos θ)",
            "film_whole_arc": "an oriented film with its whole arc received, 1/sin 2θ",
            "film_part_of_arc": "an oriented film with a fixed part of its arc received, 1/(sin θ sin 2θ)",
        }
        return f"Lorentz factor of {formula[self.kind]}"


@dataclass(frozen=True, slots=True, kw_only=True)
class Polarisation:
    """Loss of X-ray intensity by the direction of the electric vector.

    With I_σ and I_π the intensities incident with the electric vector perpendicular to and in the
    plane of diffraction, P = (I_σ + I_π cos²2θ)/(I_σ + I_π); unpolarised, (1 + cos²2θ)/2
    (International Tables for Crystallography C, chapter 6.2).

    Attributes
    ----------
    degree : float
        Of the source, (I_σ − I_π)/(I_σ + I_π), −1…1: 0 for a tube, near 1 for a synchrotron
        source with a vertical plane of diffraction, near −1 with a horizontal one (Kahn et al.,
        J. Appl. Cryst. 15 (1982) 330).
    monochromator_2theta_deg : float, optional
        Scattering angle 2θ_M of a crystal monochromator between source and detector, its plane
        of diffraction that of the sample. It multiplies I_π by cos²2θ_M (mosaic) or
        |cos 2θ_M| (perfect crystal) (Azároff, Acta Cryst. 8 (1955) 701).
    perfect : bool
        Whether the monochromator diffracts as a perfect crystal.
    """

    degree: float = 0.0
    monochromator_2theta_deg: float | None = None
    perfect: bool = False

    def __post_init__(self) -> None:
        if not -1 <= self.degree <= 1:
            raise InputError("degree", "lies outside -1…1", "give (I_σ − I_π)/(I_σ + I_π)")
        if self.monochromator_2theta_deg is not None:
            angle = as_positive(self.monochromator_2theta_deg, "monochromator_2theta_deg", "degrees")
            if angle >= 180:
                raise InputError("monochromator_2theta_deg", f"is {angle:g}°", "give 2θ of the monochromator below 180")
        elif self.perfect:
            raise InputError("perfect", "speaks of a monochromator, whose angle is absent", "give its 2θ")

    def factors(self, theta: FloatArray) -> FloatArray:
        """The factor at θ in radians; (N,) -> (N,)."""
        across, along = (1 + self.degree) / 2, (1 - self.degree) / 2
        if self.monochromator_2theta_deg is not None:
            passed = abs(math.cos(math.radians(self.monochromator_2theta_deg)))
            along *= passed if self.perfect else passed**2
        return (across + along * np.cos(2 * theta) ** 2) / (across + along)

    def describe(self) -> str:
        """The correction in words."""
        source = "an unpolarised source" if self.degree == 0 else f"a source polarised to the degree {self.degree:g}"
        if self.monochromator_2theta_deg is None:
            return f"polarisation factor of {source}"
        crystal = "perfect" if self.perfect else "mosaic"
        return (
            f"polarisation factor of {source} and a {crystal} monochromator at 2θ = {self.monochromator_2theta_deg:g}°"
        )


@dataclass(frozen=True, slots=True, eq=False)
class Multiplicity:
    """Reflections that a powder or a fibre throws together, m, float64, shape (N,)."""

    values: ArrayLike

    def describe(self) -> str:
        """The correction in words."""
        return "multiplicity"


@dataclass(frozen=True, slots=True, kw_only=True)
class FilmAbsorption:
    """Absorption in a flat film in symmetric reflection: 1 − exp(−2μt/sin θ).

    The intensity of a film of thickness t relative to one of infinite thickness, beam smaller
    than the film; 2μt/sin θ for a thin film, with the volume in the beam growing as 1/sin θ
    (International Tables for Crystallography C, chapter 6.3). Without absorption, μ = 0, that
    growth t/sin θ alone.

    Attributes
    ----------
    thickness_um : float
        t in µm.
    mu_per_cm : float
        Linear absorption coefficient μ in cm⁻¹.
    """

    thickness_um: float
    mu_per_cm: float

    def __post_init__(self) -> None:
        as_positive(self.thickness_um, "thickness_um", "µm")
        if self.mu_per_cm != 0:
            as_positive(self.mu_per_cm, "mu_per_cm", "1/cm")

    def factors(self, theta: FloatArray) -> FloatArray:
        """The factor at θ in radians; (N,) -> (N,)."""
        if self.mu_per_cm == 0:
            return 1 / np.sin(theta)
        depth = self.mu_per_cm * self.thickness_um * CM_PER_UM
        return -np.expm1(-2 * depth / np.sin(theta))

    def describe(self) -> str:
        """The correction in words."""
        return (
            f"absorption and irradiated volume of a film of {self.thickness_um:g} µm "
            f"with μ = {self.mu_per_cm:g} cm⁻¹ in symmetric reflection"
        )


@dataclass(frozen=True, slots=True, kw_only=True)
class Footprint:
    """Part of the beam that falls on a sample of length L: a beam of width w lights up w/sin θ.

    ``uniform``: min(1, L sin θ/w). ``gaussian``, w the full width at half maximum:
    erf(L sin θ/(2√2 σ)), σ = w/2.3548. The sample is centred on the beam and turned about its
    own middle (Gibaud, Vignaud & Sinha, Acta Cryst. A49 (1993) 642).

    Attributes
    ----------
    length_mm, width_mm : float
        Of the sample along the beam, and of the beam in the plane of diffraction.
    profile : {"uniform", "gaussian"}
    """

    length_mm: float
    width_mm: float
    profile: BeamProfile = "uniform"

    def __post_init__(self) -> None:
        as_positive(self.length_mm, "length_mm", "mm")
        as_positive(self.width_mm, "width_mm", "mm")
        as_choice(self.profile, get_args(BeamProfile), "profile")

    def factors(self, theta: FloatArray) -> FloatArray:
        """The factor at θ in radians; (N,) -> (N,)."""
        seen = self.length_mm * np.sin(theta) / self.width_mm
        if self.profile == "uniform":
            return np.minimum(1.0, seen)
        return np.asarray(special.erf(seen * FWHM_PER_SIGMA / (2 * math.sqrt(2))))

    def describe(self) -> str:
        """The correction in words."""
        return f"footprint of a {self.profile} beam of {self.width_mm:g} mm on a sample of {self.length_mm:g} mm"


Correction = Lorentz | Polarisation | Multiplicity | FilmAbsorption | Footprint


@dataclass(frozen=True, slots=True, kw_only=True)
class Corrected:
    """Intensities freed of the effects named.

    Attributes
    ----------
    reflections : Reflections
        Intensities and their σ divided by ``factors``. σ holds the uncertainty of the
        recorded intensities, not that of the corrections' parameters.
    factors : float64, shape (N,)
        The product of all factors.
    applied : tuple of str
        The corrections in words, in the order given.
    """

    reflections: Reflections
    factors: FloatArray
    applied: tuple[str, ...]


def glancing_angles(reflections: Reflections, wavelength: float) -> FloatArray:
    """θ in radians, sin θ = λ|G|/4π, at a wavelength in Å; shape (N,).

    Raises
    ------
    InputError
        Reflections beyond the limiting sphere, sin θ > 1.
    """
    length = as_positive(wavelength, "wavelength", "Å")
    sine = length * reflections.lattice.sine_over_wavelength(reflections.indices)
    beyond = np.flatnonzero(sine > 1)
    if beyond.size:
        raise InputError.for_rows(
            "wavelength",
            reflections.row[beyond],
            f"of {length:g} Å cannot reach these reflections (sin θ > 1)",
            "correct the wavelength, the lattice or the indices",
        )
    return np.arcsin(sine)


def correct(reflections: Reflections, wavelength: float, corrections: Sequence[Correction]) -> Corrected:
    """Divide recorded intensities by the product of the factors named.

    Parameters
    ----------
    reflections : Reflections
        Intensities, without the zero term.
    wavelength : float
        Å.
    corrections : sequence of Lorentz, Polarisation, Multiplicity, FilmAbsorption, Footprint
        Each kind at most once.

    Raises
    ------
    InputError
        Amplitudes given, a zero term, reflections out of reach of the wavelength, a kind given
        twice, a multiplicity of the wrong length or not above zero, or a reflection where a
        factor is zero or without bound (2θ = 180° in a Lorentz factor).
    """
    require_intensities(reflections)
    require_no_zero_term(reflections)
    kinds = [type(correction) for correction in corrections]
    for place, kind in enumerate(kinds):
        if kind in kinds[:place]:
            raise InputError(("corrections", place), f"is the second {kind.__name__}", "name each correction once")
    theta = glancing_angles(reflections, wavelength)
    product = np.ones(reflections.count)
    for correction in corrections:
        if isinstance(correction, Multiplicity):
            factors = as_weights(correction.values, reflections, "multiplicity")
        else:
            with np.errstate(divide="ignore"):
                factors = correction.factors(theta)
        # Backscattering: rounding leaves sin 2θ at 1e-16 instead of zero.
        bad = np.flatnonzero(~((factors > 1e-12) & (factors < 1e12)))
        if bad.size:
            raise InputError.for_rows(
                "corrections",
                reflections.row[bad],
                f"cannot be undone: {correction.describe()} is zero or without bound there",
                "leave these reflections out",
            )
        product *= factors
    return Corrected(
        reflections=reflections.scaled(1 / product),
        factors=product,
        applied=tuple(correction.describe() for correction in corrections),
    )

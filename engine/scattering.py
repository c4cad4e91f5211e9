"""Scattering by atoms and by compositions: form factors, scattering lengths, mean densities.

The tables are those of the library periodictable. Form factors f0: Waasmaier & Kirfel, Acta
Cryst. A51 (1995) 416. Dispersion f′ and f″: Henke, Gullikson & Davis, At. Data Nucl. Data
Tables 54 (1993) 181, with later revisions. Bound coherent scattering lengths: Rauch &
Waschkowski (Neutron Data Booklet, 2003) with later measurements, which lie within 0.05 % of
Sears, Neutron News 3 (1992) 26, for the light elements.
"""

from __future__ import annotations

import re
from collections.abc import Sequence
from dataclasses import dataclass
from functools import lru_cache
from typing import Any, Literal, get_args

import numpy as np
import periodictable
from pyparsing import ParseBaseException

from engine.arrays import FloatArray, as_choice, as_matrix, as_positive
from engine.errors import InputError

Probe = Literal["xray", "neutron"]

AVOGADRO = 6.02214076e23
"""1/mol, exact since 2019 (SI)."""
FORM_FACTOR_LIMIT = 6.0
"""s in Å⁻¹ up to which the form factors were fitted."""
LONGEST_FORMULA = 1000
DEEPEST_FORMULA = 20
"""Characters, and brackets within brackets, of a formula that is still read."""

_SPECIES = re.compile(r"([A-Z][a-z]?)(?:\[(\d{1,3})\])?(?:\{(\d{0,2})([+-])\}|(\d{0,2})([+-]))?")
_FORMULA = re.compile(r"[A-Za-z0-9.()\[\]{}+\- ]+")
_UNIT = re.compile(r"(?<![A-Za-z])[a-z]")


@dataclass(frozen=True, slots=True)
class Composition:
    """What a formula unit or a cell consists of; make one with ``composition``.

    Attributes
    ----------
    formula : str
        As it was given.
    species : tuple of str
        Distinct, as ``O``, ``D``, ``O[18]``, ``Fe2+``.
    counts : tuple of float
        How many of each.
    """

    formula: str
    species: tuple[str, ...]
    counts: tuple[float, ...]

    @property
    def electrons(self) -> float:
        """Σ (Z − charge): F(000) for X-rays of one formula unit, dispersion left out."""
        return self._sum([_atom(name).number - _atom(name).charge for name in self.species])

    @property
    def molar_mass(self) -> float:
        """Mass of one mole of formula units, g."""
        return self._sum([_atom(name).mass for name in self.species])

    @property
    def scattering_length(self) -> float:
        """Σ b of one formula unit, fm.

        Raises
        ------
        InputError
            A species has no measured scattering length.
        """
        return self._sum(scattering_lengths(self.species).tolist())

    def _sum(self, values: Sequence[float]) -> float:
        return float(np.dot(self.counts, values))


def composition(formula: str) -> Composition:
    """Read a formula such as ``SiO2``, ``Ca(CO3)``, ``D2O``, ``CaCO3+6H2O``, ``Fe{2+}O``, ``O[18]``.

    An isotope stands in square brackets, a charge in braces; a number in front multiplies what
    follows. Mixtures and densities are no part of a formula.

    Raises
    ------
    InputError
        Not a formula, too long, empty, or with an element, isotope or charge that does not exist.
    """
    if len(formula) > LONGEST_FORMULA or not _FORMULA.fullmatch(formula):
        raise InputError(
            "formula", "is not a chemical formula", "write elements with counts, such as SiO2, Ca(CO3), D2O, Fe{2+}O"
        )
    if _UNIT.search(formula):
        raise InputError("formula", f"= {formula!r} has a name in small letters", "begin every element with a capital")
    if _depth(formula) > DEEPEST_FORMULA:
        raise InputError("formula", "has too many brackets within brackets", "write it out")
    try:
        # A copy that owes nothing to a density or a name kept by the library.
        atoms: dict[Any, float] = dict(periodictable.formula(formula).atoms)
    except ParseBaseException as fault:
        raise InputError(
            "formula",
            f"= {formula!r} cannot be read at character {fault.loc + 1}",
            "write elements with counts, isotopes as O[18], charges as Fe{2+}",
        ) from fault
    except (ValueError, KeyError) as fault:
        raise InputError(
            "formula",
            f"= {formula!r} names what does not exist ({fault.args[0]})",
            "correct the element, isotope or charge",
        ) from fault
    held = {_name(atom): float(count) for atom, count in atoms.items() if count > 0}
    if not held:
        raise InputError("formula", f"= {formula!r} holds no atom", "name at least one element with a count above zero")
    return Composition(formula, tuple(held), tuple(held.values()))


def form_factors(species: Sequence[str], s: FloatArray) -> FloatArray:
    """f0 of free atoms and ions, electrons, at s = sin θ/λ in Å⁻¹; (n species), (N,) -> (n, N).

    Σ a_i exp(−b_i s²) + c with the coefficients of Waasmaier & Kirfel, Acta Cryst. A51 (1995) 416.

    Raises
    ------
    InputError
        Unknown species, an ion the table does not hold, or s outside 0…6 Å⁻¹.
    """
    grid = as_matrix(np.atleast_2d(np.asarray(s)), (1, -1), "s")[0]
    beyond = np.flatnonzero((grid < 0) | (grid > FORM_FACTOR_LIMIT))
    if beyond.size:
        raise InputError.for_rows(
            "s", beyond, f"lies outside 0…{FORM_FACTOR_LIMIT:g} Å⁻¹, where form factors are known", "leave these out"
        )
    factors = np.empty((len(species), grid.size))
    for row, name in enumerate(species):
        try:
            factors[row] = _atom(name).xray.f0(4 * np.pi * grid)
        except KeyError as fault:
            raise InputError(
                ("species", row),
                f"{name} has no tabulated form factor",
                "use the neutral atom or a charge that is tabulated",
            ) from fault
    return factors


def dispersion(species: Sequence[str], wavelength: float) -> tuple[FloatArray, FloatArray]:
    """f′ and f″ in electrons at a wavelength in Å, two arrays of shape (n species,).

    f′ = f₁ − Z from f₁, f₂ of Henke, Gullikson & Davis (1993), the relativistic correction
    included in f′; f″ = f₂ > 0 absorbs. Near an edge they hold for free atoms only.

    Raises
    ------
    InputError
        Unknown species, no table for it, or a wavelength outside its table.
    """
    length = as_positive(wavelength, "wavelength", "Å")
    real, imaginary = np.empty(len(species)), np.empty(len(species))
    for row, name in enumerate(species):
        atom = _atom(name)
        first, second = atom.xray.scattering_factors(wavelength=length)
        if first is None or not np.isfinite(first) or not np.isfinite(second):
            raise InputError(
                ("species", row),
                f"{name} has no tabulated dispersion at {length:g} Å",
                "leave dispersion out or give f0 alone",
            )
        real[row], imaginary[row] = first - atom.number, second
    return real, imaginary


def scattering_lengths(species: Sequence[str]) -> FloatArray:
    """Bound coherent neutron scattering lengths b, fm, shape (n species,).

    The real part at thermal energies. The few nuclei with a resonance there (see ``resonant``)
    have lengths that change with the wavelength, which these are not.

    Raises
    ------
    InputError
        Unknown species, or none has been measured.
    """
    lengths = np.empty(len(species))
    for row, name in enumerate(species):
        value = _atom(name).neutron.b_c
        if value is None:
            raise InputError(
                ("species", row), f"{name} has no measured scattering length", "name an isotope that has one"
            )
        lengths[row] = value
    return lengths


def resonant(species: Sequence[str]) -> tuple[str, ...]:
    """Those whose scattering length depends on the wavelength by a thermal resonance."""
    return tuple(name for name in species if _atom(name).neutron.is_energy_dependent)


def sum_of_squares(
    content: Composition, s: FloatArray, *, units: float = 1.0, probe: Probe = "xray", wavelength: float | None = None
) -> FloatArray:
    """Σ_j |f_j|² over `units` formula units at s (Å⁻¹, shape (N,)), electrons² or fm²; shape (N,).

    The mean intensity of atoms at random (Wilson, Nature 150 (1942) 152). For X-rays f = f0, or
    f0 + f′ + i f″ where a wavelength (Å) is given; for neutrons f = b.

    Raises
    ------
    InputError
        As ``form_factors``, ``dispersion`` and ``scattering_lengths``; unknown probe, or a
        wavelength given for neutrons.
    """
    as_choice(probe, get_args(Probe), "probe")
    counts = np.asarray(content.counts) * as_positive(units, "units", "formula units")
    if probe == "neutron":
        if wavelength is not None:
            raise InputError("wavelength", "has no meaning for scattering lengths", "leave it out")
        return np.full(np.shape(s), counts @ scattering_lengths(content.species) ** 2)
    factors = form_factors(content.species, s)
    if wavelength is None:
        return np.asarray(counts @ factors**2)
    real, imaginary = dispersion(content.species, wavelength)
    return np.asarray(counts @ ((factors + real[:, None]) ** 2 + imaginary[:, None] ** 2))


def zero_term(content: Composition, *, units: float = 1.0, probe: Probe = "xray") -> float:
    """F(000) of a cell that holds `units` formula units: electrons, or fm for neutrons.

    Raises
    ------
    InputError
        Unknown probe, units not above zero, or no measured scattering length.
    """
    as_choice(probe, get_args(Probe), "probe")
    unit = content.electrons if probe == "xray" else content.scattering_length
    return unit * as_positive(units, "units", "formula units")


def mean_density(
    content: Composition, *, mass_density: float | None = None, volume: float | None = None, probe: Probe = "xray"
) -> float:
    """Electron density, e/Å³, or neutron scattering-length density, 10⁻⁶ Å⁻².

    Parameters
    ----------
    content : Composition
        One formula unit.
    mass_density : float, optional
        g/cm³.
    volume : float, optional
        Å³ a formula unit. One of the two is wanted.

    Raises
    ------
    InputError
        Neither or both given, not above zero, or as ``zero_term``.
    """
    if (mass_density is None) == (volume is None):
        raise InputError("mass_density", "or volume, one of the two, decides a density", "give exactly one")
    if mass_density is not None:
        room = content.molar_mass / (as_positive(mass_density, "mass_density", "g/cm³") * AVOGADRO) * 1e24
    else:
        room = as_positive(volume or 0.0, "volume", "Å³")
    # 1 fm/Å³ = 10⁻⁵ Å⁻².
    return zero_term(content, probe=probe) / room * (1.0 if probe == "xray" else 10.0)


@lru_cache(maxsize=1024)
def _atom(name: str) -> Any:  # noqa: ANN401  (the library's atoms, ions and isotopes share no declared type)
    match = _SPECIES.fullmatch(name)
    if match is None:
        raise InputError("species", f"{name!r} is not an atom or ion", "write O, D, O[18] or Fe2+")
    symbol, isotope, *charge = match.groups()
    try:
        atom: Any = periodictable.elements.symbol(symbol)
        if isotope:
            atom = atom[int(isotope)]
        sign = charge[1] or charge[3]
        if sign:
            size = int(charge[0] or charge[2] or 1)
            atom = atom.ion[size if sign == "+" else -size]
    except (ValueError, KeyError) as fault:
        raise InputError("species", f"{name!r} does not exist", "correct the element, isotope or charge") from fault
    return atom


def _name(atom: Any) -> str:  # noqa: ANN401
    isotope = getattr(atom, "isotope", None)
    charge = f"{abs(atom.charge)}{'+' if atom.charge > 0 else '-'}" if atom.charge else ""
    element = (
        "D" if atom.number == 1 and isotope == 2 else atom.element.symbol if atom.charge or isotope else atom.symbol
    )
    return f"{element}{'' if isotope is None or element == 'D' else f'[{isotope}]'}{charge}"


def _depth(formula: str) -> int:
    steps = [1 if character in "([{" else -1 if character in ")]}" else 0 for character in formula]
    return int(np.cumsum(steps).max())

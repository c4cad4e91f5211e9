"""Parts of a trial stack: sheets of atoms and uniform slabs."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from engine.arrays import FloatArray, as_positive
from engine.errors import InputError
from engine.scattering import Composition, Probe, composition, form_factors, scattering_lengths

NEUTRON_UNIT = 10.0
"""1 fm/Å² = 10⁻⁵ Å⁻¹ = 10 × 10⁻⁶ Å⁻¹."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Plane:
    """A sheet of atoms; make one with `of`.

    Attributes
    ----------
    name : str
    position : float
        z of its centre, Å.
    width : float
        Root mean square displacement u along z, Å.
    occupancy : float
        Factor on the strength.
    content : Composition or None
        What `area` holds, in its stead `strength`.
    area : float
        Å².
    strength : float
        Density times Å, the same at all q.
    displaced : float
        Volume a unit area that it takes from the background, Å.
    central : bool
        Centred on a mirror of its stack and so its own image; `Stack.of` finds it.
    """

    name: str
    position: float
    width: float = 0.0
    occupancy: float = 1.0
    content: Composition | None = None
    area: float = 1.0
    strength: float = 0.0
    displaced: float = 0.0
    central: bool = False

    @classmethod
    def of(
        cls,
        name: str,
        position: float,
        *,
        width: float = 0.0,
        occupancy: float = 1.0,
        formula: str | None = None,
        area: float | None = None,
        strength: float | None = None,
        displaced: float = 0.0,
    ) -> Plane:
        """A sheet of atoms, of a formula on an area (Å²) or of a strength (density times Å).

        Raises
        ------
        InputError
            Neither or both of formula and strength, a formula without area, numbers out of range.
        """
        if (formula is None) == (strength is None):
            raise InputError(("parts", name), "has not exactly one of formula and strength", "give one of the two")
        if formula is not None and area is None:
            raise InputError(("parts", name, "area"), "is absent", "give the area in Å² that holds the formula")
        refuse_not_finite(name, position=position, strength=strength or 0.0, displaced=displaced)
        _refuse_negative(name, width=width, occupancy=occupancy, displaced=displaced)
        return cls(
            name=_name(name),
            position=float(position),
            width=float(width),
            occupancy=float(occupancy),
            content=None if formula is None else composition(formula),
            area=1.0 if area is None else as_positive(area, ("parts", name, "area"), "Å²"),
            strength=float(strength or 0.0),
            displaced=float(displaced),
        )


@dataclass(frozen=True, slots=True, kw_only=True)
class Slab:
    """A uniform layer; make one with `between`.

    Attributes
    ----------
    name : str
    position : float
        z of its centre, Å.
    thickness : float
        Å.
    density : float
    roughness : float
        Root mean square, of both edges, Å.
    central : bool
        Centred on a mirror of its stack and so its own image; `Stack.of` finds it.
    """

    name: str
    position: float
    thickness: float
    density: float
    roughness: float = 0.0
    central: bool = False

    @classmethod
    def between(cls, name: str, lower: float, upper: float, *, density: float, roughness: float = 0.0) -> Slab:
        """A uniform layer between two edges, Å.

        Raises
        ------
        InputError
            The upper edge is not above the lower, numbers out of range.
        """
        refuse_not_finite(name, lower=lower, upper=upper, density=density)
        _refuse_negative(name, roughness=roughness)
        if not upper > lower:
            raise InputError(("parts", name, "upper"), "is not above the lower edge", "exchange the two")
        return cls(
            name=_name(name),
            position=(float(lower) + float(upper)) / 2,
            thickness=float(upper) - float(lower),
            density=float(density),
            roughness=float(roughness),
        )


Part = Plane | Slab
REFINABLE: dict[type[Plane] | type[Slab], tuple[str, ...]] = {
    Plane: ("position", "width", "occupancy", "strength"),
    Slab: ("position", "thickness", "density", "roughness"),
}
"""Numbers of a part that can be changed one by one."""
NEVER_NEGATIVE = ("width", "occupancy", "thickness", "roughness", "scale")


def strengths(part: Plane, s: FloatArray, probe: Probe) -> FloatArray:
    """Strength of a plane at s (Å⁻¹, shape (n,)), density times Å, occupancy aside; shape (n,)."""
    if part.content is None:
        return np.full(s.size, part.strength)
    counts = np.asarray(part.content.counts) / part.area
    if probe == "xray":
        return np.asarray(counts @ form_factors(part.content.species, s))
    return np.full(s.size, NEUTRON_UNIT * float(counts @ scattering_lengths(part.content.species)))


def _name(name: str) -> str:
    if not name or "." in name:
        raise InputError("parts", f"holds the name {name!r}", "give names without a point in them")
    return name


def refuse_not_finite(name: str, **numbers: float) -> None:
    """Refuse numbers of a part that are not finite."""
    for member, number in numbers.items():
        if not math.isfinite(number):
            raise InputError(("parts", name, member), "is not a finite number", "give a finite number")


def _refuse_negative(name: str, **numbers: float) -> None:
    for member, number in numbers.items():
        if not 0 <= number < math.inf:
            raise InputError(("parts", name, member), "is not zero or above", "give a number of 0 or more")

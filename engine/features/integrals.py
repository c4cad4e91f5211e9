"""Integrals of a density over regions, in closed form, with their covariance.

∫ n dV over a region is Σ_G n_G t_G, t_G the region's measure times its transform (`engine.averages`)
and exp(iG·c) of its centre c; no value of a grid enters. Such numbers are linear in the
coefficients, so that their covariance is exact to first order in the errors.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Literal, get_args

import numpy as np
from numpy.typing import ArrayLike

from engine.arrays import ComplexArray, FloatArray, IntArray, as_choice, as_indices, as_positive
from engine.averages import Average, BallAverage, BoxAverage, LateralAverage, SlabAverage
from engine.coefficients import CoefficientSet
from engine.errors import InputError
from engine.features.linear import density_of
from engine.fields import Treatment
from engine.lattice import FLATTEST, Lattice
from engine.sampling.grids import wrapped
from engine.sampling.positions import Coordinates, as_fractional, as_fractional_rows, refuse_null

Per = Literal["area", "cell"]
FM_PER_UNIT = 0.1
"""10⁻⁶ Å in fm: 1 Å = 10⁵ fm."""
_POWERS = {0: "", 1: "Å", 2: "Å²", 3: "Å³"}
_INTEGRATED = {
    "e/Å³": ("e/Å³", "e/Å²", "e/Å", "e"),
    "e/Å²": ("e/Å²", "e/Å", "e", "e·Å"),
    "e/Å": ("e/Å", "e", "e·Å", "e·Å²"),
    "10⁻⁶ Å⁻²": ("10⁻⁶ Å⁻²", "10⁻⁶ Å⁻¹", "10⁻⁶", "10⁻⁶ Å"),
}
_LENGTHS = {1: "fm/Å²", 2: "fm/Å", 3: "fm"}


@dataclass(frozen=True, slots=True)
class IntegralRegion:
    """A region of a lattice; make one with a function of this module.

    Attributes
    ----------
    centre : float64, shape (d,)
        Fractional.
    transforms : tuple of Average
        Their product is the transform of the region about its centre.
    measure : float
        Length, area or volume, Å^power; what the mean is multiplied by.
    power : int
        Of Å in the integral's unit.
    words : str
    """

    centre: FloatArray
    transforms: tuple[Average, ...]
    measure: float
    power: int
    words: str

    def factors(self, lattice: Lattice, indices: IntArray) -> ComplexArray:
        """t_G; indices (N, d) -> (N,)."""
        made = self.measure * np.exp(2j * np.pi * (indices @ wrapped(self.centre)))
        for one in self.transforms:
            made *= one.factors(lattice, indices)
        return np.asarray(made)


@dataclass(frozen=True, slots=True)
class RegionIntegrals:
    """The integrals over K regions, as numbers linear in the coefficients."""

    regions: Sequence[IntegralRegion]

    @property
    def count(self) -> int:
        return len(self.regions)

    def factors(self, lattice: Lattice, indices: IntArray) -> ComplexArray:
        return np.stack([region.factors(lattice, indices) for region in self.regions])


@dataclass(frozen=True, slots=True, kw_only=True)
class Integrals:
    """Integrals of one density over K regions.

    Attributes
    ----------
    regions : tuple of str
        Each in words.
    values : float64, shape (K,)
        In ``units``.
    units : tuple of str
    measures : float64, shape (K,)
        Length, area or volume of each, in ``measure_units``.
    measure_units : tuple of str
    means : float64, shape (K,)
        Mean density in each, in the density's ``unit``.
    unit : str
    sigma, mean_sigma : float64, shape (K,), or None
        Standard uncertainties of the values and of the means.
    covariance : float64, shape (K, K), or None
        Of the values.
    scattering_length : float64, shape (K,), or None
        Of a scattering-length density in 10⁻⁶ Å⁻², the integrals in ``scattering_units``:
        10⁻⁶ Å = 0.1 fm.
    scattering_sigma : float64, shape (K,), or None
    scattering_units : tuple of str
    contains, omits : tuple of str
        What is in the uncertainties, and what is not.
    applied, notes : tuple of str
        What was done to the density; what a reader must know.
    """

    regions: tuple[str, ...]
    values: FloatArray
    units: tuple[str, ...]
    measures: FloatArray
    measure_units: tuple[str, ...]
    means: FloatArray
    unit: str
    sigma: FloatArray | None
    mean_sigma: FloatArray | None
    covariance: FloatArray | None
    scattering_length: FloatArray | None
    scattering_sigma: FloatArray | None
    scattering_units: tuple[str, ...]
    contains: tuple[str, ...]
    omits: tuple[str, ...]
    applied: tuple[str, ...]
    notes: tuple[str, ...]


def integrals(
    coefficients: CoefficientSet, regions: Sequence[IntegralRegion], treatment: Treatment | None = None
) -> Integrals:
    """Integrate a density over regions.

    Parameters
    ----------
    coefficients : CoefficientSet
        Of a real density.
    regions : sequence of IntegralRegion
        On the set's lattice.
    treatment : Treatment, optional
        Of the field density; σ's are those of the treated density.

    Raises
    ------
    InputError
        No region or one of another dimension, or as `engine.features.linear.density_of`.
    """
    if not regions:
        raise InputError("regions", "are none", "give at least one")
    for row, region in enumerate(regions):
        if region.centre.size != coefficients.lattice.dimension:
            raise InputError(
                ("regions", row),
                f"has {region.centre.size} dimensions where the lattice has {coefficients.lattice.dimension}",
                "make the region on the lattice of the set",
            )
    density = density_of(coefficients, treatment)
    functional = RegionIntegrals(tuple(regions))
    values = density.numbers(functional)
    covariance = density.covariance(functional)
    # Rounding may leave less than nothing of a variance that is zero.
    sigma = None if covariance is None else np.sqrt(np.maximum(np.diagonal(covariance), 0.0))
    measures = np.array([region.measure for region in regions])
    scattering = density.unit == "10⁻⁶ Å⁻²"
    return Integrals(
        regions=tuple(region.words for region in regions),
        values=values,
        units=tuple(integrated_unit(density.unit, region.power) for region in regions),
        measures=measures,
        measure_units=tuple(_POWERS[region.power] for region in regions),
        means=values / measures,
        unit=density.unit,
        sigma=sigma,
        mean_sigma=None if sigma is None else sigma / measures,
        covariance=covariance,
        scattering_length=FM_PER_UNIT * values if scattering else None,
        scattering_sigma=FM_PER_UNIT * sigma if scattering and sigma is not None else None,
        scattering_units=tuple(_LENGTHS[region.power] for region in regions) if scattering else (),
        contains=density.contains,
        omits=density.omits,
        applied=density.applied,
        notes=density.notes,
    )


def integrated_unit(unit: str, power: int) -> str:
    """The unit of a density times Å^power, power 0…3."""
    if unit in _INTEGRATED:
        return _INTEGRATED[unit][power]
    return unit if unit == "arbitrary" or not power else f"{unit}·{_POWERS[power]}"


def slab(
    lattice: Lattice,
    normal: ArrayLike,
    start: float,
    end: float,
    *,
    per: Per = "area",
    origin: ArrayLike | None = None,
    coordinates: Coordinates = "fractional",
) -> IntegralRegion:
    """The layer between two planes parallel to (hkl): an interval of the laterally averaged profile.

    Parameters
    ----------
    normal : array_like, shape (d,)
        Indices of the planes.
    start, end : float
        Å along the normal, counted from `origin` (default: the cell's).
    per : {"area", "cell"}
        The integral per unit area of the slab (density × Å), or over one translational unit of the
        planes (density × Å^d), whose area is V/d_hkl with the indices free of a common divisor.

    Raises
    ------
    InputError
        The indices name no plane, or the end does not lie beyond the start.
    """
    as_choice(per, get_args(Per), "per")
    indices = as_indices(normal, lattice.dimension, "normal")
    first, last = _finite(start, "start"), _finite(end, "end")
    if not last > first:
        raise InputError("end", f"= {last:g} Å does not lie beyond the start, {first:g} Å", "exchange the two")
    primitive = indices // math.gcd(*(int(index) for index in indices))
    wavevector = lattice.wavevectors(primitive[None, :])[0]
    magnitude = float(np.linalg.norm(wavevector))
    base = np.zeros(lattice.dimension) if origin is None else as_fractional(lattice, origin, coordinates, "origin")
    middle = lattice.to_fractional(wavevector / magnitude * (0.5 * (first + last)))
    area = 1.0 if per == "area" else lattice.volume * magnitude / (2 * math.pi)
    plane = "(" + " ".join(str(int(index)) for index in indices) + ")"
    return IntegralRegion(
        centre=base + middle,
        transforms=(LateralAverage(indices), SlabAverage(indices, last - first)),
        measure=area * (last - first),
        power=1 if per == "area" else lattice.dimension,
        words=f"from {first:g} to {last:g} Å along the normal of {plane}, "
        + ("per unit area" if per == "area" else "over one translational unit of the planes"),
    )


def segment(
    lattice: Lattice, start: ArrayLike, end: ArrayLike, *, coordinates: Coordinates = "fractional"
) -> IntegralRegion:
    """The straight line between two points; the integral is density × Å.

    Raises
    ------
    InputError
        The points coincide or are not finite.
    """
    first = as_fractional(lattice, start, coordinates, "from")
    span = as_fractional(lattice, end, coordinates, "to") - first
    refuse_null(span, "to")
    return IntegralRegion(
        centre=first + span / 2,
        transforms=(BoxAverage(span[None, :]),),
        measure=float(np.linalg.norm(lattice.to_cartesian(span))),
        power=1,
        words=f"the line from {_point(first)} to {_point(first + span)} (fractional)",
    )


def parallelepiped(
    lattice: Lattice,
    edges: ArrayLike,
    *,
    origin: ArrayLike | None = None,
    centre: ArrayLike | None = None,
    coordinates: Coordinates = "fractional",
) -> IntegralRegion:
    """A parallelepiped; with fewer edges than dimensions a parallelogram or a segment.

    Parameters
    ----------
    edges : array_like, shape (p, d)
        1 to d vectors.
    origin, centre : array_like, shape (d,)
        One of the two: the corner that the edges start from, or the middle.

    Raises
    ------
    InputError
        Both or neither of origin and centre, too many edges, or edges that span no volume.
    """
    rows = as_fractional_rows(lattice, edges, coordinates, "edges")
    if rows.shape[0] > lattice.dimension:
        raise InputError("edges", f"are {rows.shape[0]}", f"give at most {lattice.dimension}")
    for row, edge in enumerate(rows):
        refuse_null(edge, ("edges", row))
    if (origin is None) == (centre is None):
        raise InputError("origin", "and centre are both given or both absent", "give one of the two")
    vectors = lattice.to_cartesian(rows)
    singular = np.linalg.svd(vectors, compute_uv=False)
    measure = float(np.prod(singular))
    if measure < FLATTEST * float(np.prod(np.linalg.norm(vectors, axis=1))):
        raise InputError("edges", "are linearly dependent or nearly so", "give edges that span the region")
    if centre is None:
        middle = as_fractional(lattice, [] if origin is None else origin, coordinates, "origin") + rows.sum(axis=0) / 2
    else:
        middle = as_fractional(lattice, centre, coordinates, "centre")
    spelt = "; ".join(_point(edge) for edge in rows)
    return IntegralRegion(
        centre=middle,
        transforms=(BoxAverage(rows),),
        measure=measure,
        power=rows.shape[0],
        words=f"the box with the edges {spelt} about {_point(middle)} (fractional)",
    )


def ball(
    lattice: Lattice, centre: ArrayLike, radius: float, *, coordinates: Coordinates = "fractional"
) -> IntegralRegion:
    """The interval, disc or ball, by the lattice's dimension, of the given radius (Å) about a point.

    Raises
    ------
    InputError
        The radius is not a positive length, or the centre is not finite.
    """
    reach = as_positive(radius, "radius", "Å")
    d = lattice.dimension
    middle = as_fractional(lattice, centre, coordinates, "centre")
    shape = {1: "interval", 2: "disc", 3: "ball"}[d]
    return IntegralRegion(
        centre=middle,
        transforms=(BallAverage(reach),),
        measure={1: 2 * reach, 2: math.pi * reach**2, 3: 4 / 3 * math.pi * reach**3}[d],
        power=d,
        words=f"the {shape} of radius {reach:g} Å about {_point(middle)} (fractional)",
    )


def _finite(value: float, name: str) -> float:
    if isinstance(value, bool) or not isinstance(value, int | float | np.integer | np.floating):
        raise InputError(name, "is not a number", "give Å")
    number = float(value)
    if not math.isfinite(number):
        raise InputError(name, "is not a finite number", "give Å")
    return number


def _point(fractional: FloatArray) -> str:
    return "(" + ", ".join(f"{x:g}" for x in fractional) + ")"

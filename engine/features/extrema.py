"""Maxima, minima and saddles of a density: where, how high, how sharp, how certain.

search.py finds where they may be, refine.py goes there by Newton's method on the series itself, sites.py
gathers what is the same, critical.py judges by morse.py whether all were found, precision.py says how well each
is known.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Literal, get_args

import numpy as np

from engine.arrays import FloatArray, IntArray, as_choice, as_count, as_positive
from engine.coefficients import CoefficientSet
from engine.errors import InputError
from engine.features.critical import CriticalPoints, critical_points, symmetry_of, varying_field
from engine.features.morse import Morse
from engine.features.precision import Uncertain, point_covariances
from engine.features.regions import Region, images_inside
from engine.features.search import Tally, Wanted
from engine.features.sites import SAME, Domain, orbit, site_symmetry
from engine.fields import PHASES_DECIDE, Treatment, multipliers
from engine.lattice import Lattice
from engine.symmetry.group import Group
from engine.synthesis import Progress

Kind = Literal["maximum", "minimum", "saddle"]
KINDS: tuple[Kind, ...] = get_args(Kind)


@dataclass(frozen=True, slots=True, kw_only=True)
class Extrema:
    """M extrema or saddles, in the order of the kinds asked for; maxima fall, minima and saddles rise.

    Attributes
    ----------
    coefficients : CoefficientSet
    treatment : Treatment
    kind : tuple of str
        ``maximum``, ``minimum`` or ``saddle``.
    index : int64, shape (M,)
        Negative curvatures: d of a maximum, 0 of a minimum.
    fractional : float64, shape (M, d)
        One of each set of equivalents, in [0, 1); within a region each by its position there.
    cartesian : float64, shape (M, d)
        Å.
    value : float64, shape (M,)
    sigma : float64, shape (M,), or None
        Standard uncertainty of the value, first order in the errors; None where the set has none.
    significance : float64, shape (M,), or None
        value/σ, of the value as it stands, the mean included where it is known; infinite where σ is zero.
    curvatures : float64, shape (M, d)
        Eigenvalues of the Hessian, rising, unit/Å².
    directions : float64, shape (M, d, d)
        Their Cartesian unit vectors as rows.
    hessian : float64, shape (M, d, d)
        Cartesian.
    position_covariance : float64, shape (M, d, d), or None
        Å², Cartesian.
    position_sigma : float64, shape (M, d), or None
        Å, along the Cartesian axes; 0 along directions that symmetry fixes.
    largest_position_sigma : float64, shape (M,), or None
        Å, in the direction where it is largest.
    multiplicity : int64, shape (M,)
        Equivalents in the cell by `group`.
    site_order : int64, shape (M,)
        Order of the site symmetry.
    site_symmetry : tuple of tuple of str
        Its operations as coordinates.
    freedom : float64, shape (M, d, d)
        Cartesian projector on the displacements that the site symmetry allows.
    shift : float64, shape (M,)
        Å by which a position was moved onto the symmetry elements it lies on, at most 1e-5.
    group : Group or None
        Operations of the set that the field has as treated.
    found : int
        How many there were of the kinds and with the values asked for, before `most` was applied.
    cell : Morse or None
        The numbers of a whole cell, where all kinds were asked for, everywhere, and with any value.
    region : Region or None
    unit : str
        Of the values.
    tally : Tally
        What the search did.
    contains, omits : tuple of str
        Which errors are in the uncertainties, and which are not.
    applied : tuple of str
        Every treatment, in words.
    notes : tuple of str
        What a reader must know.
    """

    coefficients: CoefficientSet
    treatment: Treatment
    kind: tuple[Kind, ...]
    index: IntArray
    fractional: FloatArray
    cartesian: FloatArray
    value: FloatArray
    sigma: FloatArray | None
    significance: FloatArray | None
    curvatures: FloatArray
    directions: FloatArray
    hessian: FloatArray
    position_covariance: FloatArray | None
    position_sigma: FloatArray | None
    largest_position_sigma: FloatArray | None
    multiplicity: IntArray
    site_order: IntArray
    site_symmetry: tuple[tuple[str, ...], ...]
    freedom: FloatArray
    shift: FloatArray
    group: Group | None
    found: int
    cell: Morse | None
    region: Region | None
    unit: str
    tally: Tally
    contains: tuple[str, ...]
    omits: tuple[str, ...]
    applied: tuple[str, ...]
    notes: tuple[str, ...]

    @property
    def count(self) -> int:
        return int(self.value.size)


def find_extrema(
    coefficients: CoefficientSet,
    treatment: Treatment | None = None,
    *,
    kinds: Sequence[Kind] = ("maximum",),
    region: Region | None = None,
    spacing: float | None = None,
    most: int | None = None,
    least_value: float | None = None,
    greatest_value: float | None = None,
    least_significance: float | None = None,
    with_sigma: bool = True,
    max_bytes: int | None = None,
    progress: Progress | None = None,
) -> Extrema:
    """Maxima, minima and saddles of a real density or of its Laplacian, by Newton's method on the series.

    Parameters
    ----------
    coefficients : CoefficientSet
        Of a real density; with ``group`` equivalents are found once.
    treatment : Treatment, optional
        Its field is ``density`` or ``laplacian``.
    kinds : sequence of {"maximum", "minimum", "saddle"}
    region : Region, optional
        Only those inside, each of several equivalents for itself; else one of each set of equivalents.
    spacing : float, optional
        Å between the samples searched; a sixth of the smallest spacing d by default.
    most : int, optional
        At most so many of each kind, the foremost in its order.
    least_value, greatest_value : float, optional
        Bounds of the value, in the field's unit.
    least_significance : float, optional
        Least |value|/σ.
    with_sigma : bool
        Whether uncertainties are computed where the set has them.
    max_bytes : int, optional
        Bound of the memory for the search.
    progress : callable, optional
        Called with the planes searched and in all; may raise to end the work.

    Raises
    ------
    InputError
        A complex density, another field, coefficients that vary along fewer directions than the lattice
        has, a spacing too coarse, or an option that does not fit the set.
    TooLargeError
        The search would take more than `max_bytes`.
    """
    treatment = treatment or Treatment()
    wanted_kinds = _checked(coefficients, treatment, kinds)
    made = multipliers(coefficients, treatment)
    uncertain = Uncertain.of(made) if with_sigma else None
    if most is not None:
        as_count(most, "most")
    if least_significance is not None:
        as_positive(least_significance, "least_significance", "standard uncertainties")
        if uncertain is None:
            raise InputError("least_significance", "needs uncertainties", "give the column sigma, or leave it out")
    field = varying_field(made)
    lattice, d = coefficients.lattice, coefficients.lattice.dimension
    group, notes = symmetry_of(coefficients, field)
    wanted = Wanted(
        indices=tuple(sorted({index for kind in wanted_kinds for index in _indices(kind, d)})),
        least=_bound(least_value, "least_value", -np.inf),
        greatest=_bound(greatest_value, "greatest_value", np.inf),
        region=region,
        domain=Domain(group) if group.order > 1 and region is None else None,
    )
    points = critical_points(field, wanted, group, spacing=spacing, max_bytes=max_bytes, progress=progress)
    inside = (points.value >= wanted.least) & (points.value <= wanted.greatest)
    rows = np.flatnonzero(inside & np.isin(points.index, wanted.indices))
    fractional = points.sites.fractional[rows]
    if region is not None:
        rows, fractional = _within(region, lattice, group, points, rows)
    order = _ranked(points.index[rows], points.value[rows], fractional, wanted_kinds, d)
    rows, fractional = rows[order], fractional[order]
    if uncertain is not None and least_significance is not None:
        variance = point_covariances(uncertain, fractional)[0]
        strong = np.abs(points.value[rows]) >= least_significance * np.sqrt(variance)
        rows, fractional = rows[strong], fractional[strong]
    found = len(rows)
    kept = _foremost(tuple(_kind(index, d) for index in points.index[rows].tolist()), most)
    rows, fractional = rows[kept], fractional[kept]
    value, hessian = points.value[rows], field.at(fractional).hessian
    curvatures, axes = np.linalg.eigh(hessian)
    symmetry = site_symmetry(lattice, group, fractional)
    sigma = significance = covariance = along = largest = None
    if uncertain is not None:
        variance, slopes = point_covariances(uncertain, fractional)
        sigma = np.sqrt(variance)
        with np.errstate(divide="ignore", invalid="ignore"):
            significance = np.where(sigma > 0, value / sigma, np.copysign(np.inf, value))
        moved = -symmetry.freedom @ np.linalg.inv(hessian)
        covariance = moved @ slopes @ moved.transpose(0, 2, 1)
        along, largest = _squared_roots(covariance)
    shift = points.sites.shift[rows]
    return Extrema(
        coefficients=coefficients,
        treatment=treatment,
        kind=tuple(_kind(index, d) for index in points.index[rows].tolist()),
        index=points.index[rows],
        fractional=fractional,
        cartesian=lattice.to_cartesian(fractional),
        value=value,
        sigma=sigma,
        significance=significance,
        curvatures=curvatures,
        directions=axes.transpose(0, 2, 1),
        hessian=hessian,
        position_covariance=covariance,
        position_sigma=along,
        largest_position_sigma=largest,
        multiplicity=points.sites.multiplicity[rows],
        site_order=symmetry.order,
        site_symmetry=symmetry.operations,
        freedom=symmetry.freedom,
        shift=shift,
        group=group if coefficients.group is not None else None,
        found=found,
        cell=points.cell,
        region=region,
        unit=made.unit,
        tally=points.tally,
        contains=uncertain.errors.contains if uncertain is not None else (),
        omits=uncertain.errors.omits if uncertain is not None else (),
        applied=(*coefficients.history, *made.applied, *((f"within {region.describe()}",) if region else ())),
        notes=(*_notes(coefficients, treatment, int(np.count_nonzero(symmetry.order > 1))), *notes, *points.notes),
    )


def _checked(coefficients: CoefficientSet, treatment: Treatment, kinds: Sequence[Kind]) -> tuple[Kind, ...]:
    if not coefficients.real:
        raise InputError("density", "is complex, and complex values have no order", "give a real density")
    if treatment.field not in ("density", "laplacian"):
        raise InputError("field", f"{treatment.field} is not searched for extrema", "choose density or laplacian")
    if isinstance(kinds, str) or not kinds:
        raise InputError("kinds", "is not a list of kinds", f"give some of {', '.join(KINDS)}")
    for place, kind in enumerate(kinds):
        as_choice(kind, KINDS, ("kinds", place))
        if kind == "saddle" and coefficients.lattice.dimension == 1:
            raise InputError(("kinds", place), "a layer stack has no saddles", "ask for maxima and minima")
    return tuple(dict.fromkeys(kinds))


def _bound(value: float | None, name: str, default: float) -> float:
    if value is None:
        return default
    if isinstance(value, bool) or not isinstance(value, int | float | np.integer | np.floating):
        raise InputError(name, "is not a number", "give a value in the field's unit")
    if not np.isfinite(value):
        raise InputError(name, "is not finite", "give a value in the field's unit")
    return float(value)


def _indices(kind: Kind, dimension: int) -> tuple[int, ...]:
    return {"maximum": (dimension,), "minimum": (0,), "saddle": tuple(range(1, dimension))}[kind]


def _within(
    region: Region, lattice: Lattice, group: Group, points: CriticalPoints, rows: IntArray
) -> tuple[IntArray, FloatArray]:
    """Every equivalent and translate inside a region: rows of the points and positions."""
    of, _, images = orbit(lattice, group, points.sites.fractional[rows])
    chosen, places = images_inside(region, lattice, images)
    return rows[of[chosen]], places


def _ranked(index: IntArray, value: FloatArray, place: FloatArray, kinds: Sequence[Kind], dimension: int) -> IntArray:
    """Kinds in the order asked for; maxima falling, others rising; then by position, so that ties have an order."""
    rank = np.zeros(len(index), dtype=np.int64)
    for number, kind in enumerate(kinds):
        rank[np.isin(index, _indices(kind, dimension))] = number
    # Equal but for rounding is equal.
    scale = max(float(np.abs(value).max(initial=0.0)) * 1e-12, np.finfo(np.float64).tiny)
    rounded = np.rint(np.where(index == dimension, -value, value) / scale)
    return np.lexsort((*np.round(place, 6).T[::-1], rounded, rank)).astype(np.int64)


def _foremost(kind: tuple[Kind, ...], most: int | None) -> IntArray:
    """Rows of the first `most` of each kind."""
    names = np.array(kind)
    chosen = [np.flatnonzero(names == name)[:most] for name in dict.fromkeys(kind)]
    return np.sort(np.concatenate([np.zeros(0, dtype=np.int64), *chosen])).astype(np.int64)


def _kind(index: int, dimension: int) -> Kind:
    return "maximum" if index == dimension else "minimum" if index == 0 else "saddle"


def _notes(coefficients: CoefficientSet, treatment: Treatment, snapped: int) -> list[str]:
    notes = [
        PHASES_DECIDE,
        "The series ends with the coefficients given; among its extrema are ripples of termination.",
    ]
    known = coefficients.phase_known[~coefficients.indices.any(axis=1)]
    if treatment.field == "density" and not (known.size and known.all()):
        notes.append("The zero term is not known: values are relative to the mean density.")
    if coefficients.unphased:
        notes.append(f"{coefficients.unphased} of {coefficients.count} coefficients have no phase and are left out.")
    if snapped:
        notes.append(f"{snapped} positions were moved by at most {SAME:g} Å onto the symmetry elements they lie on.")
    return notes


def _squared_roots(covariance: FloatArray) -> tuple[FloatArray, FloatArray]:
    """σ along the Cartesian axes (M, d) and the largest in any direction (M,)."""
    along = np.sqrt(np.maximum(np.einsum("mii->mi", covariance), 0.0))
    largest = np.linalg.eigvalsh(covariance)[:, -1] if len(covariance) else np.zeros(0)
    return along, np.sqrt(np.maximum(largest, 0.0))

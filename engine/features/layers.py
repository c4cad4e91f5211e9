"""Layers of a density along a line: where they are, how wide, how much is in them, each with its σ.

A layer is the interval between two successive minima of the density along a straight line, often the
normal of a stack's planes with the density averaged laterally. Nothing is fitted; maxima, minima,
points of half height and integrals are those of the exact series.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from typing import Literal, get_args

import numpy as np
from numpy.typing import ArrayLike

from engine.arrays import BoolArray, FloatArray, as_choice
from engine.averages import lateral
from engine.coefficients import CoefficientSet
from engine.errors import InputError
from engine.features.integrals import integrated_unit
from engine.features.layer_numbers import NAMES, LayerNumbers, baseline_of, layer_numbers
from engine.features.linear import Density, density_of
from engine.features.profiles import FINENESS, Line, Parts, line_of, merged, parts_of, profile_of
from engine.fields import Treatment
from engine.sampling import normal_line
from engine.sampling.grids import Sampling

BaselineKind = Literal["minima", "higher_minimum", "zero"]
PLACES = ("position", "centroid", "lower", "upper")
ROUNDING = 1e-9
"""Of the line's length, below which the σ of a place is rounding."""
EXACT_LATTICE = "the uncertainty of the lattice, whose lengths are taken as exact"
FIRST_ORDER = "changes of the numbers beyond first order in the errors, and layers that come or go with them"


@dataclass(frozen=True, slots=True, kw_only=True)
class Layers:
    """M layers in the order in which they lie along the line.

    Places are in Å along the axis of the samples, those of a periodic line within one period for the
    maxima. A number that is undefined is not a number (NaN). σ's are None where the set has no
    uncertainties.

    Attributes
    ----------
    position, position_sigma : float64, shape (M,)
        The maximum.
    centroid, centroid_sigma : float64, shape (M,)
        Of the density above the baseline between the bounds; undefined where that integrates to
        nothing or less.
    height, height_sigma : float64, shape (M,)
        The density at the maximum.
    prominence, prominence_sigma : float64, shape (M,)
        Height above the higher of the neighbouring minima; undefined with neither.
    width, width_sigma : float64, shape (M,)
        Full width at half of the height above the baseline, to the first point of that level on
        either side; undefined where it is not reached between the bounds.
    half_lower, half_upper : float64, shape (M,)
        Those points.
    area, area_sigma : float64, shape (M,)
        Integral of the density between the bounds, in ``area_unit``.
    area_above, area_above_sigma : float64, shape (M,)
        The same of the density above the baseline.
    lower, lower_sigma, upper, upper_sigma : float64, shape (M,)
        The bounds: minima, or ends of the line (σ 0).
    lower_density, lower_density_sigma, upper_density, upper_density_sigma : float64, shape (M,)
        The density there.
    base : float64, shape (M,)
        The baseline below the maximum.
    open : bool, shape (M,)
        A bound is an end of the line: the layer may go on beyond it.
    overlapping : bool, shape (M,)
        A neighbouring minimum lies above half of the maximum, both counted from zero or from the
        level given as baseline: the width and the position are those of the sum of neighbours.
    position_covariance, centroid_covariance, area_covariance : float64, shape (M, M), or None
    unit, area_unit : str
    length : float
        Å of the line analysed.
    periodic : bool
        The line is a whole period, and the last layer joins the first.
    merged : int
        Maxima that stood out too little and were merged with a neighbour.
    contains, omits : tuple of str
        What is in the uncertainties, and what is not.
    applied, assumptions, notes : tuple of str
    """

    position: FloatArray
    position_sigma: FloatArray | None
    centroid: FloatArray
    centroid_sigma: FloatArray | None
    height: FloatArray
    height_sigma: FloatArray | None
    prominence: FloatArray
    prominence_sigma: FloatArray | None
    width: FloatArray
    width_sigma: FloatArray | None
    half_lower: FloatArray
    half_upper: FloatArray
    area: FloatArray
    area_sigma: FloatArray | None
    area_above: FloatArray
    area_above_sigma: FloatArray | None
    lower: FloatArray
    lower_sigma: FloatArray | None
    upper: FloatArray
    upper_sigma: FloatArray | None
    lower_density: FloatArray
    lower_density_sigma: FloatArray | None
    upper_density: FloatArray
    upper_density_sigma: FloatArray | None
    base: FloatArray
    open: BoolArray
    overlapping: BoolArray
    position_covariance: FloatArray | None
    centroid_covariance: FloatArray | None
    area_covariance: FloatArray | None
    unit: str
    area_unit: str
    length: float
    periodic: bool
    merged: int
    contains: tuple[str, ...]
    omits: tuple[str, ...]
    applied: tuple[str, ...]
    assumptions: tuple[str, ...]
    notes: tuple[str, ...]

    @property
    def count(self) -> int:
        return int(self.position.size)


def layers(
    coefficients: CoefficientSet,
    line: Sampling,
    treatment: Treatment | None = None,
    *,
    baseline: BaselineKind | float = "minima",
    least_prominence: float = 0.0,
    least_significance: float = 0.0,
) -> Layers:
    """Find and measure the layers of a density along a line.

    Parameters
    ----------
    coefficients : CoefficientSet
        Of a real density.
    line : AffineGrid
        Of one axis; says where the line runs, not how finely it is searched. Where the density
        repeats itself after the line (with or without its last step) the line is taken as a period.
    treatment : Treatment, optional
        Of the field density; a lateral average makes layers of a crystal's planes.
    baseline : {"minima", "higher_minimum", "zero"} or float
        What heights of half maximum, centroids and ``area_above`` are counted from: the straight
        line through the two minima (of one, where the other bound is an end of the line), the
        higher of them, zero, or a level in the density's unit.
    least_prominence : float
        Maxima that stand out less from their higher neighbouring minimum, in the density's unit,
        are merged with the neighbour beyond it.
    least_significance : float
        The same in standard uncertainties of that height.

    Raises
    ------
    InputError
        The samples are no line, the density is complex or of another field, an option is not a number
        of 0 or more, or a significance is wanted of a set without uncertainties.
    TooLargeError
        The line is too long for its shortest wavelength.
    """
    kind, level = _baseline(baseline)
    least = _least(least_prominence, "least_prominence")
    significance = _least(least_significance, "least_significance")
    density = density_of(coefficients, treatment)
    if significance and density.errors is None:
        raise InputError("least_significance", "is wanted of a set without uncertainties", "give least_prominence")
    where = line_of(density, line)
    profile = profile_of(density, where)
    parts, joined = merged(profile, parts_of(profile), least, significance)
    measured = layer_numbers(profile, parts, baseline_of(parts, kind, level))
    return _described(density, where, parts, measured, joined, kind, level)


def stack_layers(
    coefficients: CoefficientSet,
    normal: ArrayLike,
    treatment: Treatment | None = None,
    *,
    origin: ArrayLike | None = None,
    baseline: BaselineKind | float = "minima",
    least_prominence: float = 0.0,
    least_significance: float = 0.0,
) -> Layers:
    """The layers of one repeat along the normal of (hkl), the density averaged laterally.

    Raises
    ------
    InputError
        The treatment has an average of its own, or as `layers`.
    """
    treatment = treatment or Treatment()
    if treatment.average is not None:
        raise InputError("average", "is lateral already", "leave it out")
    lattice = coefficients.lattice
    return layers(
        coefficients,
        normal_line(lattice, normal, 2, origin=origin),
        replace(treatment, average=lateral(lattice, normal)),
        baseline=baseline,
        least_prominence=least_prominence,
        least_significance=least_significance,
    )


def _baseline(baseline: BaselineKind | float) -> tuple[str, float]:
    if isinstance(baseline, str):
        as_choice(baseline, get_args(BaselineKind), "baseline")
        return ("level", 0.0) if baseline == "zero" else (baseline, 0.0)
    if isinstance(baseline, bool) or not math.isfinite(baseline):
        raise InputError("baseline", "is neither a known word nor a finite number", "give one")
    return "level", float(baseline)


def _least(value: float, name: str) -> float:
    if isinstance(value, bool) or not (math.isfinite(value) and value >= 0):
        raise InputError(name, "is not a number of 0 or more", "give 0 or more")
    return float(value)


def _placed(line: Line, place: FloatArray) -> FloatArray:
    """Places on the axis; what rounding leaves of the start is the start."""
    return line.start + np.where(np.abs(place) < ROUNDING * line.length, 0.0, place)


def _described(
    density: Density, line: Line, parts: Parts, made: LayerNumbers, joined: int, kind: str, level: float
) -> Layers:
    numbers = dict(zip(NAMES, made.values, strict=True))
    sigma: dict[str, FloatArray | None] = dict.fromkeys(NAMES)
    blocks: dict[str, FloatArray | None] = dict.fromkeys(NAMES)
    if made.covariance is not None:
        for row, name in enumerate(NAMES):
            block = made.covariance[row, :, row, :]
            blocks[name] = block
            # Rounding may leave less than nothing of a variance that is zero.
            found = np.sqrt(np.maximum(np.diagonal(block), 0.0))
            # A place on a mirror of the density is exact; what rounding leaves is no uncertainty.
            sigma[name] = np.where(found < ROUNDING * line.length, 0.0, found) if name in PLACES else found
    closed = np.stack([parts.closed[:-1], parts.closed[1:]])
    depth = np.where(closed, np.stack([parts.depths[:-1], parts.depths[1:]]), -np.inf)
    overlapping = (parts.heights > level) & (depth.max(axis=0) > level + 0.5 * (parts.heights - level))
    errors = density.errors is not None
    return Layers(
        position=_placed(line, numbers["position"]),
        position_sigma=sigma["position"],
        centroid=_placed(line, numbers["centroid"]),
        centroid_sigma=sigma["centroid"],
        height=numbers["height"],
        height_sigma=sigma["height"],
        prominence=numbers["prominence"],
        prominence_sigma=sigma["prominence"],
        width=numbers["width"],
        width_sigma=sigma["width"],
        half_lower=line.start + made.crossings[0],
        half_upper=line.start + made.crossings[1],
        area=numbers["area"],
        area_sigma=sigma["area"],
        area_above=numbers["area_above"],
        area_above_sigma=sigma["area_above"],
        lower=line.start + numbers["lower_bound"],
        lower_sigma=sigma["lower_bound"],
        upper=line.start + numbers["upper_bound"],
        upper_sigma=sigma["upper_bound"],
        lower_density=numbers["lower_value"],
        lower_density_sigma=sigma["lower_value"],
        upper_density=numbers["upper_value"],
        upper_density_sigma=sigma["upper_value"],
        base=made.base,
        open=np.asarray(~closed.all(axis=0)),
        overlapping=np.asarray(overlapping),
        position_covariance=blocks["position"],
        centroid_covariance=blocks["centroid"],
        area_covariance=blocks["area"],
        unit=density.unit,
        area_unit=integrated_unit(density.unit, 1),
        length=line.length,
        periodic=line.periodic,
        merged=joined,
        contains=density.contains,
        omits=(*density.omits, EXACT_LATTICE, FIRST_ORDER) if errors else (),
        applied=density.applied,
        assumptions=_assumptions(line, kind, level, density.unit),
        notes=_notes(density, parts, made, joined),
    )


def _assumptions(line: Line, kind: str, level: float, unit: str) -> tuple[str, ...]:
    base = {
        "minima": "the straight line through the two neighbouring minima",
        "higher_minimum": "the higher of the two neighbouring minima",
        "level": f"the level {level:g} {unit}",
    }[kind]
    ends = f"the line repeats itself after {line.length:g} Å" if line.periodic else "the line ends at both its ends"
    return (
        "a layer is what lies between two successive minima of the density along the line",
        f"half heights, centroids and areas above are counted from {base}",
        ends,
        f"maxima closer together than 1/{FINENESS} of the shortest wavelength along the line are not told apart",
    )


def _notes(density: Density, parts: Parts, made: LayerNumbers, joined: int) -> tuple[str, ...]:
    notes = list(density.notes)
    if not parts.count:
        notes.append("The density has no maximum along the line.")
    if joined:
        notes.append(f"{joined} maxima stood out too little and were merged with their neighbours.")
    lost = int(np.count_nonzero(~np.isfinite(made.crossings).all(axis=0)))
    if lost:
        notes.append(f"{lost} of {parts.count} layers do not fall to half of their height on both sides: no width.")
    if made.covariance is not None and parts.count:
        rows = np.arange(parts.count)
        place = made.covariance[0, rows, 0, rows]
        # Where n'' is not well above its own error a place moves further than the expansion holds.
        far = int(np.count_nonzero(~(place < (0.25 * np.diff(parts.bounds)) ** 2)))
        if far:
            notes.append(f"{far} positions have σ above a quarter of their layer: not to be trusted to first order.")
    if not parts.closed.all() and parts.count:
        notes.append("Layers at the ends of the line are open: their numbers are those of the part on the line.")
    return tuple(notes)

"""Merging of equivalent and repeated measurements into one reflection for each orbit."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Literal, get_args

import numpy as np

from engine.agreement import Agreement, agreements, orbit_sums
from engine.arrays import BoolArray, FloatArray, IntArray, as_choice, as_positive
from engine.errors import InputError
from engine.outliers import OrbitMeans, Outliers, orbit_means, without_outliers
from engine.reflections import Reflections
from engine.shells import equal_shells
from engine.symmetry.group import Group
from engine.symmetry.metric import METRIC_TOLERANCE, check_metric
from engine.symmetry.reflections import classify, orbits, wrapped

MergedSigma = Literal["weights", "larger"]


@dataclass(frozen=True, slots=True, kw_only=True)
class Absences:
    """Systematically absent reflections that were measured; they are left out of the merged set.

    Attributes
    ----------
    row : int64, shape (A,)
        Rows of the source, counted from 0.
    indices : int64, shape (A, d)
    mean_signal, mean_signal_of_others : float or None
        ⟨observed/σ⟩ over the absent and over all other rows with a σ above zero; None without
        any. Near zero against a large number where the group is right.
    """

    row: IntArray
    indices: IntArray
    mean_signal: float | None
    mean_signal_of_others: float | None

    @property
    def count(self) -> int:
        """Rows."""
        return int(self.row.size)


@dataclass(frozen=True, slots=True, kw_only=True)
class Merged:
    """One reflection for each orbit, and what the measurements say about themselves.

    Attributes
    ----------
    reflections : Reflections
        Representatives of M orbits, ordered by last index, then the one before it; ``row`` is
        the first source row of each.
    redundancy : int64, shape (M,)
        Rows merged.
    sigma_scatter : float64, shape (M,)
        Standard uncertainty of the mean from the scatter of the rows; NaN where there is one.
    unweighted : bool, shape (M,)
        Orbits merged with equal weights since a σ is missing or zero.
    overall : Agreement
    shells : tuple of Agreement
        From low to high resolution.
    outliers : Outliers
        Sought in orbits with weights alone.
    absences : Absences
    """

    reflections: Reflections
    redundancy: IntArray
    sigma_scatter: FloatArray
    unweighted: BoolArray
    overall: Agreement
    shells: tuple[Agreement, ...]
    outliers: Outliers
    absences: Absences


def merge(
    reflections: Reflections,
    group: Group,
    *,
    friedel: bool,
    generator: np.random.Generator,
    shells: int | None = None,
    sigma: MergedSigma = "weights",
    outlier_limit: float = 6.0,
    reject_outliers: bool = False,
    phase_tolerance_deg: float = 1.0,
    metric_tolerance: float = METRIC_TOLERANCE,
) -> Merged:
    """Merge equivalents: Ī = Σ w I / Σ w with w = 1/σ², of intensities or of amplitudes as given.

    Where a σ of an orbit is missing or zero all its rows weigh the same. The uncertainty from
    the weights is (Σ w)^−½ (with equal weights √(Σσ²)/n), from the scatter
    √(Σ w (I − Ī)² / ((n − 1) Σ w)). Phases are not independent measurements: those of an orbit,
    brought to the representative, must agree and are averaged; phase_sigma and merit are the
    means of the rows with a phase.

    Parameters
    ----------
    reflections : Reflections
    group : Group
    friedel : bool
        Whether mates are equivalent.
    generator : numpy.random.Generator
        Draws the halves for CC½; the same seed gives the same statistics.
    shells : int, optional
        See `engine.shells.equal_shells`.
    sigma : {"weights", "larger"}
        σ of the merged reflections: from the weights, or the larger of that and the scatter's.
    outlier_limit : float
        Deviation in standard uncertainties beyond which a row is listed.
    reject_outliers : bool
        Leave out the worst listed row of each orbit of three rows or more, and look again,
        until none is left. Statistics are of the rows that stay.
    phase_tolerance_deg : float
        How far a phase may lie from the mean of its orbit.
    metric_tolerance : float
        See `engine.symmetry.check_metric`.

    Raises
    ------
    InputError
        A cell without the group's symmetry, more shells than unique reflections, no reflection
        that is not absent, "larger" without σ, or phases of equivalents that disagree (rows are
        named).
    """
    as_choice(sigma, get_args(MergedSigma), "sigma")
    as_positive(outlier_limit, "outlier_limit", "standard uncertainties")
    as_positive(phase_tolerance_deg, "phase_tolerance_deg", "degrees")
    if sigma == "larger" and reflections.sigma is None:
        raise InputError("sigma", "is absent, so there is no uncertainty from weights", 'ask for "weights"')
    check_metric(reflections.lattice, group, metric_tolerance)
    gathered = orbits(reflections.indices, group, friedel=friedel)
    absent = classify(gathered.unique, group).absent[gathered.orbit]
    given = reflections
    if given.phase is not None:
        given = replace(given, phase=gathered.carried(given.phase))
    given, orbit = given.select(~absent), gathered.orbit[~absent]
    if not given.count:
        raise InputError("indices", f"hold no reflection that {group.name} allows", "check the group")
    names, orbit = np.unique(orbit, return_inverse=True)
    indices = np.asfortranarray(gathered.unique[names])
    given, orbit, outliers = without_outliers(given, orbit, outlier_limit, reject=reject_outliers)
    means = orbit_means(given, orbit)
    scatter = _scatter(given, orbit, means)
    merged_sigma = _merged_sigma(given, orbit, means, scatter, sigma)
    merged = _merged(given, orbit, means, indices, merged_sigma, phase_tolerance_deg)
    signal = np.full(means.mean.size, np.nan)
    if merged_sigma is not None:
        np.divide(means.mean, merged_sigma, out=signal, where=merged_sigma > 0)
    sums = orbit_sums(
        given.observed,
        means.weight,
        means.weighted,
        orbit,
        spacing=given.lattice.spacings(indices),
        signal=signal,
        generator=generator,
    )
    parted = equal_shells(given.lattice, indices, shells)
    return Merged(
        reflections=merged,
        redundancy=means.count,
        sigma_scatter=scatter,
        unweighted=~means.weighted,
        overall=agreements(sums, np.zeros(len(indices), dtype=np.int64), 1)[0],
        shells=agreements(sums, parted.of(given.lattice, indices), parted.count),
        outliers=outliers,
        absences=Absences(
            row=reflections.row[absent],
            indices=reflections.indices[absent],
            mean_signal=_mean_signal(reflections, absent),
            mean_signal_of_others=_mean_signal(reflections, ~absent),
        ),
    )


def _scatter(given: Reflections, orbit: IntArray, means: OrbitMeans) -> FloatArray:
    squares = np.bincount(orbit, means.weight * (given.observed - means.mean[orbit]) ** 2)
    freedom = np.where(means.count > 1, means.count - 1, np.nan)
    return np.asarray(np.sqrt(squares / (freedom * means.total)))


def _merged_sigma(
    given: Reflections, orbit: IntArray, means: OrbitMeans, scatter: FloatArray, choice: MergedSigma
) -> FloatArray | None:
    if given.sigma is None:
        return None
    equal = np.sqrt(np.bincount(orbit, given.sigma**2)) / means.count
    from_weights = np.where(means.weighted, 1 / np.sqrt(means.total), equal)
    return from_weights if choice == "weights" else np.fmax(from_weights, scatter)


def _merged(
    given: Reflections,
    orbit: IntArray,
    means: OrbitMeans,
    indices: IntArray,
    sigma: FloatArray | None,
    phase_tolerance_deg: float,
) -> Reflections:
    phase, known = None, np.ones(given.count, dtype=np.bool_)
    if given.phase is not None:
        known = ~np.isnan(given.phase)
        phase = _joined_phase(given, given.phase, known, orbit, phase_tolerance_deg)

    def mean(column: FloatArray | None) -> FloatArray | None:
        if column is None:
            return None
        usable = known & ~np.isnan(column)
        number = np.bincount(orbit, usable)
        made = np.full(number.size, np.nan)
        np.divide(np.bincount(orbit, np.where(usable, column, 0.0)), number, out=made, where=number > 0)
        return made

    _, first = np.unique(orbit, return_index=True)
    return Reflections(
        lattice=given.lattice,
        indices=indices,
        quantity=given.quantity,
        observed=means.mean,
        sigma=sigma,
        phase=phase,
        phase_sigma=mean(given.phase_sigma),
        merit=mean(given.merit),
        row=given.row[first],
        scale=given.scale,
    )


def _joined_phase(
    given: Reflections, phase: FloatArray, known: BoolArray, orbit: IntArray, tolerance_deg: float
) -> FloatArray:
    filled = np.where(known, phase, 0.0)
    cosine, sine = (np.bincount(orbit, known * wave(filled)) for wave in (np.cos, np.sin))
    joined = np.where(np.bincount(orbit, known) > 0, np.arctan2(sine, cosine), np.nan)
    apart = np.abs(np.rad2deg(wrapped(phase - joined[orbit])))
    beyond = np.flatnonzero(apart > tolerance_deg)
    if beyond.size:
        raise InputError.for_rows(
            "phase",
            given.row[beyond[np.argsort(-apart[beyond], kind="stable")]],
            f"lies up to {apart[beyond].max():.4g}° from the mean of its equivalents",
            "check the group, its origin and the sign convention of the phases, or merge without phases",
        )
    return joined


def _mean_signal(given: Reflections, chosen: BoolArray) -> float | None:
    if given.sigma is None:
        return None
    usable = chosen & (given.sigma > 0)
    if not usable.any():
        return None
    return float(np.mean(given.observed[usable] / given.sigma[usable]))

"""What a person must know of a set before summing it: one object, plain numbers and plain words."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from engine.agreement import Agreement
from engine.amplitudes.normalised import intensity_statistics, normalise
from engine.arrays import FloatArray
from engine.completeness import completeness
from engine.errors import InputError
from engine.preparation.chain import Prepared
from engine.symmetry import classify, unique_reflections

FEW_FOR_STATISTICS = 100
"""Unique reflections below which shells and intensity statistics say little."""
SHELLS = 10
OUTLIERS_NAMED = 100
WEAK_SHELL = 1.0
"""⟨I/σ⟩ of the highest shell below which its reflections are mostly noise."""
POOR_AGREEMENT = 0.3
INCOMPLETE = 0.9


@dataclass(frozen=True, slots=True, kw_only=True)
class Shell:
    """One shell of resolution: what is possible, observed, and how well repeated.

    Attributes
    ----------
    d_max, d_min : float
        Å.
    possible, observed : int
        Unique reflections.
    """

    d_max: float
    d_min: float
    possible: int
    observed: int

    @property
    def completeness(self) -> float:
        """Observed over possible."""
        return self.observed / self.possible


@dataclass(frozen=True, slots=True, kw_only=True)
class Summary:
    """A prepared set in numbers and words.

    Attributes
    ----------
    rows : int
        Reflections that entered the chain.
    unique, expanded : int
        After merging, and after expansion (one of each Friedel pair of a real density).
    group : str
    cell_volume : float
        Å^d.
    d_max, d_min : float
        Of the unique reflections, Å.
    completeness : float
        Over the range.
    completeness_shells : tuple of Shell
    agreement : Agreement
        Of equivalents, overall.
    agreement_shells : tuple of Agreement
    absences : int
    absence_signal, other_signal : float or None
        ⟨I/σ⟩ of systematically absent reflections, and of the others.
    outliers : int
    outlier_rows : tuple of int
        The worst of them, at most 100: rows of the source, counted from 0.
    negative : int or None
        Merged intensities below zero; None where amplitudes were given.
    centric_share : float
        Of the unique reflections.
    phased : int
        Unique reflections with a phase.
    scale : str
        ``absolute`` or ``arbitrary``.
    wilson_b, wilson_b_sigma, wilson_scale, wilson_scale_sigma : float or None
    model_r, model_weighted_r : float or None
        R factors of a trial model.
    statistics : str or None
        What the distribution of intensities says, in words.
    applied, warnings : tuple of str
    """

    rows: int
    unique: int
    expanded: int
    group: str
    cell_volume: float
    d_max: float
    d_min: float
    completeness: float
    completeness_shells: tuple[Shell, ...]
    agreement: Agreement
    agreement_shells: tuple[Agreement, ...]
    absences: int
    absence_signal: float | None
    other_signal: float | None
    outliers: int
    outlier_rows: tuple[int, ...]
    negative: int | None
    centric_share: float
    phased: int
    scale: str
    wilson_scale: float | None
    wilson_scale_sigma: float | None
    wilson_b: float | None
    wilson_b_sigma: float | None
    model_r: float | None
    model_weighted_r: float | None
    statistics: str | None
    applied: tuple[str, ...]
    warnings: tuple[str, ...]


def summarize_set(prepared: Prepared) -> Summary:
    """Summarise a prepared set.

    Raises
    ------
    TooLargeError
        The resolution range holds too many possible reflections to be counted.
    """
    unique, merged, recipe = prepared.unique, prepared.merged, prepared.recipe
    lattice = unique.lattice
    spacing = lattice.spacings(unique.indices)
    d_max, d_min = float(spacing.max()), float(spacing.min())
    possible = len(unique_reflections(lattice, recipe.group, d_min, d_max, friedel=recipe.friedel))
    counted = completeness(
        unique,
        recipe.group,
        friedel=recipe.friedel,
        d_min=d_min,
        d_max=d_max,
        shells=max(1, min(SHELLS, possible // 20)),
    )
    shells = tuple(
        Shell(d_max=float(high), d_min=float(low), possible=int(all_of), observed=int(seen))
        for high, low, all_of, seen in zip(
            counted.d_max, counted.d_min, counted.possible, counted.observed, strict=True
        )
    )
    phase = unique.phase
    phased = 0 if phase is None else int(np.count_nonzero(~np.isnan(phase)))
    statistics = _statistics(prepared)
    plot = prepared.plot
    return Summary(
        rows=prepared.given.count,
        unique=unique.count,
        expanded=prepared.expansion.reflections.count,
        group=recipe.group.name,
        cell_volume=lattice.volume,
        d_max=d_max,
        d_min=d_min,
        completeness=counted.fraction,
        completeness_shells=shells,
        agreement=merged.overall,
        agreement_shells=merged.shells,
        absences=merged.absences.count,
        absence_signal=merged.absences.mean_signal,
        other_signal=merged.absences.mean_signal_of_others,
        outliers=int(merged.outliers.row.size),
        outlier_rows=tuple(
            merged.outliers.row[np.argsort(-np.abs(merged.outliers.deviation))][:OUTLIERS_NAMED].tolist()
        ),
        negative=None if prepared.converted is None else prepared.converted.negative,
        centric_share=float(classify(unique.indices, recipe.group).centric.mean()),
        phased=phased,
        scale=unique.scale,
        wilson_scale=None if plot is None else plot.scale,
        wilson_scale_sigma=None if plot is None else plot.scale_sigma,
        wilson_b=None if plot is None else plot.b,
        wilson_b_sigma=None if plot is None else plot.b_sigma,
        model_r=None if prepared.model is None else prepared.model.r,
        model_weighted_r=None if prepared.model is None else prepared.model.weighted_r,
        statistics=statistics,
        applied=prepared.applied,
        warnings=(*prepared.notes, *_warnings(prepared, counted.fraction, phased, spacing)),
    )


def _statistics(prepared: Prepared) -> str | None:
    """The verdict on the intensities of a crystal's general reflections, None where it would say nothing."""
    merged, kinds = prepared.merged.reflections, prepared.kinds
    general = ~kinds.centric if not kinds.centric.all() else np.ones(merged.count, dtype=np.bool_)
    if merged.lattice.dimension != 3 or np.count_nonzero(general) < FEW_FOR_STATISTICS:
        return None
    try:
        normalised = normalise(merged, epsilon=kinds.epsilon, centric=kinds.centric)
        return intensity_statistics(normalised, general).words
    except InputError as fault:
        # A set without signal in some shell is no reason to refuse a summary; it is one to say so.
        return f"no statistics: {fault.reason}"


def _warnings(prepared: Prepared, fraction: float, phased: int, spacing: FloatArray) -> list[str]:
    merged, unique = prepared.merged, prepared.unique
    warnings = []
    if fraction < INCOMPLETE:
        warnings.append(
            f"{100 * (1 - fraction):.0f} % of the reflections possible from {spacing.max():.3g} to "
            f"{spacing.min():.3g} Å are missing: the density lacks what they carry."
        )
    if phased == 0:
        warnings.append("No reflection has a phase: only the autocorrelation can be summed.")
    elif phased < unique.count:
        warnings.append(
            f"{unique.count - phased} of {unique.count} unique reflections have no phase and are not summed."
        )
    agreement = merged.overall
    if agreement.r_meas is not None and agreement.r_meas > POOR_AGREEMENT:
        warnings.append(
            f"Equivalents agree poorly (R_meas {agreement.r_meas:.2f}): check the symmetry and the measurement."
        )
    last = merged.shells[-1]
    if last.mean_signal is not None and last.mean_signal < WEAK_SHELL:
        warnings.append(
            f"From {last.d_max:.3g} to {last.d_min:.3g} Å the mean of value over σ is "
            f"{last.mean_signal:.2g}: mostly noise."
        )
    absences = merged.absences
    if absences.mean_signal is not None and absences.mean_signal > 3:
        warnings.append(
            f"Reflections that {prepared.recipe.group.name} forbids are seen with a mean I/σ of "
            f"{absences.mean_signal:.1f}: the group may be wrong."
        )
    if unique.sigma is None:
        warnings.append("No standard uncertainties were given.")
    return warnings

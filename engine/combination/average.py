"""Weighted means of coefficient sets, and how well the sets agree.

With phases of their own the mean is that of complex numbers. Weights are the inverse total variances of a
coefficient in the complex plane, 1/⟨|δn|²⟩: the best that one real weight a set and term can do.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Literal

import numpy as np

from engine.arrays import BoolArray, FloatArray, IntArray, as_choice, as_vector
from engine.coefficients import CoefficientSet
from engine.combination.build import Combined, build
from engine.combination.combine import check_merit
from engine.combination.gathering import Gathered, gather
from engine.combination.matching import CELL_TOLERANCE
from engine.combination.scales import AS_GIVEN, ScaleChoice
from engine.errors import InputError
from engine.uncertainty.errors import plane_errors

UNLIKELY = 2.0
"""χ² a degree of freedom at which a reader is told that the sets agree worse than their σ's say."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Averaged:
    """A mean of S sets.

    Attributes
    ----------
    combined : Combined
        The mean, its scales and its account.
    counts : int64, shape (N,)
        Sets that each coefficient of the mean was averaged over.
    chi_squared : float or None
        Σ |n_j − n̄|²/⟨|δn_j|²⟩ a degree of freedom, about 1 where the sets agree within their errors; of
        amplitudes where those were averaged. None without errors, or without a term in several sets.
    degrees : int
        Degrees of freedom: Σ (sets − 1) over the terms.
    """

    combined: Combined
    counts: IntArray
    chi_squared: float | None
    degrees: int

    @property
    def coefficients(self) -> CoefficientSet:
        return self.combined.coefficients


def average(
    sets: Sequence[CoefficientSet],
    *,
    weights: Literal["sigma", "equal"] | Sequence[float] = "sigma",
    scale: ScaleChoice = AS_GIVEN,
    phases: Literal["own", "first"] = "own",
    apply_merit: bool = False,
    cell_tolerance: float = CELL_TOLERANCE,
) -> Averaged:
    """Weighted mean; a term is averaged over the sets that have it.

    Parameters
    ----------
    sets : sequence of CoefficientSet
        Their errors are taken as independent.
    weights : {"sigma", "equal"} or sequence of S numbers
        ``sigma``: the inverse variances of each coefficient; a term with a σ of zero in some set, such as a
        mean that was given, is averaged equally.
    scale : ScaleChoice
        How the others are brought to the first.
    phases : {"own", "first"}
        ``first``: amplitudes are averaged and take the first set's phases.
    apply_merit : bool
        As in `difference`.

    Raises
    ------
    InputError
        Weights that are negative or all zero, a set without errors where they decide, or as `difference`.
    """
    names = [f"set {number + 1}" for number in range(len(sets))]
    as_choice(phases, ("own", "first"), "phases")
    check_merit(sets, phases if phases == "own" else 0, apply_merit)
    own = phases == "own"
    gathered = gather(sets, names, scale, cell_tolerance=cell_tolerance)
    if own:
        phased = np.stack([gathered.phased(number) for number in range(len(sets))])
        lacking = int(np.count_nonzero(gathered.present & ~phased))
        # Errors are asked for twice: for the weights and for the mean.
        known = tuple(replace(one, plane_errors=plane_errors(one)) for one in gathered.sets)
        gathered = replace(gathered, present=phased, sets=known)
    else:
        lacking = 0
    terms = np.flatnonzero(gathered.present.any(axis=0) if own else gathered.phased(0)).astype(np.int64)
    if not terms.size:
        raise InputError("sets", "have no term with a phase", "give phases")
    held = gathered.present[:, terms]
    variances = _variances(gathered, terms, own=own)
    shares, words = _shares(weights, variances, held, names)
    counts = np.count_nonzero(held, axis=0)
    partial = int(np.count_nonzero(counts < len(sets)))
    if partial:
        words.append(f"{partial} terms that not all sets have are averaged over those that have them")
    if lacking:
        words.append(f"{lacking} coefficients of single sets have no phase and are left out")
    if not own:
        lost = int(np.count_nonzero(~gathered.phased(0)))
        words += [f"{lost} terms that the first set does not phase are left out"] if lost else []
    combined = build(
        gathered,
        terms,
        list(shares),
        "own" if own else 0,
        words,
        apply_merit=apply_merit,
        cell_tolerance=cell_tolerance,
    )
    chi_squared, degrees = _agreement(combined, gathered, terms, variances, own=own, apply_merit=apply_merit)
    if chi_squared is not None and chi_squared > UNLIKELY:
        told = f"the sets scatter by {np.sqrt(chi_squared):.2g} times what their σ's say: that of the mean is too small"
        combined = replace(combined, notes=(*combined.notes, told))
    return Averaged(combined=combined, counts=counts, chi_squared=chi_squared, degrees=degrees)


def _variances(gathered: Gathered, terms: IntArray, *, own: bool) -> list[FloatArray | None]:
    """Of each set's scaled coefficients, or of their amplitudes; shape (terms,) each, NaN where absent."""
    made: list[FloatArray | None] = []
    for number, source in enumerate(gathered.sets):
        held = gathered.present[number][terms]
        rows = gathered.rows[number][terms[held]]
        variance = None if source.sigma is None else source.sigma**2
        if own:
            errors = plane_errors(source)
            variance = None if errors is None else errors.along**2 + errors.across**2
        if variance is None:
            made.append(None)
            continue
        one = np.full(terms.size, np.nan)
        one[held] = variance[rows] * gathered.factors(number, terms[held]) ** 2
        made.append(one)
    return made


def _shares(
    weights: Literal["sigma", "equal"] | Sequence[float],
    variances: Sequence[FloatArray | None],
    held: BoolArray,
    names: Sequence[str],
) -> tuple[FloatArray, list[str]]:
    """What each set contributes to each term, 1 in all; shape (S, terms), and in words."""
    raw = held.astype(np.float64)
    if isinstance(weights, str):
        as_choice(weights, ("sigma", "equal"), "weights")
        words = ["averaged with equal weights"]
    else:
        numbers = as_vector(weights, len(names), "weights")
        if np.any(numbers <= 0):
            raise InputError("weights", "holds a number that is not above zero", "leave that set out")
        raw *= numbers[:, None]
        words = ["averaged with the weights " + ", ".join(f"{number:g}" for number in numbers)]
    if weights == "sigma":
        for variance, name in zip(variances, names, strict=True):
            if variance is None:
                raise InputError("weights", f"need the errors of {name}, which has none", 'give σ, or "equal"')
        table = np.where(held, np.stack([one for one in variances if one is not None]), 1.0)
        certain = np.any(table == 0, axis=0)
        raw = np.where(held, 1 / np.where(certain, 1.0, table), 0.0)
        words = ["averaged with the inverse variances of the coefficients as weights"]
        if certain.any():
            words.append(f"{np.count_nonzero(certain)} terms with a σ of zero in some set are averaged equally")
    return raw / raw.sum(axis=0), words


def _agreement(
    combined: Combined,
    gathered: Gathered,
    terms: IntArray,
    variances: Sequence[FloatArray | None],
    *,
    own: bool,
    apply_merit: bool,
) -> tuple[float | None, int]:
    """χ² a degree of freedom over terms with errors above zero in at least two sets; and these degrees."""
    if any(one is None for one in variances):
        return None, 0
    held = gathered.present[:, terms]
    counts = np.count_nonzero(held, axis=0)
    judged = (counts > 1) & ~np.any([one == 0 for one in variances if one is not None], axis=0)
    mean, total = combined.coefficients.values, 0.0
    for number, variance in enumerate(one for one in variances if one is not None):
        part = gathered.part(number, terms, np.ones(terms.size), apply_merit=apply_merit)
        values = part.factors * part.source.values[part.rows]
        away = values - mean[part.places] if own else np.abs(values) - np.abs(mean[part.places])
        pull = np.abs(away) ** 2 / np.where(judged, variance, 1.0)[part.places]
        total += float(pull[judged[part.places]].sum())
    degrees = int(np.sum(counts[judged] - 1))
    return (total / degrees if degrees else None), degrees

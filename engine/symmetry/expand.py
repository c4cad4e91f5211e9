"""From an asymmetric set of reflections to the full one, and back to canonical representatives."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Literal, get_args

import numpy as np

from engine.arrays import BoolArray, FloatArray, IntArray, as_choice, as_positive
from engine.errors import InputError
from engine.reflections import Reflections
from engine.symmetry.group import Group
from engine.symmetry.metric import METRIC_TOLERANCE, check_metric
from engine.symmetry.reflections import Packing, classify, orbits, rotations_up_to_sign, wrapped

Restricted = Literal["refuse", "report"]

_BLOCK = 1 << 13
"""Rows expanded at a time."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Expansion:
    """A full set and what was found on the way; rows are those of the source, counted from 0.

    Attributes
    ----------
    reflections : Reflections
        Distinct indices, those of one orbit side by side; ``row`` is that of the asymmetric
        reflection each came from.
    absent_rows : int64, shape (A,)
        Systematically absent reflections, which have no equivalents and were left out.
    significant_absent_rows : int64, shape (S,)
        Those of them whose strength exceeds the significance asked for; without a σ above zero,
        those of any strength. Signs of a wrong group, or of reflections excited twice.
    misplaced_rows : int64, shape (P,)
        Centric reflections whose phase is farther from both allowed values than the tolerance.
    misplaced_deg : float64, shape (P,)
        How far, degrees, in (0, 90].
    """

    reflections: Reflections
    absent_rows: IntArray
    significant_absent_rows: IntArray
    misplaced_rows: IntArray
    misplaced_deg: FloatArray


def expand(
    reflections: Reflections,
    group: Group,
    *,
    friedel: bool = True,
    mates: Literal["one", "both"] = "one",
    restricted: Restricted = "refuse",
    phase_tolerance_deg: float = 1.0,
    significance: float = 3.0,
    metric_tolerance: float = METRIC_TOLERANCE,
) -> Expansion:
    """All equivalents of an asymmetric set, each index once, by F(hR) = F(h) exp(−2πi h·t).

    Parameters
    ----------
    reflections : Reflections
        At most one of each orbit.
    group : Group
    friedel : bool
        Whether Friedel's law holds (the density is real). Without it mates stand for
        themselves, `mates` does not matter, and no phase is restricted.
    mates : {"one", "both"}
        Of each Friedel pair list the one whose last index other than zero is positive, or both.
    restricted : {"refuse", "report"}
        What to do where a centric reflection's phase is not one of the two that symmetry
        allows. Reported ones are expanded with the phase they came with.
    phase_tolerance_deg : float
        How far, in degrees, such a phase may lie from an allowed value unmentioned.
    significance : float
        An absent reflection is significant when ``observed`` exceeds so many σ.
    metric_tolerance : float
        See `check_metric`.

    Raises
    ------
    InputError
        A cell without the group's symmetry, several rows of one orbit, or misplaced phases
        where those are refused; rows are named.
    """
    as_choice(mates, ("one", "both"), "mates")
    as_choice(restricted, get_args(Restricted), "restricted")
    as_positive(phase_tolerance_deg, "phase_tolerance_deg", "degrees")
    as_positive(significance, "significance", "standard uncertainties")
    check_metric(reflections.lattice, group, metric_tolerance)
    _require_asymmetric(reflections, group, friedel)
    kinds = classify(reflections.indices, group)
    absent = kinds.absent
    misplaced = np.zeros(reflections.count)
    if friedel and reflections.phase is not None:
        misplaced = _misplacement(reflections.phase, kinds.restricted_phase)
    beyond = ~absent & (misplaced > phase_tolerance_deg)
    if restricted == "refuse" and beyond.any():
        worst = np.flatnonzero(beyond)[np.argsort(-misplaced[beyond], kind="stable")]
        raise InputError.for_rows(
            "phase",
            reflections.row[worst],
            f"lies up to {misplaced[beyond].max():.4g}° from the two values that {group.name} allows where centric",
            "check the group, its origin and the sign convention of the phases",
        )
    present = reflections.select(~absent)
    source, operation, conjugated = _members(present.indices, group, friedel=friedel, both=mates == "both")
    return Expansion(
        reflections=_carried(present, group, source, operation, conjugated),
        absent_rows=reflections.row[absent],
        significant_absent_rows=reflections.row[absent & _significant(reflections, significance)],
        misplaced_rows=reflections.row[beyond],
        misplaced_deg=misplaced[beyond],
    )


def reduce(
    reflections: Reflections, group: Group, *, friedel: bool = True, metric_tolerance: float = METRIC_TOLERANCE
) -> Reflections:
    """Every reflection under the index of its orbit's representative, with the phase brought along.

    Row by row, nothing is merged; the order is kept. `engine.symmetry.orbits` says which
    equivalent the representative is.

    Raises
    ------
    InputError
        A cell without the group's symmetry.
    """
    check_metric(reflections.lattice, group, metric_tolerance)
    gathered = orbits(reflections.indices, group, friedel=friedel)
    return replace(
        reflections,
        indices=np.asfortranarray(gathered.unique[gathered.orbit]),
        phase=None if reflections.phase is None else gathered.carried(reflections.phase),
    )


def _require_asymmetric(reflections: Reflections, group: Group, friedel: bool) -> None:
    gathered = orbits(reflections.indices, group, friedel=friedel)
    several = np.bincount(gathered.orbit, minlength=gathered.count)[gathered.orbit] > 1
    if several.any():
        raise InputError.for_rows(
            "indices",
            reflections.row[several],
            f"are related by {group.name} to other rows",
            "merge equivalent reflections first",
        )


def _misplacement(phase: FloatArray, restricted_phase: FloatArray) -> FloatArray:
    """Distance of each phase from the nearer allowed value, degrees; 0 where free or unknown."""
    apart = phase - restricted_phase
    apart = np.abs(apart - np.pi * np.rint(apart / np.pi))
    return np.where(np.isnan(apart), 0.0, np.rad2deg(apart))


def _significant(reflections: Reflections, significance: float) -> BoolArray:
    strong = reflections.observed > 0
    if reflections.sigma is None:
        return np.asarray(strong)
    return np.asarray(strong & (reflections.observed > significance * reflections.sigma))


def _members(indices: IntArray, group: Group, *, friedel: bool, both: bool) -> tuple[IntArray, IntArray, BoolArray]:
    """Source row, operation and conjugation of each distinct member of the rows' orbits."""
    packing = Packing.of(indices, group)
    chosen = rotations_up_to_sign(group) if friedel else group.cosets
    columns = packing.columns(group.rotations[chosen])
    sources, places, flips = [], [], []
    for start in range(0, len(indices), _BLOCK):
        keys = indices[start : start + _BLOCK] @ columns
        flipped = keys < 0 if friedel else np.zeros(keys.shape, dtype=np.bool_)
        source, place = np.nonzero(_first_of_each(np.where(flipped, -keys, keys)))
        flip = flipped[source, place]
        if friedel and both:
            # A pair stands side by side; zero is its own mate.
            copies = np.where(keys[source, place] == 0, 1, 2)
            pair = np.repeat(np.arange(source.size), copies)
            source, place, flip = source[pair], place[pair], flip[pair]
            flip[1:] ^= pair[1:] == pair[:-1]
        sources.append(source + start)
        places.append(place)
        flips.append(flip)
    if not sources:
        empty = np.zeros(0, dtype=np.int64)
        return empty, empty, np.zeros(0, dtype=np.bool_)
    return np.concatenate(sources), chosen[np.concatenate(places)], np.concatenate(flips)


def _first_of_each(keys: IntArray) -> BoolArray:
    """Where each distinct key of a row stands first; (N, n) -> (N, n)."""
    order = np.argsort(keys, axis=1, kind="stable")
    ranked = np.take_along_axis(keys, order, axis=1)
    first = np.ones(keys.shape, dtype=np.bool_)
    first[:, 1:] = ranked[:, 1:] != ranked[:, :-1]
    made = np.empty_like(first)
    np.put_along_axis(made, order, first, axis=1)
    return made


def _carried(
    reflections: Reflections, group: Group, source: IntArray, operation: IntArray, conjugated: BoolArray
) -> Reflections:
    made = reflections.select(source)
    sign = np.where(conjugated, -1, 1)
    indices = np.einsum("ij,ijk->ik", made.indices, group.rotations[operation]) * sign[:, None]
    phase = made.phase
    if phase is not None:
        turns = np.einsum("ij,ij->i", made.indices, group.numerators[operation]) % group.denominator
        phase = wrapped(sign * (phase - 2 * np.pi / group.denominator * turns))
    return replace(made, indices=np.asfortranarray(indices), phase=phase)

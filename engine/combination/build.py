"""From gathered sets and a weight for each term to a combined set, its errors and its account."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Literal

import numpy as np

from engine.arrays import BoolArray, ComplexArray, FloatArray, IntArray
from engine.coefficients import CoefficientSet
from engine.combination.gathering import Gathered
from engine.combination.linear import (
    Part,
    added,
    amplitude_sigma,
    joint_history,
    joint_tally,
    words_of_amplitudes,
)
from engine.combination.matching import CELL_TOLERANCE, check_alike, common_group, keys_of, positions_in
from engine.combination.modes import SCALES_APART, SCALES_OMITTED, scale_modes
from engine.combination.scales import Scale
from engine.errors import InputError
from engine.symmetry.group import Group
from engine.uncertainty.errors import phasors, plane_errors


@dataclass(frozen=True, slots=True, kw_only=True)
class Combined:
    """A combination of S sets, and what was done on the way.

    Attributes
    ----------
    coefficients : CoefficientSet
        On the lattice and in the unit of the first set, with errors to first order (``plane_errors``).
        ``scale_sigma`` is that of the first set where the others were fitted to it, else zero.
    scales : tuple of Scale
        What multiplied each set.
    common : int
        Terms that all sets have.
    absent : tuple of int
        Terms that each set lacks and some other has.
    unphased : int
        Terms left out because a phase is not known.
    scale_modes : tuple of CoefficientSet
        Densities that one σ of each independent error of the scales adds to the result. They are not in the
        coefficients' errors: see `scale_sigma_of`.
    applied, notes : tuple of str
        What was done, and what a reader must know.
    """

    coefficients: CoefficientSet
    scales: tuple[Scale, ...]
    common: int
    absent: tuple[int, ...]
    unphased: int
    scale_modes: tuple[CoefficientSet, ...]
    applied: tuple[str, ...]
    notes: tuple[str, ...]

    @property
    def scale(self) -> float:
        """k of the second set."""
        return self.scales[1].k

    @property
    def scale_sigma(self) -> float:
        """σ of k of the second set."""
        return self.scales[1].k_sigma

    @property
    def relative_b(self) -> float:
        """B of the second set, Å²."""
        return self.scales[1].b

    @property
    def only_first(self) -> int:
        """Terms of the first of two sets that the second lacks."""
        return self.absent[1]

    @property
    def only_second(self) -> int:
        """Terms of the second of two sets that the first lacks."""
        return self.absent[0]


def build(
    gathered: Gathered,
    terms: IntArray,
    shares: Sequence[FloatArray],
    phases: Literal["own"] | int | CoefficientSet,
    words: Sequence[str],
    *,
    apply_merit: bool,
    cell_tolerance: float = CELL_TOLERANCE,
) -> Combined:
    """The set Σ c_j k_j n_j over chosen terms with c_j of shape (terms,), and its account.

    Terms whose phase is not known are left out and counted.
    """
    donor = None if isinstance(phases, str) else _donor(gathered, terms, phases, cell_tolerance)
    known = _all_phased(gathered)[terms] if donor is None else donor.known
    unphased = int(np.count_nonzero(~known))
    terms, shares = terms[known], [share[known] for share in shares]
    if not terms.size:
        raise InputError("sets", "have no term with a phase in common", "check that they are indexed alike")
    parts = [gathered.part(number, terms, share, apply_merit=apply_merit) for number, share in enumerate(shares)]
    bare = _bare(gathered, terms, gathered.group if donor is None else donor.group)
    if donor is None:
        result, contributions = _with_own_phases(bare, parts)
        how = "coefficients combined as complex numbers, each with its own phase"
    else:
        result, contributions = _with_phases_of(bare, parts, donor, gathered.zero[terms])
        how = (
            f"amplitudes combined, all with the phases of {donor.name}; a negative amplitude turns the phase by π; the "
            "zero term combined with its own signs"
        )
    modes = scale_modes(gathered, terms, contributions, result)
    if modes and result.plane_errors is not None:
        omitted = (*result.plane_errors.omits, SCALES_OMITTED)
        result = replace(result, plane_errors=replace(result.plane_errors, omits=omitted))
    applied = (how, *words, *gathered.words())
    if apply_merit:
        applied = (*applied, "each coefficient multiplied by its figure of merit first")
    notes = [*gathered.notes, *(() if donor is None else donor.notes)]
    notes += _notes(gathered, terms, own=donor is None, apply_merit=apply_merit, unphased=unphased, modes=bool(modes))
    return Combined(
        coefficients=replace(result, history=(*joint_history(gathered.sets, gathered.names), *applied)),
        scales=gathered.scales,
        common=int(np.count_nonzero(gathered.present.all(axis=0))),
        absent=tuple(int(np.count_nonzero(~held)) for held in gathered.present),
        unphased=unphased,
        scale_modes=modes,
        applied=applied,
        notes=tuple(notes),
    )


@dataclass(frozen=True, slots=True, kw_only=True)
class _Donor:
    """Where the phases of T terms come from.

    Attributes
    ----------
    source : CoefficientSet
    name : str
    rows : int64, shape (K,)
        Its rows of the terms whose phase it knows.
    known : bool, shape (T,)
        Which these are.
    group : Group or None
        Operations common to all sets and to it.
    notes : tuple of str
    """

    source: CoefficientSet
    name: str
    rows: IntArray
    known: BoolArray
    group: Group | None
    notes: tuple[str, ...]

    def phasors(self) -> ComplexArray:
        """exp(iφ) of the terms, (K,); where the amplitude is zero, what symmetry still tells of it."""
        values = self.source.values[self.rows]
        found = phasors(values)
        errors = None if np.all(values != 0) else plane_errors(self.source)
        return found if errors is None else np.where(values != 0, found, errors.phasor[self.rows])


def _donor(gathered: Gathered, terms: IntArray, phases: int | CoefficientSet, cell_tolerance: float) -> _Donor:
    if not isinstance(phases, CoefficientSet):
        if isinstance(phases, bool) or not 0 <= phases < len(gathered.sets):
            raise InputError("phases", f"is {phases}, which is the number of no set", "give a set's number, from 0")
        known = gathered.phased(phases)[terms]
        return _Donor(
            source=gathered.sets[phases],
            name=gathered.names[phases],
            rows=gathered.rows[phases][terms[known]],
            known=known,
            group=gathered.group,
            notes=(),
        )
    first = gathered.leader
    told = check_alike((first, phases), (gathered.names[0], "phases"), cell_tolerance)
    group, further = common_group((*gathered.sets, phases))
    wanted = replace(first, indices=gathered.indices[terms])
    keys, own_keys = keys_of((wanted, phases))
    rows, known = positions_in(own_keys, keys)
    known[known] = phases.phase_known[rows[known]]
    notes = (*told, *(one for one in further if one not in gathered.notes))
    return _Donor(source=phases, name="a further set", rows=rows[known], known=known, group=group, notes=notes)


def _all_phased(gathered: Gathered) -> BoolArray:
    """Terms of which no set that has them lacks the phase; shape (U,)."""
    return np.asarray(np.all([gathered.phased(number) | ~held for number, held in enumerate(gathered.present)], axis=0))


def _bare(gathered: Gathered, terms: IntArray, group: Group | None) -> CoefficientSet:
    """The result without its values."""
    first = gathered.leader
    return replace(
        first,
        indices=np.asfortranarray(gathered.indices[terms]),
        values=np.zeros(terms.size, dtype=np.complex128),
        phase_known=np.ones(terms.size, dtype=np.bool_),
        sigma=None,
        phase_sigma=None,
        merit=None,
        plane_errors=None,
        tally=joint_tally(gathered.sets, gathered.zero_term(terms)),
        group=group,
        scale_sigma=first.scale_sigma if gathered.choice.kind == "fitted" else 0.0,
    )


def _with_own_phases(bare: CoefficientSet, parts: Sequence[Part]) -> tuple[CoefficientSet, list[ComplexArray]]:
    """The result, and what each set adds to it."""
    made = added(parts, bare.count)
    contributions = []
    for part in parts:
        one = np.zeros(bare.count, dtype=np.complex128)
        one[part.places] = part.factors * part.source.values[part.rows]
        contributions.append(one)
    sigma, phase_sigma = made.described()
    result = replace(bare, values=made.values, sigma=sigma, phase_sigma=phase_sigma, plane_errors=made.errors)
    return result, contributions


def _with_phases_of(
    bare: CoefficientSet, parts: Sequence[Part], donor: _Donor, zero: BoolArray
) -> tuple[CoefficientSet, list[ComplexArray]]:
    """The result, and what each set adds to it."""
    axes = donor.phasors()
    contributions = []
    for part in parts:
        one = np.zeros(bare.count, dtype=np.complex128)
        values = part.source.values[part.rows]
        # The sign of a mean is known whatever the phases.
        one[part.places] = part.factors * np.where(zero[part.places], values, np.abs(values) * axes[part.places])
        contributions.append(one)
    values = np.sum(contributions, axis=0)
    column = {
        name: None if given is None else np.where(zero, certain, given[donor.rows])
        for name, given, certain in (
            ("phase_sigma", donor.source.phase_sigma, 0.0),
            ("merit", donor.source.merit, 1.0),
        )
    }
    result = replace(
        bare,
        values=values,
        sigma=amplitude_sigma(parts, bare.count),
        phase_sigma=column["phase_sigma"],
        merit=column["merit"],
    )
    # The axes are those of the phases, also of a difference that vanishes: its own phase is rounding.
    directed = replace(result, values=np.maximum(np.abs(values), np.finfo(np.float64).tiny) * axes)
    errors = plane_errors(directed)
    if errors is not None:
        contains, omits = words_of_amplitudes(parts)
        # Of one coefficient the errors of the phases alone, for their words.
        some = directed.select(np.arange(directed.count) == 0)
        phase_errors = plane_errors(replace(some, sigma=None))
        told = () if phase_errors is None else phase_errors.contains
        lacking = () if phase_errors is not None else ("errors of the phases: none were given",)
        errors = replace(errors, contains=(*contains, *told), omits=(*omits, *lacking))
    return replace(result, plane_errors=errors), contributions


def _notes(
    gathered: Gathered, terms: IntArray, *, own: bool, apply_merit: bool, unphased: int, modes: bool
) -> list[str]:
    made = []
    if unphased:
        made.append(f"{unphased} terms have no phase and are left out")
    if not gathered.zero[terms].any() and gathered.zero.any():
        made.append("the zero term is not known in every set and is left out: values are relative to the mean")
    if own and not apply_merit and any(one.merit is not None for one in gathered.sets):
        made.append("figures of merit were given and not applied; the result has none")
    if not own:
        made.append(
            "amplitudes of sets with unlike structures under the phases of one: where phases are acentric, changes "
            "come out at about half their height"
        )
    if modes:
        made.append(SCALES_APART)
    return made

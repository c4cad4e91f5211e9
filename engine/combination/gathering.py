"""All terms of several sets side by side, each set brought to the scale of the first."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from engine.arrays import BoolArray, FloatArray, IntArray
from engine.coefficients import CoefficientSet
from engine.combination.linear import Part
from engine.combination.matching import (
    CELL_TOLERANCE,
    Matched,
    check_alike,
    common_group,
    keys_of,
    positions_in,
    same_keys,
)
from engine.combination.scales import REFERENCE, Scale, ScaleChoice, find_scale
from engine.errors import InputError
from engine.symmetry.group import Group


@dataclass(frozen=True, slots=True, kw_only=True)
class Gathered:
    """The terms that any of S sets has: U terms in lexical order.

    Attributes
    ----------
    leader : CoefficientSet
        Whose cell, unit and scale the others are brought to.
    sets : tuple of CoefficientSet
    names : tuple of str
        What messages call them.
    indices : int64, shape (U, d)
    rows : int64, shape (S, U)
        Row of each set that is the term; meaningless where it is absent.
    present : bool, shape (S, U)
    group : Group or None
        Operations common to all.
    scales : tuple of Scale
        What multiplies each set.
    choice : ScaleChoice
    notes : tuple of str
        How the cells and the groups differ.
    """

    leader: CoefficientSet
    sets: tuple[CoefficientSet, ...]
    names: tuple[str, ...]
    indices: IntArray
    rows: IntArray
    present: BoolArray
    group: Group | None
    scales: tuple[Scale, ...]
    choice: ScaleChoice
    notes: tuple[str, ...]

    @property
    def zero(self) -> BoolArray:
        """Where the zero term is; shape (U,)."""
        return np.asarray(~self.indices.any(axis=1), dtype=np.bool_)

    def phased(self, number: int) -> BoolArray:
        """Terms that a set has with their phase; shape (U,)."""
        made: BoolArray = self.present[number].copy()
        made[made] = self.sets[number].phase_known[self.rows[number][made]]
        return made

    def factors(self, number: int, terms: IntArray) -> FloatArray:
        """What the scale makes of a set's terms: k exp(−B s²); shape of `terms`.

        A mean that was given in the unit of an absolute density is not on the scale of the measured terms.
        """
        made = self.scales[number].factors(self.leader.lattice, self.indices[terms])
        if self._mean_is_absolute(number):
            made = np.where(self.zero[terms], 1.0, made)
        return made

    def part(self, number: int, terms: IntArray, weights: FloatArray, *, apply_merit: bool = False) -> Part:
        """A set's share of a sum over chosen terms, with weights of the same shape; absent terms add nothing."""
        source = self.sets[number]
        held = self.present[number][terms]
        rows = self.rows[number][terms[held]]
        factors = (weights * self.factors(number, terms))[held]
        if apply_merit and source.merit is not None:
            factors = factors * source.merit[rows]
        return Part(
            source=source,
            name=self.names[number],
            rows=rows,
            places=np.flatnonzero(held).astype(np.int64),
            factors=factors,
        )

    def zero_term(self, terms: IntArray) -> str:
        """What a zero term made of those of the sets is: `measured`, `given` or `absent`."""
        at_zero = terms[self.zero[terms]]
        if not at_zero.size:
            return "absent"
        kinds = {one.tally.zero_term for one, held in zip(self.sets, self.present[:, at_zero[0]], strict=True) if held}
        return "given" if kinds == {"given"} else "measured"

    def words(self) -> tuple[str, ...]:
        """What was done to the scales."""
        moved = [number for number, scale in enumerate(self.scales) if scale is not REFERENCE]
        told = [self.scales[number].words for number in moved]
        kept = [self.names[number] for number in moved if self._mean_is_absolute(number)]
        if kept and self.choice.kind != "as_given":
            told.append(f"the mean of {', '.join(kept)} was given in {self.leader.unit} and is left unscaled")
        return tuple(told)

    def _mean_is_absolute(self, number: int) -> bool:
        source = self.sets[number]
        return source.tally.zero_term == "given" and source.unit == self.leader.unit != "arbitrary"

    def only(self, number: int) -> Gathered:
        """One of the sets, on the scale it was brought to."""
        return replace(
            self,
            sets=(self.sets[number],),
            names=(self.names[number],),
            rows=self.rows[[number]],
            present=self.present[[number]],
            group=self.sets[number].group,
            scales=(self.scales[number],),
            notes=(),
        )


def gather(
    sets: Sequence[CoefficientSet],
    names: Sequence[str],
    choice: ScaleChoice,
    *,
    cell_tolerance: float = CELL_TOLERANCE,
) -> Gathered:
    """Bring sets side by side and to the scale of the first.

    Raises
    ------
    InputError
        No set, an empty one, or as `check_alike` and `find_scale`.
    """
    if not sets:
        raise InputError("sets", "is empty", "give at least one set")
    for one, name in zip(sets, names, strict=True):
        if not one.count:
            raise InputError(name, "holds no coefficients", "give a set that has some")
    notes = check_alike(sets, names, cell_tolerance)
    group, told = common_group(sets)
    keys = keys_of(sets)
    distinct = [one for number, one in enumerate(keys) if number == 0 or not np.array_equal(one, keys[0])]
    # The keys of each set ascend already: merging runs is much faster than hashing.
    union = np.sort(np.concatenate(distinct), kind="stable")
    union = union[np.concatenate([[True], union[1:] != union[:-1]])]
    found = [positions_in(one, union) for one in keys]
    rows = np.stack([place for place, _ in found])
    present = np.stack([held for _, held in found])
    indices = np.empty((union.size, sets[0].lattice.dimension), dtype=np.int64, order="F")
    for one, place, held in zip(sets, rows, present, strict=True):
        indices[held] = one.indices[place[held]]
    scales = [REFERENCE]
    for number in range(1, len(sets)):
        matched = None
        if choice.kind == "fitted":
            at_first, at_other = same_keys(keys[0], keys[number])
            nothing = np.zeros(0, dtype=np.int64)
            pair, _ = common_group([sets[0], sets[number]])
            matched = Matched(
                first=at_first, second=at_other, only_first=nothing, only_second=nothing, group=pair, notes=()
            )
        scales.append(find_scale(sets[0], sets[number], choice, matched=matched, name=names[number]))
    return Gathered(
        leader=sets[0],
        sets=tuple(sets),
        names=tuple(names),
        indices=indices,
        rows=rows,
        present=present,
        group=group,
        scales=tuple(scales),
        choice=choice,
        notes=(*notes, *told),
    )

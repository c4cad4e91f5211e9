"""Which terms of two coefficient sets are the same, and what the sets share besides."""

from __future__ import annotations

import itertools
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from engine.arrays import BoolArray, IntArray, as_positive
from engine.coefficients import CoefficientSet
from engine.errors import InputError
from engine.lattice import Lattice
from engine.symmetry.group import Group

CELL_TOLERANCE = 0.01
"""Cells of isomorphous crystals differ by less: lengths by this part, cosines of angles by this much."""
SAME_CELL = 1e-9
"""Cells closer than this are one cell written twice."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Matched:
    """Rows of two sets that are the same term.

    Attributes
    ----------
    first, second : int64, shape (M,)
        Rows of each set with the same indices, in the order of the first set.
    only_first, only_second : int64
        Rows of terms that the other set lacks.
    group : Group or None
        Operations under which both densities are invariant; None where one set names none.
    notes : tuple of str
        How the cells and the groups differ.
    """

    first: IntArray
    second: IntArray
    only_first: IntArray
    only_second: IntArray
    group: Group | None
    notes: tuple[str, ...]


def match(first: CoefficientSet, second: CoefficientSet, *, cell_tolerance: float = CELL_TOLERANCE) -> Matched:
    """Match the terms of two sets by their indices.

    Parameters
    ----------
    cell_tolerance : float
        Largest relative difference of cell lengths, and of cosines of angles.

    Raises
    ------
    InputError
        Sets of different dimension, one of a real and one of a complex density, or cells that
        differ beyond the tolerance.
    """
    notes = check_alike([first, second], ("first", "second"), cell_tolerance)
    group, told = common_group([first, second])
    keys, other = keys_of([first, second])
    at_first, at_second = same_keys(keys, other)
    return Matched(
        first=at_first,
        second=at_second,
        only_first=_others(at_first, first.count),
        only_second=_others(at_second, second.count),
        group=group,
        notes=(*notes, *told),
    )


def check_alike(
    sets: Sequence[CoefficientSet], names: Sequence[str], cell_tolerance: float = CELL_TOLERANCE
) -> tuple[str, ...]:
    """Whether all sets can be combined with the first; how their cells differ, in words.

    Raises
    ------
    InputError
        As `match`.
    """
    tolerance = as_positive(cell_tolerance, "cell_tolerance", "relative")
    first, notes = sets[0], []
    for other, name in zip(sets[1:], names[1:], strict=True):
        if other.lattice.dimension != first.lattice.dimension:
            raise InputError(
                name,
                f"has {other.lattice.dimension} indices a term, {names[0]} has {first.lattice.dimension}",
                "combine sets of one kind of lattice",
            )
        if other.real != first.real:
            kinds = ("complex", "real")
            raise InputError(
                name,
                f"is of a {kinds[other.real]} density, {names[0]} of a {kinds[first.real]} one",
                "assemble both as real, or both as complex",
            )
        lengths, cosines = _cell_difference(first.lattice, other.lattice)
        if max(lengths, cosines) > tolerance:
            raise InputError(
                name,
                f"has the cell {cell_words(other.lattice)}, {names[0]} has {cell_words(first.lattice)}: lengths differ "
                f"by up to {100 * lengths:.3g} %, cosines of angles by up to {cosines:.3g}",
                "give sets on one cell, index both in the same setting, or raise cell_tolerance",
            )
        if max(lengths, cosines) > SAME_CELL:
            notes.append(
                f"the cell of {name} ({cell_words(other.lattice)}) differs from that of {names[0]} by up to "
                f"{100 * lengths:.2g} % in length and {cosines:.2g} in the cosines of angles: the cell of {names[0]} "
                f"({cell_words(first.lattice)}) is used"
            )
    return tuple(notes)


def common_group(sets: Sequence[CoefficientSet]) -> tuple[Group | None, tuple[str, ...]]:
    """The operations that all sets have, and what is to be said of them.

    A combination of densities is invariant under the operations common to all.
    """
    groups = [one.group for one in sets]
    present = [group for group in groups if group is not None]
    if not present:
        return None, ()
    if len(present) < len(groups):
        return None, (
            "not all sets name their symmetry: none is taken to be common, and errors of terms that symmetry "
            "relates are taken as independent",
        )
    tables = [_operations(group) for group in present]
    first, common = present[0], set(tables[0]).intersection(*tables[1:])
    if all(len(table) == len(common) for table in tables):
        return first, ()
    # The order of the first group's operations, the identity in front.
    kept = np.array([row for key, row in tables[0].items() if key in common])
    names = tuple(dict.fromkeys(group.name for group in present))
    made = Group(
        rotations=first.rotations[kept],
        translations=first.translations[kept],
        name=f"the {len(kept)} operations common to {' and '.join(names)}",
    )
    return made, (
        f"the sets have different symmetry: their combination has {made.name}, and errors of terms that the others "
        "relate are taken as independent",
    )


def keys_of(sets: Sequence[CoefficientSet]) -> list[IntArray]:
    """One whole number for each term, the same in all sets, ascending in lexical order of the indices."""
    reach = max((int(np.abs(one.indices).max(initial=0)) for one in sets), default=0)
    base = 2 * reach + 1
    dimension = sets[0].lattice.dimension
    if (base**dimension - 1) // 2 > np.iinfo(np.int64).max:
        raise InputError("indices", f"reach ±{reach}", "check the indices")
    weights = np.array([base**power for power in range(dimension - 1, -1, -1)], dtype=np.int64)
    return [np.asarray(one.indices @ weights) for one in sets]


def same_keys(keys: IntArray, other: IntArray) -> tuple[IntArray, IntArray]:
    """Places of the keys that both have, in the order of the first; keys are distinct in each."""
    if keys.size == other.size and np.array_equal(keys, other):
        every = np.arange(keys.size, dtype=np.int64)
        return every, every
    place, found = positions_in(other, keys)
    return np.flatnonzero(found).astype(np.int64), place[found]


def positions_in(keys: IntArray, wanted: IntArray) -> tuple[IntArray, BoolArray]:
    """Where each wanted key stands among distinct keys, and whether it does; (N,), (M,) -> (M,), (M,)."""
    if not keys.size:
        return np.zeros(wanted.size, dtype=np.int64), np.zeros(wanted.size, dtype=np.bool_)
    order = None
    if not np.all(keys[1:] > keys[:-1]):
        order = np.argsort(keys, kind="stable")
        keys = keys[order]
    place = np.minimum(np.searchsorted(keys, wanted), keys.size - 1)
    found = np.asarray(keys[place] == wanted)
    return np.asarray(place if order is None else order[place]), found


def cell_words(lattice: Lattice) -> str:
    """Lengths and angles of a cell."""
    lengths = " × ".join(f"{length:.5g}" for length in lattice.lengths)
    if lattice.dimension == 1:
        return f"{lengths} Å"
    cosines = _cosines(lattice)
    angles = ", ".join(f"{np.degrees(np.arccos(np.clip(cosine, -1, 1))):.5g}°" for cosine in cosines)
    return f"{lengths} Å, {angles}"


def _cell_difference(first: Lattice, other: Lattice) -> tuple[float, float]:
    """Largest relative difference of lengths and largest difference of cosines of angles."""
    lengths = float(np.abs(other.lengths / first.lengths - 1).max())
    cosines = np.subtract(_cosines(other), _cosines(first))
    return lengths, float(np.abs(cosines).max(initial=0.0))


def _cosines(lattice: Lattice) -> list[float]:
    """Of α, β, γ; of γ in the plane; none of a stack."""
    unit = lattice.vectors / lattice.lengths[:, None]
    pairs = list(itertools.combinations(range(lattice.dimension), 2))[::-1]
    return [float(unit[i] @ unit[j]) for i, j in pairs]


def _operations(group: Group) -> dict[tuple[object, ...], int]:
    """Each operation, comparable between groups, and its place."""
    # Translations are fractions with denominators up to 24: no two are as close as these steps.
    steps = np.rint(group.translations * 12144).astype(np.int64)
    return {
        (rotation.tobytes(), *shift): row
        for row, (rotation, shift) in enumerate(zip(group.rotations, steps.tolist(), strict=True))
    }


def _others(rows: IntArray, count: int) -> IntArray:
    left = np.ones(count, dtype=np.bool_)
    left[rows] = False
    return np.flatnonzero(left).astype(np.int64)

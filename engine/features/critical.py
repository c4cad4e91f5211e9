"""Critical points of a field: all there are in a cell, or those of some kinds in a region.

The search is judged where it can be: in a whole cell the numbers of critical points obey Morse's relations.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from engine.arrays import FloatArray, IntArray, as_positive
from engine.coefficients import CoefficientSet
from engine.errors import InputError
from engine.features.jets import JetField
from engine.features.morse import Morse, morse
from engine.features.refine import newton_steps
from engine.features.search import COARSEST, DIVISIONS, Tally, Wanted, prepare_search, run
from engine.features.sites import SAME, Sites, held_group, merged, sites_of
from engine.fields import Multipliers
from engine.series import Series
from engine.symmetry.group import Group
from engine.symmetry.metric import check_metric
from engine.synthesis import Progress

VANISHING = 1e-7
"""Smallest curvature, relative to the largest of the same point, that is told from zero."""
ROUNDING = 1e-13
"""And relative to Σ |G|² |n_G|."""
UNSETTLED = 3e-7
"""Å. A Newton step that is still as long where the slope is zero but for rounding tells of a vanishing curvature."""
FINER = (1.0, 1.6, 2.5)
"""Where topology says that some were missed, the search is repeated on grids finer by these."""


@dataclass(frozen=True, slots=True)
class CriticalPoints:
    """Distinct regular critical points, one of each set of equivalents.

    Attributes
    ----------
    value : float64, shape (M,)
    index : int64, shape (M,)
        Negative curvatures.
    sites : Sites
    tally : Tally
        What the search did.
    cell : Morse or None
        The numbers in the cell, where all were sought.
    notes : tuple of str
        What is missing, in words.
    """

    value: FloatArray
    index: IntArray
    sites: Sites
    tally: Tally
    cell: Morse | None = None
    notes: tuple[str, ...] = ()

    def numbers(self, dimension: int) -> Morse:
        counts = [int(self.sites.multiplicity[self.index == k].sum()) for k in range(dimension + 1)]
        return morse(counts)


def varying_field(made: Multipliers) -> JetField:
    """The field of a real set, refused where its extrema would be lines or planes.

    Raises
    ------
    InputError
        The coefficients span fewer directions than the lattice has.
    """
    used = made.used
    values = used.values * made.factors[0]
    kept = np.abs(values) > 0
    d = used.lattice.dimension
    rank = int(np.linalg.matrix_rank(used.indices[kept].astype(np.float64))) if kept.any() else 0
    if rank < d:
        raise InputError(
            "field",
            f"varies along {rank} of {d} directions: its coefficients other than zero span no more",
            "ask for a profile along the normal instead, or give the set on a lattice of fewer dimensions"
            if rank
            else "give coefficients other than the zero term",
        )
    return JetField.of(Series(used.lattice, np.asfortranarray(used.indices[kept]), values[kept], real=True))


def symmetry_of(coefficients: CoefficientSet, field: JetField) -> tuple[Group, list[str]]:
    """The operations that the field has, at least the identity; and what to say of those that it lacks."""
    given, d = coefficients.group, coefficients.lattice.dimension
    if given is None:
        return Group(rotations=np.eye(d, dtype=np.int64)[None], translations=np.zeros((1, d)), name="identity"), []
    check_metric(coefficients.lattice, given)
    held = held_group(given, field)
    if held is given:
        return held, []
    return held, [f"The field as treated has {held.name}: what the others relate is listed apart."]


def critical_points(
    field: JetField,
    wanted: Wanted,
    group: Group,
    *,
    spacing: float | None = None,
    max_bytes: int | None = None,
    progress: Progress | None = None,
) -> CriticalPoints:
    """Critical points of the kinds wanted; others may be among them.

    Raises
    ------
    InputError
        The spacing is not a positive length or too coarse.
    TooLargeError
        The search would take more than `max_bytes`.
    """
    finest = 2 * np.pi / field.g_max
    whole = len(wanted.indices) == field.dimension + 1 and wanted.region is None
    whole &= not np.isfinite(wanted.least) and not np.isfinite(wanted.greatest)
    if spacing is not None:
        as_positive(spacing, "spacing", "Å")
        if spacing > finest / COARSEST * (1 + 1e-9):
            raise InputError(
                "spacing",
                f"is {spacing:g} Å where the smallest spacing d summed is {finest:.4g} Å",
                f"give at most {finest / COARSEST:.4g} Å",
            )
    notes: list[str] = []
    for finer in FINER if spacing is None else (1.0,):
        step = spacing if spacing is not None else finest / DIVISIONS / finer
        search = prepare_search(field, step, max_bytes)
        places, tally = run(search, wanted, progress)
        points = _regular(field, group, places, tally)
        numbers = points.numbers(field.dimension) if whole else None
        if numbers is None or numbers.holds or points.tally.degenerate:
            break
    if points.tally.degenerate:
        notes.append(
            f"The search ended at {points.tally.degenerate} positions where a curvature vanishes; such critical "
            "points, which may form lines or planes, are left out, and the others may be incomplete."
        )
    elif numbers is not None and not numbers.holds:
        notes.append(
            f"The numbers of critical points in the cell, {numbers.counts} with 0, 1, … negative curvatures, cannot "
            "be all: search with a finer spacing."
        )
    return replace(points, cell=numbers, notes=tuple(notes))


def _regular(field: JetField, group: Group, places: FloatArray, tally: Tally) -> CriticalPoints:
    lattice = field.series.lattice
    jets = field.at(places)
    curvatures = np.linalg.eigvalsh(jets.hessian)
    size = np.abs(curvatures)
    regular = size.min(axis=1) > np.maximum(VANISHING * size.max(axis=1), ROUNDING * field.sums[2])
    # Where curvatures vanish too, the slope vanishes but for rounding at positions that are still apart.
    regular &= newton_steps(jets.gradient, jets.hessian, 1.0)[1] < UNSETTLED
    index = np.count_nonzero(curvatures[regular] < 0, axis=1).astype(np.int64)
    sites = sites_of(lattice, group, places[regular], index)
    vanishing = places[~regular]
    return CriticalPoints(
        value=jets.value[regular][sites.rows],
        index=index[sites.rows],
        sites=sites,
        tally=replace(
            tally, degenerate=len(merged(lattice, vanishing, np.zeros(len(vanishing), dtype=np.int64), SAME))
        ),
    )

"""How much of what a cell makes possible was observed."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from engine.arrays import FloatArray, IntArray
from engine.reflections import Reflections
from engine.shells import equal_shells
from engine.symmetry.enumeration import MARGIN, unique_reflections
from engine.symmetry.group import Group
from engine.symmetry.metric import METRIC_TOLERANCE
from engine.symmetry.reflections import classify, orbits


@dataclass(frozen=True, slots=True, kw_only=True)
class Completeness:
    """Unique reflections possible and observed, by shells from low to high resolution.

    Attributes
    ----------
    possible, observed : int64, shape (S,)
        Not systematically absent; the zero term is not counted.
    d_max, d_min : float64, shape (S,)
        Largest and smallest spacing of the possible reflections of a shell, Å.
    outside : int
        Unique observed reflections that are not counted: outside the range, or the zero term.
    absent : int
        Unique observed reflections that are not counted: systematically absent.
    """

    possible: IntArray
    observed: IntArray
    d_max: FloatArray
    d_min: FloatArray
    outside: int
    absent: int

    @property
    def fraction(self) -> float:
        """Observed over possible, all shells together."""
        return float(self.observed.sum() / self.possible.sum())


def completeness(
    reflections: Reflections,
    group: Group,
    *,
    friedel: bool,
    d_min: float,
    d_max: float | None = None,
    shells: int | None = None,
    metric_tolerance: float = METRIC_TOLERANCE,
) -> Completeness:
    """Count the unique reflections possible and observed with d_min ≤ d ≤ d_max (Å).

    Parameters
    ----------
    reflections : Reflections
        Equivalents and repeats count once.
    group : Group
    friedel : bool
        Whether Friedel mates count as one.
    d_min, d_max : float
        Å.
    shells : int, optional
        See `engine.shells.equal_shells`.

    Raises
    ------
    InputError
        As `unique_reflections` and `equal_shells`; no reflection is possible in the range.
    TooLargeError
        The range holds too many indices to be looked at.
    """
    lattice = reflections.lattice
    possible = unique_reflections(lattice, group, d_min, d_max, friedel=friedel, metric_tolerance=metric_tolerance)
    parted = equal_shells(lattice, possible, shells)
    seen = orbits(reflections.indices, group, friedel=friedel).unique
    absent = classify(seen, group).absent
    seen = seen[~absent]
    spacing = lattice.spacings(seen)
    high = np.inf if d_max is None else d_max * (1 + MARGIN)
    inside = seen.any(axis=1) & (spacing >= d_min * (1 - MARGIN)) & (spacing <= high)
    shell = parted.of(lattice, possible)
    number = np.bincount(shell, minlength=parted.count)
    # Sorted by |G| the possible reflections lie shell after shell.
    ranked = 2 * np.pi / np.sort(lattice.magnitudes(possible))
    ends = np.cumsum(number)
    return Completeness(
        possible=number.astype(np.int64),
        observed=np.bincount(parted.of(lattice, seen[inside]), minlength=parted.count).astype(np.int64),
        d_max=ranked[ends - number],
        d_min=ranked[ends - 1],
        outside=int(np.count_nonzero(~inside)),
        absent=int(np.count_nonzero(absent)),
    )

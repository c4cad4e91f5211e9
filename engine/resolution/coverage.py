"""How many of the terms that a lattice has within a set's resolution are in the set, and which are not."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from engine.arrays import BoolArray, FloatArray, IntArray
from engine.coefficients import CoefficientSet
from engine.resolution.region import held, region_of
from engine.symmetry.group import Group
from engine.symmetry.reflections import classify

MOST_POINTS = 5e6
"""Points of the lattice up to which each is looked at; of more the number is estimated."""
LOW_POINTS = 1e5
"""Where it is estimated, gaps are looked for among so many points of lowest order."""
GAPS = 5


@dataclass(frozen=True, slots=True, kw_only=True)
class Coverage:
    """Terms possible and present, the zero term aside; Friedel pairs count once where the density is real.

    Attributes
    ----------
    d_min : float
        Down to which terms are counted, Å: the smallest spacing of the set's terms with a phase (of
        all its terms where none has one). There is no upper limit.
    possible : int
        Terms of the lattice in the region that the set's group, where it has one, does not forbid.
    present : int
        Of these, in the set with a phase.
    without_phase : int
        In the set without a phase.
    missing : int
        Not in the set.
    gaps : int64, shape (n, d), n ≤ 5
        Of the terms that are missing or without phase those of largest spacing, in that order.
    gap_spacings : float64, shape (n,)
        Their d, Å.
    region : str
        Which lattice the terms are counted in, in words.
    estimated : bool
        Whether ``possible`` comes from volumes instead of a count; gaps are then sought among the
        lowest orders only.
    """

    d_min: float
    possible: int
    present: int
    without_phase: int
    missing: int
    gaps: IntArray
    gap_spacings: FloatArray
    region: str
    estimated: bool

    @property
    def fraction(self) -> float:
        """Present with a phase, of those possible."""
        return self.present / self.possible if self.possible else 1.0


def coverage(coefficients: CoefficientSet) -> Coverage | None:
    """Count the terms that are possible and present.

    Where all terms of the set are parallel, or lie in one plane of reciprocal space, only that row or
    plane is counted: the set is one of a profile or of a projection.

    Returns
    -------
    Coverage or None
        None for a set of the zero term alone.
    """
    known = coefficients.phase_known
    with_phase = coefficients.indices[known]
    measured = with_phase if with_phase.any() else coefficients.indices
    lattice = coefficients.lattice
    region = region_of(lattice, measured)
    if region is None:
        return None
    g_max = float(lattice.magnitudes(measured).max())
    half = 2 if coefficients.real else 1
    estimated = region.work(g_max) > MOST_POINTS * half
    reach = g_max
    if estimated:
        reach = g_max * min((LOW_POINTS * half / region.work(g_max)) ** (1 / region.rank), 1.0)
    points = region.points(reach, friedel=coefficients.real)
    points = points[~forbidden(points, coefficients.group)]
    phased = held(points, with_phase)
    unphased = held(points, coefficients.indices[~known])
    open_points = points[~phased]
    spacings = lattice.spacings(open_points)
    first = np.argsort(-spacings, kind="stable")[:GAPS]
    possible, present, without = len(points), int(phased.sum()), int(unphased.sum())
    if estimated:
        centring = 1 if coefficients.group is None else len(coefficients.group.centring)
        possible = math.ceil(region.expected(g_max) / half / centring)
        present = int(np.count_nonzero(with_phase.any(axis=1)))
        others = lattice.magnitudes(coefficients.indices[~known])
        without = int(np.count_nonzero((others > 0) & (others <= g_max)))
        possible = max(possible, present + without)
    return Coverage(
        d_min=2 * math.pi / g_max,
        possible=possible,
        present=present,
        without_phase=without,
        missing=possible - present - without,
        gaps=open_points[first],
        gap_spacings=spacings[first],
        region=region.words(),
        estimated=estimated,
    )


def forbidden(points: IntArray, group: Group | None) -> BoolArray:
    """Which points (M, d) are systematically absent; shape (M,)."""
    if group is None or not group.numerators.any():
        return np.zeros(len(points), dtype=np.bool_)
    # Centring forbids most of what is forbidden, and is asked quickly.
    made = np.asarray(np.any((points @ group.centring.T) % group.denominator != 0, axis=1))
    made[~made] = classify(points[~made], group).absent
    return made

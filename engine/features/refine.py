"""Critical points of a series from positions nearby: Newton's method on the gradient, all positions at once.

The step −H⁻¹g is shortened to a trust radius, and halved where it does not make |g| smaller: a
direction in which |g|² falls exists wherever H is regular (Dennis & Schnabel, Numerical Methods for
Unconstrained Optimization and Nonlinear Equations, 1983, §6.5). So minima, maxima and saddles are found alike.
Uphill, every curvature is taken for negative and halving ends where the value rises: that leads to a maximum
from all its basin, which between two saddles Newton's step hardly meets; downhill likewise.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from engine.arrays import BoolArray, FloatArray, IntArray
from engine.features.jets import EXACT, JetField
from engine.lattice import Lattice

STEP = 1e-9
"""Å. A position has converged when the next step is shorter."""
MOST_STEPS = 60
HALVINGS = 8
"""A step that has been halved so often without gain is given up."""
TINY = 1e-300
THINNED_AFTER = (1, 2, 3, 5)
SINGULAR = 1e-12
"""Curvatures below this, relative to the largest there, are raised to it for the step."""


@dataclass(frozen=True, slots=True)
class Refined:
    """Where Newton's method ended.

    Attributes
    ----------
    positions : float64, shape (K, d)
        Of those that converged; fractional.
    rows : int64, shape (K,)
        Start that each came from.
    index : int64, shape (K,)
        Negative curvatures at each.
    wandered : int
        Starts that led away farther than allowed.
    unsettled : int
        Starts from which the gradient could not be made to vanish.
    """

    positions: FloatArray
    rows: IntArray
    index: IntArray
    wandered: int
    unsettled: int


def newton_steps(
    gradient: FloatArray, hessian: FloatArray, radius: float, seek: int = 0
) -> tuple[FloatArray, FloatArray, IntArray]:
    """Steps no longer than `radius` (Cartesian, Å), their full lengths, and the Hessians' negative curvatures.

    gradient (M, d), hessian (M, d, d) -> (M, d), (M,), (M,). With `seek` = 1 uphill, −1 downhill.
    """
    curvature, axes = np.linalg.eigh(hessian)
    size = np.abs(curvature)
    slope = np.linalg.norm(gradient, axis=1, keepdims=True)
    # Where the field is flat altogether the step stays a number.
    least = np.maximum(SINGULAR * np.maximum(size.max(axis=1, keepdims=True), slope / radius), TINY)
    safe = np.copysign(np.maximum(size, least), np.full_like(curvature, -seek) if seek else curvature)
    along = -np.einsum("mij,mi->mj", axes, gradient) / safe
    length = np.linalg.norm(along, axis=1)
    along *= np.minimum(1.0, radius / np.maximum(length, TINY))[:, None]
    return np.einsum("mij,mj->mi", axes, along), length, np.count_nonzero(curvature < 0, axis=1).astype(np.int64)


def refine(
    field: JetField,
    starts: FloatArray,
    *,
    radius: float,
    reach: float,
    step: float = STEP,
    tolerance: float = EXACT,
    most: int = MOST_STEPS,
    thin: float | None = None,
    seek: int = 0,
) -> Refined:
    """Follow Newton's steps from fractional starts (M, d).

    Parameters
    ----------
    radius : float
        Longest single step, Å.
    reach : float
        Farthest a position may move from its start, Å.
    step : float
        Å; converged when the next step is shorter, or the gradient is zero but for rounding.
    tolerance : float
        Relative accuracy of the sums.
    most : int
        Steps after which a start is given up.
    thin : float, optional
        Å. Positions that come closer after the first steps, with as many negative curvatures, go on as one.
    seek : {0, 1, -1}
        1 looks uphill for maxima alone, −1 downhill for minima.
    """
    lattice = field.series.lattice
    count, d = starts.shape
    zero = tolerance * field.sums[1]
    # What a step may lose by rounding and still count as one that gains nothing.
    loss = tolerance * field.sums[0] if seek else 0.0
    sought = {1: d, -1: 0}.get(seek)
    place, moved = starts.copy(), np.zeros((count, d))
    base, base_moved = starts.copy(), np.zeros((count, d))
    offered, best = np.zeros((count, d)), np.full(count, np.inf)
    halvings = np.zeros(count, dtype=np.int64)
    index = np.zeros(count, dtype=np.int64)
    done: BoolArray = np.zeros(count, dtype=np.bool_)
    away: BoolArray = np.zeros(count, dtype=np.bool_)
    active = np.arange(count)
    joined = 0
    for number in range(most):
        if not active.size:
            break
        jets = field.at(place[active], tolerance)
        size = np.linalg.norm(jets.gradient, axis=1)
        merit = -seek * jets.value - loss if seek else size
        better = (merit < best[active]) | (size <= zero)
        won, lost = active[better], active[~better]
        steps, length, negative = newton_steps(jets.gradient[better], jets.hessian[better], radius, seek)
        base[won], base_moved[won], best[won], offered[won] = place[won], moved[won], merit[better] + loss, steps
        index[won], halvings[won] = negative, 0
        ended = (length < step) | (size[better] <= zero)
        done[won[ended]] = True
        if sought is not None:
            # On a saddle, exactly, there is no uphill.
            stuck = won[ended & (negative != sought)]
            done[stuck], halvings[stuck] = False, HALVINGS
        # The last step is short, and still an improvement where the gradient is more than rounding.
        steps[ended & (length >= step)] = 0.0
        offered[won] = steps
        offered[lost] *= 0.5
        halvings[lost] += 1
        place[active] = base[active] + lattice.to_fractional(offered[active])
        moved[active] = base_moved[active] + offered[active]
        away[active] = np.linalg.norm(moved[active], axis=1) > reach
        active = active[~done[active] & ~away[active] & (halvings[active] < HALVINGS)]
        if thin is not None and number in THINNED_AFTER:
            kept = thinned(lattice, place[active], index[active], thin)
            joined += active.size - kept.size
            active = active[kept]
    rows = np.flatnonzero(done & ~away)
    wandered = int(np.count_nonzero(away))
    return Refined(place[rows], rows, index[rows], wandered, count - rows.size - wandered - joined)


def thinned(lattice: Lattice, fractional: FloatArray, kind: IntArray, distance: float) -> IntArray:
    """One row of those of a kind in each small cell, about `distance` (Å) wide; (M, d), (M,) -> (K,).

    Unlike joining whatever is close, this never joins a long chain of positions.
    """
    counts = np.maximum(np.floor(lattice.lengths / distance), 1.0)
    cells = np.floor((fractional - np.floor(fractional)) * counts).astype(np.int64)
    return np.unique(np.column_stack([kind, cells]), axis=0, return_index=True)[1].astype(np.int64)

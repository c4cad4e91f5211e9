"""The most negative value of a point's response, and how far from the point it lies."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from engine.arrays import FloatArray, IntArray
from engine.lattice import Lattice
from engine.sampling.grids import AffineGrid, wrapped
from engine.series import Series
from engine.synthesis import Demand, fill, plan, result_dtype

MOST_SAMPLES = 40_000
"""Of a whole cell (its half) that is searched; larger cells are searched around the origin."""
PER_PERIOD = 5
"""Samples to the shortest period along an axis."""
PERIODS = 3
"""Shortest periods, in each direction, that a box around the origin reaches out to."""
WIDTHS = 1.5
"""Full widths that it reaches out to at least."""
MOST_ALONG = 60
"""Samples along half an axis of the box at the most: 61 × 121 × 121 of them take as long as the rest."""
TOLERANCE = 1e-3
"""Of the samples; what is found on them is followed on the sum itself."""
CANDIDATES = 8
"""Lowest samples, a period apart, that are followed to the bottom."""
EVALUATIONS = 1 << 19
"""Terms that are summed on the way; but the lowest is followed one step at least."""
STEPS = 8
FLAT = 2e-3
"""Curvatures below this part of the largest are not divided by: the minimum of a complete sphere is a
sphere, flat along itself."""
FARTHEST = 20
"""Cells along each axis, of a lattice as skew as can be, that are looked through for the nearest point."""
NOTHING = 1e-9
"""A value above −1e-9 is a zero."""


@dataclass(frozen=True, slots=True)
class Ripple:
    """Most negative value found (0 where none), its distance in Å, and the region searched."""

    value: float
    distance: float | None
    searched: str


def deepest(
    series: Series,
    weights: FloatArray,
    waves: FloatArray,
    directions: FloatArray,
    widths: FloatArray,
    largest: FloatArray,
) -> Ripple:
    """Search the response Σ w cos(G·r) for its most negative value.

    Parameters
    ----------
    series : Series
        Whose value (of a complex series its real part) the response is.
    weights, waves : float64, shapes (N,), (N, d)
        w and G.
    directions : float64, shape (d, d)
        Principal directions, rows.
    widths, largest : float64, shape (d,)
        Along each: full width at half maximum, Å; largest |G| component, Å⁻¹.
    """
    grid, searched = _whole_cell(series) or _box(series.lattice, directions, widths, largest)
    values = np.empty(grid.shape, dtype=result_dtype(series.real, "double"))
    fill(plan(series, grid, Demand(tolerance=TOLERANCE)).prepare(), values, threads=1)
    samples = np.asarray(values.real, dtype=np.float64)
    best, place = 0.0, None
    apart = math.pi / float(np.linalg.norm(largest))
    affordable = max(EVALUATIONS // weights.size, 1)
    steps = min(affordable, STEPS)
    for position in _lowest(series.lattice, grid, samples, apart)[: max(affordable // STEPS, 1)]:
        value, found = _followed(weights, waves, position, steps, apart)
        if value < best:
            best, place = value, found
    if place is None or best > -NOTHING:
        return Ripple(0.0, None, searched)
    return Ripple(best, distance_from_lattice(series.lattice, place), searched)


def _whole_cell(series: Series) -> tuple[AffineGrid, str] | None:
    """Half of the cell's samples, where they are few."""
    extent = np.maximum(np.abs(series.low), np.abs(series.high))
    counts = [max(PER_PERIOD * int(reach), 1) for reach in extent]
    shape = (counts[0] // 2 + 1, *counts[1:])
    if math.prod(shape) > MOST_SAMPLES:
        return None
    d = len(counts)
    grid = AffineGrid(np.zeros(d), np.diag(1.0 / np.array(counts)), shape, ("a", "b", "c")[:d], (0.0,) * d)
    return grid, "the whole cell"


def _box(lattice: Lattice, directions: FloatArray, widths: FloatArray, largest: FloatArray) -> tuple[AffineGrid, str]:
    """Half of a box around the origin along the principal directions."""
    varies = largest > 0
    period = 2 * math.pi / np.where(varies, largest, 1.0)
    reach = PERIODS * period
    reach = np.maximum(reach, np.where(np.isfinite(widths), WIDTHS * widths, 0.0))
    half = np.where(varies, np.minimum(np.ceil(reach / period * PER_PERIOD), MOST_ALONG), 0).astype(int)
    steps = lattice.to_fractional(directions * (reach / np.maximum(half, 1))[:, None])
    # The first axis, the sharpest, starts at the origin: the other half is the same by inversion.
    shape = (int(half[0]) + 1, *(2 * int(n) + 1 for n in half[1:]))
    origin = -(half[1:] @ steps[1:]) if half.size > 1 else np.zeros(1)
    grid = AffineGrid(origin, steps, shape, ("1", "2", "3")[: half.size], (0.0,) * half.size)
    spans = " × ".join(f"±{span:.3g} Å" if wide else "one point" for span, wide in zip(reach, varies, strict=True))
    return grid, f"a box around the origin along the principal directions, {spans}"


def _lowest(lattice: Lattice, grid: AffineGrid, values: FloatArray, apart: float) -> list[FloatArray]:
    """Cartesian positions of the lowest negative samples, no two nearer than `apart` (Å)."""
    flat = values.ravel()
    count = min(64, flat.size)
    order = np.argpartition(flat, count - 1)[:count]
    order = order[np.argsort(flat[order])]
    places = np.stack(np.unravel_index(order, grid.shape), axis=1)
    positions = lattice.to_cartesian(grid.origin + places @ grid.steps)
    chosen: list[FloatArray] = []
    made: list[FloatArray] = []
    for value, position, place in zip(flat[order].tolist(), positions, places, strict=True):
        if value < 0 and all(np.linalg.norm(position - other) > apart for other in chosen):
            chosen.append(position)
            made.append(position + lattice.to_cartesian(_parabolic(values, place) @ grid.steps))
        if len(chosen) == CANDIDATES:
            break
    return made


def _parabolic(values: FloatArray, place: IntArray) -> FloatArray:
    """From a sample to the bottom of the parabola through it and its neighbours, steps along each axis."""
    shift = np.zeros(place.size)
    for axis, here in enumerate(place.tolist()):
        if 0 < here < values.shape[axis] - 1:
            line = values[tuple(slice(p, p + 1) if j != axis else slice(p - 1, p + 2) for j, p in enumerate(place))]
            before, middle, after = line.ravel().tolist()
            curvature = before - 2 * middle + after
            if curvature > 0:
                shift[axis] = min(max(0.5 * (before - after) / curvature, -0.5), 0.5)
    return shift


def _followed(
    weights: FloatArray, waves: FloatArray, position: FloatArray, steps: int, longest: float
) -> tuple[float, FloatArray]:
    """Newton's method down to the minimum near a position; the lowest value met, and where."""
    best, place = math.inf, position
    for step in range(steps + 1):
        angle = waves @ position
        cosines = weights * np.cos(angle)
        value = float(cosines.sum())
        if value >= best:
            break
        best, place = value, position
        if step == steps:
            break
        gradient = -(weights * np.sin(angle)) @ waves
        hessian = -(waves * cosines[:, None]).T @ waves
        curvature, axes = np.linalg.eigh(hessian)
        slopes = axes.T @ gradient
        usable = curvature > FLAT * float(np.abs(curvature).max())
        move = axes @ np.where(usable, -slopes / np.where(usable, curvature, 1.0), 0.0)
        length = float(np.linalg.norm(move))
        if length < 1e-6 * longest:
            break
        position = position + move * min(1.0, longest / length)
    return best, place


def distance_from_lattice(lattice: Lattice, position: FloatArray) -> float:
    """From the nearest lattice point, Å."""
    inside = wrapped(lattice.to_fractional(position))
    near = float(np.linalg.norm(lattice.to_cartesian(inside)))
    # |x_j| ≤ |g_j| r/2π within a distance r: in a skew cell other lattice points may be nearer.
    reach = np.linalg.norm(lattice.reciprocal, axis=1) * near / (2 * math.pi)
    axes = [np.arange(-n, n + 1) for n in np.minimum(np.ceil(reach), FARTHEST).astype(int).tolist()]
    around = np.stack(np.meshgrid(*axes, indexing="ij"), axis=-1).reshape(-1, inside.size)
    return float(np.linalg.norm(lattice.to_cartesian(inside + around), axis=1).min())

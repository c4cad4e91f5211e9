"""Where critical points of a series may lie: a grid over the cell, block by block.

The gradient at a displacement x from a sample is g + Hx but for third derivatives. In the axes of H a
zero within the radius r of a sample, half the diagonal of a grid cell, needs |g_i| ≤ |λ_i| r in each; the
rest, (Σ max(0, |g_i| − |λ_i| r)²)^½, is what third derivatives would have to make up. A sample stays a
candidate while they can. So pairs of extrema and saddles that have almost merged are found too, where
−H⁻¹g points nowhere.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace

import numpy as np

from engine.arrays import BoolArray, FloatArray, IntArray
from engine.errors import TooLargeError
from engine.features.jets import JetField, blocks
from engine.features.refine import newton_steps, refine, thinned
from engine.features.regions import Region, images_inside
from engine.features.sites import Domain
from engine.sampling import full_cell_by_spacing
from engine.sampling.grids import AffineGrid
from engine.synthesis import Plan, Progress

DIVISIONS = 6.0
"""Samples to the smallest spacing d."""
COARSEST = 3.0
"""Fewest that a caller may choose: with fewer, neighbouring extrema share a sample."""
MARGIN = 1.1
"""The Hessian changes within r: radius for |λ_i|, relative to r."""
THIRD = {1: 1.0, 2: 0.7, 3: 0.3}
"""Share of the norm of all third derivatives that those along one direction may have, by dimension. With two
thirds of it no pair of extrema was lost in some thousand random sets, with half of it every fifth stack lost one."""
FOURTH = 0.1
"""Fourth derivatives to reckon with, relative to the Hessian's norm times G_max²."""
REACH = 3.0
"""Steps of the grid that a candidate may wander."""
ROUGH = 1e-3
"""Step of the grid at which the first, rough refinement ends."""
ROUGH_TOLERANCE = 1e-7
ROUGH_STEPS = 16
"""Newton's method near a critical point needs few; each step halves the distance from one that is nearly degenerate."""
THIN = 0.02
"""Step of the grid within which candidates on their way are taken for one."""
BATCH = 1 << 17
"""Candidates that are refined together."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Tally:
    """What a search did.

    Attributes
    ----------
    shape : tuple of int
        Samples along each direct vector.
    spacing : float
        Longest step of the grid, Å.
    candidates : int
        Starts of Newton's method and of the ways uphill and downhill.
    wandered : int
        Of these, those that led farther away than three steps of the grid; what they led to has candidates of
        its own.
    unsettled : int
        Those that led nowhere.
    degenerate : int
        Critical points left out because a curvature vanishes there.
    """

    shape: tuple[int, ...]
    spacing: float
    candidates: int = 0
    wandered: int = 0
    unsettled: int = 0
    degenerate: int = 0


@dataclass(frozen=True, slots=True, kw_only=True)
class Wanted:
    """What a search is for, so that it may pass over the rest.

    Attributes
    ----------
    indices : tuple of int
        Numbers of negative curvatures.
    least, greatest : float
        Bounds of the value.
    region : Region or None
    domain : Domain or None
        A part of the cell that holds one of each set of equivalent positions.
    """

    indices: tuple[int, ...]
    least: float = -np.inf
    greatest: float = np.inf
    region: Region | None = None
    domain: Domain | None = None


@dataclass(frozen=True, slots=True)
class Search:
    """A search that has been costed."""

    field: JetField
    grid: AffineGrid
    plans: tuple[Plan, ...]
    radius: float
    step: float
    bytes: int


def prepare_search(field: JetField, spacing: float, max_bytes: int | None = None) -> Search:
    """Cost a search on a grid of the given spacing (Å).

    Raises
    ------
    InputError
        The grid would be absurdly fine.
    TooLargeError
        It would take more than `max_bytes`.
    """
    lattice, d = field.series.lattice, field.dimension
    grid = full_cell_by_spacing(lattice, spacing)
    plans = field.plans(grid)
    steps = lattice.to_cartesian(grid.steps)
    corners = np.stack(np.meshgrid(*[(-0.5, 0.5)] * d, indexing="ij"), axis=-1).reshape(-1, d)
    radius = float(np.linalg.norm(corners @ steps, axis=1).max())
    numbers = len(plans)
    rest = grid.samples // grid.shape[0]
    # A block of planes is what a plan makes of its second-level cache: at most an eighth of the planes or few MiB.
    block = min(grid.samples, max(rest, grid.samples // 8 + 1, 1 << 18))
    held = 8 * (3 * numbers * block + min(BATCH + block, grid.samples) * (numbers + 4 * d * d + 12 * d))
    found = 8 * (grid.samples // 50) * (numbers + 6 * d * d)
    total = sum(one.chosen.workspace for one in plans) + held + found + 64 * field.series.count * numbers
    if max_bytes is not None and total > max_bytes:
        raise TooLargeError(
            "spacing",
            f"a search at {spacing:.3g} Å would take {total / 2**20:,.0f} MiB, more than the limit of "
            f"{max_bytes / 2**20:,.0f} MiB",
            "cut the set at a larger d_min, search with a coarser spacing, or raise the limit",
        )
    return Search(field, grid, plans, radius, float(np.linalg.norm(steps, axis=1).max()), total)


def run(search: Search, wanted: Wanted, progress: Progress | None = None) -> tuple[FloatArray, Tally]:
    """Critical points, each found once but for equivalents by symmetry.

    Returns
    -------
    float64, shape (K, d)
        Fractional positions in [0, 1); those of other kinds than wanted may be among them.
    Tally
    """
    field, step = search.field, search.step
    lattice = field.series.lattice
    tally = Tally(shape=search.grid.shape, spacing=step)
    places, kinds = [np.zeros((0, field.dimension))], [np.zeros(0, dtype=np.int64)]
    for starts, may in _batches(_candidates(search, wanted, progress)):
        for seek, rows in _searches(wanted.indices, may):
            rough = refine(
                field,
                starts[rows],
                radius=step,
                reach=REACH * step,
                step=ROUGH * step,
                tolerance=ROUGH_TOLERANCE,
                most=ROUGH_STEPS,
                thin=THIN * step,
                seek=seek,
            )
            kept = thinned(lattice, rough.positions, rough.index, ROUGH * step)
            places.append(rough.positions[kept])
            kinds.append(rough.index[kept])
            tally = replace(
                tally,
                candidates=tally.candidates + len(rows),
                wandered=tally.wandered + rough.wandered,
                unsettled=tally.unsettled + rough.unsettled,
            )
    rough_places, index = np.concatenate(places), np.concatenate(kinds)
    kept = thinned(lattice, rough_places, index, ROUGH * step)
    fine = refine(field, rough_places[kept], radius=step, reach=REACH * step)
    tally = replace(tally, wandered=tally.wandered + fine.wandered, unsettled=tally.unsettled + fine.unsettled)
    return fine.positions, tally


def _searches(indices: tuple[int, ...], may: BoolArray) -> Iterator[tuple[int, IntArray]]:
    """Uphill for maxima, downhill for minima, and towards all that is wanted where saddles are."""
    d = may.shape[1] - 1
    ends = {d: 1, 0: -1}
    for index in indices:
        if index in ends:
            yield ends[index], np.flatnonzero(may[:, index])
    if any(index not in ends for index in indices):
        yield 0, np.flatnonzero(may[:, list(indices)].any(axis=1))


def _candidates(search: Search, wanted: Wanted, progress: Progress | None) -> Iterator[tuple[FloatArray, BoolArray]]:
    """Starts from each block, displaced by their first step, fractional; and the indices that each may lead to."""
    field, grid, radius = search.field, search.grid, search.radius
    lattice = field.series.lattice
    planes = grid.shape[0]
    rest = grid.samples // planes
    for block in blocks(search.plans, grid):
        jets = block.jets
        norm = np.linalg.norm(jets.hessian, axis=(1, 2))
        slope = np.linalg.norm(jets.gradient, axis=1)
        slack = THIRD[field.dimension] * radius**2 / 2 * block.third
        slack += FOURTH * radius**3 / 6 * field.g_max**2 * norm
        # How far a value can lie from that of a sample within r.
        change = slope * radius + norm * radius**2 + slack * radius
        near = (slope <= MARGIN * norm * radius + slack) & (jets.value + change >= wanted.least)
        near &= jets.value - change <= wanted.greatest
        chosen = np.flatnonzero(near)
        counters = np.stack(np.unravel_index(chosen + block.start * rest, grid.shape), axis=-1)
        positions = counters / np.array(grid.shape)
        if wanted.region is not None:
            inside = np.unique(images_inside(wanted.region, lattice, positions, REACH * search.step)[0])
            chosen, positions = chosen[inside], positions[inside]
        if wanted.domain is not None:
            held = wanted.domain.holds(lattice, positions, 2 * radius)
            chosen, positions = chosen[held], positions[held]
        gradient, hessian = jets.gradient[chosen], jets.hessian[chosen]
        may = _may_hold(gradient, hessian, slack[chosen], radius)
        kept = np.flatnonzero(may[:, list(wanted.indices)].any(axis=1))
        start_steps, of = _first_steps(gradient[kept], hessian[kept], slack[chosen][kept], radius)
        yield positions[kept][of] + lattice.to_fractional(start_steps), may[kept][of]
        if progress is not None:
            progress(block.stop, planes)


def _may_hold(gradient: FloatArray, hessian: FloatArray, slack: FloatArray, radius: float) -> BoolArray:
    """Whether the gradient may vanish near each sample with 0, 1, … d negative curvatures; (M, d + 1)."""
    curvature, axes = np.linalg.eigh(hessian)
    along = np.abs(np.einsum("mij,mi->mj", axes, gradient))
    lacking = np.linalg.norm(np.maximum(along - MARGIN * radius * np.abs(curvature), 0.0), axis=1)
    # Third derivatives change a curvature within r by twice what they change the slope by, over r.
    change = (2 * slack / radius)[:, None]
    surely = np.count_nonzero(curvature < -change, axis=1)[:, None]
    perhaps = np.count_nonzero(curvature < change, axis=1)[:, None]
    number = np.arange(curvature.shape[1] + 1)
    return np.asarray((lacking <= slack)[:, None] & (surely <= number) & (number <= perhaps))


def _first_steps(
    gradient: FloatArray, hessian: FloatArray, slack: FloatArray, radius: float
) -> tuple[FloatArray, IntArray]:
    """Newton's step, and where a curvature may vanish nearby steps to both sides along its axis; rows they are of.

    Between an extremum and a saddle that have almost merged Newton's step leads to one of them or far away; from
    outside it leads to the nearer one.
    """
    steps, _, _ = newton_steps(gradient, hessian, radius)
    curvature, axes = np.linalg.eigh(hessian)
    flattest = np.abs(curvature).argmin(axis=1)
    rows = np.arange(len(gradient))
    flat = np.flatnonzero(np.abs(curvature[rows, flattest]) <= slack / radius)
    aside = radius * axes[flat, :, flattest[flat]]
    return np.concatenate([steps, aside, -aside]), np.concatenate([rows, flat, flat]).astype(np.int64)


def _batches(parts: Iterator[tuple[FloatArray, BoolArray]]) -> Iterator[tuple[FloatArray, BoolArray]]:
    waiting: list[tuple[FloatArray, BoolArray]] = []
    for part in parts:
        waiting.append(part)
        if sum(len(starts) for starts, _ in waiting) >= BATCH:
            yield np.concatenate([one for one, _ in waiting]), np.concatenate([one for _, one in waiting])
            waiting = []
    if waiting:
        yield np.concatenate([one for one, _ in waiting]), np.concatenate([one for _, one in waiting])

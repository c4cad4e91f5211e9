"""The maxima of a density along a straight line and the minima that part them.

Sign changes of dn/dt on a fine grid are refined by Newton's method on the exact series; the grid
decides only that there is an extremum, never where.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from engine.arrays import BoolArray, FloatArray, IntArray
from engine.errors import InputError, TooLargeError
from engine.features.linear import Density, LineDerivatives
from engine.sampling.grids import AffineGrid, Sampling
from engine.series import Series
from engine.synthesis import Demand, fill, plan

FINENESS = 24
"""Grid steps in the shortest wavelength along the line."""
MOST_STEPS = 1 << 22
CLOSURE = 1e-7
"""Largest deviation, in turns, of a phase over one period."""
FLAT = 1e-10
"""Prominence, as a share of the whole range, that rounding may have made."""
ROUNDS = 80


@dataclass(frozen=True, slots=True)
class Line:
    """A straight line, t Å from its origin.

    Attributes
    ----------
    origin : float64, shape (d,)
        Fractional.
    direction : float64, shape (d,)
        Fractional vector of 1 Å.
    length : float
        Å.
    start : float
        The axis coordinate of the origin, Å.
    periodic : bool
        The density repeats itself after the length.
    """

    origin: FloatArray
    direction: FloatArray
    length: float
    start: float
    periodic: bool


@dataclass(frozen=True, slots=True)
class Profile:
    """A density along a line: exact values anywhere, and values on a fine grid.

    Attributes
    ----------
    density : Density
    line : Line
    first, step : float
        The grid is first + i·step, Å.
    values, slopes : float64, shape (K,)
        n and dn/dt on it.
    """

    density: Density
    line: Line
    first: float
    step: float
    values: FloatArray
    slopes: FloatArray

    def derivatives(self, at: FloatArray, orders: tuple[int, ...]) -> FloatArray:
        """d^k n/dt^k at t (M,) for each order k; shape (len(orders), M)."""
        made = self.density.numbers(LineDerivatives(self.line.origin, self.line.direction, at, orders))
        return made.reshape(len(orders), -1)


@dataclass(frozen=True, slots=True)
class Parts:
    """M maxima and the M + 1 boundaries around them, in order.

    Attributes
    ----------
    maxima : float64, shape (M,)
        t, Å; on a periodic line within 0 … length.
    bounds : float64, shape (M + 1,)
        Maximum j lies between the bounds j and j + 1: minima, or ends of the line. On a periodic
        line the last is the first, one period on.
    heights : float64, shape (M,)
    depths : float64, shape (M + 1,)
        n there.
    closed : bool, shape (M + 1,)
        Whether a bound is a minimum.
    """

    maxima: FloatArray
    bounds: FloatArray
    heights: FloatArray
    depths: FloatArray
    closed: BoolArray

    @property
    def count(self) -> int:
        return int(self.maxima.size)


def line_of(density: Density, sampling: Sampling) -> Line:
    """The line that a grid of one axis lies on, whole where the density repeats itself along it.

    Raises
    ------
    InputError
        Not a grid of one axis with two samples or more.
    """
    if not isinstance(sampling, AffineGrid) or len(sampling.shape) != 1 or sampling.shape[0] < 2:
        raise InputError("samples", "are not a line", "give a line of at least two samples")
    step, count = sampling.steps[0], sampling.shape[0]
    spacing = float(np.linalg.norm(density.series.lattice.to_cartesian(step)))
    if not spacing > 0:
        raise InputError("samples", "lie on one point", "give a line of some length")
    steps, periodic = count - 1, False
    for wanted in (count - 1, count):
        turns = density.series.indices @ (step * wanted)
        if float(np.abs(turns - np.rint(turns)).max(initial=0.0)) < CLOSURE:
            steps, periodic = wanted, True
            break
    return Line(sampling.origin, step / spacing, spacing * steps, sampling.starts[0], periodic)


def profile_of(density: Density, line: Line) -> Profile:
    """The density along a line.

    Raises
    ------
    TooLargeError
        The line is too long for its shortest wavelength.
    """
    series = density.series
    kappa = 2 * np.pi * (series.indices @ line.direction)
    waves = line.length * float(np.abs(kappa).max(initial=0.0)) / (2 * np.pi)
    if waves * FINENESS > MOST_STEPS:
        raise TooLargeError("samples", f"span {waves:,.0f} of the shortest wavelengths", "give a shorter line")
    steps = max(FINENESS, int(np.ceil(waves * FINENESS)))
    step = line.length / steps
    # Between the points where symmetry makes extrema likely.
    first = 0.5 * step if line.periodic else 0.0
    count = steps if line.periodic else steps + 1
    grid = AffineGrid(line.origin + first * line.direction, step * line.direction[None, :], (count,), ("t",), (0.0,))
    values, slopes = np.empty(count), np.empty(count)
    for strengths, out in ((series.values, values), (1j * kappa * series.values, slopes)):
        part = Series(series.lattice, series.indices, strengths, real=True)
        fill(plan(part, grid, Demand(tolerance=1e-12)).prepare(), out, threads=1)
    return Profile(density, line, first, step, values, slopes)


def parts_of(profile: Profile) -> Parts:
    """All maxima along the line and what parts them."""
    line, rising = profile.line, profile.slopes > 0
    steepest = float(np.abs(profile.density.series.doubled()) @ _speeds(profile))
    if float(np.abs(profile.slopes).max()) <= 1e-11 * steepest or not steepest:
        return _none()
    after = np.roll(rising, -1) if line.periodic else np.append(rising[1:], rising[-1])
    at = np.flatnonzero(rising != after)
    peaks = rising[at]
    low = np.asarray(profile.first + profile.step * at, dtype=np.float64)
    ahead = np.roll(profile.slopes, -1)[at]
    # Where the chord from one grid point to the next goes through zero.
    share = profile.slopes[at] / (profile.slopes[at] - ahead)
    high = np.asarray(low + profile.step, dtype=np.float64)
    start = np.asarray(low + share * profile.step, dtype=np.float64)
    found = refined(lambda t: profile.derivatives(t, (1, 2)), low, high, falling=peaks, start=start)
    if not peaks.any():
        return _none()
    if line.periodic:
        return _round(profile, found, peaks)
    first, last = int(np.flatnonzero(peaks)[0]), int(np.flatnonzero(peaks)[-1])
    inner = found[first : last + 1]
    left = found[first - 1] if first else 0.0
    right = found[last + 1] if last + 1 < found.size else line.length
    maxima, bounds = inner[::2], np.concatenate([[left], inner[1::2], [right]])
    closed = np.ones(bounds.size, dtype=np.bool_)
    closed[0], closed[-1] = first > 0, last + 1 < found.size
    return _parts(profile, maxima, bounds, closed)


def refined(
    function: Callable[[FloatArray], FloatArray],
    low: FloatArray,
    high: FloatArray,
    *,
    falling: BoolArray,
    start: FloatArray,
) -> FloatArray:
    """Zeros of a function between bounds, by Newton's method, by halving where that leaves them.

    Parameters
    ----------
    function : callable
        t (M,) -> values and derivatives, shape (2, M).
    low, high, start : float64, shape (M,)
    falling : bool, shape (M,)
        Whether the function goes from positive to negative.
    """
    at, low, high = start.copy(), low.copy(), high.copy()
    # A step of Newton's method that is so short leaves an error of its square.
    limit = 1e-9 * (high - low)
    for _ in range(ROUNDS if at.size else 0):
        value, slope = function(at)
        before = (value > 0) == falling
        low, high = np.where(before, at, low), np.where(before, high, at)
        with np.errstate(divide="ignore", invalid="ignore", over="ignore"):
            wanted = at - value / slope
        # Not a number compares as outside.
        inside = (wanted >= low) & (wanted <= high)
        new = np.where(value == 0, at, np.where(inside, wanted, 0.5 * (low + high)))
        moved = np.abs(new - at)
        at = new
        if (moved <= limit).all():
            break
    return at


def merged(profile: Profile, parts: Parts, least: float, significance: float) -> tuple[Parts, int]:
    """Join maxima that stand out too little with their neighbours, the least prominent first.

    Parameters
    ----------
    least : float
        Smallest height above the higher neighbouring minimum, in the density's unit.
    significance : float
        The same in its own standard uncertainties.

    Returns
    -------
    parts : Parts
    joined : int
        How many maxima were merged.
    """
    covariance = None
    if significance and parts.count:
        at = np.concatenate([parts.maxima, parts.bounds])
        covariance = profile.density.covariance(LineDerivatives(profile.line.origin, profile.line.direction, at))
    floor = max(least, FLAT * float(np.ptp(profile.values)))
    tops, feet = np.arange(parts.count), np.arange(parts.count + 1)
    periodic = profile.line.periodic
    while tops.size and not (periodic and tops.size == 1):
        chosen = higher_bound(parts.depths[feet], parts.closed[feet])
        foot = feet[chosen]
        prominence = np.where(parts.closed[foot], parts.heights[tops] - parts.depths[foot], np.inf)
        wanted = np.full(tops.size, floor)
        if covariance is not None:
            here, there = tops, parts.count + foot
            variance = covariance[here, here] + covariance[there, there] - 2 * covariance[here, there]
            wanted = np.maximum(wanted, significance * np.sqrt(np.maximum(variance, 0.0)))
        short = prominence < wanted
        if not short.any():
            break
        ratio = np.full(tops.size, np.inf)
        np.divide(prominence, wanted, out=ratio, where=short)
        weakest = int(np.argmin(ratio))
        tops, feet = _without(parts.heights, tops, feet, int(chosen[weakest]), weakest, periodic)
    if tops.size == parts.count:
        return parts, 0
    maxima, bounds = parts.maxima[tops], parts.bounds[feet]
    if periodic:
        bounds[0] -= profile.line.length if bounds[0] > maxima[0] else 0.0
        bounds[-1] = bounds[0] + profile.line.length
    made = Parts(maxima, bounds, parts.heights[tops], parts.depths[feet], parts.closed[feet])
    return made, parts.count - tops.size


def higher_bound(depths: FloatArray, closed: BoolArray) -> IntArray:
    """Of each maximum the bound at the higher of its minima, an end of the line only if both are; (M + 1,) -> (M,)."""
    level = np.where(closed, depths, -np.inf)
    left = np.arange(depths.size - 1)
    return np.where(level[:-1] >= level[1:], left, left + 1)


def _without(
    heights: FloatArray, tops: IntArray, feet: IntArray, gone: int, weakest: int, periodic: bool
) -> tuple[IntArray, IntArray]:
    """Take away the bound number `gone` and the lower of the maxima that it parts."""
    count = tops.size
    if not periodic:
        top = weakest
        if 0 < gone < count:
            top = gone - 1 if heights[tops[gone - 1]] < heights[tops[gone]] else gone
        return np.delete(tops, top), np.delete(feet, gone)
    # The first bound and the last are one; bound j comes before maximum j.
    gone %= count
    before = (gone - 1) % count
    top = before if heights[tops[before]] < heights[tops[gone]] else gone
    kept = np.delete(feet[:-1], gone)
    if gone == 0 and top == before:
        kept = np.roll(kept, 1)
    return np.delete(tops, top), np.append(kept, kept[0])


def _round(profile: Profile, found: FloatArray, peaks: BoolArray) -> Parts:
    period = profile.line.length
    # The last interval of the grid reaches over the end of the period.
    if found[-1] >= period:
        found, peaks = np.roll(found, 1), np.roll(peaks, 1)
        found[0] -= period
    maxima, minima = found[peaks], found[~peaks]
    if peaks[0]:
        bounds = np.concatenate([[minima[-1] - period], minima])
    else:
        bounds = np.concatenate([minima, [minima[0] + period]])
    return _parts(profile, maxima, bounds, np.ones(bounds.size, dtype=np.bool_))


def _parts(profile: Profile, maxima: FloatArray, bounds: FloatArray, closed: BoolArray) -> Parts:
    heights = profile.derivatives(maxima, (0,))[0]
    return Parts(maxima, bounds, heights, profile.derivatives(bounds, (0,))[0], closed)


def _none() -> Parts:
    nothing = np.zeros(0)
    return Parts(nothing, np.zeros(1), nothing, np.zeros(1), np.zeros(1, dtype=np.bool_))


def _speeds(profile: Profile) -> FloatArray:
    return np.abs(2 * np.pi * (profile.density.series.indices @ profile.line.direction))

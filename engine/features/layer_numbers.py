"""Numbers of layers and how they move with the coefficients.

A maximum p obeys n'(p) = 0, so that to first order δp = −δn'(p)/n''(p) (Cruickshank, Acta Cryst. 2
(1949) 65); minima and the points of half height follow in the same way from the equations that they
obey. Every number so becomes linear in ten functionals of its layer, whose covariance is exact.
"""

from __future__ import annotations

import itertools
from dataclasses import dataclass

import numpy as np

from engine.arrays import FloatArray, IntArray
from engine.features.linear import Joined, LineDerivatives, LineMoments
from engine.features.profiles import Parts, Profile, higher_bound, refined

BASIS = 10
"""δ of n(p), n'(p), n(a), n'(a), n(b), n'(b), n(left), n(right), ∫ n, ∫ (t − c) n of each layer."""
NAMES = (
    "position",
    "centroid",
    "height",
    "prominence",
    "width",
    "area",
    "area_above",
    "lower_bound",
    "upper_bound",
    "lower_value",
    "upper_value",
)


@dataclass(frozen=True, slots=True)
class Baseline:
    """The straight line that a layer stands on, by its levels at the layer's two bounds.

    Attributes
    ----------
    at_lower, at_upper : float64, shape (M,)
        Not a number where there is none.
    lower_moves, upper_moves : float64, shape (M, BASIS)
        What the levels are of the functionals of the layer.
    """

    at_lower: FloatArray
    at_upper: FloatArray
    lower_moves: FloatArray
    upper_moves: FloatArray


@dataclass(frozen=True, slots=True)
class LayerNumbers:
    """Numbers of M layers, in the order of ``NAMES``.

    Attributes
    ----------
    values : float64, shape (Q, M)
        Places along the line in Å from its origin; not a number where undefined.
    covariance : float64, shape (Q, M, Q, M), or None
    crossings : float64, shape (2, M)
        Points of half height; not a number where the level is not reached.
    base : float64, shape (M,)
        The baseline's level below each maximum.
    """

    values: FloatArray
    covariance: FloatArray | None
    crossings: FloatArray
    base: FloatArray


def baseline_of(parts: Parts, kind: str, level: float) -> Baseline:
    """The baseline of each layer; `kind` is minima, higher_minimum or level.

    With one bound at an end of the line the other's minimum is the baseline; with both there is none.
    """
    count = parts.count
    lower_moves, upper_moves = np.zeros((count, BASIS)), np.zeros((count, BASIS))
    if kind == "level":
        flat = np.full(count, level)
        return Baseline(flat, flat, lower_moves, upper_moves)
    rows = np.arange(count)
    higher = higher_bound(parts.depths, parts.closed)
    here, there = rows.copy(), rows + 1
    alone = (kind == "higher_minimum") | ~(parts.closed[:-1] & parts.closed[1:])
    here, there = np.where(alone, higher, here), np.where(alone, higher, there)
    lower_moves[rows, 2 + 2 * (here - rows)] = 1
    upper_moves[rows, 2 + 2 * (there - rows)] = 1
    known = parts.closed[:-1] | parts.closed[1:]
    at_lower = np.where(known, parts.depths[here], np.nan)
    return Baseline(at_lower, np.where(known, parts.depths[there], np.nan), lower_moves, upper_moves)


def layer_numbers(profile: Profile, parts: Parts, baseline: Baseline) -> LayerNumbers:
    """All numbers of the layers, and their covariance where the density has uncertainties."""
    line, count = profile.line, parts.count
    p, a, b = parts.maxima, parts.bounds[:-1], parts.bounds[1:]
    length, middle = b - a, 0.5 * (a + b)
    slope = (baseline.at_upper - baseline.at_lower) / length
    base = baseline.at_lower + slope * (p - a)
    crossings = _half(profile, parts, baseline)
    reached = np.isfinite(crossings)
    crossed = np.where(reached, crossings, p)

    # Curvatures and slopes at the nominal places.
    curvature = profile.derivatives(np.concatenate([p, parts.bounds]), (2,))[0]
    steep = profile.derivatives(crossed.ravel(), (1,))[0].reshape(2, count)
    moments = profile.density.numbers(LineMoments(line.origin, line.direction, a, b)).reshape(2, count)

    unit = np.broadcast_to(np.eye(BASIS)[:, None, :], (BASIS, count, BASIS))
    with np.errstate(divide="ignore", invalid="ignore"):
        d_p = -unit[1] / curvature[:count, None]
        d_a = np.where(parts.closed[:-1, None], -unit[3] / curvature[count:-1, None], 0.0)
        d_b = np.where(parts.closed[1:, None], -unit[5] / curvature[count + 1 :, None], 0.0)

        # The baseline at a fixed place moves with its levels and with the places they are taken at.
        def d_base(at: FloatArray) -> FloatArray:
            share = ((at - a) / length)[:, None]
            lower = baseline.lower_moves - slope[:, None] * d_a
            return (1 - share) * lower + share * (baseline.upper_moves - slope[:, None] * d_b)

        d_half = 0.5 * (unit[0] - d_base(p) - slope[:, None] * d_p)
        d_cross = [
            -(unit[6 + side] - d_base(crossed[side]) - d_half) / (steep[side] - slope)[:, None] for side in (0, 1)
        ]
        width, d_width = crossings[1] - crossings[0], d_cross[1] - d_cross[0]
        d_width = np.where(np.isfinite(width)[:, None], d_width, np.nan)

        left, right = parts.depths[:-1], parts.depths[1:]
        area, first = moments
        d_area = unit[8] + right[:, None] * d_b - left[:, None] * d_a
        mean_base, rise = 0.5 * (baseline.at_lower + baseline.at_upper), baseline.at_upper - baseline.at_lower
        d_length = d_b - d_a
        above = area - length * mean_base
        d_above = (
            d_area
            - d_length * mean_base[:, None]
            - 0.5 * length[:, None] * (baseline.lower_moves + baseline.upper_moves)
        )
        # First moments about the layer's middle, which is held fixed.
        lever = first - length**2 * rise / 12
        d_lever = (
            unit[9]
            + 0.5 * length[:, None] * (right[:, None] * d_b + left[:, None] * d_a)
            - 0.5 * (length * mean_base)[:, None] * (d_a + d_b)
            - (length * rise)[:, None] * d_length / 6
            - (length**2)[:, None] * (baseline.upper_moves - baseline.lower_moves) / 12
        )
        some = np.where(above > 0, above, np.nan)
        offset = lever / some
        d_centroid = (d_lever - offset[:, None] * d_above) / some[:, None]

    foot = higher_bound(parts.depths, parts.closed)
    known = parts.closed[:-1] | parts.closed[1:]
    prominence = np.where(known, parts.heights - parts.depths[foot], np.nan)
    d_prominence = np.where(known[:, None], unit[0] - _at_bound(unit, foot), np.nan)

    values = np.stack([p, middle + offset, parts.heights, prominence, width, area, above, a, b, left, right])
    moves = np.stack(
        [
            d_p,
            d_centroid,
            unit[0],
            d_prominence,
            d_width,
            d_area,
            d_above,
            d_a,
            d_b,
            unit[2],
            unit[4],
        ]
    )
    functional = Joined(
        [
            LineDerivatives(line.origin, line.direction, np.concatenate([p, a, b]), (0, 1)),
            LineDerivatives(line.origin, line.direction, crossed.ravel()),
            LineMoments(line.origin, line.direction, a, b),
        ]
    )
    found = profile.density.covariance(functional)
    covariance = None
    if found is not None:
        # Functionals stand as n(p), n(a), n(b), n'(p), n'(a), n'(b), … of all layers each.
        order = np.array([0, 3, 1, 4, 2, 5, 6, 7, 8, 9])
        basic = found.reshape(BASIS, count, BASIS, count)[order][:, :, order]
        with np.errstate(invalid="ignore"):
            covariance = np.einsum("qik,kilj,rjl->qirj", moves, basic, moves, optimize=True)
    return LayerNumbers(values, covariance, crossings, base)


def _at_bound(unit: FloatArray, foot: IntArray) -> FloatArray:
    """The functional n at one of each layer's bounds; (M, BASIS)."""
    upper = foot > np.arange(foot.size)
    return np.asarray(np.where(upper[:, None], unit[4], unit[2]))


def _half(profile: Profile, parts: Parts, baseline: Baseline) -> FloatArray:
    """The first points of half height from each maximum towards its lower and its upper bound; (2, M)."""
    p, a, b = parts.maxima, parts.bounds[:-1], parts.bounds[1:]
    slope = (baseline.at_upper - baseline.at_lower) / (b - a)
    half = 0.5 * (parts.heights - baseline.at_lower - slope * (p - a))
    size = profile.values.size
    inner, outer = np.full((2, p.size), np.nan), np.full((2, p.size), np.nan)
    for side, row in itertools.product((0, 1), np.flatnonzero(half > 0)):
        bound = (a, b)[side][row]
        ends = np.sort([p[row], bound])
        low = int(np.ceil((ends[0] - profile.first) / profile.step))
        high = int(np.floor((ends[1] - profile.first) / profile.step))
        # From the maximum outwards.
        numbers = np.arange(low, high + 1)[:: 2 * side - 1]
        at = np.concatenate([[p[row]], profile.first + profile.step * numbers, [bound]])
        n = np.concatenate([[parts.heights[row]], profile.values[numbers % size], [parts.depths[row + side]]])
        below = np.flatnonzero(n - baseline.at_lower[row] - slope[row] * (at - a[row]) - half[row] < 0)
        if below.size:
            inner[side, row], outer[side, row] = at[below[0] - 1], at[below[0]]
    sides, rows = np.nonzero(np.isfinite(outer))

    def excess(at: FloatArray) -> FloatArray:
        """What the density exceeds the level by, and its slope."""
        n, rise = profile.derivatives(at, (0, 1))
        level = baseline.at_lower[rows] + slope[rows] * (at - a[rows]) + half[rows]
        return np.stack([n - level, rise - slope[rows]])

    made = np.full((2, p.size), np.nan)
    low, high = np.minimum(inner, outer)[sides, rows], np.maximum(inner, outer)[sides, rows]
    made[sides, rows] = refined(excess, low, high, falling=sides == 1, start=0.5 * (low + high))
    return made

"""Full width at half maximum of a cosine sum along a line, exact and cheap for a million terms."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from engine.arrays import FloatArray
from engine.sampling.grids import AffineGrid
from engine.series import Series
from engine.synthesis import Demand, fill, plan, result_dtype

BINS = 1024
"""Into which the components of G along a direction are gathered where there are more of them."""
NEAR = 8.0
"""How far, in units of 1/(rms of G along the direction), the half width is looked for on the bins."""
STEP = 0.2
"""Of the search, in units of 1/(largest G along the direction): a dip to half that lasts for less, and
is 0.5 % deep at the most, is passed over."""
MOST_STEPS = 1 << 18
"""Of the search beyond the near range."""


def full_width(
    series: Series, weights: FloatArray, components: FloatArray, direction: FloatArray, limit: float
) -> float:
    """Full width at half maximum (Å) of f(t) = Σ w cos(p t); infinite where f stays above half.

    Parameters
    ----------
    series : Series
        Whose f is the value (of a complex series its real part) at t along `direction`.
    weights : float64, shape (N,)
        w, adding up to 1.
    components : float64, shape (N,)
        p = |G·direction|, Å⁻¹; exactly 0 where G is perpendicular.
    direction : float64, shape (d,)
        Cartesian unit vector.
    limit : float
        How far f is followed, Å.
    """
    largest = float(components.max())
    absolute = np.abs(weights)
    # The terms that vary take f down by twice their weight at the most.
    if 1 - 2 * float(absolute @ (components > 0)) > 0.5:
        return math.inf
    rms = math.sqrt(float(absolute @ components**2) / float(absolute.sum()))
    bins = _Bins.of(weights, components, largest)
    step = STEP / largest
    near = min(NEAR / rms, limit)
    bracket = _first_below(bins, near, step)
    if bracket is not None:
        # Newton's method on the sum itself ends what error the bins and the false position have left.
        return 2 * _newton(weights, components, _refined(bins, *bracket), bracket)
    if near >= limit:
        return math.inf
    count = min(math.ceil((limit - near) / step) + 2, MOST_STEPS)
    values = _on_line(series, direction, near, step, count)
    below = np.flatnonzero((values <= 0.5) & (near + step * np.arange(count) <= limit * (1 + 1e-12)))
    if not below.size:
        return math.inf
    end = near + step * int(below[0])
    half = end
    for _ in range(4):
        half = _newton(weights, components, half, (max(end - step, 0.0), end))
    return 2 * half


@dataclass(frozen=True, slots=True)
class _Bins:
    """Σ w cos(p t) from sums of w and w(p − c) about the centre c of each bin.

    The cosine is developed to first order about c; with half a bin h/2 the error is below (h t)²/8, 1e-6
    where a complete set falls to half. Where there are fewer terms than bins, each is its own and the
    sum exact.
    """

    centres: FloatArray
    zeroth: FloatArray
    first: FloatArray

    @classmethod
    def of(cls, weights: FloatArray, components: FloatArray, largest: float) -> _Bins:
        if weights.size <= BINS:
            return cls(components, weights, np.zeros(weights.size))
        width = largest / (BINS - 1)
        number = np.rint(components / width).astype(np.intp)
        offset = components - width * number
        sums = [np.asarray(np.bincount(number, part, BINS), dtype=np.float64) for part in (weights, weights * offset)]
        return cls(np.asarray(np.arange(BINS) * width, dtype=np.float64), *sums)

    def values(self, t: FloatArray) -> FloatArray:
        """f at t (M,); shape (M,)."""
        angle = t[:, None] * self.centres
        return np.asarray(np.cos(angle) @ self.zeroth - t * (np.sin(angle) @ self.first))


def _first_below(bins: _Bins, limit: float, step: float) -> tuple[float, float] | None:
    """The first step within `limit` that ends at or below half."""
    count = math.ceil(limit / step * (1 - 1e-12))
    for start in range(0, count, 16):
        t = np.minimum(step * np.arange(start + 1, min(start + 16, count) + 1), limit)
        below = np.flatnonzero(bins.values(t) <= 0.5)
        if below.size:
            place = int(below[0])
            return (step * (start + place), float(t[place]))
    return None


def _refined(bins: _Bins, low: float, high: float) -> float:
    """The root of f − ½ within the bracket, on the bins, by false position."""
    above, below = (bins.values(np.array([low, high])) - 0.5).tolist()
    t = high
    for _ in range(4):
        if not above > 0 > below:
            break
        t = low + (high - low) * above / (above - below)
        value = float(bins.values(np.array([t]))[0]) - 0.5
        if value > 0:
            low, above = t, value
        else:
            high, below = t, value
    return t


def _newton(weights: FloatArray, components: FloatArray, t: float, bracket: tuple[float, float]) -> float:
    angle = components * t
    value = float(weights @ np.cos(angle)) - 0.5
    slope = -float((weights * components) @ np.sin(angle))
    return min(max(t - value / slope, bracket[0]), bracket[1]) if slope < 0 else t


def _on_line(series: Series, direction: FloatArray, start: float, step: float, count: int) -> FloatArray:
    """The response (real part) at start + j·step (Å) along a direction."""
    steps = series.lattice.to_fractional(direction[None, :])
    line = AffineGrid(steps[0] * start, steps * step, (count,), ("t",), (start,))
    demand = Demand(tolerance=1e-7)
    values = np.empty(count, dtype=result_dtype(series.real, "double"))
    fill(plan(series, line, demand).prepare(), values, threads=1)
    return np.asarray(values.real, dtype=np.float64)

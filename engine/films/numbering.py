"""The numberings of a scan's lines that periods lead to, and the evidence for each.

A long period numbers anything: its orders stand so close that each line meets one by chance. Periods are
therefore compared by the evidence for them, the probability of the positions with everything else
integrated out (Jeffreys, Theory of Probability, 3rd ed. (1961), chapter 5; MacKay, Neural Comput. 4 (1992)
415), relative to that of lines strewn at random:

- an order lies at q_l = 2πl/d with its σ, and may be moved with all others by a common shift and by
  refraction, q² = (2πl/d)² + q_c², both of unknown size and entering as covariances;
- a stray line lies anywhere from 0 to the last line, half a line of them expected in a scan;
- of the orders up to the highest seen each is present with a probability that is not known, uniform in
  0…1, so that k of L orders cost log L + log C(L−1, k−1) (the highest itself is seen by definition);
- the period is as likely in each octave, which charges a sharp one by its precision σ_d/d.

All arrays here are in the sequence of rising q.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from scipy.special import betaln

from engine.arrays import BoolArray, FloatArray, IntArray

MOST_ORDERS = 60
"""Highest order that a period found without help may give the last line."""
CEILING = 600
"""Highest order that a line is given at all, unless the scan carries a higher one; lines beyond are stray."""
MOST_GRID = 3_000
STRAYS_EXPECTED = 0.5
FINALISTS = 400


@dataclass(frozen=True, slots=True, kw_only=True)
class Errors:
    """Standard deviations in q, Å⁻¹, shape (n,): of each line alone, of a shift and of refraction."""

    each: FloatArray
    shift: FloatArray
    bend: FloatArray

    @property
    def total(self) -> FloatArray:
        """As if the three were independent."""
        return np.sqrt(self.each**2 + self.shift**2 + self.bend**2)


@dataclass(frozen=True, slots=True, kw_only=True)
class Weighed:
    """Numberings of M kinds: orders (M, n), the rest (M,)."""

    orders: IntArray
    period: FloatArray
    sigma: FloatArray
    chi_squared: FloatArray
    score: FloatArray

    def select(self, kept: BoolArray | IntArray) -> Weighed:
        """The chosen numberings."""
        return Weighed(
            orders=self.orders[kept],
            period=self.period[kept],
            sigma=self.sigma[kept],
            chi_squared=self.chi_squared[kept],
            score=self.score[kept],
        )

    def join(self, other: Weighed) -> Weighed:
        """These, then the other ones."""
        return Weighed(
            orders=np.concatenate([self.orders, other.orders]),
            period=np.concatenate([self.period, other.period]),
            sigma=np.concatenate([self.sigma, other.sigma]),
            chi_squared=np.concatenate([self.chi_squared, other.chi_squared]),
            score=np.concatenate([self.score, other.score]),
        )


def inverses(q: FloatArray, known: IntArray, errors: Errors, low: float, high: float) -> FloatArray:
    """Candidates of d/2π, Å: those that put an order on a line, and a grid that no order outruns."""
    shortest, longest = low / (2 * math.pi), high / (2 * math.pi)
    highest = max(1, math.ceil(min(longest * q[-1] + 1, CEILING)))
    exact = (np.arange(1, highest + 1)[:, None] / q).ravel()
    exact = exact[(exact >= shortest) & (exact <= longest)]
    step = 0.5 * float(errors.total.min() / q[-1])
    count = min(MOST_GRID, 2 + math.ceil(math.log(longest / shortest) / step))
    return np.concatenate([exact, known[known > 0] / q[known > 0], np.geomspace(shortest, longest, count)])


def number(inverse: FloatArray, q: FloatArray, known: IntArray, errors: Errors) -> IntArray:
    """Distinct numberings that candidates of d/2π, (M,), lead to; (K, n), 0 where stray."""
    total = errors.total
    rows = _nearest(inverse, q, known, total)
    for _ in range(2):
        weight = rows / total**2
        normal = (weight * rows).sum(axis=1)
        fitted = np.divide(normal, (weight * q).sum(axis=1), out=inverse.copy(), where=normal > 0)
        inverse = np.concatenate([inverse, fitted])
        rows = np.concatenate([rows, _nearest(fitted, q, known, total)])
        first = _distinct(rows)
        rows, inverse = rows[first], inverse[first]
    # Orders that the scan carries may stand where no period puts them.
    highest = np.maximum.accumulate(rows, axis=1)
    rising = ((rows[:, 1:] == 0) | (rows[:, 1:] > highest[:, :-1])).all(axis=1)
    kept: IntArray = rows[rising & (np.count_nonzero(rows, axis=1) >= min(2, q.size))]
    return kept


def _distinct(rows: IntArray) -> IntArray:
    """The first of each kind of row; (M, n) -> (K,)."""
    # Sums of random multiples, modulo 2⁶⁴, sort far faster than rows do; two of 10⁴ meet once in 10¹¹ scans.
    multiples = np.random.default_rng(0).integers(1, 2**63, rows.shape[1], dtype=np.uint64)
    first: IntArray = np.unique(rows.astype(np.uint64) @ multiples, return_index=True)[1]
    return first


def _nearest(inverse: FloatArray, q: FloatArray, known: IntArray, total: FloatArray) -> IntArray:
    orders = np.maximum(np.rint(q * inverse[:, None]), 1.0)
    orders = np.where(known > 0, known, orders)
    z = np.abs(q - orders / inverse[:, None]) / total
    z = np.where(known > 0, 0.0, z)
    # A line is an order where that is likelier than a stray line just there.
    limit = 2 * np.log(q[-1] / (STRAYS_EXPECTED * math.sqrt(2 * math.pi) * total))
    orders[z**2 > np.maximum(limit, 0.0)] = 0
    orders[orders > max(CEILING, int(known.max()))] = 0
    # One line to an order: the nearest stays.
    ranked = np.lexsort((z, orders), axis=-1)
    sorted_orders = np.take_along_axis(orders, ranked, axis=1)
    again = np.zeros(orders.shape, dtype=bool)
    again[:, 1:] = sorted_orders[:, 1:] == sorted_orders[:, :-1]
    np.put_along_axis(orders, ranked, np.where(again, 0.0, sorted_orders), axis=1)
    return orders.astype(np.int64)


def weigh(rows: IntArray, q: FloatArray, errors: Errors) -> Weighed:
    """Generalised least squares and evidence of numberings, (M, n)."""
    total = errors.total
    seen = rows > 0
    # Errors as if independent choose those for which the covariances are worth inverting.
    weight = np.where(seen, 1 / total**2, 0.0)
    slope = (weight * rows * q).sum(axis=1) / (weight * rows**2).sum(axis=1)
    rough = _evidence(
        (weight * (q - rows * slope[:, None]) ** 2).sum(axis=1),
        np.where(seen, 2 * np.log(total), 0.0).sum(axis=1),
        1 / (weight * rows**2).sum(axis=1) / slope**2,
        rows,
        float(q[-1]),
    )
    rows = rows[np.argsort(-rough, kind="stable")[:FINALISTS]]
    seen = rows > 0
    shared = np.outer(errors.shift, errors.shift) + np.outer(errors.bend, errors.bend)
    covariance = np.where(seen[:, :, None] & seen[:, None, :], shared, 0.0)
    diagonal = np.arange(q.size)
    covariance[:, diagonal, diagonal] += np.where(seen, errors.each**2, 1.0)
    present = np.stack([rows.astype(np.float64), np.where(seen, q, 0.0)], axis=2)
    solved = np.linalg.solve(covariance, present)
    normal = np.swapaxes(present, 1, 2) @ solved
    slope = normal[:, 0, 1] / normal[:, 0, 0]
    variance = 1 / normal[:, 0, 0]
    # From the residuals: a difference of the large sums would lose the digits of a good fit.
    turned = solved[:, :, 1] - slope[:, None] * solved[:, :, 0]
    chi_squared = ((present[:, :, 1] - slope[:, None] * present[:, :, 0]) * turned).sum(axis=1)
    score = _evidence(chi_squared, np.linalg.slogdet(covariance)[1], variance / slope**2, rows, float(q[-1]))
    period = 2 * math.pi / slope
    return Weighed(
        orders=rows, period=period, sigma=period * np.sqrt(variance) / slope, chi_squared=chi_squared, score=score
    ).select(slope > 0)  # A shift allowed for that is larger than the spacing itself may leave less than nothing.


def _evidence(
    chi_squared: FloatArray, log_determinant: FloatArray, relative: FloatArray, rows: IntArray, last: float
) -> FloatArray:
    """Logarithm of the evidence as told above; ``relative`` is (σ_d/d)²."""
    k = np.count_nonzero(rows, axis=1)
    highest = rows.max(axis=1)
    positions = -0.5 * (chi_squared + log_determinant + k * math.log(2 * math.pi))
    not_stray = k * math.log(last / STRAYS_EXPECTED)
    sharpness = 0.5 * np.log(2 * math.pi * relative) - math.log(math.log(2))
    return np.asarray(positions + not_stray + betaln(k, highest - k + 1) + sharpness)

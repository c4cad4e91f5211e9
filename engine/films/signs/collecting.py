"""What is kept of the sign sets that are looked at: the best, and sums over all."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np

from engine.arrays import FloatArray, IntArray


@dataclass(frozen=True, slots=True, kw_only=True)
class Found:
    """Outcome of a search over the signs of n orders.

    Attributes
    ----------
    signs : int64, shape (K, n)
        Best first.
    scores : float64, shape (K,)
    least : float64, shape (2, n)
        Least score met with the order's sign −, +; infinite where none was.
    support : float64, shape (2, n)
        Σ exp(−(score − best)/2) over the sign sets with the order's sign −, +.
    total : float
        The same sum over all.
    looked_at : int
        Sign sets, with those that were dismissed by a lower bound of their score.
    reach : float
        Sign sets that score more than this above the best may be in `signs`, but not in `least` and `support`.
    exhaustive : bool
    """

    signs: IntArray
    scores: FloatArray
    least: FloatArray
    support: FloatArray
    total: float
    looked_at: int
    reach: float
    exhaustive: bool


@dataclass(slots=True)
class Sums:
    """Least scores and Σ exp(−(score − best)/2) by each half of a code, whatever the best is so far.

    The halves: codes are first·2^bits + last.
    """

    first_count: int
    bits: int
    best: float
    least_first: FloatArray = field(init=False)
    least_last: FloatArray = field(init=False)
    sum_first: FloatArray = field(init=False)
    sum_last: FloatArray = field(init=False)

    def __post_init__(self) -> None:
        self.least_first = np.full(self.first_count, np.inf)
        self.least_last = np.full(1 << self.bits, np.inf)
        self.sum_first = np.zeros(self.first_count)
        self.sum_last = np.zeros(1 << self.bits)

    def add(self, first: int, last: IntArray, scores: FloatArray) -> None:
        """Scores of codes with one first half; the last halves are distinct."""
        if not scores.size:
            return
        lowest = float(scores.min())
        self.rebase(lowest)
        self.least_first[first] = min(float(self.least_first[first]), lowest)
        self.least_last[last] = np.minimum(self.least_last[last], scores)
        share = np.exp(0.5 * (self.best - scores))
        self.sum_first[first] += share.sum()
        self.sum_last[last] += share

    def rebase(self, best: float) -> None:
        """Count relative to a better best."""
        if best < self.best:
            factor = np.exp(0.5 * (best - self.best)) if np.isfinite(self.best) else 0.0
            self.sum_first *= factor
            self.sum_last *= factor
            self.best = best

    def join(self, other: Sums) -> None:
        """Add what another has gathered of other codes."""
        self.rebase(other.best)
        other.rebase(self.best)
        np.minimum(self.least_first, other.least_first, out=self.least_first)
        np.minimum(self.least_last, other.least_last, out=self.least_last)
        self.sum_first += other.sum_first
        self.sum_last += other.sum_last


@dataclass(slots=True)
class Best:
    """The `count` codes of least score; of equal scores the lower codes."""

    count: int
    codes: IntArray = field(default_factory=lambda: np.zeros(0, dtype=np.int64))
    scores: FloatArray = field(default_factory=lambda: np.zeros(0))

    @property
    def worst(self) -> float:
        """A score that is not below this cannot enter, but for its code."""
        return float(self.scores[-1]) if self.scores.size == self.count else np.inf

    def add(self, codes: IntArray, scores: FloatArray) -> None:
        """Take the better ones of some more."""
        entering = scores <= self.worst
        if not entering.any():
            return
        codes = np.concatenate([self.codes, codes[entering]])
        scores = np.concatenate([self.scores, scores[entering]])
        if scores.size > 4 * self.count:
            limit = np.partition(scores, self.count - 1)[self.count - 1]
            codes, scores = codes[scores <= limit], scores[scores <= limit]
        order = np.lexsort((codes, scores))[: self.count]
        self.codes, self.scores = codes[order], scores[order]

"""Numbers that describe the values of a field, gathered while it is computed."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from engine.arrays import AnyArray

SMALLEST = 1e-30
"""Sums of squares below it may have lost their smaller terms in single precision."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Statistics:
    """Over all samples; for complex values the extremes are those of |value|.

    Attributes
    ----------
    minimum, maximum : float
    mean : float or complex
        Of the samples; of a whole cell sampled evenly it is the zero term.
    rms : float
        Root of the mean of |value|².
    """

    minimum: float
    maximum: float
    mean: float | complex
    rms: float


class Tracker:
    """Adds up blocks of values."""

    def __init__(self) -> None:
        self._low, self._high = math.inf, -math.inf
        self._sum = 0j
        self._squares = 0.0
        self._count = 0

    def add(self, block: AnyArray) -> None:
        """Take the values of one more block into account."""
        if block.dtype.kind == "c":
            modulus = np.abs(block)
            self._low = min(self._low, float(modulus.min()))
            self._high = max(self._high, float(modulus.max()))
            self._sum += complex(block.sum(dtype=np.complex128))
        else:
            self._low = min(self._low, float(block.min()))
            self._high = max(self._high, float(block.max()))
            self._sum += float(block.sum(dtype=np.float64))
        flat = block.reshape(-1)
        # vdot conjugates its first operand; in single precision it adds up pairwise in blocks.
        squares = float(np.vdot(flat, flat).real)
        if not SMALLEST < squares < math.inf:
            squares = float(np.sum(np.abs(flat).astype(np.float64) ** 2))
        self._squares += squares
        self._count += block.size

    def statistics(self) -> Statistics:
        """What has been gathered."""
        mean = self._sum / self._count
        return Statistics(
            minimum=self._low,
            maximum=self._high,
            mean=mean if mean.imag else float(mean.real),
            rms=math.sqrt(self._squares / self._count),
        )

"""What a synthesis will cost, and the shape that every method shares."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal, Protocol, get_args

import numpy as np
from numpy.typing import DTypeLike

from engine.arrays import AnyArray, FloatArray, as_choice
from engine.sampling.grids import FreePoints, Sampling, wrapped
from engine.series import Series

Method = Literal["direct", "cascade", "nonuniform"]
Precision = Literal["double", "single"]

DEFAULT_TOLERANCE = 1e-9
LOSS_PER_TURN = 1e-15
"""A phase of t turns is known to some 2π·10⁻¹⁶ t; measured errors of sums stay below this."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Demand:
    """How a sum is to be done.

    Attributes
    ----------
    precision : {"double", "single"}
    tolerance : float
        Largest error wanted, relative to the largest |value|; a method may do better. Single
        precision ends at 1e-5.
    threads : int
    """

    precision: Precision = "double"
    tolerance: float = DEFAULT_TOLERANCE
    threads: int = 1

    def __post_init__(self) -> None:
        as_choice(self.precision, get_args(Precision), "precision")


@dataclass(frozen=True, slots=True, kw_only=True)
class Estimate:
    """Cost of one method for one series on one sampling, known before anything is allocated.

    Attributes
    ----------
    method : Method
    seconds : float
        Rough; for choosing between methods and for deciding whether to show progress.
    workspace : int
        Bytes held at the peak beside the output.
    accuracy : float
        Error to expect, relative to the largest |value|.
    """

    method: Method
    seconds: float
    workspace: int
    accuracy: float


class Source(Protocol):
    """A prepared sum, computed in blocks of planes along the first axis of the sampling.

    Attributes
    ----------
    planes : int
        Samples along the first axis.
    block : int
        Planes that are best computed together.
    concurrent : bool
        Whether blocks may be computed by several threads at once; where not, one block uses
        the threads itself.
    """

    planes: int
    block: int
    concurrent: bool

    def compute(self, start: int, stop: int, out: AnyArray) -> None:
        """Write the planes start … stop−1 into `out`, shape (stop − start, *rest)."""


def result_dtype(real: bool, precision: Precision) -> np.dtype[np.generic]:
    """Type of a value."""
    kinds: dict[tuple[bool, Precision], DTypeLike] = {
        (True, "double"): np.float64,
        (True, "single"): np.float32,
        (False, "double"): np.complex128,
        (False, "single"): np.complex64,
    }
    return np.dtype(kinds[real, precision])


def rounding(precision: Precision, turns: float) -> float:
    """Error that arithmetic alone leaves, relative to the largest |value|.

    Some hundred units of the last place; or what is lost in phases of many turns, where that is
    more.
    """
    return max(1e-12 if precision == "double" else 1e-5, LOSS_PER_TURN * turns)


def largest_turns(series: Series, origin: FloatArray, reach: FloatArray) -> float:
    """Bound of |m·x| for positions within `reach` (fractional, shape (d,)) of an origin."""
    extent = np.maximum(np.abs(series.low), np.abs(series.high))
    return float(extent @ (np.abs(wrapped(origin)) + reach))


def turns_on(series: Series, sampling: Sampling) -> float:
    """Bound of the phases, in turns, that are computed for a series on a sampling."""
    d = series.lattice.dimension
    if isinstance(sampling, FreePoints):
        return largest_turns(series, np.zeros(d), np.full(d, 0.5))
    spans = np.abs(sampling.steps) * (np.array(sampling.shape) - 1)[:, None]
    return largest_turns(series, sampling.origin, spans.sum(axis=0))

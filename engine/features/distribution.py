"""How the values of a field are distributed: moments, extremes, histogram, block by block.

Third and higher central moments of the blocks are combined by the formulas of Chan, Golub & LeVeque
(Am. Statistician 37 (1983) 242) and Pébay (Sandia report SAND2008-6212, 2008), so that no small
difference of large sums arises and the whole array never exists.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Iterator
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike
from scipy import fft

from engine.arrays import AnyArray, FloatArray, IntArray, as_count, as_positive, as_vector
from engine.coefficients import CoefficientSet
from engine.errors import InputError
from engine.evaluate import Work, iterate, prepare
from engine.fields import Treatment
from engine.lattice import Lattice
from engine.sampling import full_cell
from engine.sampling.grids import AffineGrid, Sampling
from engine.series import Series
from engine.synthesis import Demand

KEPT_BYTES = 1 << 26
"""Values of so many bytes are kept for the histogram; more are summed a second time."""
DIVISIONS = 4
"""Samples in the smallest spacing d, where the caller does not say."""
HIGHEST = 4
MOST_BINS = 1 << 20


@dataclass(frozen=True, slots=True, kw_only=True)
class Distribution:
    """Of the values of a field at samples.

    Attributes
    ----------
    samples : int
    shape : tuple of int
        Of the sampling.
    mean : float
    rms : float
        Root of the mean square, about zero.
    standard_deviation : float
        Root of the mean square about the mean.
    skewness : float or None
        m₃/m₂^{3/2} of the central moments; None where all values are equal.
    excess_kurtosis : float or None
        m₄/m₂² − 3, which is 0 for a normal distribution; None where all values are equal.
    minimum, maximum : float
        Of the samples; between them the field may go further.
    fraction_negative : float
    edges : float64, shape (B + 1,)
    counts : int64, shape (B,)
        Values in edges[i] ≤ n < edges[i+1]; the last interval has its upper edge.
    below, above : int
        Values outside the edges.
    exact_moments : int
        The powers of n up to this one have their exact means over the cell: 4 means that mean,
        standard deviation, skewness and kurtosis are those of the series, not of the samples.
    unit : str
    applied, notes : tuple of str
    """

    samples: int
    shape: tuple[int, ...]
    mean: float
    rms: float
    standard_deviation: float
    skewness: float | None
    excess_kurtosis: float | None
    minimum: float
    maximum: float
    fraction_negative: float
    edges: FloatArray
    counts: IntArray
    below: int
    above: int
    exact_moments: int
    unit: str
    applied: tuple[str, ...]
    notes: tuple[str, ...]


class Moments:
    """Adds up blocks of real values."""

    def __init__(self) -> None:
        self.count = 0
        self.mean = 0.0
        self.second = self.third = self.fourth = 0.0
        self.low, self.high = math.inf, -math.inf
        self.negative = 0

    def add(self, block: AnyArray) -> None:
        """Take the values of one more block into account."""
        values = block.astype(np.float64, copy=False).reshape(-1)
        if not values.size:
            return
        mean = float(values.mean())
        deviation = values - mean
        square = deviation * deviation
        one = (values.size, mean, float(square.sum()), float(square @ deviation), float(square @ square))
        self.low, self.high = min(self.low, float(values.min())), max(self.high, float(values.max()))
        self.negative += int(np.count_nonzero(values < 0))
        self._join(*one)

    def _join(self, n: int, mean: float, second: float, third: float, fourth: float) -> None:
        have, total = self.count, self.count + n
        apart = mean - self.mean
        a, b = have / total, n / total
        fourth_moved = apart**4 * have * b * (a * a - a * b + b * b)
        fourth_moved += 6 * apart**2 * (a * a * second + b * b * self.second)
        fourth_moved += 4 * apart * (a * third - b * self.third)
        third_moved = apart**3 * have * b * (a - b) + 3 * apart * (a * second - b * self.second)
        self.fourth += fourth + fourth_moved
        self.third += third + third_moved
        self.second += second + apart**2 * have * b
        self.mean += apart * b
        self.count = total


def distribution(
    coefficients: CoefficientSet,
    treatment: Treatment | None = None,
    *,
    sampling: Sampling | None = None,
    spacing: float | None = None,
    bins: int = 100,
    limits: ArrayLike | None = None,
    demand: Demand | None = None,
    max_bytes: int | None = None,
) -> Distribution:
    """The distribution of a real scalar field over the cell, or over samples.

    Parameters
    ----------
    sampling : Sampling, optional
        Where; by default the whole cell.
    spacing : float, optional
        Å between samples of the whole cell at most, along each direct vector. By default a quarter
        of the smallest spacing d and more than four times the highest index, so that the first four
        moments are exact.
    bins : int
        Intervals of the histogram.
    limits : array_like, shape (2,), optional
        Its ends; by default the extremes. Values beyond are counted apart.
    demand, max_bytes
        As of `engine.evaluate.prepare`.

    Raises
    ------
    InputError
        The field is complex or a vector, spacing and sampling are both given, a number is out of
        range, or as `engine.evaluate.prepare`.
    """
    if not coefficients.real:
        raise InputError("density", "is complex", "give a set whose density is real")
    parts = as_count(bins, "bins")
    if parts > MOST_BINS:
        raise InputError("bins", f"are {parts}", f"give at most {MOST_BINS}")
    ends = None if limits is None else as_vector(limits, 2, "limits")
    if ends is not None and not ends[0] < ends[1]:
        raise InputError("limits", "do not rise", "give the lower one first")
    if sampling is not None and spacing is not None:
        raise InputError("spacing", "and a sampling are both given", "give one of the two")
    treatment = treatment or Treatment()
    if treatment.field in ("gradient", "gradient_magnitude"):
        raise InputError("field", f"is {treatment.field}", "ask for a scalar field that is a sum of waves")
    where = sampling or _whole_cell(coefficients, spacing)
    work = prepare(coefficients, where, treatment, demand, max_bytes=max_bytes)
    moments, kept = Moments(), []
    keep = work.bytes_output <= KEPT_BYTES
    for block in iterate(work):
        moments.add(block)
        if keep:
            kept.append(block)
    low, high = (moments.low, moments.high) if ends is None else (float(ends[0]), float(ends[1]))
    if ends is None:
        # Of a field that is flat but for rounding, intervals must still be told apart.
        finest = 4 * parts * float(np.spacing(max(abs(low), abs(high))))
        if high - low < finest:
            low, high = low - finest, high + finest
    edges = np.histogram_bin_edges(np.array([low, high]), parts, (low, high))
    counts, below, above = _counted(kept if keep else iterate(work), edges)
    variance = moments.second / moments.count
    # What rounding leaves of a constant field has no shape.
    flat = variance <= (1e-14 * max(abs(moments.low), abs(moments.high))) ** 2
    exact = exact_moments(work.parts.series[0], where, coefficients.lattice)
    return Distribution(
        samples=moments.count,
        shape=where.shape,
        mean=moments.mean,
        rms=math.sqrt(variance + moments.mean**2),
        standard_deviation=math.sqrt(variance),
        skewness=None if flat else moments.third / moments.count / variance**1.5,
        excess_kurtosis=None if flat else moments.fourth / moments.count / variance**2 - 3,
        minimum=moments.low,
        maximum=moments.high,
        fraction_negative=moments.negative / moments.count,
        edges=edges,
        counts=counts,
        below=below,
        above=above,
        exact_moments=exact,
        unit=work.parts.unit,
        applied=(*coefficients.history, *work.parts.applied),
        notes=_notes(work, exact),
    )


def exact_moments(series: Series, sampling: Sampling, lattice: Lattice) -> int:
    """The highest power k ≤ 4 of which the mean over the samples is that over the cell.

    n^k has indices up to k times those of n; on a grid of N_j > k·max|m_j| samples none but zero
    is a multiple of N_j. 0 where the samples are not those of one whole cell.
    """
    d = lattice.dimension
    if not isinstance(sampling, AffineGrid) or len(sampling.shape) != d:
        return 0
    shape = np.array(sampling.shape)
    if not np.allclose(sampling.steps * shape[:, None], np.eye(d), rtol=0, atol=1e-12):
        return 0
    reach = np.maximum(np.abs(series.low), np.abs(series.high))
    return int(np.count_nonzero([(shape > k * reach).all() for k in range(1, HIGHEST + 1)]))


def _whole_cell(coefficients: CoefficientSet, spacing: float | None) -> AffineGrid:
    lattice, used = coefficients.lattice, coefficients
    if spacing is None:
        resolution = used.resolution()
        step = float(lattice.lengths.max()) if resolution is None else resolution[0] / DIVISIONS
        least = HIGHEST * np.abs(used.indices).max(axis=0, initial=0) + 1
    else:
        step, least = as_positive(spacing, "spacing", "Å"), np.ones(lattice.dimension, dtype=np.int64)
    if float(lattice.lengths.max()) / step > 1e9:
        raise InputError("spacing", f"is {step:g} Å, a billionth of the cell", "give a coarser spacing")
    wanted = np.maximum(np.ceil(lattice.lengths / step * (1 - 1e-12)).astype(np.int64), least)
    return full_cell(lattice, [int(fft.next_fast_len(int(count), real=True)) for count in wanted])


def _counted(blocks: Iterable[AnyArray] | Iterator[AnyArray], edges: FloatArray) -> tuple[IntArray, int, int]:
    counts = np.zeros(edges.size - 1, dtype=np.int64)
    below = above = 0
    for block in blocks:
        values = block.astype(np.float64, copy=False)
        counts += np.histogram(values, edges.size - 1, (edges[0], edges[-1]))[0]
        below += int(np.count_nonzero(values < edges[0]))
        above += int(np.count_nonzero(values > edges[-1]))
    return counts, below, above


def _notes(work: Work, exact: int) -> tuple[str, ...]:
    names = ("mean", "standard deviation", "skewness", "kurtosis")
    notes = []
    if exact:
        listed = ", ".join(names[:exact])
        notes.append(f"The samples are fine enough for the exact values over the cell of: {listed}.")
    if exact < HIGHEST:
        listed = ", ".join(names[exact:])
        notes.append(f"Of the samples alone are: {listed}.")
    notes.append("Minimum, maximum, fraction negative and histogram are those of the samples.")
    if not work.parts.series[0].zero_term and work.treatment.field == "density":
        notes.append("The zero term is absent or zero: the sign of a value is that of its deviation from the mean.")
    if work.parts.unphased:
        notes.append(f"{work.parts.unphased} of {work.coefficients.count} coefficients have no phase and are left out.")
    return tuple(notes)

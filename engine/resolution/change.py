"""How far the terms that were not measured could change a density, as a field on its samples.

Not an uncertainty of what was measured: that is in σ. This is what is not in the series at all.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np

from engine.arrays import AnyArray
from engine.coefficients import CoefficientSet
from engine.errors import InputError
from engine.fields import Treatment
from engine.resolution.envelope import Envelope
from engine.resolution.unmeasured import Unmeasured, unmeasured
from engine.sampling.grids import Sampling
from engine.synthesis import Demand, Progress
from engine.uncertainty.sigma import SigmaWork, perform_sigma, prepare_sigma
from engine.windows import NO_WINDOW


@dataclass(frozen=True, slots=True, kw_only=True)
class Change:
    """What unmeasured terms could do.

    Attributes
    ----------
    values : float array
        Root mean square change at each sample over all phases the terms might have, in the
        density's unit.
    rms : float
        Over all samples.
    largest_inside, largest_beyond : float
        The change at any point were all phases aligned there: by terms missing down to d_min, and by
        those beyond.
    words : tuple of str
        What was assumed.
    """

    values: AnyArray
    rms: float
    largest_inside: float
    largest_beyond: float
    words: tuple[str, ...]


@dataclass(frozen=True, slots=True, kw_only=True)
class ChangeWork:
    """A costed change.

    Attributes
    ----------
    terms : Unmeasured
    works : tuple of SigmaWork
        Of the terms inside and of those beyond, as far as there are any.
    shape : tuple of int
    dtype : numpy dtype
    words : tuple of str
    """

    terms: Unmeasured
    works: tuple[SigmaWork, ...]
    shape: tuple[int, ...]
    dtype: np.dtype[np.generic]
    words: tuple[str, ...]

    @property
    def bytes(self) -> int:
        """Values and workspace at the peak."""
        own = math.prod(self.shape) * self.dtype.itemsize
        return own + max((one.bytes for one in self.works), default=0)

    @property
    def seconds(self) -> float:
        """Estimate."""
        return sum(one.seconds for one in self.works)


def prepare_change(
    coefficients: CoefficientSet,
    envelope: Envelope,
    sampling: Sampling,
    treatment: Treatment,
    demand: Demand | None = None,
    *,
    d_stop: float | None = None,
    max_bytes: int | None = None,
) -> ChangeWork:
    """Cost the change of a density by what was not measured.

    A termination window of the treatment is left out: it is there because the terms are not. The
    average stays.

    Raises
    ------
    InputError
        Another field than the density, a sharpened or complex one, or as
        `engine.resolution.unmeasured.unmeasured`.
    TooLargeError
        Too many terms, or more than `max_bytes`.
    """
    if treatment.field != "density" or treatment.sharpen > 0 or not coefficients.real:
        raise InputError(
            "unmeasured", "is told of a real density that is not sharpened, and of no other field", "leave it out"
        )
    found = unmeasured(coefficients, envelope, d_stop)
    plain = replace(treatment, window=NO_WINDOW, apply_merit=False)
    demand = demand or Demand()
    works = tuple(
        prepare_sigma(part, sampling, plain, demand, max_bytes=max_bytes)
        for part in (found.inside, found.beyond)
        if part is not None
    )
    words = list(found.words)
    if treatment.window.kind != "none":
        words.append("the termination window is not applied to missing terms")
    if treatment.average is not None:
        words.append("the integral for the last terms is not averaged, and so an upper bound")
    dtype = np.dtype(np.float64 if demand.precision == "double" else np.float32)
    return ChangeWork(terms=found, works=works, shape=sampling.shape, dtype=dtype, words=tuple(words))


def perform_change(work: ChangeWork, *, progress: Progress | None = None) -> Change:
    """Compute a costed change."""
    values = np.full(work.shape, work.terms.tail_variance, dtype=work.dtype)
    for one in work.works:
        part = perform_sigma(one, values, progress=progress).values
        np.multiply(part, part, out=part)
        values += part
    np.sqrt(values, out=values)
    flat = values.reshape(-1)
    return Change(
        values=values,
        rms=math.sqrt(float(np.vdot(flat, flat)) / flat.size),
        largest_inside=work.terms.largest_inside,
        largest_beyond=work.terms.largest_beyond,
        words=work.words,
    )

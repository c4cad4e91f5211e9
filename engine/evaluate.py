"""From a coefficient set to a field on samples: treat, plan, sum, describe."""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from engine.arrays import AnyArray
from engine.coefficients import CoefficientSet
from engine.errors import InputError, TooLargeError
from engine.fields import PHASES_DECIDE, Summands, Treatment, summands
from engine.sampling.grids import AffineGrid, Axis, Sampling
from engine.statistics import Statistics, Tracker
from engine.synthesis import Demand, Method, Plan, Progress, fill, plan, result_dtype, stream
from engine.uncertainty.sigma import Sigma, SigmaWork, perform_sigma, prepare_sigma


@dataclass(frozen=True, slots=True, kw_only=True)
class Work:
    """A field that has been costed and not yet computed.

    Attributes
    ----------
    coefficients : CoefficientSet
    sampling : Sampling
    treatment : Treatment
    parts : Summands
    plans : tuple of Plan
        One per component.
    shape : tuple of int
        Of the values: the sampling's, and the components' number last for a vector.
    dtype : numpy dtype
    sigma : SigmaWork or None
        Of the standard uncertainties, where they are asked for.
    """

    coefficients: CoefficientSet
    sampling: Sampling
    treatment: Treatment
    parts: Summands
    plans: tuple[Plan, ...]
    shape: tuple[int, ...]
    dtype: np.dtype[np.generic]
    sigma: SigmaWork | None = None

    @property
    def bytes_output(self) -> int:
        """Bytes of the values."""
        return math.prod(self.shape) * self.dtype.itemsize

    @property
    def bytes(self) -> int:
        """Values and workspace together, at the peak."""
        # A vector is summed into strided memory, its length by way of each component.
        one = self.plans[0].output if self.parts.components or self.parts.magnitude else 0
        alone = self.bytes_output + one + max(part.chosen.workspace for part in self.plans)
        return alone if self.sigma is None else max(alone, self.bytes_output + self.sigma.bytes)

    @property
    def seconds(self) -> float:
        """Estimate."""
        return sum(one.chosen.seconds for one in self.plans) + (0.0 if self.sigma is None else self.sigma.seconds)


@dataclass(frozen=True, slots=True, kw_only=True)
class Field:
    """Values of a field on samples, with everything needed to read them.

    Attributes
    ----------
    values : array
        Shape of the sampling; the components of a vector last. Real or complex.
    sampling : Sampling
    axes : tuple of Axis
        Empty for free points.
    components : tuple of str
        Names of a vector's Cartesian components, else empty.
    unit : str
    statistics : Statistics
    methods : tuple of Method
        How the sum was done.
    accuracy : float
        Largest error to expect from the summation, relative to the largest |value|.
    summed : int
        Coefficients in the sum, with both of each Friedel pair.
    unphased : int
        Coefficients left out because their phase is unknown.
    resolution : (float, float) or None
        Smallest and largest spacing d summed, Å.
    applied : tuple of str
        Every treatment, in words.
    notes : tuple of str
        What a reader must know before trusting the values.
    sigma : Sigma or None
        Standard uncertainty of each value, where it was asked for.
    """

    values: AnyArray
    sampling: Sampling
    axes: tuple[Axis, ...]
    components: tuple[str, ...]
    unit: str
    statistics: Statistics
    methods: tuple[Method, ...]
    accuracy: float
    summed: int
    unphased: int
    resolution: tuple[float, float] | None
    applied: tuple[str, ...]
    notes: tuple[str, ...]
    sigma: Sigma | None = None


def prepare(
    coefficients: CoefficientSet,
    sampling: Sampling,
    treatment: Treatment | None = None,
    demand: Demand | None = None,
    *,
    uncertainty: bool = False,
    method: Method | None = None,
    max_bytes: int | None = None,
) -> Work:
    """Cost a field without computing it.

    Parameters
    ----------
    uncertainty : bool
        Whether the standard uncertainty of every value is wanted too.
    max_bytes : int, optional
        Bound of the values and the workspace together.

    Raises
    ------
    InputError
        See `engine.fields.summands`, `engine.synthesis.plan` and `engine.uncertainty.sigma.prepare_sigma`.
    TooLargeError
        No method stays within `max_bytes`.
    """
    treatment = treatment or Treatment()
    parts = summands(coefficients, treatment)
    count = len(parts.series)
    output = math.prod(sampling.shape) * result_dtype(parts.series[0].real, (demand or Demand()).precision).itemsize
    # One component is summed at a time, beside the values of all or the length of the vector.
    others = count if parts.components else int(parts.magnitude)
    if max_bytes is not None and output * (1 + others) > max_bytes:
        raise TooLargeError(
            "samples",
            f"the values alone would take {output * (1 + others) / 2**20:,.0f} MiB, more than the limit of "
            f"{max_bytes / 2**20:,.0f} MiB",
            "ask for fewer samples or single precision, or raise the limit",
        )
    room = None if max_bytes is None else max_bytes - output * others
    plans = tuple(plan(series, sampling, demand, method=method, max_bytes=room) for series in parts.series)
    dtype = result_dtype(parts.series[0].real, plans[0].demand.precision)
    if parts.magnitude:
        dtype = result_dtype(True, plans[0].demand.precision)
    shape = (*sampling.shape, count) if parts.components else sampling.shape
    sigma = None
    if uncertainty:
        left = None if max_bytes is None else max_bytes - math.prod(shape) * dtype.itemsize
        sigma = prepare_sigma(coefficients, sampling, treatment, demand, max_bytes=left)
    return Work(
        coefficients=coefficients,
        sampling=sampling,
        treatment=treatment,
        parts=parts,
        plans=plans,
        shape=shape,
        dtype=dtype,
        sigma=sigma,
    )


def perform(work: Work, *, out: AnyArray | None = None, progress: Progress | None = None) -> Field:
    """Compute a costed field.

    Parameters
    ----------
    out : array, optional
        Where the values go: C-contiguous, of the work's shape and dtype.
    progress : callable, optional
        Called with the planes done and in all; may raise to end the work.

    Raises
    ------
    InputError
        `out` does not fit.
    TransformError
        A numerical library failed.
    """
    if out is None:
        out = np.empty(work.shape, dtype=work.dtype)
    elif out.shape != work.shape or out.dtype != work.dtype or not out.flags.c_contiguous:
        raise InputError("out", "does not fit the values", f"give a contiguous array {work.shape} of {work.dtype}")
    tracker = Tracker()
    count = len(work.plans)
    # One array for every component; and no source outlives its sum, to need no more memory than was said.
    kind = result_dtype(work.parts.series[0].real, work.plans[0].demand.precision)
    component = np.empty(work.sampling.shape, kind) if work.parts.magnitude else None
    for number, one in enumerate(work.plans):
        report = None if progress is None else _share(progress, number, count + (work.sigma is not None))
        threads = one.demand.threads
        if component is None:
            target = out[..., number] if work.parts.components else out
            fill(one.prepare(), target, threads=threads, progress=report, each=tracker.add)
            continue
        fill(one.prepare(), component, threads=threads, progress=report)
        if number == 0:
            out.fill(0)
        _add_square(out, component)
    if component is not None:
        np.sqrt(out, out=out)
        tracker.add(out)
    sigma = None
    if work.sigma is not None:
        component = None
        last = None if progress is None else _share(progress, count, count + 1)
        sigma = perform_sigma(work.sigma, out, progress=last)
    return _described(work, out, tracker.statistics(), sigma)


def evaluate(
    coefficients: CoefficientSet,
    sampling: Sampling,
    treatment: Treatment | None = None,
    demand: Demand | None = None,
    *,
    uncertainty: bool = False,
    method: Method | None = None,
    max_bytes: int | None = None,
    progress: Progress | None = None,
) -> Field:
    """Cost and compute a field: `prepare`, then `perform`; raises what they raise."""
    work = prepare(
        coefficients, sampling, treatment, demand, uncertainty=uncertainty, method=method, max_bytes=max_bytes
    )
    return perform(work, progress=progress)


def iterate(work: Work) -> Iterator[AnyArray]:
    """Compute a costed scalar field in blocks of planes along the first axis, in order.

    The whole array never exists. Blocks have the shape (planes, *rest) of the sampling.

    Raises
    ------
    InputError
        The field is a vector or its length; sum one component at a time.
    """
    if work.parts.components or work.parts.magnitude:
        raise InputError("field", "has several components", "iterate over a scalar field")
    one = work.plans[0]
    yield from stream(one.prepare(), work.dtype, work.sampling.shape[1:], one.demand.threads)


def _add_square(total: AnyArray, component: AnyArray) -> None:
    """Add |component|² to a real total; the component is overwritten."""
    parts = component.view(total.dtype).reshape(*total.shape, -1)
    np.multiply(parts, parts, out=parts)
    for part in np.moveaxis(parts, -1, 0):
        total += part


def _share(progress: Progress, number: int, count: int) -> Progress:
    def report(done: int, total: int) -> None:
        progress(number * total + done, count * total)

    return report


def _described(work: Work, values: AnyArray, statistics: Statistics, sigma: Sigma | None) -> Field:
    given = work.coefficients
    summed = work.parts.series[0].indices if len(work.parts.series) == 1 else given.phased().indices
    others = summed[summed.any(axis=1)]
    resolution = None
    if others.size:
        magnitudes = given.lattice.magnitudes(others)
        resolution = (float(2 * np.pi / magnitudes.max()), float(2 * np.pi / magnitudes.min()))
    sampling = work.sampling
    return Field(
        values=values,
        sampling=sampling,
        axes=sampling.axes(given.lattice) if isinstance(sampling, AffineGrid) else (),
        components=work.parts.components,
        unit=work.parts.unit,
        statistics=statistics,
        methods=tuple(dict.fromkeys(one.method for one in work.plans)),
        accuracy=max(one.chosen.accuracy for one in work.plans),
        summed=summed.shape[0] + (others.shape[0] if given.real else 0),
        unphased=work.parts.unphased,
        resolution=resolution,
        applied=(*given.history, *work.parts.applied),
        notes=_notes(work),
        sigma=sigma,
    )


def _notes(work: Work) -> tuple[str, ...]:
    given, tally = work.coefficients, work.coefficients.tally
    notes = []
    if work.treatment.field not in ("autocorrelation", "response"):
        notes.append(PHASES_DECIDE)
    if tally.zero_term == "absent" and work.treatment.field == "density":
        notes.append("The zero term was not given: values are relative to the mean density.")
    elif work.treatment.field == "density" and not given.phase_known[~given.indices.any(axis=1)].all():
        notes.append("The zero term has no phase and is left out: values are relative to the mean density.")
    if work.parts.unphased:
        notes.append(f"{work.parts.unphased} of {given.count} coefficients have no phase and are left out.")
    if work.sigma is not None and given.merit is not None and not work.treatment.apply_merit:
        notes.append(
            "The uncertainty is that of coefficients weighted by their figures of merit; the values are not so."
        )
    if tally.beyond_resolution:
        notes.append(f"{tally.beyond_resolution} coefficients lie outside the resolution limits and are left out.")
    if tally.mates_joined:
        notes.append(f"{tally.mates_joined} Friedel pairs were given on both sides, agree, and were averaged.")
    if tally.repeats_joined:
        notes.append(f"{tally.repeats_joined} rows repeat others exactly and were counted once.")
    notes.append("The series ends with the coefficients given; ripples of termination are in the values.")
    return tuple(notes)

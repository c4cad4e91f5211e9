"""σ of a field on its samples: costed, then computed by one more synthesis of the same kind."""

from __future__ import annotations

import itertools
import math
from dataclasses import dataclass, replace

import numpy as np

from engine.arrays import AnyArray, ComplexArray, FloatArray
from engine.coefficients import CoefficientSet, PlaneErrors
from engine.errors import InputError
from engine.fields import Treatment, multipliers
from engine.sampling.grids import Sampling
from engine.series import Series
from engine.synthesis import Demand, Plan, Progress, fill, plan, result_dtype
from engine.uncertainty.errors import Errors, errors_of
from engine.uncertainty.pairs import estimate, variance_series

BYTES_PER_COEFFICIENT = 88
"""Of the errors, their indices aside, which are kept while σ is computed."""
CHUNK = 1 << 18
"""Values treated at a time between syntheses."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Sigma:
    """Standard uncertainties of a field's values.

    Attributes
    ----------
    values : float array
        The shape of the field's values and their unit. Of a complex value the root of ⟨|δn|²⟩.
    minimum, maximum, rms : float
        Over all samples.
    accuracy : float
        Largest error to expect from the summation, relative to the largest σ.
    contains, omits : tuple of str
        Which errors are in it, and which are not.
    """

    values: AnyArray
    minimum: float
    maximum: float
    rms: float
    accuracy: float
    contains: tuple[str, ...]
    omits: tuple[str, ...]


@dataclass(frozen=True, slots=True, kw_only=True)
class SigmaWork:
    """A field's σ that has been costed and not yet computed.

    Attributes
    ----------
    errors : Errors
    plans : tuple of Plan
        Of the variances of a field's components; of a gradient's length, of all their covariances
        (xx, xy, xz, yy, …).
    gradient : tuple of Plan
        Of the components themselves, where their direction is needed.
    nominal : Plan or None
        Of what a common scale multiplies, where the field's values are not that: an exact self term is in them.
    common : tuple of tuples of Plan
        Of each error common to all coefficients, what one standard deviation of it does to each component.
    zero_factor : float
        What the zero term is multiplied by in the field.
    shape : tuple of int
    dtype : numpy dtype
    workspace : int
        Bytes at the peak beside the values.
    """

    errors: Errors
    plans: tuple[Plan, ...]
    gradient: tuple[Plan, ...]
    nominal: Plan | None
    common: tuple[tuple[Plan, ...], ...]
    zero_factor: float
    shape: tuple[int, ...]
    dtype: np.dtype[np.generic]
    workspace: int

    @property
    def bytes(self) -> int:
        """Values and workspace together, at the peak."""
        return math.prod(self.shape) * self.dtype.itemsize + self.workspace

    @property
    def seconds(self) -> float:
        """Estimate."""
        return sum(one.chosen.seconds for one in self._all)

    @property
    def _all(self) -> tuple[Plan, ...]:
        shared = tuple(one for every in self.common for one in every)
        return (*self.plans, *self.gradient, *shared, *(() if self.nominal is None else (self.nominal,)))


def prepare_sigma(
    coefficients: CoefficientSet,
    sampling: Sampling,
    treatment: Treatment,
    demand: Demand | None = None,
    *,
    max_bytes: int | None = None,
) -> SigmaWork:
    """Cost the σ of a field; the series of its variance is made on the way.

    Raises
    ------
    InputError
        The set has no uncertainties, the field is the response, or as `engine.fields.multipliers`.
    TooLargeError
        More than `max_bytes` would be needed.
    """
    if treatment.field == "response":
        raise InputError("uncertainty", "is asked of the response, which holds no measured value", "leave it out")
    linear = replace(treatment, field="density") if treatment.field == "autocorrelation" else treatment
    source = _squares(coefficients) if treatment.field == "autocorrelation" else coefficients
    # The merit is in the errors already.
    made = multipliers(source, replace(linear, apply_merit=False, self_term=0.0))
    errors = errors_of(made.used)
    factors = [one[errors.order] for one in made.factors]
    count = len(factors)
    magnitude = treatment.field == "gradient_magnitude"
    demand = demand or Demand()
    dtype = result_dtype(True, demand.precision)
    samples = math.prod(sampling.shape)
    vector = treatment.field == "gradient"
    shape = (*sampling.shape, count) if vector else sampling.shape
    pairs = (
        list(itertools.combinations_with_replacement(range(count), 2)) if magnitude else [(j, j) for j in range(count)]
    )
    # A vector is summed by way of each component, a length by way of all of them and a covariance.
    arrays = count + 1 if magnitude else int(vector)
    with_nominal = bool(errors.scale and treatment.self_term)
    arrays += with_nominal + (2 if errors.common.shape[1] else 0)
    beside = arrays * samples * dtype.itemsize
    strengths = [_strengths(errors, one) for one in factors]
    kinds = len(strengths[0])
    beside += errors.count * (BYTES_PER_COEFFICIENT + 8 * errors.lattice.dimension + 16 * (kinds + 2) * count)
    room = None if max_bytes is None else max_bytes - math.prod(shape) * dtype.itemsize - beside
    made_of: list[Series] = []
    series_bytes, making = 0, 0
    for i, j in pairs:
        left = None if room is None else room - series_bytes
        made_of.append(variance_series(errors, strengths[i], strengths[j], max_bytes=left))
        cost = estimate(errors, kinds=kinds, same=i == j)
        making = max(making, series_bytes + cost.at_peak(made_of[-1].count))
        series_bytes += made_of[-1].count * (8 * errors.lattice.dimension + 16)
    if room is not None:
        # A plan counts the array that it fills, which has been counted already.
        room += samples * dtype.itemsize - series_bytes
    plans = tuple(plan(one, sampling, demand, max_bytes=room) for one in made_of)
    themselves = tuple(
        plan(Series(errors.lattice, errors.indices, errors.values * one, errors.real), sampling, demand, max_bytes=room)
        for one in (factors if magnitude or with_nominal else ())
    )
    common = tuple(
        tuple(
            plan(Series(errors.lattice, errors.indices, moved * one, errors.real), sampling, demand, max_bytes=room)
            for one in factors
        )
        for moved in errors.common.T
    )
    at_zero = ~errors.indices.any(axis=1)
    return SigmaWork(
        errors=errors,
        plans=plans,
        gradient=themselves if magnitude else (),
        nominal=themselves[0] if with_nominal else None,
        common=common,
        zero_factor=float(factors[0][at_zero].real.sum()),
        shape=shape,
        dtype=dtype,
        workspace=beside + max(making, series_bytes + max(one.chosen.workspace for one in (*plans, *themselves))),
    )


def perform_sigma(work: SigmaWork, field_values: AnyArray, *, progress: Progress | None = None) -> Sigma:
    """Compute a costed σ.

    Parameters
    ----------
    field_values : array
        The field's values on the same samples; the error of a common scale goes with them.
    """
    out = np.empty(work.shape, dtype=work.dtype)
    if work.gradient:
        _length_variance(work, out)
    else:
        for number, one in enumerate(work.plans):
            target = out if out.shape == one.sampling.shape else np.empty(one.sampling.shape, dtype=work.dtype)
            fill(one.prepare(), target, threads=one.demand.threads, progress=progress)
            if target is not out:
                out[..., number] = target
        for every in work.common:
            for number, one in enumerate(every):
                moved = _filled(one)
                (out[..., number] if out.shape != one.sampling.shape else out)[...] += np.abs(moved) ** 2
    if work.nominal is not None:
        field_values = np.empty(work.shape, dtype=work.dtype)
        fill(work.nominal.prepare(), field_values, threads=work.nominal.demand.threads)
    low, high, squares = _finish(out.reshape(-1), field_values.reshape(-1), work)
    # The accuracy of a variance is relative to its largest value; its root halves relative errors
    # there and magnifies them where σ is small.
    accuracy = max(one.chosen.accuracy for one in work.plans)
    return Sigma(
        values=out,
        minimum=low,
        maximum=high,
        rms=math.sqrt(squares / out.size),
        accuracy=math.sqrt(accuracy),
        contains=work.errors.contains,
        omits=work.errors.omits,
    )


def significance(values: AnyArray, sigma: Sigma) -> AnyArray:
    """n/σ, not a number where σ is 0; of complex values |n|/σ."""
    measured = np.abs(values) if values.dtype.kind == "c" else values
    made = np.full(measured.shape, np.nan, dtype=measured.dtype)
    np.divide(measured, sigma.values, out=made, where=sigma.values > 0)
    return made


def _strengths(errors: Errors, factors: ComplexArray | FloatArray) -> tuple[ComplexArray, ...]:
    along = errors.spread() * factors
    return (along, errors.turned() * factors) if errors.across.any() else (along,)


def _squares(coefficients: CoefficientSet) -> CoefficientSet:
    """V |n|² as the coefficients they are in an autocorrelation, with the σ of a squared normal variable."""
    volume, amplitude = coefficients.lattice.volume, np.abs(coefficients.values)
    sigma = coefficients.sigma
    if sigma is not None:
        sigma = volume * np.sqrt(4 * amplitude**2 * sigma**2 + 2 * sigma**4)
    errors = None
    if sigma is not None:
        # They are real, those that are zero too, and no phase enters.
        none = np.zeros(coefficients.count)
        errors = PlaneErrors(
            phasor=np.ones(coefficients.count, dtype=np.complex128),
            along=sigma,
            across=none,
            mixed=none,
            contains=("standard uncertainties of the amplitudes",),
        )
    return replace(
        coefficients,
        values=(volume * amplitude**2).astype(np.complex128),
        phase_known=np.ones(coefficients.count, dtype=np.bool_),
        sigma=sigma,
        phase_sigma=None,
        merit=None,
        scale_sigma=2 * coefficients.scale_sigma,
        plane_errors=errors,
        common_errors=None,
    )


def _length_variance(work: SigmaWork, out: AnyArray) -> None:
    """ĝᵀ C ĝ of the gradient g; where g vanishes, the mean of C over all directions."""
    count = len(work.gradient)
    components = np.empty((count, *work.shape), dtype=work.dtype)
    for one, target in zip(work.gradient, components, strict=True):
        fill(one.prepare(), target, threads=one.demand.threads)
    length = np.sqrt(np.einsum("i...,i...->...", components, components))
    still = length <= float(np.finfo(str(work.dtype)).eps) * length.max(initial=0.0)
    np.divide(components, length, out=components, where=~still)
    components[:, still] = 0
    out.fill(0)
    covariance = length
    pairs = itertools.combinations_with_replacement(range(count), 2)
    for (i, j), one in zip(pairs, work.plans, strict=True):
        fill(one.prepare(), covariance, threads=one.demand.threads)
        out += (1 if i == j else 2) * components[i] * components[j] * covariance
        if i == j:
            out[still] += covariance[still] / count
    for every in work.common:
        along = np.zeros(work.shape, dtype=work.dtype)
        for direction, one in zip(components, every, strict=True):
            along += direction * _filled(one)
        out += along**2


def _filled(one: Plan) -> AnyArray:
    """The values of a plan."""
    made = np.empty(one.sampling.shape, dtype=result_dtype(one.series.real, one.demand.precision))
    fill(one.prepare(), made, threads=one.demand.threads)
    return made


def _finish(variance: AnyArray, values: AnyArray, work: SigmaWork) -> tuple[float, float, float]:
    """Variance to σ in place, the common scale included; smallest, largest, and sum of squares."""
    low, high, squares = math.inf, 0.0, 0.0
    fixed = work.errors.fixed * work.zero_factor
    for start in range(0, variance.size, CHUNK):
        part = variance[start : start + CHUNK]
        # Where the exact variance is zero, on symmetry elements, rounding may leave less.
        np.maximum(part, 0, out=part)
        if work.errors.scale:
            moved = np.abs(values[start : start + CHUNK] - (fixed if values.dtype.kind == "c" else fixed.real))
            part += (work.errors.scale * moved) ** 2
        np.sqrt(part, out=part)
        low, high = min(low, float(part.min())), max(high, float(part.max()))
        squares += float(np.vdot(part, part))
    return low, high, squares

"""σ of a field on its samples: costed, then computed by one more synthesis of the same kind."""

from __future__ import annotations

import itertools
import math
from dataclasses import dataclass, replace

import numpy as np

from engine.arrays import AnyArray, ComplexArray, FloatArray
from engine.coefficients import CoefficientSet
from engine.errors import InputError, TooLargeError
from engine.fields import Treatment, multipliers
from engine.sampling.grids import Sampling
from engine.series import Series
from engine.synthesis import Demand, Plan, Progress, fill, plan, result_dtype
from engine.uncertainty.errors import Errors, errors_of
from engine.uncertainty.pairs import estimate, variance_series

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
        return sum(one.chosen.seconds for one in (*self.plans, *self.gradient))


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
    shape = sampling.shape if magnitude or count == 1 else (*sampling.shape, count)
    pairs = (
        list(itertools.combinations_with_replacement(range(count), 2)) if magnitude else [(j, j) for j in range(count)]
    )
    cost = estimate(errors)
    series_bytes = len(pairs) * cost.terms * (8 * errors.lattice.dimension + 16)
    # A vector is summed by way of each component, a length by way of all of them and a covariance.
    arrays = count + 1 if magnitude else int(count > 1)
    beside = arrays * samples * dtype.itemsize
    room = None if max_bytes is None else max_bytes - math.prod(shape) * dtype.itemsize - beside
    if room is not None and cost.workspace + series_bytes > room:
        raise TooLargeError(
            "uncertainty",
            f"needs {(cost.workspace + series_bytes) / 2**20:,.0f} MiB for the {cost.pairs:,} pairs of related "
            f"coefficients, more than is left of the limit of {(max_bytes or 0) / 2**20:,.0f} MiB",
            "leave it out, ask for a coarser resolution, or raise the limit",
        )
    strengths = [_strengths(errors, one) for one in factors]
    plans = tuple(
        plan(variance_series(errors, strengths[i], strengths[j]), sampling, demand, max_bytes=room) for i, j in pairs
    )
    gradient: tuple[Plan, ...] = ()
    if magnitude:
        gradient = tuple(
            plan(
                Series(errors.lattice, errors.indices, errors.values * one, errors.real),
                sampling,
                demand,
                max_bytes=room,
            )
            for one in factors
        )
    at_zero = ~errors.indices.any(axis=1)
    return SigmaWork(
        errors=errors,
        plans=plans,
        gradient=gradient,
        zero_factor=float(factors[0][at_zero].real.sum()),
        shape=shape,
        dtype=dtype,
        workspace=beside + series_bytes + max(one.chosen.workspace for one in (*plans, *gradient)),
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
            target = out if len(work.plans) == 1 else np.empty(work.shape[:-1], dtype=work.dtype)
            fill(one.prepare(), target, threads=one.demand.threads, progress=progress)
            if target is not out:
                out[..., number] = target
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
    return replace(
        coefficients,
        values=(volume * amplitude**2).astype(np.complex128),
        phase_known=np.ones(coefficients.count, dtype=np.bool_),
        sigma=sigma,
        phase_sigma=None,
        merit=None,
        scale_sigma=2 * coefficients.scale_sigma,
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

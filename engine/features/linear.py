"""A real density as it is summed, with its errors, ready for numbers that are linear in its coefficients.

Integrals, layers and comparisons are made of such numbers; here stands what they share.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from engine.arrays import ComplexArray, FloatArray, IntArray
from engine.coefficients import CoefficientSet
from engine.errors import InputError
from engine.fields import Treatment, multipliers
from engine.lattice import Lattice
from engine.sampling.grids import wrapped
from engine.series import Series
from engine.uncertainty import Errors, Functional, covariance, errors_of, numbers

NO_MEAN = "The zero term is absent: numbers are those of the deviation from the mean density."
NO_ERRORS = "The set has no uncertainties, so none are given."


@dataclass(frozen=True, slots=True, kw_only=True)
class Density:
    """What is summed, and its errors; make one with `density_of`.

    Attributes
    ----------
    series : Series
        Coefficients after the treatment.
    errors : Errors or None
        Where the set has uncertainties: errors of the coefficients before the treatment.
    factors : float64, shape (N,), or None
        What an error is multiplied by, in the order of `errors`.
    unit : str
    zero_known : bool
        Whether the zero term is summed.
    applied, notes : tuple of str
    """

    series: Series
    errors: Errors | None
    factors: FloatArray | None
    unit: str
    zero_known: bool
    applied: tuple[str, ...]
    notes: tuple[str, ...]

    @property
    def contains(self) -> tuple[str, ...]:
        """What is in the uncertainties."""
        return () if self.errors is None else self.errors.contains

    @property
    def omits(self) -> tuple[str, ...]:
        """What is not in the uncertainties."""
        return () if self.errors is None else self.errors.omits

    def numbers(self, functional: Functional) -> FloatArray:
        """Shape (K,)."""
        return numbers(self.series, functional)

    def covariance(self, functional: Functional) -> FloatArray | None:
        """Shape (K, K); None where the set has no uncertainties."""
        if self.errors is None:
            return None
        if not functional.count:
            return np.zeros((0, 0))
        return covariance(self.errors, functional, factors=self.factors)


def density_of(coefficients: CoefficientSet, treatment: Treatment | None = None, *, name: str = "density") -> Density:
    """The density of a set with its window, sharpening, average and merit.

    Parameters
    ----------
    coefficients : CoefficientSet
    treatment : Treatment, optional
        Of the field density.
    name : str
        How a refusal calls the set.

    Raises
    ------
    InputError
        The density is complex, another field is asked for, or as `engine.fields.multipliers`.
    """
    treatment = treatment or Treatment()
    if not coefficients.real:
        raise InputError(name, "is complex", "give a set whose density is real")
    if treatment.field != "density":
        raise InputError("field", f"is {treatment.field}", "ask for the field density")
    made = multipliers(coefficients, treatment)
    used, factors = made.used, np.asarray(made.factors[0].real)
    errors, ordered = None, None
    if not (used.sigma is None and used.phase_sigma is None and used.merit is None and not used.scale_sigma):
        # The merit is in the errors already; only the error of the scale goes with the best coefficient.
        plain = np.asarray(multipliers(coefficients, replace(treatment, apply_merit=False)).factors[0].real)
        kept = plain != 0
        # What an average takes away needs no error; without any left, all are kept at nothing.
        if not kept.any():
            kept = np.ones(used.count, dtype=np.bool_)
        summed = used.select(kept)
        errors = errors_of(summed)
        ordered = plain[kept][errors.order]
        if treatment.apply_merit and summed.merit is not None:
            best = errors.values * summed.merit[errors.order]
            at_zero = ~errors.indices.any(axis=1)
            fixed = complex(best[at_zero].sum()) if errors.fixed else 0j
            errors = replace(errors, values=best, fixed=fixed)
    zero_known = bool((~used.indices.any(axis=1)).any())
    unphased = coefficients.count - used.count
    notes = [] if zero_known else [NO_MEAN]
    if unphased:
        notes.append(f"{unphased} of {coefficients.count} coefficients have no phase and are left out.")
    if errors is None:
        notes.append(NO_ERRORS)
    values = np.asarray(used.values * factors, dtype=np.complex128)
    # What a factor made zero adds nothing; a coefficient measured as zero is one all the same.
    kept = factors != 0
    series = Series(used.lattice, np.asfortranarray(used.indices[kept]), values[kept], real=True)
    return Density(
        series=series,
        errors=errors,
        factors=ordered,
        unit=made.unit,
        zero_known=zero_known,
        applied=(*coefficients.history, *made.applied),
        notes=tuple(notes),
    )


@dataclass(frozen=True, slots=True)
class Joined:
    """The numbers of several functionals, one after the other."""

    parts: Sequence[Functional]

    @property
    def count(self) -> int:
        return sum(part.count for part in self.parts)

    def factors(self, lattice: Lattice, indices: IntArray) -> ComplexArray:
        return np.concatenate([part.factors(lattice, indices) for part in self.parts])


@dataclass(frozen=True, slots=True)
class LineDerivatives:
    """n and its derivatives along a straight line, at t Å from its origin.

    Attributes
    ----------
    origin : float64, shape (d,)
        Fractional.
    direction : float64, shape (d,)
        Fractional vector of 1 Å.
    at : float64, shape (M,)
        t, Å.
    orders : tuple of int
        Derivatives; number k of K = M·len(orders) is order k div M at the place k mod M.
    """

    origin: FloatArray
    direction: FloatArray
    at: FloatArray
    orders: tuple[int, ...] = (0,)

    @property
    def count(self) -> int:
        return int(self.at.size) * len(self.orders)

    def factors(self, lattice: Lattice, indices: IntArray) -> ComplexArray:
        kappa, start = _along_line(self.origin, self.direction, indices)
        waves = _phasors(np.outer(self.at, kappa))
        waves *= start
        if self.orders == (0,):
            return waves
        return np.concatenate([waves * (1j * kappa) ** order if order else waves for order in self.orders])


@dataclass(frozen=True, slots=True)
class LineMoments:
    """∫ n dt and ∫ (t − c) n dt over intervals of a straight line, c the middle of each.

    With h half the length and κ = G·ê, ∫ e^{iκt} dt = 2h e^{iκc} sin(κh)/(κh) and
    ∫ (t − c) e^{iκt} dt = 2i h² e^{iκc} j_1(κh).

    Attributes
    ----------
    origin, direction : float64, shape (d,)
        As in `LineDerivatives`.
    begin, end : float64, shape (M,)
        Å. Numbers 0 … M−1 are the integrals, M … 2M−1 the first moments.
    """

    origin: FloatArray
    direction: FloatArray
    begin: FloatArray
    end: FloatArray

    @property
    def count(self) -> int:
        return 2 * int(self.begin.size)

    def factors(self, lattice: Lattice, indices: IntArray) -> ComplexArray:
        kappa, start = _along_line(self.origin, self.direction, indices)
        half = 0.5 * (self.end - self.begin)[:, None]
        waves = _phasors(np.outer(0.5 * (self.begin + self.end), kappa))
        waves *= start
        x = half * kappa
        return np.concatenate([2 * half * np.sinc(x / np.pi) * waves, 2j * half**2 * _bessel_one(x) * waves])


def _along_line(origin: FloatArray, direction: FloatArray, indices: IntArray) -> tuple[FloatArray, ComplexArray]:
    """κ = G·ê (Å⁻¹) and exp(iG·o), each of shape (N,)."""
    return 2 * np.pi * (indices @ direction), np.exp(2j * np.pi * (indices @ wrapped(origin)))


def _phasors(angle: FloatArray) -> ComplexArray:
    """exp(i·angle), in half the time that the complex exponential takes."""
    made = np.empty(angle.shape, dtype=np.complex128)
    np.cos(angle, out=made.real)
    np.sin(angle, out=made.imag)
    return made


def _bessel_one(x: FloatArray) -> FloatArray:
    """The spherical Bessel function j_1(x) = sin x/x² − cos x/x of any real x."""
    # Where x is small the closed form cancels; the next term of the series is x⁸/1330560 of the first.
    near = np.abs(x) < 0.1
    safe = np.where(near, 1.0, x)
    square = x**2
    small = x / 3 * (1 - square / 10 * (1 - square / 28 * (1 - square / 54)))
    return np.where(near, small, (np.sin(safe) / safe - np.cos(safe)) / safe)

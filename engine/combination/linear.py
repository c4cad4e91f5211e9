"""Σ c_j n_j of coefficients, and its errors in the complex plane.

Errors of different sets are independent. A coefficient of each has a covariance in the complex plane
with axes along its phasor and across it; covariances of a sum add once they are written in the same axes.
That is exact: a sum is linear in its coefficients. The axes of the result are those of the first set that
has errors. Equivalents have equivalent axes then, also where they cancel in the result, whose own phase is
rounding there.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from engine.arrays import ComplexArray, FloatArray, IntArray
from engine.coefficients import CoefficientSet, PlaneErrors, Tally
from engine.uncertainty.errors import phasors, plane_errors

UNIFORM = math.pi / math.sqrt(3)
"""Standard deviation of a phase that nothing is known of: no phase σ is larger."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Part:
    """One set in a sum.

    Attributes
    ----------
    source : CoefficientSet
    name : str
    rows : int64, shape (n,)
        Rows of it that are summed.
    places : int64, shape (n,)
        Where in the sum.
    factors : float64, shape (n,)
        What they are multiplied by.
    """

    source: CoefficientSet
    name: str
    rows: IntArray
    places: IntArray
    factors: FloatArray


@dataclass(frozen=True, slots=True, kw_only=True)
class Sum:
    """Values and errors of a sum of parts.

    Attributes
    ----------
    values : complex128, shape (N,)
    errors : PlaneErrors or None
        None where no part has errors.
    """

    values: ComplexArray
    errors: PlaneErrors | None

    def described(self) -> tuple[FloatArray | None, FloatArray | None]:
        """To first order the standard uncertainties of |n| and of the phase (radians), each of shape (N,).

        No phase is less certain than one that nothing is known of.
        """
        if self.errors is None:
            return None, None
        own = self.errors.towards(np.where(self.values != 0, phasors(self.values), self.errors.phasor))
        amplitude = np.abs(self.values)
        phase_sigma = np.full(amplitude.shape, UNIFORM)
        np.divide(own.across, amplitude, out=phase_sigma, where=own.across < UNIFORM * amplitude)
        return own.along, np.where(own.across > 0, phase_sigma, 0.0)


def added(parts: Sequence[Part], count: int) -> Sum:
    """The sum of the parts as complex numbers, errors included; shape (count,)."""
    values = np.zeros(count, dtype=np.complex128)
    for part in parts:
        values[part.places] += part.factors * part.source.values[part.rows]
    found = [(part, errors) for part in parts if (errors := plane_errors(part.source)) is not None]
    if not found:
        return Sum(values=values, errors=None)
    frame = np.ones(count, dtype=np.complex128)
    for part, errors in reversed(found):
        frame[part.places] = errors.phasor[part.rows]
    along, across, mixed = np.zeros(count), np.zeros(count), np.zeros(count)
    for part, errors in found:
        one = errors.select(part.rows).scaled(part.factors).towards(frame[part.places])
        along[part.places] += one.along**2
        across[part.places] += one.across**2
        mixed[part.places] += one.mixed
    contains, omits = _words(parts, {part.name: errors for part, errors in found})
    made = PlaneErrors(
        phasor=frame, along=np.sqrt(along), across=np.sqrt(across), mixed=mixed, contains=contains, omits=omits
    )
    return Sum(values=values, errors=made)


def amplitude_sigma(parts: Sequence[Part], count: int) -> FloatArray | None:
    """Standard uncertainty of Σ c_j |n_j|; shape (count,), None where no part has a σ."""
    if all(part.source.sigma is None for part in parts):
        return None
    variance = np.zeros(count)
    for part in parts:
        if part.source.sigma is not None:
            variance[part.places] += (part.factors * part.source.sigma[part.rows]) ** 2
    return np.sqrt(variance)


def words_of_amplitudes(parts: Sequence[Part]) -> tuple[tuple[str, ...], tuple[str, ...]]:
    """Which errors of the parts are in a sum of amplitudes, and which are not."""
    contains, omits = [], []
    for part in parts:
        if part.source.sigma is None:
            omits.append(f"errors of the amplitudes of {part.name}: it has none and is taken as exact")
        else:
            contains.append(f"standard uncertainties of the amplitudes of {part.name}")
    return tuple(contains), tuple(omits)


def _words(parts: Sequence[Part], found: dict[str, PlaneErrors]) -> tuple[tuple[str, ...], tuple[str, ...]]:
    """Which errors of the parts are in a sum of complex numbers, and which are not."""
    contains, omits = [], []
    for part in parts:
        errors = found.get(part.name)
        if errors is None:
            omits.append(f"errors of {part.name}: it has none and is taken as exact")
            continue
        contains += [f"{words} ({part.name})" for words in errors.contains]
        omits += [f"{words} ({part.name})" for words in errors.omits]
    return tuple(contains), tuple(omits)


def joint_tally(sets: Sequence[CoefficientSet], zero_term: str) -> Tally:
    """What became of the rows of all sets."""
    tallies = [one.tally for one in sets]
    return Tally(
        rows=sum(one.rows for one in tallies),
        repeats_joined=sum(one.repeats_joined for one in tallies),
        mates_joined=sum(one.mates_joined for one in tallies),
        beyond_resolution=sum(one.beyond_resolution for one in tallies),
        zero_term=zero_term,
    )


def joint_history(sets: Sequence[CoefficientSet], names: Sequence[str]) -> tuple[str, ...]:
    """What was done to each set before, told once where it is the same for all."""
    if all(one.history == sets[0].history for one in sets):
        return sets[0].history
    return tuple(f"{name}: {words}" for one, name in zip(sets, names, strict=True) for words in one.history)

"""The independent errors of a coefficient set.

A measurement o has an amplitude A with σ_A and a phase that deviates by δ from the one given. Its
coefficients, all that symmetry and Friedel's law make of it, contribute to a density
n_o(r) = A (cos δ · C(r) − sin δ · S(r)), with C the contribution of the coefficients as given and S
that of the same, turned by a right angle. With ⟨sin δ⟩ = 0, m = ⟨cos δ⟩, m₂ = ⟨cos 2δ⟩ and A
independent of δ the variance is

    var n_o = [(A² + σ_A²)(1 + m₂)/2 − A² m²] C² + (A² + σ_A²)(1 − m₂)/2 · S²,

with C and S of unit amplitude: exact in the phase, however broad its distribution. For small σ_φ it is
σ_A² C² + A² σ_φ² S², the law of propagation. Distributions: of a figure of merit that of von Mises,
m = I₁(κ)/I₀(κ), m₂ = 1 − 2m/κ (Sim, Acta Cryst. 13 (1960) 511); of a phase σ the wrapped normal,
m = exp(−σ²/2), m₂ = m⁴ (Mardia & Jupp, Directional Statistics, 2000, §3.5); of a centric reflection two
values, m₂ = 1. The power A²(1 − m²) that the best coefficient leaves unused is in it (Blow & Crick, Acta
Cryst. 12 (1959) 794).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from engine.arrays import BoolArray, ComplexArray, FloatArray, IntArray
from engine.coefficients import CoefficientSet
from engine.errors import InputError
from engine.lattice import Lattice
from engine.phases.concentration import concentration_of_merit
from engine.symmetry.reflections import classify, orbits


@dataclass(frozen=True, slots=True, kw_only=True)
class Errors:
    """Independent errors of the coefficients that are summed, those of one measurement side by side.

    Attributes
    ----------
    lattice : Lattice
    real : bool
        Whether the density is real: one of each Friedel pair is listed.
    order : int64, shape (N,)
        Rows of the set, in the order in which its coefficients stand here.
    indices : int64, shape (N, d)
    values : complex128, shape (N,)
        The coefficients.
    phasor : complex128, shape (N,)
        exp(iφ), 1 where the amplitude is zero.
    along, across : float64, shape (N,)
        Standard deviation of a coefficient in the direction of its phasor and at a right angle to
        it, in the density's unit. The two are independent errors of the measurement.
    sense : float64, shape (N,)
        1 where the coefficient's phase turns with that of the measurement, −1 where against it.
    starts : int64, shape (M,)
        First coefficient of each measurement.
    scale : float
        Relative standard uncertainty of the scale that all values but ``fixed`` share.
    fixed : complex
        What of the zero term does not depend on that scale.
    contains, omits : tuple of str
        What is in an uncertainty made from these errors, and what is not.
    """

    lattice: Lattice
    real: bool
    order: IntArray
    indices: IntArray
    values: ComplexArray
    phasor: ComplexArray
    along: FloatArray
    across: FloatArray
    sense: FloatArray
    starts: IntArray
    scale: float
    fixed: complex
    contains: tuple[str, ...]
    omits: tuple[str, ...]

    @property
    def count(self) -> int:
        """Coefficients."""
        return int(self.values.size)

    @property
    def measurements(self) -> int:
        return int(self.starts.size)

    def spread(self) -> ComplexArray:
        """Strengths of the error along each phasor, shape (N,)."""
        return self.along * self.phasor

    def turned(self) -> ComplexArray:
        """Strengths of the error across each phasor, shape (N,)."""
        return self.across * self.sense * 1j * self.phasor


def errors_of(used: CoefficientSet) -> Errors:
    """The errors of a set whose coefficients all have phases.

    Raises
    ------
    InputError
        The set has neither σ's nor phase σ's nor figures of merit nor a σ of its scale.
    """
    if used.sigma is None and used.phase_sigma is None and used.merit is None and not used.scale_sigma:
        raise InputError("sigma", "is absent, and no other uncertainty is given", "give the column sigma")
    measurement, sense, centric = _measurements(used)
    order = np.argsort(measurement, kind="stable")
    sorted_ids = measurement[order]
    starts = np.flatnonzero(np.concatenate([[True], sorted_ids[1:] != sorted_ids[:-1]])).astype(np.int64)
    amplitude = np.abs(used.values)
    along, across = _deviations(used, amplitude, centric)
    at_zero = ~used.indices.any(axis=1)
    fixed = complex(used.values[at_zero].sum()) if used.tally.zero_term == "given" else 0j
    phasor = np.where(amplitude > 0, used.values / np.where(amplitude > 0, amplitude, 1), 1)
    return Errors(
        lattice=used.lattice,
        real=used.real,
        order=order,
        indices=np.asfortranarray(used.indices[order]),
        values=used.values[order],
        phasor=phasor[order],
        along=along[order],
        across=across[order],
        sense=sense[order],
        starts=starts,
        scale=used.scale_sigma,
        fixed=fixed,
        contains=_contains(used, measurement, starts.size),
        omits=_omits(used),
    )


def _measurements(used: CoefficientSet) -> tuple[IntArray, FloatArray, BoolArray]:
    """Number of the measurement, sense of the phase, and whether centric, of each coefficient."""
    if used.group is None:
        at_zero = np.asarray(~used.indices.any(axis=1))
        centric = at_zero if used.real else np.zeros(used.count, dtype=np.bool_)
        return np.arange(used.count, dtype=np.int64), np.ones(used.count), centric
    gathered = orbits(used.indices, used.group, friedel=used.real)
    kinds = classify(used.indices, used.group)
    centric = kinds.centric if used.real else np.zeros(used.count, dtype=np.bool_)
    return gathered.orbit, np.where(gathered.conjugated, -1.0, 1.0), centric


def _deviations(used: CoefficientSet, amplitude: FloatArray, centric: BoolArray) -> tuple[FloatArray, FloatArray]:
    square = amplitude**2
    sigma_square = np.zeros(used.count) if used.sigma is None else used.sigma**2
    # Complements 1 − m² and 1 − m₂ are computed as such: of a sharp phase they are small.
    if used.merit is not None:
        merit = used.merit
        kappa = concentration_of_merit(merit)
        unused = (1 - merit) * (1 + merit)
        with np.errstate(invalid="ignore", divide="ignore"):
            second = np.where(kappa > 0, np.where(np.isinf(kappa), 0.0, 2 * merit / kappa), 1.0)
    elif used.phase_sigma is not None:
        unused = -np.expm1(-(used.phase_sigma**2))
        second = -np.expm1(-2 * used.phase_sigma**2)
    else:
        return np.sqrt(sigma_square), np.zeros(used.count)
    second = np.where(centric, 0.0, second)
    along = sigma_square * (1 - second / 2) + square * np.maximum(unused - second / 2, 0.0)
    across = (square + sigma_square) * second / 2
    return np.sqrt(along), np.sqrt(across)


def _contains(used: CoefficientSet, measurement: IntArray, count: int) -> tuple[str, ...]:
    found = []
    if used.sigma is not None:
        found.append("standard uncertainties of the amplitudes")
    if used.merit is not None:
        found.append("phase errors by the figures of merit (von Mises distributions; signs where centric)")
    elif used.phase_sigma is not None:
        found.append("phase errors by their standard uncertainties (wrapped normal distributions; signs where centric)")
    if used.scale_sigma:
        found.append(f"the scale, {100 * used.scale_sigma:.3g} %, common to all coefficients")
    if used.group is None:
        found.append("each coefficient taken as a measurement of its own")
    else:
        found.append(f"coefficients related by {used.group.name} taken as one measurement ({count} in all)")
    return tuple(found)


def _omits(used: CoefficientSet) -> tuple[str, ...]:
    left = ["termination and missing coefficients", "systematic errors"]
    if used.merit is None and used.phase_sigma is None:
        left.insert(0, "errors of the phases: none were given")
    if used.sigma is None:
        left.insert(0, "errors of the amplitudes: none were given")
    if not used.scale_sigma:
        left.append("the uncertainty of the scale")
    if used.tally.zero_term == "given":
        left.append("the uncertainty of the zero term, taken as exact")
    elif used.tally.zero_term == "absent":
        left.append("the mean density, which is not known")
    return tuple(left)

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

An amplitude of zero has no phase. Its σ is spread over both directions alike, σ²/2 each, so that the choice of
the origin makes no difference; where symmetry restricts the phase, it lies in the direction allowed.

A combination of sets has errors with any covariance Σ in the complex plane. Two independent errors with the
columns of its symmetric root Σ^½ as strengths have that covariance; the root does not depend on the axes that Σ
is written in, so equivalents, rotated or reflected, have equivalent roots and stay one measurement.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from engine.arrays import BoolArray, ComplexArray, FloatArray, IntArray
from engine.coefficients import CoefficientSet, PlaneErrors
from engine.errors import InputError
from engine.lattice import Lattice
from engine.phases.concentration import concentration_of_merit
from engine.symmetry.reflections import classify, orbits

COMMON = "the scales of the sets to each other, each common to all coefficients"


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
        exp(iφ); where the amplitude is zero, one that symmetry allows; of a set with covariances of its own,
        their axes.
    along, across, mixed : float64, shape (N,)
        Root [[along, mixed], [mixed, across]] of the covariance of a coefficient's components in the
        direction of its phasor and at a right angle to it, in the density's unit. ``mixed`` is zero but in
        combinations of sets: then the other two are standard deviations. The columns are independent
        errors of the measurement.
    sense : float64, shape (N,)
        1 where the coefficient's phase turns with that of the measurement, −1 where against it.
    starts : int64, shape (M,)
        First coefficient of each measurement.
    scale : float
        Relative standard uncertainty of the scale that all values but ``fixed`` share.
    fixed : complex
        What of the zero term does not depend on that scale.
    common : complex128, shape (N, E)
        Displacements by one standard deviation of each error common to all coefficients.
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
    mixed: FloatArray
    sense: FloatArray
    starts: IntArray
    scale: float
    fixed: complex
    common: ComplexArray
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
        """Strengths of the first error, that along each phasor, shape (N,)."""
        return (self.along + 1j * self.mixed) * self.phasor

    def turned(self) -> ComplexArray:
        """Strengths of the second error, that across each phasor, shape (N,)."""
        return (self.mixed + 1j * self.across) * self.sense * self.phasor


def errors_of(used: CoefficientSet) -> Errors:
    """The errors of a set whose coefficients all have phases.

    Raises
    ------
    InputError
        The set has neither σ's nor phase σ's nor figures of merit nor a σ of its scale.
    """
    columns = (used.sigma, used.phase_sigma, used.merit, used.plane_errors, used.common_errors)
    if all(one is None for one in columns) and not used.scale_sigma:
        raise InputError("sigma", "is absent, and no other uncertainty is given", "give the column sigma")
    related = _related(used)
    order = np.argsort(related.measurement, kind="stable")
    sorted_ids = related.measurement[order]
    starts = np.flatnonzero(np.concatenate([[True], sorted_ids[1:] != sorted_ids[:-1]])).astype(np.int64)
    if used.plane_errors is None:
        phasor, along, across = _components(used, related)
        mixed = np.zeros(used.count)
    else:
        phasor = used.plane_errors.phasor
        along, across, mixed = _root(used.plane_errors)
    at_zero = ~used.indices.any(axis=1)
    fixed = complex(used.values[at_zero].sum()) if used.tally.zero_term == "given" else 0j
    return Errors(
        lattice=used.lattice,
        real=used.real,
        order=order,
        indices=np.asfortranarray(used.indices[order]),
        values=used.values[order],
        phasor=phasor[order],
        along=along[order],
        across=across[order],
        mixed=mixed[order],
        sense=related.sense[order],
        starts=starts,
        scale=used.scale_sigma,
        fixed=fixed,
        common=np.zeros((used.count, 0), np.complex128) if used.common_errors is None else used.common_errors[order],
        contains=_contains(used, starts.size),
        omits=_omits(used),
    )


def plane_errors(used: CoefficientSet) -> PlaneErrors | None:
    """Covariances of a set's coefficients, row by row, without its scale's; None where nothing is said of errors."""
    if used.plane_errors is not None:
        return used.plane_errors
    if used.sigma is None and used.phase_sigma is None and used.merit is None:
        return None
    phasor, along, across = _components(used, _related(used))
    return PlaneErrors(
        phasor=phasor,
        along=along,
        across=across,
        mixed=np.zeros(used.count),
        contains=_kinds(used),
        omits=_lacking(used),
    )


def phasors(values: ComplexArray) -> ComplexArray:
    """exp(iφ) of each value, 1 where it is zero; (N,) -> (N,)."""
    amplitude = np.abs(values)
    return np.asarray(np.where(amplitude > 0, values / np.where(amplitude > 0, amplitude, 1), 1))


def _root(errors: PlaneErrors) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Entries of the symmetric roots of the covariances: (Σ + √det Σ) / √(tr Σ + 2 √det Σ)."""
    along, across, mixed = errors.along**2, errors.across**2, errors.mixed
    determinant = np.sqrt(np.maximum(along * across - mixed**2, 0.0))
    size = np.sqrt(along + across + 2 * determinant)
    size = np.where(size > 0, size, 1.0)
    return (along + determinant) / size, (across + determinant) / size, mixed / size


@dataclass(frozen=True, slots=True)
class _Related:
    """Which coefficients are one measurement; all of shape (N,).

    ``sense`` is that of the phase. ``phasor`` is one that symmetry allows: the only one but for its sign where
    the coefficient is centric, one of any otherwise, and those of a measurement related as its coefficients are.
    """

    measurement: IntArray
    sense: FloatArray
    centric: BoolArray
    phasor: ComplexArray


def _related(used: CoefficientSet) -> _Related:
    count = used.count
    if used.group is None:
        centric = ~used.indices.any(axis=1) if used.real else np.zeros(count, dtype=np.bool_)
        number = np.arange(count, dtype=np.int64)
        return _Related(number, np.ones(count), np.asarray(centric), np.ones(count, dtype=np.complex128))
    gathered = orbits(used.indices, used.group, friedel=used.real)
    centric, phase = np.zeros(gathered.count, dtype=np.bool_), np.zeros(gathered.count)
    if used.real:
        kinds = classify(gathered.unique, used.group)
        centric = kinds.centric
        # n_h = F(−h)/V has the opposite phase.
        phase = np.where(centric, -kinds.restricted_phase, 0.0)
    sense = np.where(gathered.conjugated, -1.0, 1.0)
    phasor = np.exp(1j * (sense * phase[gathered.orbit] - gathered.shift))
    return _Related(gathered.orbit, sense, centric[gathered.orbit], phasor)


def _components(used: CoefficientSet, related: _Related) -> tuple[ComplexArray, FloatArray, FloatArray]:
    """Phasors and standard deviations along and across them, each of shape (N,)."""
    amplitude = np.abs(used.values)
    along, across = _deviations(used, amplitude, related.centric)
    undirected = amplitude == 0
    phasor = np.where(undirected, related.phasor, phasors(used.values))
    either = np.sqrt(0.5) * np.hypot(along, across)
    undirected &= ~related.centric
    return phasor, np.where(undirected, either, along), np.where(undirected, either, across)


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


def _contains(used: CoefficientSet, count: int) -> tuple[str, ...]:
    found = list(_kinds(used))
    if used.common_errors is not None and used.common_errors.shape[1]:
        found.append(COMMON)
    if used.scale_sigma:
        found.append(f"the scale, {100 * used.scale_sigma:.3g} %, common to all coefficients")
    if used.group is None:
        found.append("each coefficient taken as a measurement of its own")
    else:
        found.append(f"coefficients related by {used.group.name} taken as one measurement ({count} in all)")
    return tuple(found)


def _kinds(used: CoefficientSet) -> tuple[str, ...]:
    """Errors that the set's columns tell."""
    if used.plane_errors is not None:
        return used.plane_errors.contains
    found = []
    if used.sigma is not None:
        found.append("standard uncertainties of the amplitudes")
    if used.merit is not None:
        found.append("phase errors by the figures of merit (von Mises distributions; signs where centric)")
    elif used.phase_sigma is not None:
        found.append("phase errors by their standard uncertainties (wrapped normal distributions; signs where centric)")
    return tuple(found)


def _omits(used: CoefficientSet) -> tuple[str, ...]:
    left = [*_lacking(used), "termination and missing coefficients", "systematic errors"]
    if not used.scale_sigma:
        left.append("the uncertainty of the scale")
    if used.tally.zero_term == "given":
        left.append("the uncertainty of the zero term, taken as exact")
    elif used.tally.zero_term == "absent":
        left.append("the mean density, which is not known")
    return tuple(left)


def _lacking(used: CoefficientSet) -> tuple[str, ...]:
    """Errors that the set's columns do not tell."""
    if used.plane_errors is not None:
        return used.plane_errors.omits
    left = []
    if used.sigma is None:
        left.append("errors of the amplitudes: none were given")
    if used.merit is None and used.phase_sigma is None:
        left.append("errors of the phases: none were given")
    return tuple(left)

"""A density and its relatives: each a factor on the coefficients, then the same sum.

density          n_G
gradient         i G n_G, one series per Cartesian component
gradient_magnitude  the length of that vector
laplacian        −|G|² n_G
autocorrelation  V |n_G|², the Patterson function (Patterson, Phys. Rev. 46 (1934) 372); needs no
                 phases
response         equal coefficients on exactly the G that are summed, scaled to 1 at the origin: the
                 point-spread function of the measured set
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Literal, get_args

import numpy as np

from engine.arrays import ComplexArray, FloatArray, as_choice
from engine.averages import Average
from engine.coefficients import CoefficientSet
from engine.errors import InputError
from engine.series import Series
from engine.windows import NO_WINDOW, Window, gaussian

FieldKind = Literal["density", "gradient", "gradient_magnitude", "laplacian", "autocorrelation", "response"]
FIELD_KINDS: tuple[FieldKind, ...] = get_args(FieldKind)

STEEPEST = 50.0
"""Largest believed exponent of a sharpening: beyond it the outermost coefficients are all that is left."""
PHASES_DECIDE = "A density is only as good as its phases: wrong ones give a wrong map that looks as sharp."


@dataclass(frozen=True, slots=True, kw_only=True)
class Treatment:
    """What is made of a set before it is summed.

    Attributes
    ----------
    field : FieldKind
    window : Window
        Termination window.
    sharpen : float
        B in Å² of a factor exp(B s²), s = |G|/4π; negative smooths.
    average : Average or None
        Region that each sample is averaged over.
    apply_merit : bool
        Multiply each coefficient by its figure of merit m, the best coefficient in the
        least-squares sense (Blow & Crick, Acta Cryst. 12 (1959) 794).
    self_term : float
        Subtracted from every |n_G|² of an autocorrelation, in the density's unit squared: takes
        the origin peak away.
    """

    field: FieldKind = "density"
    window: Window = NO_WINDOW
    sharpen: float = 0.0
    average: Average | None = None
    apply_merit: bool = False
    self_term: float = 0.0


@dataclass(frozen=True, slots=True, kw_only=True)
class Summands:
    """What is to be summed for a field, and what was done to get it.

    Attributes
    ----------
    series : tuple of Series
        One per component.
    components : tuple of str
        Their names; empty for a scalar field.
    magnitude : bool
        The field is the length of the vector that the components form.
    unit : str
    applied : tuple of str
        Every step taken, in words.
    unphased : int
        Coefficients left out because their phase is unknown.
    """

    series: tuple[Series, ...]
    components: tuple[str, ...]
    magnitude: bool
    unit: str
    applied: tuple[str, ...]
    unphased: int


@dataclass(frozen=True, slots=True, kw_only=True)
class Multipliers:
    """What each coefficient is multiplied by, for a field that is linear in the coefficients.

    Attributes
    ----------
    used : CoefficientSet
        The coefficients that are summed: those with a phase.
    factors : tuple of complex128 or float64, each of shape (N,)
        One per component.
    components : tuple of str
        Their names; empty for a scalar field.
    unit : str
    applied : tuple of str
        Every step taken, in words.
    """

    used: CoefficientSet
    factors: tuple[ComplexArray | FloatArray, ...]
    components: tuple[str, ...]
    unit: str
    applied: tuple[str, ...]


def summands(coefficients: CoefficientSet, treatment: Treatment) -> Summands:
    """The series of a field of a set.

    Raises
    ------
    InputError
        No coefficient is left to sum, the figure of merit is asked for and absent, or an option
        does not belong to the field.
    """
    _check(coefficients, treatment)
    if treatment.field == "response":
        return _response(coefficients, treatment)
    if treatment.field == "autocorrelation":
        return _autocorrelation(coefficients, treatment)
    made = multipliers(coefficients, treatment)
    magnitude = treatment.field == "gradient_magnitude"
    return Summands(
        series=tuple(_summed(made.used, made.used.values * factors) for factors in made.factors),
        components=() if magnitude else made.components,
        magnitude=magnitude,
        unit=made.unit,
        applied=made.applied,
        unphased=coefficients.count - made.used.count,
    )


def multipliers(coefficients: CoefficientSet, treatment: Treatment) -> Multipliers:
    """The factors of a field that is linear in the coefficients; of a gradient's length, those of the gradient.

    Raises
    ------
    InputError
        The field is not linear, or as `summands`.
    """
    _check(coefficients, treatment)
    if treatment.field in ("response", "autocorrelation"):
        raise InputError("field", f"{treatment.field} is not linear in the coefficients", "choose another field")
    used = _phased(coefficients)
    lattice, indices = used.lattice, used.indices
    factors, applied = _factors(used, treatment)
    every: tuple[ComplexArray | FloatArray, ...] = (factors,)
    components: tuple[str, ...] = ()
    unit = used.unit
    if treatment.field in ("gradient", "gradient_magnitude"):
        every = tuple(1j * wave * factors for wave in lattice.wavevectors(indices).T)
        components = ("x", "y", "z")[: lattice.dimension]
        unit = _per(used.unit, "Å")
    elif treatment.field == "laplacian":
        every = (-(lattice.magnitudes(indices) ** 2) * factors,)
        unit = _per(used.unit, "Å²")
    return Multipliers(used=used, factors=every, components=components, unit=unit, applied=tuple(applied))


def _check(coefficients: CoefficientSet, treatment: Treatment) -> None:
    if treatment.self_term and treatment.field != "autocorrelation":
        raise InputError("self_term", "belongs to the field autocorrelation alone", "leave it out")
    if treatment.apply_merit and coefficients.merit is None:
        raise InputError("apply_merit", "the set has no figures of merit", "give the column merit")
    if not math.isfinite(treatment.sharpen):
        raise InputError("sharpen", "is not a finite number", "give B in Å²")
    as_choice(treatment.field, FIELD_KINDS, "field")
    if coefficients.count == 0:
        raise InputError("resolution", "leaves no coefficient", "widen the limits")


def _phased(coefficients: CoefficientSet) -> CoefficientSet:
    used = coefficients.phased()
    if used.count == 0:
        raise InputError("phase_deg", "no coefficient has a phase", "give phases, or ask for the autocorrelation")
    return used


def _response(coefficients: CoefficientSet, treatment: Treatment) -> Summands:
    used = _phased(coefficients)
    factors, applied = _factors(used, treatment)
    series = Series(used.lattice, used.indices, factors.astype(np.complex128), used.real)
    peak = float(series.doubled().real.sum()) if used.real else float(factors.sum())
    if not abs(peak) > 0:
        raise InputError("window", "leaves no coefficient", "choose another window or average")
    return Summands(
        series=(_summed(used, series.values / peak),),
        components=(),
        magnitude=False,
        unit="1",
        applied=tuple(applied),
        unphased=coefficients.count - used.count,
    )


def _autocorrelation(used: CoefficientSet, treatment: Treatment) -> Summands:
    lattice = used.lattice
    factors, applied = _factors(used, treatment)
    squares = (np.abs(used.values) ** 2 - treatment.self_term) * lattice.volume
    if treatment.self_term:
        applied.append(f"self term {treatment.self_term:g} subtracted from every |n|²")
    length = {1: "Å", 2: "Å²", 3: "Å³"}[lattice.dimension]
    return Summands(
        series=(_summed(used, squares * factors),),
        components=(),
        magnitude=False,
        unit="arbitrary" if used.unit == "arbitrary" else f"({used.unit})²·{length}",
        applied=tuple(applied),
        unphased=0,
    )


def _factors(used: CoefficientSet, treatment: Treatment) -> tuple[FloatArray, list[str]]:
    """Window, sharpening, average and merit as one real factor, and in words."""
    lattice = used.lattice
    magnitudes = lattice.magnitudes(used.indices)
    g_max = float(magnitudes.max(initial=0.0))
    factors = np.ones(used.count)
    applied = []
    if g_max > 0:
        factors *= treatment.window.factors(magnitudes, g_max)
        applied.append(treatment.window.describe(lattice.dimension, g_max))
    if treatment.sharpen:
        if treatment.sharpen * (g_max / (4 * math.pi)) ** 2 > STEEPEST:
            raise InputError(
                "sharpen",
                f"multiplies the outermost coefficients by more than exp({STEEPEST:g})",
                "give a smaller B, in Å²",
            )
        factors *= gaussian(magnitudes, treatment.sharpen)
        verb = "sharpened" if treatment.sharpen > 0 else "smoothed"
        applied.append(f"{verb} by exp(B s²) with B = {treatment.sharpen:g} Å²")
    if treatment.average is not None:
        factors *= treatment.average.factors(lattice, used.indices)
        applied.append(treatment.average.describe())
    if used.merit is not None and treatment.field not in ("autocorrelation", "response"):
        if treatment.apply_merit:
            factors *= used.merit
            applied.append("each coefficient multiplied by its figure of merit")
        else:
            applied.append("figures of merit were given and not applied")
    return factors, applied


def _summed(used: CoefficientSet, values: ComplexArray | FloatArray) -> Series:
    """The terms that a factor did not make exactly zero; those cost time and add nothing."""
    complex_values = values.astype(np.complex128)
    kept = complex_values != 0
    if kept.all():
        return Series(used.lattice, used.indices, complex_values, used.real)
    return Series(used.lattice, np.asfortranarray(used.indices[kept]), complex_values[kept], used.real)


def _per(unit: str, length: str) -> str:
    return unit if unit == "arbitrary" else f"{unit}/{length}"

"""Scales that take more than a plot: from the zero term, from two known densities, from another set."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from engine import sampling
from engine.amplitudes.scaling import DensityMap, RelativeScale, relative_scale, scale_from_two_densities
from engine.arrays import FloatArray
from engine.errors import InputError
from engine.evaluate import evaluate
from engine.phases import coefficient_set
from engine.reflections import Reflections


@dataclass(frozen=True, slots=True, kw_only=True)
class KnownDensities:
    """Two places whose densities are known, such as the solvent between sheets and the chains at their middle.

    Attributes
    ----------
    positions : float64, shape (2, d)
        Fractional.
    densities, sigmas : (float, float)
        In the density's unit.
    """

    positions: FloatArray
    densities: tuple[float, float]
    sigmas: tuple[float, float] = (0.0, 0.0)


@dataclass(frozen=True, slots=True, kw_only=True)
class ReferenceSet:
    """Unique amplitudes that another set is brought to the scale of; see `engine.amplitudes.scaling.relative_scale`."""

    reflections: Reflections
    displacement: bool = False
    robust: bool = False


def by_zero_term(measured: float | complex | None, known: float | None) -> float:
    """The factor of amplitudes that makes the measured zero term the known one.

    Raises
    ------
    InputError
        Either is absent or zero, or their signs differ.
    """
    if known is None:
        raise InputError("zero_term", "is not known", "give the content of the cell, or the mean density")
    if measured is None:
        raise InputError("indices", "hold no row of the zero term", "give F(000) on the scale of the others")
    ratio = known / complex(measured) if measured else 0j
    if ratio.imag or not ratio.real > 0:
        raise InputError("zero_term", "and the measured one have no positive ratio", "check F(000)")
    return ratio.real


def by_two_densities(full: Reflections, known: KnownDensities) -> DensityMap:
    """The line from the density of the set as it is, without its mean, to the known densities.

    Parameters
    ----------
    full : Reflections
        Expanded amplitudes with phases, without the zero term.

    Raises
    ------
    InputError
        No phases, or what `scale_from_two_densities` refuses.
    """
    if full.phase is None or np.isnan(full.phase).all():
        raise InputError("phase", "is absent", "a scale by densities needs phases")
    where = sampling.points(full.lattice, known.positions)
    values = evaluate(coefficient_set(full), where).values
    return scale_from_two_densities(
        (float(values[0].real), float(values[1].real)), known.densities, density_sigma=known.sigmas
    )


def by_reference(unique: Reflections, reference: ReferenceSet) -> tuple[Reflections, RelativeScale]:
    """The set on the scale of the reference.

    Raises
    ------
    InputError
        As `engine.amplitudes.scaling.relative_scale`.
    """
    found = relative_scale(reference.reflections, unique, displacement=reference.displacement, robust=reference.robust)
    return replace(found.apply(unique), scale=reference.reflections.scale), found

"""What may be known of a film beside its orders, and the equation in (k, m) that each fact is.

See `engine.films.scale` for the equations; here stand their numbers.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from itertools import combinations

import numpy as np

from engine.arrays import ComplexArray, FloatArray, IntArray, as_positive, as_vector
from engine.errors import InputError
from engine.features.integrals import RegionIntegrals, slab
from engine.films.orders import FilmOrders
from engine.lattice import Lattice
from engine.scattering import Composition, Probe, zero_term
from engine.uncertainty import Functional


@dataclass(frozen=True, slots=True, kw_only=True)
class KnownDensity:
    """Mean density between two places, Å along the normal; σ is of the given number."""

    start: float
    end: float
    density: float
    sigma: float = 0.0
    name: str = "region"


@dataclass(frozen=True, slots=True, kw_only=True)
class KnownTotal:
    """Electrons or scattering length per unit area (density × Å) between two places."""

    start: float
    end: float
    total: float
    sigma: float = 0.0
    name: str = "region"


@dataclass(frozen=True, slots=True, kw_only=True)
class KnownMean:
    """Mean density m of the period; make one of a composition with `mean_of_composition`."""

    mean: float
    sigma: float = 0.0
    name: str = "mean density"


@dataclass(frozen=True, slots=True, kw_only=True)
class KnownFactor:
    """k itself, above zero."""

    factor: float
    sigma: float = 0.0
    name: str = "factor"


@dataclass(frozen=True, slots=True, kw_only=True)
class KnownAmplitude:
    """|F_l| of one phased order on the absolute scale, density × Å."""

    order: int
    amplitude: float
    sigma: float = 0.0
    name: str = "amplitude"


Fact = KnownDensity | KnownTotal | KnownMean | KnownFactor | KnownAmplitude


def mean_of_composition(
    content: Composition,
    *,
    area: float,
    period: float,
    area_sigma: float = 0.0,
    period_sigma: float = 0.0,
    units: float = 1.0,
    units_sigma: float = 0.0,
    probe: Probe = "xray",
) -> KnownMean:
    """Mean density from what one repeat unit of the stack holds: m = F_0/d, F_0 = units · content/area.

    This fixes the mean and no more: a scale needs one fact besides.

    Parameters
    ----------
    content : Composition
        One formula unit.
    area : float
        Å² of the plane per repeat unit.
    period : float
        d, Å.
    units : float
        Formula units in a repeat unit.
    probe : {"xray", "neutron"}
        Electrons, the mean in e/Å³; or bound coherent lengths, the mean in 10⁻⁶ Å⁻².

    Raises
    ------
    InputError
        An area, period or number not above zero, a negative σ, or as `engine.scattering.zero_term`.
    """
    room, d = as_positive(area, "area", "Å²"), as_positive(period, "period", "Å")
    errors = as_vector([area_sigma, period_sigma, units_sigma], 3, "area_sigma")
    if (errors < 0).any():
        raise InputError("area_sigma", "or another σ is negative", "give standard uncertainties")
    # 1 fm/Å³ = 10⁻⁵ Å⁻².
    mean = zero_term(content, units=units, probe=probe) / (room * d) * (1.0 if probe == "xray" else 10.0)
    relative = math.sqrt(float(((errors / np.array([room, d, units])) ** 2).sum()))
    return KnownMean(
        mean=mean,
        sigma=abs(mean) * relative,
        name=f"mean by {units:g} {content.formula} on {room:g} Å² a period of {d:g} Å",
    )


def check(facts: Sequence[Fact], orders: FilmOrders) -> None:
    """Refuse facts that cannot be used with a film, whatever else is known.

    Raises
    ------
    InputError
        Numbers that are not finite, negative σ, regions without width, longer than the period, or of known
        density that overlap; factors and amplitudes not above zero.
    """
    d = orders.period
    for row, fact in enumerate(facts):
        path = ("facts", row)
        numbers = [value for name in fact.__slots__ if name != "name" and (value := getattr(fact, name)) is not None]
        as_vector(numbers, len(numbers), path)
        if fact.sigma < 0:
            raise InputError((*path, "sigma"), "is negative", "give a standard uncertainty of 0 or more")
        if isinstance(fact, KnownDensity | KnownTotal):
            if not fact.end > fact.start:
                raise InputError((*path, "end"), "does not lie beyond the start", "exchange the two")
            if fact.end - fact.start > d * (1 + 1e-9):
                raise InputError(path, f"is longer than the period, {d:g} Å", "give a region within one period")
        if isinstance(fact, KnownFactor) and fact.factor <= 0:
            raise InputError((*path, "factor"), "is not above zero", "turn the phases round where the sign is wrong")
        if isinstance(fact, KnownAmplitude) and fact.amplitude <= 0:
            raise InputError((*path, "amplitude"), "is not above zero", "name an order that is not extinct")
    known = [fact for fact in facts if isinstance(fact, KnownDensity)]
    for one, other in combinations(known, 2):
        apart = (one.start + one.end - other.start - other.end) / 2 / d
        if abs(apart - round(apart)) * d < (one.end - one.start + other.end - other.start) / 2 - 1e-9 * d:
            raise InputError("facts", "name two regions that overlap", "give regions apart from each other")


def parts_of(
    lattice: Lattice, orders: FilmOrders, phases: FloatArray, facts: Sequence[Fact]
) -> tuple[list[Functional], IntArray]:
    """What of the facts is measured, and which facts these are.

    Raises
    ------
    InputError
        An amplitude of an order that is not there, zero or unphased.
    """
    parts: list[Functional] = []
    measured = []
    for row, fact in enumerate(facts):
        if isinstance(fact, KnownAmplitude):
            place = np.flatnonzero(orders.order == fact.order)
            if not place.size or not np.isfinite(phases[place[0]]) or not orders.amplitude[place[0]] > 0:
                raise InputError(
                    ("facts", row), f"names order {fact.order}, which is unmeasured, zero or unphased", "name another"
                )
            parts.append(Amplitude(fact.order, math.radians(phases[place[0]])))
            measured.append(row)
        elif isinstance(fact, KnownDensity | KnownTotal):
            parts.append(RegionIntegrals((slab(lattice, [1], fact.start, fact.end),)))
            measured.append(row)
    return parts, np.array(measured, dtype=np.int64)


def equations(facts: Sequence[Fact]) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Left sides without what is measured, right sides and their σ; (f, 2), (f,), (f,)."""
    rows = []
    for fact in facts:
        match fact:
            case KnownDensity():
                width = fact.end - fact.start
                rows.append((0.0, width, width * fact.density, width * fact.sigma))
            case KnownTotal():
                rows.append((0.0, fact.end - fact.start, fact.total, fact.sigma))
            case KnownMean():
                rows.append((0.0, 1.0, fact.mean, fact.sigma))
            case KnownFactor():
                rows.append((1.0, 0.0, fact.factor, fact.sigma))
            case KnownAmplitude():
                rows.append((0.0, 0.0, fact.amplitude, fact.sigma))
    table = np.array(rows)
    return table[:, :2].copy(), table[:, 2], table[:, 3]


@dataclass(frozen=True, slots=True)
class Amplitude:
    """|F_l| of one order whose phase (radians) is held: d Re(n_l e^{iφ}), since F_l = d conj(n_l)."""

    order: int
    phase: float

    @property
    def count(self) -> int:
        return 1

    def factors(self, lattice: Lattice, indices: IntArray) -> ComplexArray:
        turn = np.exp(1j * self.phase * np.sign(indices[:, 0]))
        return np.asarray(0.5 * lattice.volume * turn * (np.abs(indices[:, 0]) == self.order))[None, :]

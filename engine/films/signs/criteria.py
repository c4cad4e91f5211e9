"""What is known of a stack besides its amplitudes, from which the signs of its orders are judged.

Every criterion gives a number of the kind of χ², −2 ln of a likelihood but for a constant: 0 or more, and to be
compared between sign sets. The score of a sign set is their sum, each times the weight that the user gives it.
A weight of 1 takes a criterion as seriously as the errors say; one that is doubted gets less.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

from engine.arrays import as_positive
from engine.errors import InputError
from engine.resolution.envelope import Envelope

Path = Sequence[str | int]


@dataclass(frozen=True, slots=True, kw_only=True)
class NonNegative:
    """The density is nowhere below a floor: Σ (floor − n)²₊/σ² over the elements of resolution of half a period.

    σ(z) is that of amplitudes and mean, and the ripple to expect of orders that were not measured.

    Attributes
    ----------
    floor : float
        In the density's unit: 0, or a little below the least dense matter of the stack. Below 0 for neutrons
        where a layer scatters so.
    weight : float
    """

    floor: float = 0.0
    weight: float = 1.0


@dataclass(frozen=True, slots=True, kw_only=True)
class Flat:
    """The density is uniform, of any value, from `start` to `stop` (Å from the mirror at the origin).

    Deviations from the region's own mean, by their covariance under errors and termination; of a t distribution where
    the strength of unmeasured orders is only estimated, which makes gross deviations count less than as χ².

    Attributes
    ----------
    start, stop : float
    sigma : float
        Root mean square unevenness that is allowed, in the density's unit, beside that of errors and termination.
    weight : float
    """

    start: float
    stop: float
    sigma: float = 0.0
    weight: float = 1.0


@dataclass(frozen=True, slots=True, kw_only=True)
class KnownDensity:
    """The mean density of an interval, or the density at a point, is `value` ± `sigma`.

    Attributes
    ----------
    value, sigma : float
        In the density's unit.
    start : float
        Å from the mirror at the origin.
    stop : float or None
        None: at the point `start`.
    weight : float
    """

    value: float
    sigma: float
    start: float
    stop: float | None = None
    weight: float = 1.0


@dataclass(frozen=True, slots=True, kw_only=True)
class KnownTotal:
    """∫ n dz from `start` to `stop` is `value` ± `sigma`.

    Attributes
    ----------
    value, sigma : float
        Density times Å.
    start, stop : float
        Å from the mirror at the origin.
    weight : float
    """

    value: float
    sigma: float
    start: float
    stop: float
    weight: float = 1.0


@dataclass(frozen=True, slots=True, kw_only=True)
class LeastStructure:
    """Of two profiles that fit, the one that rises and falls less: 2N ln ∫|n′| dz over half a period.

    Steps between N neighbouring elements of resolution that are independent and have a Laplace distribution
    of unknown width b are most likely with b = ∫|n′|/N, and then −2 ln L = 2N ln ∫|n′| + const. Total variation as
    a measure of structure: Rudin, Osher & Fatemi, Physica D 60 (1992) 259. It knows neither scale nor mean nor
    origin. Σ l²F², the same for all signs, could not tell.
    """

    weight: float = 1.0


@dataclass(frozen=True, slots=True, kw_only=True)
class Criteria:
    """What signs are judged by.

    Attributes
    ----------
    mean : float or None
        Mean density F_0/d, on the scale of the amplitudes; without it only `flat` and `least_structure` can be used.
    mean_sigma : float
    non_negative : NonNegative or None
    flat : tuple of Flat
    densities : tuple of KnownDensity
    totals : tuple of KnownTotal
    least_structure : LeastStructure or None
    envelope : Envelope or None
        Strength to expect of orders that were not measured, of n_l = F_l/d; by default as the measured ones fall off.
    """

    mean: float | None = None
    mean_sigma: float = 0.0
    non_negative: NonNegative | None = None
    flat: tuple[Flat, ...] = ()
    densities: tuple[KnownDensity, ...] = ()
    totals: tuple[KnownTotal, ...] = ()
    least_structure: LeastStructure | None = None
    envelope: Envelope | None = None

    @property
    def names(self) -> tuple[str, ...]:
        """Of the criteria, in the order in which their parts are listed."""
        return (
            *(("non-negative",) if self.non_negative is not None else ()),
            *(f"flat {number}" for number in range(1, len(self.flat) + 1)),
            *(f"density {number}" for number in range(1, len(self.densities) + 1)),
            *(f"total {number}" for number in range(1, len(self.totals) + 1)),
            *(("least structure",) if self.least_structure is not None else ()),
        )


def check_criteria(criteria: Criteria, period: float) -> None:
    """Refuse criteria that mean nothing for a stack of a given period (Å).

    Raises
    ------
    InputError
        No criterion, a number that is not finite, a weight or σ that is not above zero, an interval that does
        not rise or exceeds the period, a mean that is lacking where a criterion needs it.
    """
    if not criteria.names:
        raise InputError("criteria", "name nothing to judge by", "give at least one criterion")
    if criteria.mean is not None:
        _finite(criteria.mean, ("criteria", "mean"))
    _not_negative(criteria.mean_sigma, ("criteria", "mean_sigma"))
    if criteria.non_negative is not None:
        _finite(criteria.non_negative.floor, ("criteria", "non_negative", "floor"))
        _weight(criteria.non_negative.weight, ("criteria", "non_negative"))
    if criteria.least_structure is not None:
        _weight(criteria.least_structure.weight, ("criteria", "least_structure"))
    for number, region in enumerate(criteria.flat):
        path = ("criteria", "flat", number)
        _interval(region.start, region.stop, period, path)
        _not_negative(region.sigma, (*path, "sigma"))
        _weight(region.weight, path)
    for number, density in enumerate(criteria.densities):
        _target(density, period, ("criteria", "densities", number))
    for number, total in enumerate(criteria.totals):
        _target(total, period, ("criteria", "totals", number))
    needing = [name for name in criteria.names if not name.startswith(("flat", "least"))]
    if criteria.mean is None and needing:
        raise InputError(
            ("criteria", "mean"),
            f"is not given, and without it the criterion {needing[0]!r} says nothing of signs",
            "give the mean density on the scale of the amplitudes, or judge by flat regions and least structure alone",
        )


def _target(target: KnownDensity | KnownTotal, period: float, path: Path) -> None:
    if target.stop is None:
        _finite(target.start, (*path, "start"))
    else:
        _interval(target.start, target.stop, period, path)
    _finite(target.value, (*path, "value"))
    as_positive(target.sigma, (*path, "sigma"), "the value's unit")
    _weight(target.weight, path)


def _interval(start: float, stop: float, period: float, path: Path) -> None:
    _finite(start, (*path, "start"))
    _finite(stop, (*path, "stop"))
    if not start < stop:
        raise InputError(
            (*path, "stop"), f"= {stop:g} Å is not above the start, {start:g} Å", "give the lower end first"
        )
    if stop - start > period * (1 + 1e-9):
        raise InputError(path, f"is longer than the period, {period:g} Å", "give an interval within one period")


def _weight(value: float, path: Path) -> None:
    as_positive(value, (*path, "weight"), "1 takes the criterion as the errors say")


def _finite(value: object, path: Path) -> None:
    if isinstance(value, bool) or not isinstance(value, int | float) or not math.isfinite(value):
        raise InputError(path, "is not a finite number", "give a finite number")


def _not_negative(value: float, path: Path) -> None:
    _finite(value, path)
    if value < 0:
        raise InputError(path, "is negative", "give 0 or more")

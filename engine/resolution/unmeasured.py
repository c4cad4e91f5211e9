"""What the terms that were not measured could do to a density.

A term that is missing is known by its expected strength alone; its phase may be anything. Random phases
give the density an error of variance Σ |n_G|² over all missing G (mates apart): on the mean everywhere,
and exactly everywhere where symmetry relates none of them. The terms are put into coefficient sets with
a figure of merit of 0, so that the machinery of uncertainties does the rest, symmetry included.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from engine.arrays import FloatArray, IntArray, as_count, as_positive
from engine.coefficients import CoefficientSet, Tally
from engine.errors import InputError, TooLargeError
from engine.resolution.coverage import forbidden
from engine.resolution.envelope import Envelope
from engine.resolution.region import Region, held, region_of
from engine.symmetry.reflections import classify, orbits

MAX_TERMS = 1_000_000
"""Default limit of the terms that are listed, inside and beyond each."""
LOOKED_AT = 5
"""Points or lines of the lattice looked at, at the most, for each term allowed (and a million more)."""
NEGLIGIBLE = 1e-3
"""Part of the variance of all terms beyond the set that may be left to the tail."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Unmeasured:
    """The terms that are not in a set, and what they could do.

    Attributes
    ----------
    inside, beyond : CoefficientSet or None
        Missing terms down to the smallest spacing of those with a phase, and beyond it; None where
        there are none. Merit 0: their phases, which obey the symmetry, mean nothing else.
    d_stop : float
        Smallest spacing listed, Å.
    tail_variance : float
        Variance that the terms of smaller spacing add everywhere, by an integral, unit squared.
    largest_inside, largest_beyond : float
        Largest change of the density at any point, were all phases aligned there; the tail is in the
        second. Far above what is likely.
    words : tuple of str
        What was assumed.
    """

    inside: CoefficientSet | None
    beyond: CoefficientSet | None
    d_stop: float
    tail_variance: float
    largest_inside: float
    largest_beyond: float
    words: tuple[str, ...]


def unmeasured(
    coefficients: CoefficientSet, envelope: Envelope, d_stop: float | None = None, *, max_terms: int = MAX_TERMS
) -> Unmeasured:
    """The missing terms of a set and their effect.

    Parameters
    ----------
    coefficients : CoefficientSet
        Terms without a phase count as missing, with the strength that was measured.
    envelope : Envelope
        Strength to expect of the others.
    d_stop : float, optional
        Spacing (Å) down to which terms beyond the set are listed. By default where what remains is
        below 1e-3 of their variance, or where there are `max_terms`. The rest is an integral.
    max_terms : int
        Of either kind.

    Returns
    -------
    Unmeasured
        Terms in the row, the plane or the space of reciprocal lattice that the set lies in: of a
        profile along 00l the missing orders of 00l.

    Raises
    ------
    InputError
        No term with a phase but the zero term, an envelope that does not fit the set or never
        falls off, a d_stop that is not below the set's smallest spacing.
    TooLargeError
        More missing terms than `max_terms`.
    """
    region, g_max = _extent(coefficients)
    envelope.check(coefficients)
    g_stop, tail, tail_bound, limited = _tail(coefficients, region, g_max, envelope, d_stop, max_terms)
    inside = missing_inside(coefficients, envelope, max_terms=max_terms)
    beyond = _beyond(coefficients, envelope, region, g_max, g_stop, max_terms)
    d_min, d_last = 2 * math.pi / g_max, 2 * math.pi / g_stop
    words = [
        envelope.describe(),
        f"missing terms are those of {region.words()} that symmetry does not forbid",
        "the phases of missing terms are taken as random and independent, but for symmetry",
    ]
    lacking = sum(0 if part is None else _measured(coefficients, part.indices) for part in (inside, beyond))
    if lacking:
        words.append(f"{lacking} terms were measured without a phase and count as missing, with the strength measured")
    words.append(f"terms beyond d = {d_min:.4g} Å are listed down to {d_last:.4g} Å; the rest is added as an integral")
    if limited:
        words.append(f"that limit is where there are about {max_terms} terms; the integral is the larger for it")
    if coefficients.tally.zero_term == "absent":
        words.append("the mean density is not among the missing terms")
    return Unmeasured(
        inside=inside,
        beyond=beyond,
        d_stop=d_last,
        tail_variance=tail,
        largest_inside=largest(inside, envelope, coefficients),
        largest_beyond=largest(beyond, envelope, coefficients) + tail_bound,
        words=tuple(words),
    )


def missing_inside(
    coefficients: CoefficientSet, envelope: Envelope, *, max_terms: int = MAX_TERMS
) -> CoefficientSet | None:
    """Terms down to the smallest spacing of those with a phase that have none or were not measured.

    Returns
    -------
    CoefficientSet or None
        As `Unmeasured.inside`.

    Raises
    ------
    InputError, TooLargeError
        As `unmeasured`.
    """
    region, g_max = _extent(coefficients)
    envelope.check(coefficients)
    half = 2 if coefficients.real else 1
    phased = int(np.count_nonzero(coefficients.phase_known))
    _refuse_many(region, g_max, 0.0, half, as_count(max_terms, "max_terms") + phased, max_terms, "d_min")
    points = region.points(g_max, friedel=coefficients.real)
    points = points[~held(points, coefficients.indices[coefficients.phase_known])]
    points = points[~forbidden(points, coefficients.group)]
    if len(points) > max_terms:
        raise _too_many("d_min", g_max, len(points), max_terms)
    return _as_set(coefficients, points, envelope)


def missing_beyond(
    coefficients: CoefficientSet, envelope: Envelope, d_stop: float | None = None, *, max_terms: int = MAX_TERMS
) -> CoefficientSet | None:
    """Terms beyond the smallest spacing of those with a phase, down to d_stop (Å).

    Returns
    -------
    CoefficientSet or None
        As `Unmeasured.beyond`.

    Raises
    ------
    InputError, TooLargeError
        As `unmeasured`.
    """
    region, g_max = _extent(coefficients)
    envelope.check(coefficients)
    g_stop, _, _, _ = _tail(coefficients, region, g_max, envelope, d_stop, max_terms)
    return _beyond(coefficients, envelope, region, g_max, g_stop, max_terms)


def largest(terms: CoefficientSet | None, envelope: Envelope, measured: CoefficientSet | None = None) -> float:
    """Σ of the largest |n_G| over missing terms, mates apart: the change where all phases are aligned.

    Terms that `measured` holds count with what was measured.
    """
    if terms is None:
        return 0.0
    bound = envelope.bound_at(terms, terms.lattice.sine_over_wavelength(terms.indices))
    if measured is not None:
        known = held(terms.indices, measured.indices)
        bound = np.where(known, np.abs(terms.values), bound)
    return float(bound.sum()) * (2 if terms.real else 1)


def _extent(coefficients: CoefficientSet) -> tuple[Region, float]:
    phased = coefficients.indices[coefficients.phase_known]
    region = region_of(coefficients.lattice, phased)
    if region is None:
        raise InputError("phase_deg", "is known of no coefficient but the zero term", "give coefficients with phases")
    return region, float(coefficients.lattice.magnitudes(phased).max())


def _tail(
    coefficients: CoefficientSet,
    region: Region,
    g_max: float,
    envelope: Envelope,
    d_stop: float | None,
    max_terms: int,
) -> tuple[float, float, float, bool]:
    """Where the list of terms ends, the variance and the largest change beyond it, whether the count ended it."""
    half = 2 if coefficients.real else 1
    room = as_count(max_terms, "max_terms") * half * 0.9
    if d_stop is not None:
        g_stop = 2 * math.pi / as_positive(d_stop, "d_stop", "Å")
        if g_stop < g_max:
            raise InputError(
                "d_stop", f"= {d_stop:g} Å is not below the smallest spacing, {2 * math.pi / g_max:.4g} Å", "lower it"
            )
        _refuse_many(region, g_stop, g_max, half, max_terms, max_terms, "d_stop")
        limited = False
    else:
        crowded = ((g_max**region.rank) + room / region.expected(1.0)) ** (1 / region.rank)
        negligible = _negligible(coefficients, region, g_max, envelope)
        g_stop, limited = min(negligible, crowded), crowded < negligible
    return g_stop, *_integrals(coefficients, region, g_stop, envelope), limited


def _integrals(coefficients: CoefficientSet, region: Region, g_from: float, envelope: Envelope) -> tuple[float, float]:
    """Σ of ⟨|n_G|²⟩ and of the bound over |G| > g_from, each ≈ density · Ω_r ∫ … G^{r−1} dG."""
    g_end = 4 * math.pi * envelope.s_end(coefficients)
    if g_from >= g_end:
        return 0.0, 0.0
    # The strengths are as smooth as a Gaussian that has vanished at the end.
    edges = np.linspace(g_from, g_end, 65)
    nodes, weights = np.polynomial.legendre.leggauss(8)
    half = 0.5 * np.diff(edges)[:, None]
    g = (edges[:-1, None] + half * (1 + nodes)).ravel()
    measure = (half * weights).ravel() * region.rank * region.expected(1.0) * g ** (region.rank - 1)
    s = g / (4 * math.pi)
    return float(measure @ envelope.mean_square(coefficients, s)), float(measure @ envelope.bound_at(coefficients, s))


def _negligible(coefficients: CoefficientSet, region: Region, g_max: float, envelope: Envelope) -> float:
    """|G| (Å⁻¹) beyond which the variance is below 1e-3 of that beyond g_max."""
    total = _integrals(coefficients, region, g_max, envelope)[0]
    low, high = g_max, max(4 * math.pi * envelope.s_end(coefficients), g_max)
    for _ in range(40):
        middle = 0.5 * (low + high)
        rest = _integrals(coefficients, region, middle, envelope)[0]
        low, high = (low, middle) if rest <= NEGLIGIBLE * total else (middle, high)
    return high


def _beyond(
    coefficients: CoefficientSet, envelope: Envelope, region: Region, g_max: float, g_stop: float, max_terms: int
) -> CoefficientSet | None:
    half = 2 if coefficients.real else 1
    _refuse_many(region, g_stop, g_max, half, max_terms, max_terms, "d_stop")
    points = region.points(g_stop, friedel=coefficients.real, g_min=g_max)
    points = points[~forbidden(points, coefficients.group)]
    if len(points) > max_terms:
        raise _too_many("d_stop", g_stop, len(points), max_terms)
    return _as_set(coefficients, points, envelope)


def _refuse_many(
    region: Region, g_stop: float, g_start: float, half: int, allowed: int, max_terms: int, name: str
) -> None:
    expected = region.expected(g_stop, g_start) / half
    # The sphere inside is looked through with the shell; and thin cells have more lines than points.
    if expected > allowed * 1.05 + 1000 or region.work(g_stop) / half > LOOKED_AT * (allowed + MAX_TERMS):
        raise _too_many(name, g_stop, expected, max_terms)


def _too_many(name: str, g_stop: float, count: float, max_terms: int) -> TooLargeError:
    return TooLargeError(
        name,
        f"= {2 * math.pi / g_stop:.4g} Å asks for about {count:.3g} missing terms, more than {max_terms}",
        "give a larger spacing, or raise max_terms",
    )


def _measured(coefficients: CoefficientSet, indices: IntArray) -> int:
    return int(np.count_nonzero(held(indices, coefficients.indices)))


def _as_set(coefficients: CoefficientSet, points: IntArray, envelope: Envelope) -> CoefficientSet | None:
    """Points as terms of expected strength, with phases that obey the symmetry and a merit of 0."""
    if not len(points):
        return None
    lattice, group = coefficients.lattice, coefficients.group
    # In the order that sets are in.
    points = points[np.lexsort(points.T[::-1])]
    strength = envelope.rms(coefficients, points)
    open_rows = coefficients.indices[~coefficients.phase_known]
    if len(open_rows):
        joint = np.concatenate([open_rows, points])
        _, number = np.unique(joint, axis=0, return_inverse=True)
        number = number.ravel()
        source = np.full(number.max() + 1, -1, dtype=np.int64)
        source[number[: len(open_rows)]] = np.flatnonzero(~coefficients.phase_known)
        row = source[number[len(open_rows) :]]
        strength = np.where(row >= 0, np.abs(coefficients.values[row]), strength)
    count = len(points)
    return CoefficientSet(
        lattice=lattice,
        indices=np.asfortranarray(points),
        values=strength * np.exp(1j * _phases(coefficients, points)),
        phase_known=np.ones(count, dtype=np.bool_),
        sigma=None,
        phase_sigma=None,
        merit=np.zeros(count),
        real=coefficients.real,
        unit=coefficients.unit,
        tally=Tally(rows=count),
        history=("terms that were not measured: strengths expected, phases unknown",),
        group=group,
    )


def _phases(coefficients: CoefficientSet, points: IntArray) -> FloatArray:
    """Phases (radians) under which the density has the group's symmetry: 0, or the restricted value, of each first.

    n_{hR} = n_h exp(2πi h·t), the opposite sign of the relation between structure factors.
    """
    group = coefficients.group
    if group is None:
        return np.zeros(len(points))
    gathered = orbits(points, group, friedel=coefficients.real)
    first = np.zeros(gathered.count)
    if coefficients.real:
        kinds = classify(gathered.unique, group)
        first = np.where(kinds.centric, -np.nan_to_num(kinds.restricted_phase), 0.0)
    first = first[gathered.orbit]
    return np.asarray(np.where(gathered.conjugated, -first, first) - gathered.shift)

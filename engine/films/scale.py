"""Absolute scale and mean of a film's profile from what is known of the film.

A phased 00l series is a profile p(z) = (1/d) Σ_{l≠0} F_{−l} exp(2πi l z/d) without a mean and on a scale of its
own; the density is n(z) = m + k p(z). Each fact is one equation in (k, m), with ∫p over a region of width w in
closed form:

    density of a region         k ∫p + w m = w n
    total of a region           k ∫p + w m = T
    composition and area        m = F_0/d,  F_0 = content of a repeat unit / area    (fixes m alone)
    amplitude of an order       k |F_l| = |F_l| absolute      (fixes k alone)
    factor                      k = as given

Two facts that do not say the same fix both; more are weighed. With A the left sides, V = Σ + k² C the covariance
of the residuals, Σ that of the right sides and C that of the left sides by the errors of the amplitudes,
(k, m) = (Aᵀ V⁻¹ A)⁻¹ Aᵀ V⁻¹ b (Aitken, Proc. R. Soc. Edinb. 55 (1935) 42), A⁻¹ b where there are but two.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import ArrayLike
from scipy import special

from engine.arrays import FloatArray, as_matrix, as_vector, refuse_rows
from engine.errors import InputError, TransformError
from engine.features.linear import Joined, LineDerivatives, density_of
from engine.films.facts import (
    Fact,
    KnownAmplitude,
    KnownDensity,
    KnownMean,
    KnownTotal,
    check,
    equations,
    parts_of,
)
from engine.films.orders import FilmOrders

CONTRAST = 2.0
"""Standard uncertainties by which two facts must differ to fix a scale."""
RESOLVED = 0.6
"""Of d/l_max: a region narrower than this is smeared beyond itself by termination."""
UNLIKELY = 0.01
ROUNDS = 50


@dataclass(frozen=True, slots=True, kw_only=True)
class FilmScale:
    """n(z) = mean + factor · p(z).

    Attributes
    ----------
    factor, factor_sigma : float
        k, what amplitudes are multiplied by.
    mean, mean_sigma : float or None
        m; None where nothing fixes it.
    covariance : float64, shape (2, 2)
        Of (factor, mean); zero beside a mean that is None.
    response : float64, shape (2, f)
        Derivatives of (factor, mean) by the right sides of the f facts: totals of regions, the others as given.
    chi_squared, degrees : float, int
        Of facts beyond two.
    facts : tuple
        The facts used.
    unit : str
        Of the density.
    words : str
    assumptions, notes : tuple of str
    """

    factor: float
    factor_sigma: float
    mean: float | None
    mean_sigma: float | None
    covariance: FloatArray
    response: FloatArray
    chi_squared: float
    degrees: int
    facts: tuple[Fact, ...]
    unit: str
    words: str
    assumptions: tuple[str, ...]
    notes: tuple[str, ...] = ()

    def apply(self, orders: FilmOrders) -> FilmOrders:
        """The orders on the absolute scale; the relative σ of the factor becomes that of their scale."""
        return orders.scaled(self.factor, scale_sigma=self.factor_sigma / self.factor, unit=self.unit, words=self.words)


def scale_by_facts(orders: FilmOrders, phase_deg: ArrayLike, facts: Sequence[Fact], *, unit: str) -> FilmScale:
    """Factor and mean from any facts that fix them.

    Parameters
    ----------
    orders : FilmOrders
    phase_deg : array_like, shape (n,)
        Degrees; 0 and 180 of a symmetric stack, NaN where unknown.
    facts : sequence
        One fact of the factor alone leaves the mean open; otherwise at least two.
    unit : str
        Of the densities given.

    Raises
    ------
    InputError
        Facts that are not finite or do not fix a positive factor beyond their errors, overlapping regions
        of known density, regions longer than the period, an order that is not there, or too few facts.
    """
    if not facts:
        raise InputError("facts", "are none", "give what is known of the film")
    check(facts, orders)
    phases = as_phases(phase_deg, orders)
    used = replace(orders, scale_sigma=0.0).coefficients(phases)
    density = density_of(used)
    parts, measured = parts_of(used.lattice, orders, phases, facts)
    matrix, target, errors = equations(facts)
    moved = np.zeros((len(facts), len(facts)))
    if parts:
        matrix[measured, 0] = density.numbers(Joined(parts))
        found = density.covariance(Joined(parts))
        if found is not None:
            moved[np.ix_(measured, measured)] = found
    free = 2 if matrix[:, 1].any() else 1
    if len(facts) < free:
        raise InputError(
            "facts", "are one equation for the factor and the mean", "add a density, a total, the mean or the factor"
        )
    _require_contrast(matrix, target, errors, moved, facts)
    solved, response, covariance, residual, spread = _solve(matrix[:, :free], target, errors, moved)
    _require_factor(solved, covariance)
    degrees = len(facts) - free
    chi_squared = float(residual @ np.linalg.solve(spread, residual)) if degrees else 0.0
    notes = []
    if degrees and special.chdtrc(degrees, chi_squared) < UNLIKELY:
        notes.append(
            f"the facts contradict each other beyond their errors (χ² {chi_squared:.3g} of {degrees}): check them"
        )
    if used.unphased:
        notes.append(f"{used.unphased} orders have no phase and are left out of the profile")
    notes += _narrow(facts, orders)
    full = np.zeros((2, 2))
    full[:free, :free] = covariance
    names = " and ".join(fact.name for fact in facts)
    return FilmScale(
        factor=float(solved[0]),
        factor_sigma=math.sqrt(full[0, 0]),
        mean=float(solved[1]) if free == 2 else None,
        mean_sigma=math.sqrt(full[1, 1]) if free == 2 else None,
        covariance=full,
        response=np.vstack([response, np.zeros((2 - free, len(facts)))]),
        chi_squared=chi_squared,
        degrees=degrees,
        facts=tuple(facts),
        unit=unit,
        words=f"scaled by {solved[0]:.6g} from {names}",
        assumptions=_assumptions(orders, facts),
        notes=tuple(notes),
    )


def scale_by_two_densities(
    orders: FilmOrders, phase_deg: ArrayLike, first: KnownDensity, second: KnownDensity, *, unit: str
) -> FilmScale:
    """From the mean densities of two regions, such as a solvent layer and a chain layer.

    Raises
    ------
    InputError
        As `scale_by_facts`.
    """
    return scale_by_facts(orders, phase_deg, (first, second), unit=unit)


def scale_by_density_and_mean(
    orders: FilmOrders, phase_deg: ArrayLike, region: KnownDensity, mean: KnownMean, *, unit: str
) -> FilmScale:
    """From the density of one region and the mean of the period.

    A region that is empty (density 0) beside a mean by composition is such a pair.

    Raises
    ------
    InputError
        As `scale_by_facts`.
    """
    return scale_by_facts(orders, phase_deg, (region, mean), unit=unit)


def scale_by_total(
    orders: FilmOrders, phase_deg: ArrayLike, total: KnownTotal, other: KnownDensity | KnownMean, *, unit: str
) -> FilmScale:
    """From the electrons or scattering length per area in a region, and the mean or another density.

    Raises
    ------
    InputError
        As `scale_by_facts`.
    """
    return scale_by_facts(orders, phase_deg, (total, other), unit=unit)


def scale_by_amplitudes(
    orders: FilmOrders, order: ArrayLike, amplitude: ArrayLike, sigma: ArrayLike | None = None, *, unit: str
) -> FilmScale:
    """From |F_l| of one or more orders on the absolute scale; no phases are needed and no mean follows.

    Raises
    ------
    InputError
        As `scale_by_facts`; columns of unequal length, or several amplitudes none of which has an error.
    """
    wanted = as_matrix(np.atleast_2d(np.asarray(order)), (1, -1), "order")[0]
    refuse_rows(wanted != np.rint(wanted), "order", "is not a whole number", "give l of 00l")
    values = as_vector(amplitude, wanted.size, "amplitude")
    errors = np.zeros(wanted.size) if sigma is None else as_vector(sigma, wanted.size, "sigma")
    facts = [
        KnownAmplitude(order=int(l), amplitude=float(f), sigma=float(e), name=f"|F| of order {int(l)}")
        for l, f, e in zip(wanted, values, errors, strict=True)
    ]
    return scale_by_facts(orders, np.zeros(orders.count), facts, unit=unit)


def density_at(
    orders: FilmOrders, phase_deg: ArrayLike, scale: FilmScale, z: ArrayLike
) -> tuple[FloatArray, FloatArray]:
    """The scaled density at places and its σ, correlation of scale and amplitudes in full; two of shape (M,).

    At first order δn = δm + p δk + k δp, where δk and δm follow from the facts' errors and from the very
    amplitude errors that move p: where a density was given, σ is that of what was given.

    Parameters
    ----------
    orders, phase_deg
        Those the scale was made with.
    z : array_like, shape (M,)
        Å.

    Raises
    ------
    InputError
        The scale has no mean, or places that are not finite.
    """
    if scale.mean is None:
        raise InputError("scale", "fixes no mean", "give a fact that does")
    place = as_vector(z, np.size(np.asarray(z)), "z")
    phases = as_phases(phase_deg, orders)
    used = replace(orders, scale_sigma=0.0).coefficients(phases)
    parts, measured = parts_of(used.lattice, orders, phases, scale.facts)
    along = LineDerivatives(np.zeros(1), np.array([1 / orders.period]), place)
    density, joined = density_of(used), Joined((*parts, along))
    p, moved = density.numbers(joined)[measured.size :], density.covariance(joined)
    errors = equations(scale.facts)[2]
    # (δk, δm) = response · (δb − k δa), a the left sides that are measured; onto (p, 1).
    onto = np.stack([p, np.ones(p.size)], axis=1) @ scale.response
    variance = onto**2 @ errors**2
    if moved is not None:
        by_numbers = scale.factor * np.hstack([-onto[:, measured], np.eye(p.size)])
        variance = variance + np.einsum("ij,jk,ik->i", by_numbers, moved, by_numbers)
    return scale.mean + scale.factor * p, np.sqrt(np.maximum(variance, 0.0))


def as_phases(phase_deg: ArrayLike, orders: FilmOrders) -> FloatArray:
    """Degrees, shape (n,), NaN where unknown.

    Raises
    ------
    InputError
        Another length, or none known.
    """
    phases = np.asarray(phase_deg, dtype=np.float64)
    if phases.shape != (orders.count,):
        raise InputError("phase_deg", f"has the shape {phases.shape}", f"give {orders.count} phases, one an order")
    if not np.isfinite(phases).any():
        raise InputError("phase_deg", "knows no phase", "phase the orders first")
    return phases


def _require_contrast(
    matrix: FloatArray, target: FloatArray, errors: FloatArray, moved: FloatArray, facts: Sequence[Fact]
) -> None:
    """Refuse facts of densities alone, no two of which differ in the density and in the profile."""
    holding = np.flatnonzero(matrix[:, 1])
    if holding.size < len(facts):
        return
    width = matrix[:, 1]
    profile, known = matrix[:, 0] / width, target / width
    by_amplitudes, by_number = moved / np.outer(width, width), (errors / width) ** 2
    rounding = 1e-12 * float(np.abs(profile).max())
    one, other = np.triu_indices(len(facts), 1)
    rise, step = np.abs(profile[one] - profile[other]), np.abs(known[one] - known[other])
    variance = by_amplitudes[one, one] + by_amplitudes[other, other] - 2 * by_amplitudes[one, other]
    seen = rise > np.maximum(CONTRAST * np.sqrt(np.maximum(variance, 0)), rounding)
    told = step > CONTRAST * np.sqrt(by_number[one] + by_number[other])
    if not told.any():
        raise InputError(
            "facts",
            "give densities that do not differ beyond their errors",
            "choose places of more contrast, or give a factor",
        )
    if not (seen & told).any():
        raise InputError(
            "facts",
            "name places between which the profile does not differ beyond the errors of the amplitudes",
            "choose places of more contrast, or measure better",
        )


def _solve(
    matrix: FloatArray, target: FloatArray, errors: FloatArray, moved: FloatArray
) -> tuple[FloatArray, FloatArray, FloatArray, FloatArray, FloatArray]:
    """(k, m) or (k,), its response to the right sides, its covariance, the residuals and their covariance."""
    count, free = matrix.shape
    if count == free:
        response = _inverse(matrix)
        solved: FloatArray = response @ target
        spread = np.diag(errors**2) + solved[0] ** 2 * moved
        return solved, response, response @ spread @ response.T, np.zeros(count), spread
    solved = np.asarray(np.linalg.lstsq(matrix, target, rcond=None)[0], dtype=np.float64)
    for _ in range(ROUNDS):
        spread = np.diag(errors**2) + solved[0] ** 2 * moved
        sizes = np.sqrt(np.diagonal(spread))
        if not (sizes > 0).all() or np.linalg.cond(spread / np.outer(sizes, sizes)) > 1e12:
            raise InputError(
                "facts",
                "are more than needed and some are exact",
                "give each fact its σ, or no more than needed",
            )
        weighed = _inverse(spread) @ matrix
        covariance = _inverse(matrix.T @ weighed)
        response = covariance @ weighed.T
        before, solved = solved, response @ target
        if abs(solved[0] - before[0]) <= 1e-12 * abs(solved[0]):
            break
    else:
        raise TransformError("the weights of the facts did not settle")
    return solved, response, covariance, target - matrix @ solved, spread


def _inverse(matrix: FloatArray) -> FloatArray:
    return np.asarray(np.linalg.inv(matrix), dtype=np.float64)


def _require_factor(solved: FloatArray, covariance: FloatArray) -> None:
    factor, sigma = float(solved[0]), math.sqrt(float(covariance[0, 0]))
    if abs(factor) <= CONTRAST * sigma:
        raise InputError(
            "facts",
            f"fix the factor no better than {factor:.3g} ± {sigma:.2g}",
            "choose places of more contrast, or give facts with smaller σ",
        )
    if factor < 0:
        raise InputError(
            "facts",
            "want a profile that falls where it rises",
            "turn all phases by 180°, or correct the densities or their places",
        )


def _narrow(facts: Sequence[Fact], orders: FilmOrders) -> list[str]:
    reach = RESOLVED * orders.period / float(orders.order[-1])
    return [
        f"{fact.name} is {fact.end - fact.start:.3g} Å wide, less than the resolution of {reach:.3g} Å: its neighbours "
        "are in it"
        for fact in facts
        if isinstance(fact, KnownDensity | KnownTotal) and fact.end - fact.start < reach
    ]


def _assumptions(orders: FilmOrders, facts: Sequence[Fact]) -> tuple[str, ...]:
    found = []
    if any(isinstance(fact, KnownDensity | KnownTotal) for fact in facts):
        found += [
            "scale: the phases used are supposed to be right; a wrong sign makes it wrong",
            f"scale: regions are taken from the series as it is, cut at order {orders.order[-1]}: what termination "
            "does to them is not in the uncertainty",
            "scale: the period and the limits of the regions are taken as exact",
        ]
    found.append(
        "scale: the errors of the amplitudes are in its uncertainty"
        if orders.sigma is not None
        else "scale: the amplitudes are taken as exact, since none of their errors were given"
    )
    if orders.scale == "absolute":
        found.append("the scale that the amplitudes had before is replaced")
    return tuple(found)

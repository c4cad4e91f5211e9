"""Other ways to a scale: a known zero term, two known densities, another set of reflections."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np
from scipy import optimize

from engine.amplitudes.shells import s_squared
from engine.arrays import FloatArray, IntArray, as_vector
from engine.errors import InputError, TransformError
from engine.reflections import Reflections

HUBER = 1.345
"""Residuals in σ beyond which they count linearly: 95 % efficient for Gaussian noise."""


def scale_from_zero_term(
    reflections: Reflections, *, zero_term: float | None = None, mean: float | None = None
) -> tuple[Reflections, float]:
    """Put a set that holds its own zero term on the absolute scale; the set and k = observed/absolute.

    Parameters
    ----------
    reflections : Reflections
        With one row of all indices zero.
    zero_term : float, optional
        F(000), electrons or fm.
    mean : float, optional
        The mean density, e/Å^d or fm/Å^d; F(000) = mean × V. One of the two is wanted.

    Raises
    ------
    InputError
        Neither or both given, zero, no row or several of the zero term, or one not above zero.
    """
    if (zero_term is None) == (mean is None):
        raise InputError("zero_term", "or mean, one of the two, decides the scale", "give exactly one")
    known = zero_term if zero_term is not None else (mean or 0.0) * reflections.lattice.volume
    if not math.isfinite(known) or known == 0:
        raise InputError(
            "zero_term" if mean is None else "mean", "is zero or not finite", "give a number other than zero"
        )
    rows = np.flatnonzero(~reflections.indices.any(axis=1))
    if rows.size != 1:
        raise InputError.for_rows(
            "indices", reflections.row[rows], f"name the zero term {rows.size} times", "give it once"
        )
    observed = float(reflections.observed[rows[0]])
    if observed <= 0:
        raise InputError.for_rows("observed", reflections.row[rows], "is not above zero", "correct the zero term")
    absolute = known**2 if reflections.quantity == "intensity" else abs(known)
    k = observed / absolute
    return replace(reflections.scaled(1 / k), scale="absolute"), k


@dataclass(frozen=True, slots=True, kw_only=True)
class DensityMap:
    """The straight line n = slope · p + offset from a relative profile p to a density n.

    Attributes
    ----------
    slope : float
        Density per unit of the profile; above zero.
    offset : float
        In the unit of the density.
    covariance : float64, shape (2, 2)
        Of (slope, offset), from the uncertainties of the four numbers given.
    """

    slope: float
    offset: float
    covariance: FloatArray

    def density(self, profile: FloatArray) -> FloatArray:
        """Density of profile values, any shape."""
        return self.slope * profile + self.offset

    def density_sigma(self, profile: FloatArray) -> FloatArray:
        """Standard uncertainty of the density by that of the line alone, any shape."""
        cov = self.covariance
        return np.asarray(np.sqrt(cov[0, 0] * profile**2 + 2 * cov[0, 1] * profile + cov[1, 1]))

    def apply(self, reflections: Reflections) -> Reflections:
        """Reflections of the profile on the absolute scale, times the slope (squared for intensities).

        A zero term among them is of the profile and would need the offset as well: it is refused.

        Raises
        ------
        InputError
            A zero term.
        """
        zero = np.flatnonzero(~reflections.indices.any(axis=1))
        if zero.size:
            raise InputError.for_rows(
                "indices",
                reflections.row[zero],
                "are those of the zero term, which takes the offset",
                "leave it out and give the mean by `density` of the profile's mean",
            )
        factor = self.slope**2 if reflections.quantity == "intensity" else self.slope
        return replace(reflections.scaled(factor), scale="absolute")


def scale_from_two_densities(
    profile: tuple[float, float],
    density: tuple[float, float],
    *,
    profile_sigma: tuple[float, float] = (0.0, 0.0),
    density_sigma: tuple[float, float] = (0.0, 0.0),
) -> DensityMap:
    """The line through two places of a relative profile whose densities are known.

    Such as the solvent between the sheets of a stack and the chains at its middle.

    Parameters
    ----------
    profile : (float, float)
        Relative values at the two places.
    density : (float, float)
        Densities there, e/Å³ or the like.
    profile_sigma, density_sigma : (float, float)
        Their standard uncertainties, taken as independent.

    Raises
    ------
    InputError
        Not finite, equal in pairs, negative σ, or of opposite order, which no positive scale
        can bring together.
    """
    p, n = as_vector(profile, 2, "profile"), as_vector(density, 2, "density")
    errors = np.concatenate(
        [as_vector(profile_sigma, 2, "profile_sigma"), as_vector(density_sigma, 2, "density_sigma")]
    )
    if np.any(errors < 0):
        raise InputError("profile_sigma", "or density_sigma is negative", "give standard uncertainties")
    rise, wanted = float(p[1] - p[0]), float(n[1] - n[0])
    for name, step in (("profile", rise), ("density", wanted)):
        if step == 0:
            raise InputError(name, "is the same at both places", "choose places that differ")
    slope = wanted / rise
    if slope < 0:
        raise InputError(
            "profile",
            "rises where the density falls",
            "reverse all signs of the profile's coefficients, or exchange two places",
        )
    # Derivatives of (slope, offset = n_0 − slope p_0) by (p_0, p_1, n_0, n_1).
    d_slope = np.array([slope, -slope, -1.0, 1.0]) / rise
    d_offset = -d_slope * p[0] + np.array([-slope, 0.0, 1.0, 0.0])
    jacobian = np.stack([d_slope, d_offset]) * errors
    return DensityMap(slope=slope, offset=float(n[0] - slope * p[0]), covariance=jacobian @ jacobian.T)


@dataclass(frozen=True, slots=True, kw_only=True)
class RelativeScale:
    """k exp(−c B s²) that brings a second set to the first; c = 2 for intensities, 1 for amplitudes.

    Attributes
    ----------
    scale, scale_sigma : float
        k.
    b, b_sigma : float
        B in Å²; zero where it was not asked for.
    covariance : float64, shape (2, 2)
        Of (ln k, B).
    common : int
        Reflections in both sets.
    only_reference, only_other : int
        Reflections in one set alone.
    down_weighted : int
        Common reflections beyond the robust bound; 0 where not robust.
    reduced_chi_squared : float
    agreement : float
        Σ|x₁ − f x₂| / Σ|x₁| over the common reflections.
    notes : tuple of str
    """

    scale: float
    scale_sigma: float
    b: float
    b_sigma: float
    covariance: FloatArray
    common: int
    only_reference: int
    only_other: int
    down_weighted: int
    reduced_chi_squared: float
    agreement: float
    notes: tuple[str, ...]

    def apply(self, other: Reflections) -> Reflections:
        """The second set on the scale of the first. σ leaves out the uncertainty of the scale."""
        power = 2 if other.quantity == "intensity" else 1
        return other.scaled(self.scale * np.exp(-power * self.b * s_squared(other)))


def relative_scale(
    reference: Reflections, other: Reflections, *, displacement: bool = False, robust: bool = False
) -> RelativeScale:
    """Least-squares scale of one set to another on the reflections they share.

    Minimises Σ (x₁ − f x₂)²/(σ₁² + f²σ₂²), f = k exp(−c B s²), in which both sets carry errors
    (Deming, Statistical Adjustment of Data, 1943); robust with the loss of Huber, Ann. Math.
    Stat. 35 (1964) 73, and its sandwich covariance. Without σ in both sets all reflections weigh the
    same and the uncertainties follow from the scatter.

    Parameters
    ----------
    reference, other : Reflections
        Both intensities or both amplitudes, each reflection once, in the same half or
        asymmetric unit: only equal indices are the same reflection.
    displacement : bool
        Whether to fit B as well.
    robust : bool
        Whether to bound the pull of outliers.

    Raises
    ------
    InputError
        Different quantities or dimensions, repeated reflections, too few in common, σ not
        above zero or absent where ``robust``, or a set whose strong half is not above zero.
    TransformError
        The fit did not converge.
    """
    if reference.quantity != other.quantity:
        raise InputError(
            "other", f"carries {other.quantity}, the reference {reference.quantity}", "give the same quantity"
        )
    if reference.lattice.dimension != other.lattice.dimension:
        raise InputError("other", "is of another dimension than the reference", "give sets of one lattice")
    at_reference, at_other = _matching(reference, other)
    free = 2 if displacement else 1
    if at_reference.size <= free:
        raise InputError(
            "other",
            f"shares {at_reference.size} reflections with the reference",
            f"give sets that share more than {free}",
        )
    x1, x2 = reference.observed[at_reference], other.observed[at_other]
    weighted = reference.sigma is not None and other.sigma is not None
    s1, s2 = np.ones(x1.size), np.zeros(x1.size)
    if reference.sigma is not None and other.sigma is not None:
        s1, s2 = reference.sigma[at_reference], other.sigma[at_other]
        bad = np.flatnonzero(~((s1 > 0) & (s2 > 0)))
        if bad.size:
            raise InputError.for_rows(
                "sigma", reference.row[at_reference[bad]], "is not above zero in both sets", "give σ > 0"
            )
    if robust and not weighted:
        raise InputError("robust", "needs to know what an outlier is", "give σ in both sets, or leave it out")
    power = 2 if reference.quantity == "intensity" else 1
    exponent = np.stack([np.ones(x1.size), -power * s_squared(reference)[at_reference]], axis=1)[:, :free]
    if displacement and np.ptp(exponent[:, 1]) == 0:
        raise InputError("displacement", "cannot be found at a single resolution", "fit the scale alone")
    parameters, z, jacobian = _fit(x1, x2, s1, s2, exponent, robust)
    chi_squared = float((z**2).sum()) / (x1.size - free)
    bound = HUBER if robust else np.inf
    beyond = np.abs(z) > bound
    curvature = np.linalg.inv(jacobian[~beyond].T @ jacobian[~beyond])
    if robust:
        score = jacobian * np.clip(z, -bound, bound)[:, None]
        curvature = curvature @ (score.T @ score) @ curvature
    elif not weighted:
        curvature = curvature * chi_squared
    covariance = np.zeros((2, 2))
    covariance[:free, :free] = curvature
    k, b = float(np.exp(parameters[0])), float(parameters[1]) if displacement else 0.0
    scaled = x2 * np.exp(exponent @ parameters)
    notes = [] if weighted else ["without σ in both sets every reflection weighs the same"]
    return RelativeScale(
        scale=k,
        scale_sigma=k * float(np.sqrt(covariance[0, 0])),
        b=b,
        b_sigma=float(np.sqrt(covariance[1, 1])),
        covariance=covariance,
        common=int(x1.size),
        only_reference=reference.count - int(x1.size),
        only_other=other.count - int(x1.size),
        down_weighted=int(np.count_nonzero(beyond)),
        reduced_chi_squared=chi_squared,
        agreement=float(np.abs(x1 - scaled).sum() / np.abs(x1).sum()),
        notes=tuple(notes),
    )


def _matching(reference: Reflections, other: Reflections) -> tuple[IntArray, IntArray]:
    """Places of the common reflections in the one set and in the other."""
    both = np.concatenate([reference.indices, other.indices])
    base = 2 * int(np.abs(both).max(initial=0)) + 1
    dimension = both.shape[1]
    if base**dimension <= np.iinfo(np.int64).max:
        # One whole number a row, in lexical order: rows themselves take twenty times as long to sort.
        keys = both @ np.array([base**power for power in range(dimension - 1, -1, -1)], dtype=np.int64)
        codes = np.unique(keys, return_inverse=True)[1]
    else:
        codes = np.unique(both, axis=0, return_inverse=True)[1].reshape(-1)
    first, second = codes[: reference.count], codes[reference.count :]
    for name, part, rows in (("reference", first, reference.row), ("other", second, other.row)):
        repeated = np.bincount(part, minlength=1)[part] > 1
        if repeated.any():
            raise InputError.for_rows(
                name, rows[repeated].astype(np.intp), "repeats reflections", "merge equivalents and repeats first"
            )
    _, at_first, at_second = np.intersect1d(first, second, assume_unique=True, return_indices=True)
    return at_first.astype(np.int64), at_second.astype(np.int64)


def _fit(
    x1: FloatArray, x2: FloatArray, s1: FloatArray, s2: FloatArray, exponent: FloatArray, robust: bool
) -> tuple[FloatArray, FloatArray, FloatArray]:
    """(ln k[, B]), the residuals in σ and their Jacobian at the minimum."""
    strong = x2 >= np.median(x2)
    start = float(np.median(x1[strong])) / float(np.median(x2[strong]) or 1.0)
    if not start > 0:
        raise InputError("other", "or the reference is not above zero where it is strong", "check the quantities")

    def residuals(parameters: FloatArray) -> FloatArray:
        f = np.exp(exponent @ parameters)
        return np.asarray((x1 - f * x2) / np.hypot(s1, f * s2))

    def slopes(parameters: FloatArray) -> FloatArray:
        f = np.exp(exponent @ parameters)
        spread = np.hypot(s1, f * s2)
        by_logarithm = -f * x2 / spread - (x1 - f * x2) * (f * s2) ** 2 / spread**3
        return np.asarray(by_logarithm[:, None] * exponent)

    first = np.zeros(exponent.shape[1])
    first[0] = math.log(start)
    # Parameters of their natural size, so that one step's length suits ln k and B alike.
    found = optimize.least_squares(
        residuals,
        first,
        slopes,
        x_scale="jac",
        loss="huber" if robust else "linear",
        f_scale=HUBER,
        xtol=1e-12,
        ftol=1e-14,
        gtol=1e-12,
    )
    if not found.success:
        raise TransformError("the least-squares fit of a relative scale did not converge")
    at = np.asarray(found.x, dtype=np.float64)
    return at, residuals(at), slopes(at)

"""Figure of merit m, concentration κ and standard deviation σ of a phase: three words for one thing.

A phase with one most probable value φ₀ follows the von Mises distribution P(φ) ∝ exp(κ cos(φ−φ₀)),
whose mean cosine is m = I₁(κ)/I₀(κ) (Sim, Acta Cryst. 13 (1960) 511). A centric reflection has two
possible phases, φ₀ and φ₀+π, and m = tanh κ with the same exponent (Woolfson, Acta Cryst. 9 (1956) 804).

Two things are called σ, and are equal only where both are small:

circular     the circular standard deviation √(−2 ln m), so m = exp(−σ²/2) for any distribution
             (Mardia, Statistics of Directional Data, 1972). Unbounded as m goes to 0.
small_angle  κ = 1/σ², the width of the Gaussian that a sharp von Mises peak resembles.
"""

from __future__ import annotations

from typing import Literal, get_args

import numpy as np
from numpy.typing import ArrayLike
from scipy.special import i0e, i1e

from engine.arrays import BoolArray, FloatArray, as_choice, refuse_rows

SigmaMeaning = Literal["circular", "small_angle"]

SERIES_FROM = 30.0
"""Concentration from which 1 − I₁/I₀ is summed as a series in 1/κ, to full relative precision."""
NEWTON_STEPS = 6
"""The first guess is right to a few per cent and every step doubles the digits."""


def _deficit_series(terms: int) -> FloatArray:
    """Coefficients d_n of 1 − I₁(κ)/I₀(κ) = Σ_{n≥1} d_n κ⁻ⁿ, element 0 for n = 1.

    They follow from the Riccati equation A′ = 1 − A/κ − A² of A = I₁/I₀.
    """
    d = np.zeros(terms + 1)
    d[1] = 0.5
    for n in range(2, terms + 1):
        d[n] = (np.dot(d[1:n], d[n - 1 : 0 : -1]) + (n - 2) * d[n - 1]) / 2
    return d[1:]


_SERIES = _deficit_series(16)


def merit_of_concentration(concentration: ArrayLike, centric: BoolArray | None = None) -> FloatArray:
    """m = I₁(κ)/I₀(κ), or tanh κ for a centric reflection.

    Parameters
    ----------
    concentration : float, any shape
        κ ≥ 0; may be infinite, a certain phase. A single number gives one of shape (1,).
    centric : bool, same shape, optional
        Where only two phases are possible; nowhere by default.

    Raises
    ------
    InputError
        Negative or not a number.

    Examples
    --------
    >>> merit_of_concentration([0.0, 1.0, np.inf]).round(4).tolist()
    [0.0, 0.4464, 1.0]
    """
    kappa = _within(concentration, "concentration", 0.0, np.inf)
    merit = 1 - _deficit(kappa)
    # 1 − (1 − I₁/I₀) has lost the small m of a flat distribution.
    low = kappa < 1
    merit[low] = i1e(kappa[low]) / i0e(kappa[low])
    return merit if centric is None else np.where(centric, np.tanh(kappa), merit)


def concentration_of_merit(merit: ArrayLike, centric: BoolArray | None = None) -> FloatArray:
    """κ with I₁(κ)/I₀(κ) = m, or artanh m for a centric reflection; infinite for m = 1.

    Parameters
    ----------
    merit : float, any shape
        0 ≤ m ≤ 1.
    centric : bool, same shape, optional
        Where only two phases are possible; nowhere by default.

    Raises
    ------
    InputError
        Outside 0…1 or not a number.

    Notes
    -----
    Solved by Newton steps from the approximation of Fisher (Statistical Analysis of Circular
    Data, 1993, eq. 3.47), to rounding for every m that a double can hold.
    """
    m = _within(merit, "merit", 0.0, 1.0)
    kappa = _solve(m, 1 - m)
    if centric is None:
        return kappa
    with np.errstate(divide="ignore"):
        return np.where(centric, np.arctanh(m), kappa)


def merit_of_sigma(sigma: ArrayLike, meaning: SigmaMeaning) -> FloatArray:
    """Figure of merit of a phase whose standard deviation is given.

    Parameters
    ----------
    sigma : float, any shape
        Radians, ≥ 0.
    meaning : {"circular", "small_angle"}
        Which σ; see the module.

    Raises
    ------
    InputError
        Negative, not a number, or an unknown meaning.
    """
    as_choice(meaning, get_args(SigmaMeaning), "meaning")
    width = _within(sigma, "sigma", 0.0, np.inf)
    if meaning == "circular":
        return np.asarray(np.exp(-(width**2) / 2))
    return merit_of_concentration(concentration_of_sigma(width, meaning))


def concentration_of_sigma(sigma: ArrayLike, meaning: SigmaMeaning) -> FloatArray:
    """κ of a phase whose standard deviation is given; infinite for σ = 0.

    Parameters and errors are those of `merit_of_sigma`. A small σ keeps its digits here, which
    m = 1 − σ²/2 would round away.
    """
    as_choice(meaning, get_args(SigmaMeaning), "meaning")
    width = _within(sigma, "sigma", 0.0, np.inf)
    if meaning == "circular":
        return _solve(np.exp(-(width**2) / 2), -np.expm1(-(width**2) / 2))
    with np.errstate(divide="ignore", over="ignore"):
        return np.asarray(1 / width**2)


def sigma_of_merit(merit: ArrayLike, meaning: SigmaMeaning) -> FloatArray:
    """Standard deviation of a phase, radians; infinite for m = 0.

    Parameters
    ----------
    merit : float, any shape
        0 ≤ m ≤ 1.
    meaning : {"circular", "small_angle"}
        Which σ; see the module.

    Raises
    ------
    InputError
        Outside 0…1, not a number, or an unknown meaning.
    """
    as_choice(meaning, get_args(SigmaMeaning), "meaning")
    m = _within(merit, "merit", 0.0, 1.0)
    with np.errstate(divide="ignore"):
        if meaning == "circular":
            # The zero is added so that a certain phase has the σ 0 and not −0.
            return np.asarray(np.sqrt(-2 * np.log(m) + 0.0))
        return np.asarray(1 / np.sqrt(_solve(m, 1 - m)))


def _within(value: ArrayLike, name: str, low: float, high: float) -> FloatArray:
    array = np.array(value, dtype=np.float64, ndmin=1)
    limits = f"between {low:g} and {high:g}" if np.isfinite(high) else f"of {low:g} or more"
    bad = ~((array >= low) & (array <= high))
    refuse_rows(bad, name, f"is not a number {limits}", f"give numbers {limits}")
    return array


def _deficit(kappa: FloatArray) -> FloatArray:
    """1 − I₁(κ)/I₀(κ), with its relative precision kept where m is close to 1."""
    deficit = np.empty_like(kappa)
    far = kappa > SERIES_FROM
    inverse = 1 / kappa[far]
    deficit[far] = inverse * np.polynomial.polynomial.polyval(inverse, _SERIES)
    near = kappa[~far]
    deficit[~far] = 1 - i1e(near) / i0e(near)
    return deficit


def _slope(kappa: FloatArray) -> FloatArray:
    """d(I₁/I₀)/dκ, for κ > 0."""
    slope = np.empty_like(kappa)
    far = kappa > SERIES_FROM
    inverse = 1 / kappa[far]
    powers = np.arange(1, _SERIES.size + 1) * _SERIES
    slope[far] = inverse**2 * np.polynomial.polynomial.polyval(inverse, powers)
    near = kappa[~far]
    merit = i1e(near) / i0e(near)
    slope[~far] = 1 - merit / near - merit**2
    return slope


def _solve(merit: FloatArray, deficit: FloatArray) -> FloatArray:
    """κ of m, whose complement 1 − m is given beside it for its digits."""
    kappa = np.where(deficit == 0, np.inf, 0.0)
    flat = (merit > 0) & (merit < 0.5)
    m = merit[flat]
    guess = 2 * m + m**3 + 5 * m**5 / 6
    for _ in range(NEWTON_STEPS):
        found = i1e(guess) / i0e(guess)
        # Of a flat distribution m/κ is ½, and 0/0 where κ underflows the product with it.
        guess = guess + (m - found) / (1 - found / guess - found**2)
    kappa[flat] = guess
    sharp = (merit >= 0.5) & (deficit > 0)
    m, wanted = merit[sharp], deficit[sharp]
    # m³ − 4m² + 3m = m(1−m)(3−m), without the cancellation.
    guess = np.where(m < 0.85, -0.4 + 1.39 * m + 0.43 / wanted, 1 / (m * wanted * (3 - m)))
    for _ in range(NEWTON_STEPS):
        # log(1 − m) is nearly linear in log κ, so that no step overshoots.
        found = _deficit(guess)
        guess = guess * np.exp(np.log(found / wanted) * found / (guess * _slope(guess)))
    kappa[sharp] = guess
    return kappa

"""Lines of a stack of N layers whose spacings fluctuate independently: disorder of the second kind.

The distances of successive layers are independent, of mean d and standard deviation g d. With h = q d/2π,
w = 2π² g² h² − 2πi h and H = e^{−w} the intensity a layer, averaged over all stacks, is

    Z(h) = Σ_{|n|<N} (1 − |n|/N) e^{−w|n|} = Re[(1 + H)/(1 − H) − (2/N) H (1 − H^N)/(1 − H)²]

(Hosemann & Bagchi, Direct Analysis of Diffraction by Matter, 1962). About order l, with w = x + iφ,
x = 2π² g² l² and small φ, the sum is an integral: Z = N Re D(N w), D(z) = 2 (z − 1 + e^{−z})/z². Widths
then follow from u = N x alone: from the Laue function of N layers (u = 0) to a Lorentzian (u large).
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import ArrayLike

from engine.arrays import ComplexArray, FloatArray

NEAR = 1e-3
"""|w| below which the sum is computed as an integral with Euler's correction, of relative error w³."""
HALVINGS, NEWTON = 8, 3
"""Steps to a half width: to 1 in 100, then to all digits."""
_TERMS = np.array([2 * (-1.0) ** k / math.factorial(k + 2) for k in range(22)])
_LAUE = 2.7831147565
"""t at which (sin(t/2)/(t/2))² = 1/2."""


def lattice_factor(h: ArrayLike, g: float, layers: float) -> FloatArray:
    """Z of a stack of N layers at h = q d/2π, any shape; its mean over a period is near 1, its peak at most N.

    Parameters
    ----------
    h : array_like
    g : float
        σ_d/d, 0 or more.
    layers : float
        N, 1 or more; need not be whole.
    """
    place = np.asarray(h, dtype=np.float64)
    w = 2 * np.pi**2 * g**2 * place**2 - 2j * np.pi * (place - np.rint(place))
    near = np.abs(w) < NEAR
    small = np.where(near, w, 0.0)
    safe = np.where(near, 1.0, w)
    # 1 − H and 1 − H^N without loss of digits; H^N itself needs the whole h where N is not whole.
    turn = np.exp(-layers * safe.real + 2j * np.pi * layers * np.where(near, 0.0, place - np.rint(place)))
    gap = -np.expm1(-safe)
    closed = (2 - gap) / gap - 2 / layers * np.exp(-safe) * (1 - turn) / gap**2
    smooth = layers * integral(layers * small) + (small - np.expm1(-layers * small) / layers) / 6
    return np.asarray(np.where(near, smooth, closed).real)


def integral(z: ComplexArray | FloatArray) -> ComplexArray:
    """D(z) = 2 (z − 1 + e^{−z})/z² of complex z, Re z ≥ 0; any shape. D(0) = 1."""
    near, safe = _split(z)
    series = np.polynomial.polynomial.polyval(np.where(near, z, 0.0), _TERMS)
    return np.asarray(np.where(near, series, _closed(safe)), dtype=np.complex128)


def integral_slope(z: ComplexArray | FloatArray) -> ComplexArray:
    """D′(z) = 2 (1 − e^{−z})/z² − 2 D(z)/z; any shape. D′(0) = −1/3."""
    near, safe = _split(z)
    slopes = np.polynomial.polynomial.polyder(_TERMS)
    series = np.polynomial.polynomial.polyval(np.where(near, z, 0.0), slopes)
    closed = (2 * -np.expm1(-safe) - 2 * safe * _closed(safe)) / safe**2
    return np.asarray(np.where(near, series, closed), dtype=np.complex128)


def half_width(u: FloatArray) -> tuple[FloatArray, FloatArray]:
    """N times the full width at half maximum in h, and its derivative by u; u ≥ 0, shape (n,).

    0.8859 at u = 0, the Laue function's, and u/π where u is large, a Lorentzian's.
    """
    level = 0.5 * integral(u).real
    # The half width lies between that of either limit and their sum, where |z| is above 1 throughout.
    low, high = np.maximum(_LAUE, u), _LAUE + u
    for _ in range(HALVINGS):
        middle = 0.5 * (low + high)
        above = _closed(u + 1j * middle).real > level
        low, high = np.where(above, middle, low), np.where(above, high, middle)
    t = 0.5 * (low + high)
    for _ in range(NEWTON):
        z = u + 1j * t
        t = t + (_closed(z).real - level) / integral_slope(z).imag
    slope = integral_slope(u + 1j * t)
    by_u = (0.5 * integral_slope(u).real - slope.real) / -slope.imag
    return t / np.pi, by_u / np.pi


def breadth(u: FloatArray) -> tuple[FloatArray, FloatArray]:
    """N times the integral breadth in h, 1/D(u), and its derivative by u; shape (n,).

    1 at u = 0 and near (u + 1)/2 where u is large. The sum 1 + u/2 that is often written for it,
    thickness and disorder added, exceeds it by up to ½.
    """
    peak = integral(u).real
    return 1 / peak, -integral_slope(u).real / peak**2


def share_above_valley(order: ArrayLike, g: float) -> FloatArray:
    """Part of an order's intensity above a level background through the valleys beside it; shape (n,).

    Of a thick stack, Z = (1 − r²)/(1 − 2r cos 2πh + r²) with r = exp(−2π² g² l²) taken as constant over
    the order: 1 − (1 − r)/(1 + r) = 2r/(1 + r).
    """
    r = np.exp(-2 * np.pi**2 * g**2 * np.asarray(order, dtype=np.float64) ** 2)
    return np.asarray(2 * r / (1 + r))


def share_within(order: ArrayLike, g: float, reach: float) -> FloatArray:
    """Part of an order's intensity within ±reach (of h, at most ½), nothing subtracted; shape (n,).

    The integral of the same Z: (2/π) arctan[(1 + r)/(1 − r) tan(π reach)].
    """
    x = 2 * np.pi**2 * g**2 * np.asarray(order, dtype=np.float64) ** 2
    # (1 − r)/(1 + r) = tanh(x/2)
    return np.asarray(2 / np.pi * np.arctan2(np.sin(np.pi * reach), np.tanh(x / 2) * np.cos(np.pi * reach)))


def _closed(z: ComplexArray) -> ComplexArray:
    return np.asarray(2 * (z - 1 + np.exp(-z)) / z**2)


def _split(z: ComplexArray | FloatArray) -> tuple[FloatArray, ComplexArray]:
    near = np.abs(z) < 1
    return near, np.where(near, 1.0, z)  # type: ignore[return-value]

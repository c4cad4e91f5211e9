"""Amplitudes from intensities, of which noise has made some weak and some negative.

The Bayesian estimate of French & Wilson, Acta Cryst. A34 (1978) 517: with a measured intensity
I ± σ (Gaussian) and Wilson's distribution of the true one J ≥ 0 about its expectation Σ,
acentric exp(−J/Σ)/Σ, centric exp(−J/2Σ)/√(2πΣJ), the posterior is
∝ J^(ν−1) exp(−(J − xσ)²/2σ²) with ν = 1, x = I/σ − σ/Σ (acentric) or ν = ½, x = I/σ − σ/2Σ
(centric). Its means of J and of F = √J are finite and positive whatever I is.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Literal, get_args

import numpy as np
from numpy.typing import ArrayLike

from engine.amplitudes.checks import as_flags, as_weights, require_intensities, require_sigma
from engine.arrays import BoolArray, FloatArray, IntArray, as_choice
from engine.errors import InputError
from engine.reflections import Reflections

NODES = 64
REACH = 9.5
"""Half-width of the quadrature in σ: what lies outside is less than 1e-19 of the whole."""
BLOCK = 8192
"""Rows at a time, so that the nodes of one block stay in a processor's cache."""

NegativeRule = Literal["refuse", "exclude"]


@dataclass(frozen=True, slots=True, kw_only=True)
class Amplitudes:
    """Amplitudes and what became of the rows.

    Attributes
    ----------
    reflections : Reflections
        Amplitudes with σ_F, M rows.
    intensity : float64, shape (M,)
        The estimate of |F|² that belongs to them: not the square of the amplitude, since
        ⟨F⟩² < ⟨F²⟩.
    intensity_sigma : float64, shape (M,), or None
    negative : int
        Rows with an intensity below zero.
    excluded_rows : int64, shape (K,)
        Rows of the source that were left out.
    notes : tuple of str
        What a reader must know.
    """

    reflections: Reflections
    intensity: FloatArray
    intensity_sigma: FloatArray | None
    negative: int
    excluded_rows: IntArray
    notes: tuple[str, ...]


def bayesian_amplitudes(
    reflections: Reflections,
    *,
    expected: ArrayLike,
    epsilon: ArrayLike | None = None,
    centric: ArrayLike | None = None,
) -> Amplitudes:
    """Posterior means and standard deviations of F and I (French & Wilson 1978); no row is lost.

    Parameters
    ----------
    reflections : Reflections
        Intensities with σ > 0.
    expected : array, shape (N,)
        ⟨I/ε⟩ at each reflection's resolution, above zero, as of ``ShellMeans.at``.
    epsilon : array, shape (N,), optional
        Statistical weights; Σ = ε⟨I/ε⟩. 1 where left out.
    centric : bool array, shape (N,), optional
        Which are centric; none where left out.

    Raises
    ------
    InputError
        Amplitudes given, σ absent or not above zero, arrays of the wrong length, ``expected``
        or ``epsilon`` not above zero.
    """
    require_intensities(reflections)
    sigma = require_sigma(reflections)
    flags = as_flags(centric, reflections, "centric")
    prior = as_weights(expected, reflections, "expected") * as_weights(epsilon, reflections, "epsilon")
    x = reflections.observed / sigma - sigma / (prior * np.where(flags, 2.0, 1.0))
    f, f_sigma, j, j_sigma = posterior(x, flags)
    negative = int(np.count_nonzero(reflections.observed < 0))
    notes = ["amplitudes are posterior means of French & Wilson (1978)"]
    if negative:
        notes.append(f"{negative} of {reflections.count} intensities are negative; all are kept")
    if reflections.lattice.dimension == 1:
        notes.append("the prior supposes atoms at random, which few layer stacks are")
    root = np.sqrt(sigma)
    return Amplitudes(
        reflections=replace(reflections, quantity="amplitude", observed=root * f, sigma=root * f_sigma),
        intensity=sigma * j,
        intensity_sigma=sigma * j_sigma,
        negative=negative,
        excluded_rows=np.empty(0, dtype=np.int64),
        notes=tuple(notes),
    )


def posterior(x: FloatArray, centric: BoolArray) -> tuple[FloatArray, FloatArray, FloatArray, FloatArray]:
    """⟨F⟩, σ_F, ⟨J⟩, σ_J in units where σ = 1, for the posterior ∝ J^(ν−1) exp(−(J − x)²/2); (N,) each.

    ν = 1, for centric ½. These are ratios of parabolic cylinder functions D_{−p}(−x), which
    over- and underflow and whose variances cancel. In v = √J the density 2 v^(2ν−1) exp(−(v² − x)²/2)
    is smooth, and a Gauss–Legendre sum over where it is above 1e-19 of its peak takes mean and
    variance from the same positive terms.
    """
    nodes, weights = np.polynomial.legendre.leggauss(NODES)
    results = np.empty((4, x.size))
    for start in range(0, x.size, BLOCK):
        part = slice(start, start + BLOCK)
        results[:, part] = _moments(x[part, None], centric[part, None], nodes, weights)
    return results[0], results[1], results[2], results[3]


def _moments(x: FloatArray, centric: BoolArray, nodes: FloatArray, weights: FloatArray) -> FloatArray:
    # Offsets d from v = centre keep v² − x = d(2 centre + d) exact where x is large.
    above = np.maximum(x, 0.0)
    centre = np.sqrt(above)
    # Below zero exp(−v⁴/2 − |x|v²) is small long before v² = REACH.
    below = np.maximum(-x, 0.0)
    high = np.where(
        x > 0,
        REACH / (np.sqrt(above + REACH) + centre),
        REACH / np.sqrt(below + np.hypot(below, REACH)),
    )
    # √(x − REACH) − √x, without the difference of what is nearly the same.
    sum_of_roots = np.sqrt(np.maximum(x - REACH, 0.0)) + centre
    low = -np.divide(np.minimum(above, REACH), sum_of_roots, out=np.zeros_like(x), where=sum_of_roots > 0)
    d = 0.5 * (high + low) + 0.5 * (high - low) * nodes
    y = d * (2 * centre + d)
    mass = weights * np.exp(-0.5 * y**2 - below * y)
    mass = np.where(centric, mass, mass * (centre + d))
    mass /= mass.sum(axis=1, keepdims=True)
    mean_d = (mass * d).sum(axis=1, keepdims=True)
    mean_y = (mass * y).sum(axis=1, keepdims=True)
    return np.stack(
        [
            (centre + mean_d)[:, 0],
            np.sqrt((mass * (d - mean_d) ** 2).sum(axis=1)),
            (above + mean_y)[:, 0],
            np.sqrt((mass * (y - mean_y) ** 2).sum(axis=1)),
        ]
    )


def root_amplitudes(reflections: Reflections, *, negative: NegativeRule = "refuse") -> Amplitudes:
    """F = √I with σ_F = σ/2F, where intensities are strong enough for that.

    Parameters
    ----------
    reflections : Reflections
        Intensities, with or without σ.
    negative : {"refuse", "exclude"}
        What becomes of intensities without a root: below zero, or zero with a σ, since
        there σ_F has no bound. ``exclude`` biases weak amplitudes upwards, and says so.

    Raises
    ------
    InputError
        Amplitudes given, an unknown rule, rows without a root where these are refused, or no row
        left.
    """
    require_intensities(reflections)
    as_choice(negative, get_args(NegativeRule), "negative")
    rootless = reflections.observed < 0
    below = int(np.count_nonzero(rootless))
    if reflections.sigma is not None:
        rootless |= (reflections.observed == 0) & (reflections.sigma > 0)
    rows = reflections.row[rootless]
    if rows.size and negative == "refuse":
        raise InputError.for_rows(
            "observed",
            rows,
            "is not above zero and has no root with an uncertainty",
            "use the Bayesian estimate, or exclude",
        )
    if rows.size == reflections.count:
        raise InputError("observed", "holds no intensity above zero", "correct the intensities")
    kept = reflections.select(~rootless)
    root = np.sqrt(kept.observed)
    sigma = None
    if kept.sigma is not None:
        # Zero without uncertainty has a root without uncertainty.
        sigma = np.divide(kept.sigma, 2 * root, out=np.zeros_like(root), where=root > 0)
    notes = ["amplitudes are square roots of intensities"]
    if rows.size:
        notes.append(
            f"{rows.size} of {reflections.count} intensities without a root are left out, "
            "so that weak amplitudes are overestimated on average"
        )
    return Amplitudes(
        reflections=replace(kept, quantity="amplitude", observed=root, sigma=sigma),
        intensity=kept.observed,
        intensity_sigma=kept.sigma,
        negative=below,
        excluded_rows=rows,
        notes=tuple(notes),
    )

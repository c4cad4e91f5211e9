"""Scale and overall isotropic displacement parameter by Wilson's plot.

Of atoms at random ⟨I/ε⟩ = k Σf² exp(−2B s²) with s = sin θ/λ, I = k|F|² (Wilson, Nature 150 (1942)
152): ln(⟨I/ε⟩/Σf²) falls on a straight line against s².
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import ArrayLike
from scipy import special

from engine.amplitudes.checks import as_flags, as_weights, require_no_zero_term
from engine.amplitudes.shells import intensities, s_squared, shell_numbers
from engine.arrays import BoolArray, FloatArray, IntArray, as_count, as_positive
from engine.errors import InputError
from engine.reflections import Reflections

LEAST_REFLECTIONS = 30
LEAST_POINTS = 3
SHELL_SIZE = 50
MOST_SHELLS = 20
LOW_LIMIT = 4.0
"""d in Å above which distances between atoms show in the mean intensity and bend the plot."""
FINE_ENOUGH = 2.5
"""d in Å: data that end above it hardly leave the bent part."""
UNLIKELY = 0.01
"""Probability of χ² below which the points are said not to lie on a line."""
ROUNDS = 3


@dataclass(frozen=True, slots=True, kw_only=True)
class WilsonPlot:
    """A straight line through ln(⟨I/ε⟩/Σf²) = ln k − 2B s².

    Attributes
    ----------
    scale : float
        k, by which intensities exceed |F|² on the absolute scale; amplitudes by √k.
    scale_sigma : float
    b : float
        Overall isotropic displacement parameter, Å².
    b_sigma : float
    covariance : float64, shape (2, 2)
        Of (ln k, B).
    s_squared : float64, shape (n,)
        The points' abscissae, Å⁻².
    ordinate, ordinate_sigma : float64, shape (n,)
        The points, with the uncertainty that follows from Wilson's distributions and σ.
    count : int64, shape (n,)
        Reflections in each point.
    line : float64, shape (n,)
        The line at the points.
    reduced_chi_squared : float
        Of the points about the line. Where it is improbably large the uncertainties hold its
        root as a factor, and ``notes`` says so.
    used : int
        Reflections in the points.
    outside : int
        Reflections outside the resolution range.
    points_left_out : int
        Shells whose mean is not above zero and has no logarithm.
    d_max, d_min : float
        The range used, Å.
    notes : tuple of str
        What a reader must know.
    """

    scale: float
    scale_sigma: float
    b: float
    b_sigma: float
    covariance: FloatArray
    s_squared: FloatArray
    ordinate: FloatArray
    ordinate_sigma: FloatArray
    count: IntArray
    line: FloatArray
    reduced_chi_squared: float
    used: int
    outside: int
    points_left_out: int
    d_max: float
    d_min: float
    notes: tuple[str, ...]

    def apply(self, reflections: Reflections) -> Reflections:
        """The reflections on the absolute scale; B is left in them.

        σ does not take up the uncertainty of the scale, which is common to all.
        """
        factor = 1 / self.scale if reflections.quantity == "intensity" else self.scale**-0.5
        return replace(reflections.scaled(factor), scale="absolute")


def wilson_plot(
    reflections: Reflections,
    sum_of_squares: ArrayLike,
    *,
    epsilon: ArrayLike | None = None,
    centric: ArrayLike | None = None,
    d_max: float | None = None,
    d_min: float | None = None,
    shells: int | None = None,
) -> WilsonPlot:
    """Fit ln k and B to the shells' means by weighted least squares.

    Each reflection is divided by εΣf² exp(−2Bs²) with the B found so far, so that a shell's width
    does not matter. The logarithm of a mean of few intensities is too small on average, by
    ψ(a) − ln a for a mean that is gamma distributed with the shape a; that is taken out, and
    ψ′(a) is its variance (ψ the digamma function).

    Parameters
    ----------
    reflections : Reflections
        Intensities, or amplitudes, whose squares are taken; one row a unique reflection,
        absences left out, without the zero term.
    sum_of_squares : array, shape (N,)
        Σf² of the cell's content at each reflection, electrons² or fm² (see
        ``engine.scattering.sum_of_squares``).
    epsilon : array, shape (N,), optional
        Statistical weights; 1 where left out.
    centric : bool array, shape (N,), optional
        Which are centric; none where left out.
    d_max, d_min : float, optional
        Range of resolution, Å. By default d ≤ 4 Å where at least half the reflections lie there,
        else all.
    shells : int, optional
        By default one per 50 reflections, from 3 to 20.

    Raises
    ------
    InputError
        A zero term, arrays of the wrong length or not above zero, limits that contradict each
        other, fewer than 30 reflections in the range, or fewer than 3 shells with a mean above
        zero.
    """
    require_no_zero_term(reflections)
    per_atom = as_weights(sum_of_squares, reflections, "sum_of_squares") * as_weights(epsilon, reflections, "epsilon")
    flags = as_flags(centric, reflections, "centric")
    squares = s_squared(reflections)
    kept, notes = _range(squares, d_max, d_min)
    used = int(np.count_nonzero(kept))
    if used < LEAST_REFLECTIONS:
        raise InputError(
            "reflections",
            f"in the range of resolution are {used}, too few for a line",
            f"give at least {LEAST_REFLECTIONS}",
        )
    if shells is None:
        wanted = max(LEAST_POINTS, min(MOST_SHELLS, used // SHELL_SIZE))
    else:
        wanted = as_count(shells, "shells", least=LEAST_POINTS)
        if wanted * 5 > used:
            raise InputError("shells", f"= {wanted} are too many for {used} reflections", f"give at most {used // 5}")
    observed, sigma = intensities(reflections)
    reduced = observed[kept] / per_atom[kept]
    noise = np.zeros(used) if sigma is None else sigma[kept] / per_atom[kept]
    squares, flags = squares[kept], flags[kept]
    numbers, edges = shell_numbers(squares, wanted)
    count = np.bincount(numbers, minlength=edges.size - 1)
    abscissa = np.bincount(numbers, squares) / count
    b = 0.0
    for _ in range(ROUNDS):
        ordinate, spread = _points(reduced, noise, flags, squares, numbers, b)
        found = np.isfinite(ordinate)
        if np.count_nonzero(found) < LEAST_POINTS:
            raise InputError(
                "reflections",
                f"leave {np.count_nonzero(found)} shells with a mean above zero",
                "leave out resolutions without signal",
            )
        ordinate = ordinate - 2 * b * abscissa
        intercept, b, covariance = _line(abscissa[found], ordinate[found], spread[found])
    left_out = int(np.count_nonzero(~found))
    line = intercept - 2 * b * abscissa[found]
    degrees = int(np.count_nonzero(found)) - 2
    chi_squared = float((((ordinate[found] - line) / spread[found]) ** 2).sum())
    if special.chdtrc(degrees, chi_squared) < UNLIKELY:
        covariance = covariance * chi_squared / degrees
        notes.append(
            f"the points scatter about the line by more than chance (reduced χ² {chi_squared / degrees:.3g}); "
            "the uncertainties are enlarged by its root"
        )
    elif special.chdtr(degrees, chi_squared) < UNLIKELY:
        notes.append(
            f"the points lie on the line better than atoms at random would (reduced χ² {chi_squared / degrees:.2g}): "
            "few atoms, or atoms on special positions, whose true scale may lie far outside the uncertainties"
        )
    if left_out:
        notes.append(f"{left_out} shells with a mean not above zero are left out")
    scale, b_sigma = float(np.exp(intercept)), float(np.sqrt(covariance[1, 1]))
    notes += _doubts(b, b_sigma, squares)
    return WilsonPlot(
        scale=scale,
        scale_sigma=scale * float(np.sqrt(covariance[0, 0])),
        b=b,
        b_sigma=b_sigma,
        covariance=covariance,
        s_squared=abscissa[found],
        ordinate=ordinate[found],
        ordinate_sigma=spread[found],
        count=count[found].astype(np.int64),
        line=line,
        reduced_chi_squared=chi_squared / degrees,
        used=int(count[found].sum()),
        outside=reflections.count - used,
        points_left_out=left_out,
        d_max=float(0.5 / np.sqrt(squares.min())),
        d_min=float(0.5 / np.sqrt(squares.max())),
        notes=tuple(notes),
    )


def _range(squares: FloatArray, d_max: float | None, d_min: float | None) -> tuple[BoolArray, list[str]]:
    spacing = 0.5 / np.sqrt(squares)
    margin = 1e-9
    low = 0.0 if d_min is None else as_positive(d_min, "d_min", "Å")
    if d_max is not None:
        high = as_positive(d_max, "d_max", "Å")
        if low >= high:
            raise InputError("d_min", f"= {low:g} Å is not below d_max = {high:g} Å", "exchange the two")
        return (spacing >= low * (1 - margin)) & (spacing <= high * (1 + margin)), []
    kept = spacing >= low * (1 - margin)
    fine = kept & (spacing <= LOW_LIMIT)
    if np.count_nonzero(fine) < max(LEAST_REFLECTIONS, np.count_nonzero(kept) / 2):
        return kept, [f"most reflections lie above {LOW_LIMIT:g} Å, where the plot is not straight; all are used"]
    return fine, [f"reflections above {LOW_LIMIT:g} Å are left out of the plot by default"] if not fine.all() else []


def _points(
    reduced: FloatArray, noise: FloatArray, centric: BoolArray, squares: FloatArray, numbers: IntArray, b: float
) -> tuple[FloatArray, FloatArray]:
    """ln of the shells' means of I exp(2Bs²)/εΣf² and its uncertainty; NaN where a mean is not above zero."""
    flat = np.exp(2 * b * squares)
    count = np.bincount(numbers)
    mean = np.bincount(numbers, reduced * flat) / count
    positive = mean > 0
    spread = np.where(centric, 2.0, 1.0) * mean[numbers] ** 2 + (noise * flat) ** 2
    variance = np.bincount(numbers, spread) / count**2
    shape = np.where(positive, mean, 1.0) ** 2 / variance
    ordinate = np.log(np.where(positive, mean, np.nan)) - (special.digamma(shape) - np.log(shape))
    return ordinate, np.sqrt(special.polygamma(1, shape))


def _line(x: FloatArray, y: FloatArray, spread: FloatArray) -> tuple[float, float, FloatArray]:
    design = np.stack([np.ones_like(x), -2 * x], axis=1) / spread[:, None]
    covariance = np.linalg.inv(design.T @ design)
    intercept, b = covariance @ design.T @ (y / spread)
    return float(intercept), float(b), np.asarray(covariance)


def _doubts(b: float, b_sigma: float, squares: FloatArray) -> list[str]:
    doubts = []
    finest = float(0.5 / np.sqrt(squares.max()))
    if finest > FINE_ENOUGH:
        doubts.append(
            f"the reflections end at {finest:.3g} Å, where atoms at random are a poor model: scale and B are guides"
        )
    if b_sigma > max(1.0, abs(b) / 2):
        doubts.append(f"the range of resolution is too small to fix B: {b:.3g} ± {b_sigma:.2g} Å²")
    if b < -b_sigma:
        doubts.append(
            f"B = {b:.3g} Å² is negative, which no displacement explains: check Σf², the scale of σ and the range"
        )
    return doubts

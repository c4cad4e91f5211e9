"""Mean intensity as a function of resolution: shells and the curve through them."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from engine.amplitudes.checks import as_flags, as_weights, require_no_zero_term
from engine.arrays import BoolArray, FloatArray, IntArray, as_count
from engine.errors import InputError
from engine.reflections import Reflections

SHELL_SIZE = 100
MOST_SHELLS = 40
"""Shells are made to hold this many reflections each, but not more shells than this."""
LEAST_IN_SHELL = 5
"""A mean of fewer intensities says next to nothing: of five it is uncertain by 45 %."""


@dataclass(frozen=True, slots=True, kw_only=True)
class ShellMeans:
    """⟨I/ε⟩ in shells of equal counts, ordered from low to high s².

    Attributes
    ----------
    edges : float64, shape (n + 1,)
        s² = (sin θ/λ)², Å⁻²; a shell holds edges[k] ≤ s² < edges[k+1], the last one its upper
        edge too.
    centre : float64, shape (n,)
        Mean s² of a shell's reflections, Å⁻².
    mean : float64, shape (n,)
        ⟨I/ε⟩, in the unit of the intensities.
    mean_sigma : float64, shape (n,)
        Its standard uncertainty as a sample of Wilson's distributions (var I = ⟨I⟩² acentric,
        2⟨I⟩² centric), noise included where σ is known.
    count : int64, shape (n,)
    """

    edges: FloatArray
    centre: FloatArray
    mean: FloatArray
    mean_sigma: FloatArray
    count: IntArray

    def at(self, s_squared: FloatArray) -> FloatArray:
        """The mean between shells, its logarithm linear in s² from centre to centre and on to the ends.

        Raises
        ------
        InputError
            The mean of a shell is not above zero, so that it has no logarithm.
        """
        bad = np.flatnonzero(self.mean <= 0)
        if bad.size:
            low, high = (
                0.5 / np.sqrt(self.edges[bad[0] + side]) if self.edges[bad[0] + side] else np.inf for side in (0, 1)
            )
            raise InputError(
                "shells",
                f"have a mean intensity not above zero in {bad.size} of {self.mean.size} "
                f"(the first from {low:.3g} to {high:.3g} Å)",
                "leave out reflections at resolutions without signal, or make fewer shells",
            )
        logarithm = np.log(self.mean)
        if logarithm.size == 1:
            return np.full(s_squared.shape, self.mean[0])
        piece = np.clip(np.searchsorted(self.centre, s_squared) - 1, 0, logarithm.size - 2)
        slope = np.diff(logarithm) / np.diff(self.centre)
        return np.exp(logarithm[piece] + slope[piece] * (s_squared - self.centre[piece]))


def s_squared(reflections: Reflections) -> FloatArray:
    """(sin θ/λ)² of every reflection, Å⁻², shape (N,)."""
    return np.asarray(reflections.lattice.sine_over_wavelength(reflections.indices) ** 2)


def intensities(reflections: Reflections) -> tuple[FloatArray, FloatArray | None]:
    """I and its σ; of amplitudes F² and 2Fσ_F."""
    if reflections.quantity == "intensity":
        return reflections.observed, reflections.sigma
    squared = reflections.observed**2
    return squared, None if reflections.sigma is None else 2 * reflections.observed * reflections.sigma


def shell_numbers(squares: FloatArray, shells: int) -> tuple[IntArray, FloatArray]:
    """Shell of each reflection (N,) and the edges (shells + 1,) that hold equal counts of s²."""
    ordered = np.sort(squares)
    starts = np.arange(shells) * squares.size // shells
    edges = np.unique(np.append(ordered[starts], ordered[-1]))
    if edges.size < 2:
        return np.zeros(squares.size, dtype=np.int64), np.array([ordered[0], ordered[-1]])
    numbers = np.searchsorted(edges[1:-1], squares, side="right").astype(np.int64)
    return numbers, edges


def shell_means(
    reflections: Reflections,
    *,
    epsilon: ArrayLike | None = None,
    centric: ArrayLike | None = None,
    shells: int | None = None,
) -> ShellMeans:
    """⟨I/ε⟩ in resolution shells that hold equal numbers of reflections.

    Parameters
    ----------
    reflections : Reflections
        Intensities, or amplitudes, whose squares are taken; one row a unique reflection, the
        zero term left out.
    epsilon : array, shape (N,), optional
        Statistical weights ε; 1 where left out.
    centric : bool array, shape (N,), optional
        Which are centric; none where left out. Enters ``mean_sigma`` alone.
    shells : int, optional
        How many; by default one per 100 reflections, from 1 to 40.

    Raises
    ------
    InputError
        No reflections, a zero term, arrays of the wrong length, or fewer than 5 reflections a
        shell.
    """
    require_no_zero_term(reflections)
    if not reflections.count:
        raise InputError("reflections", "are none", "give at least one")
    weights = as_weights(epsilon, reflections, "epsilon")
    flags = as_flags(centric, reflections, "centric")
    if shells is None:
        wanted = max(1, min(MOST_SHELLS, reflections.count // SHELL_SIZE))
    else:
        wanted = as_count(shells, "shells")
        if wanted > 1 and reflections.count < LEAST_IN_SHELL * wanted:
            raise InputError(
                "shells",
                f"= {wanted} leave fewer than {LEAST_IN_SHELL} of {reflections.count} reflections to each",
                f"make at most {max(1, reflections.count // LEAST_IN_SHELL)}",
            )
    observed, sigma = intensities(reflections)
    squares = s_squared(reflections)
    numbers, edges = shell_numbers(squares, wanted)
    return _means(observed / weights, None if sigma is None else sigma / weights, flags, squares, numbers, edges)


def _means(
    reduced: FloatArray,
    sigma: FloatArray | None,
    centric: BoolArray,
    squares: FloatArray,
    numbers: IntArray,
    edges: FloatArray,
) -> ShellMeans:
    n = edges.size - 1
    count = np.bincount(numbers, minlength=n)
    mean = np.bincount(numbers, reduced, n) / count
    spread = np.where(centric, 2.0, 1.0) * mean[numbers] ** 2
    if sigma is not None:
        spread = spread + sigma**2
    return ShellMeans(
        edges=edges,
        centre=np.bincount(numbers, squares, n) / count,
        mean=mean,
        mean_sigma=np.sqrt(np.bincount(numbers, spread, n)) / count,
        count=count.astype(np.int64),
    )

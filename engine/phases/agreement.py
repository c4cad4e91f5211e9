"""How well a model's structure factors agree with the measured amplitudes.

R = Σ||F_o| − k|F_c|| / Σ|F_o| and wR = √(Σ w(|F_o| − k|F_c|)² / Σ w|F_o|²) with k by least squares,
k = Σ w|F_o||F_c| / Σ w|F_c|² (International Tables for Crystallography C, chapter 8.3).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np

from engine.arrays import ComplexArray, FloatArray, IntArray, as_count, refuse_rows
from engine.errors import InputError
from engine.lattice import Lattice
from engine.phases.border import amplitudes, calculated_for
from engine.reflections import Reflections


@dataclass(frozen=True, slots=True, kw_only=True)
class Shells:
    """Shells of resolution that hold like numbers of reflections, from the inside out.

    Attributes
    ----------
    member : int64, shape (N,)
        Shell of each reflection, 0…S−1.
    count : int64, shape (S,)
    d_max, d_min : float64, shape (S,)
        Largest and smallest spacing in each shell, Å; infinite for the zero term.
    """

    member: IntArray
    count: IntArray
    d_max: FloatArray
    d_min: FloatArray


@dataclass(frozen=True, slots=True, kw_only=True)
class Agreement:
    """Scale and R factors.

    Attributes
    ----------
    scale : float
        k that brings |F_c| to the scale of |F_o|; measured amplitudes become absolute by 1/k.
    r, weighted_r : float
        Over all reflections.
    weights : {"sigma", "unit"}
        w = 1/σ² where the reflections carry σ, else 1; for k and weighted_r.
    shells : Shells
    shell_r, shell_weighted_r : float64, shape (S,)
        With the one k; NaN in a shell whose |F_o| are all zero.
    """

    scale: float
    r: float
    weighted_r: float
    weights: Literal["sigma", "unit"]
    shells: Shells
    shell_r: FloatArray
    shell_weighted_r: FloatArray


def shells(lattice: Lattice, indices: IntArray, count: int) -> Shells:
    """Divide reflections into shells.

    Parameters
    ----------
    lattice : Lattice
    indices : int64, shape (N, d)
    count : int
        Shells, at most N.

    Raises
    ------
    InputError
        Fewer than one shell or more than reflections.
    """
    wanted = as_count(count, "shells")
    if wanted > indices.shape[0]:
        raise InputError("shells", f"are {wanted} for {indices.shape[0]} reflections", "ask for fewer shells")
    spacing = lattice.spacings(indices)
    order = np.argsort(-spacing, kind="stable")
    first = np.arange(wanted) * order.size // wanted
    last = np.append(first[1:], order.size) - 1
    member = np.empty(order.size, dtype=np.int64)
    member[order] = np.repeat(np.arange(wanted), last - first + 1)
    return Shells(member=member, count=last - first + 1, d_max=spacing[order[first]], d_min=spacing[order[last]])


def compare(reflections: Reflections, calculated: ComplexArray, *, shell_count: int = 10) -> Agreement:
    """Scale a model to the measured amplitudes and compare.

    Parameters
    ----------
    reflections : Reflections
        Amplitudes, with or without σ.
    calculated : complex128, shape (N,)
        Structure factors of the same indices.
    shell_count : int
        Shells, at most N.

    Raises
    ------
    InputError
        Intensities; not finite or negative amplitudes; a σ that is not above zero; all of
        |F_o| or |F_c| zero; a wrong number of structure factors or shells.
    """
    observed = amplitudes(reflections)
    model = np.abs(calculated_for(reflections, calculated))
    by_sigma = reflections.sigma is not None
    sigma = np.ones(observed.size) if reflections.sigma is None else reflections.sigma
    refuse_rows(
        ~((sigma > 0) & (sigma < np.inf)), "sigma", "is not above zero", "correct the σ, or compare without the column"
    )
    for column, name in ((observed, "observed"), (model, "calculated")):
        if not column.any():
            raise InputError(name, "is zero throughout", "give amplitudes to be compared")
    # Scaled to the smallest σ, squares of weights stay clear of overflow.
    weight = (sigma.min() / sigma) ** 2
    scale = float(np.sum(weight * observed * model) / np.sum(weight * model**2))
    gap = np.abs(observed - scale * model)
    divided = shells(reflections.lattice, reflections.indices, shell_count)
    terms = (gap, observed, weight * gap**2, weight * observed**2)
    sums = [np.bincount(divided.member, term, minlength=divided.count.size) for term in terms]
    gaps, sizes, square_gaps, squares = sums
    with np.errstate(invalid="ignore", divide="ignore"):
        shell_r = np.where(sizes > 0, gaps / sizes, np.nan)
        shell_weighted = np.where(squares > 0, np.sqrt(square_gaps / squares), np.nan)
    return Agreement(
        scale=scale,
        r=float(gaps.sum() / sizes.sum()),
        weighted_r=float(np.sqrt(square_gaps.sum() / squares.sum())),
        weights="sigma" if by_sigma else "unit",
        shells=divided,
        shell_r=shell_r,
        shell_weighted_r=shell_weighted,
    )

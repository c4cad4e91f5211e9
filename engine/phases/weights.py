"""Figures of merit of phases that come from an incomplete model.

Given |F_o| and the model's F_c, the phase is distributed about φ_c as exp(X cos(φ − φ_c)) with
X = 2 D|F_o||F_c| / εΣ, Σ the mean square of what the model does not explain; for a centric
reflection exp(X/2 cos(φ − φ_c)) on its two phases. So m = I₁(X)/I₀(X), or tanh(X/2) (Sim, Acta
Cryst. 13 (1960) 511). Where atoms are missing and the others are right, D = 1 and Σ = Σ f² over the
missing atoms. Where the others have errors too, the normalised structure factors obey
E_o = σ_A E_c + a random remainder: D = σ_A √(Σ_N/Σ_P) and Σ = Σ_N(1 − σ_A²) with Σ_N = ⟨|F_o|²/ε⟩,
Σ_P = ⟨|F_c|²/ε⟩ (Read, Acta Cryst. A42 (1986) 140).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import ArrayLike

from engine.arrays import BoolArray, ComplexArray, FloatArray, IntArray, as_vector, refuse_rows
from engine.errors import InputError
from engine.phases.agreement import Shells, shells
from engine.phases.border import amplitudes, calculated_for
from engine.phases.concentration import merit_of_concentration
from engine.phases.distributions import PhaseDistribution, von_mises
from engine.reflections import Reflections

FEWEST = 50
"""Reflections that a shell must have for σ_A: with fewer its standard error passes 0.1 or so."""
BISECTIONS = 50
"""Halvings of 0…1 for σ_A: to rounding."""


@dataclass(frozen=True, slots=True, kw_only=True)
class ModelWeights:
    """How far the phases of a model are to be trusted.

    Attributes
    ----------
    phase : float64, shape (N,)
        φ_c, radians.
    concentration : float64, shape (N,)
        κ of exp(κ cos(φ − φ_c)): X, or X/2 for a centric reflection.
    merit : float64, shape (N,)
        I₁(κ)/I₀(κ), or tanh κ for a centric reflection.
    scaled_model : float64, shape (N,)
        D|F_c|, on the scale of |F_o|.
    centric : bool, shape (N,)
    source : {"given", "estimated"}
        Where the missing scattering was taken from: the caller, or the amplitudes by shells.
    sigma_a : float64, shape (S,), or None
        Of each shell, where estimated.
    shells : Shells or None
        Where estimated.
    """

    phase: FloatArray
    concentration: FloatArray
    merit: FloatArray
    scaled_model: FloatArray
    centric: BoolArray
    source: Literal["given", "estimated"]
    sigma_a: FloatArray | None
    shells: Shells | None

    def distribution(self) -> PhaseDistribution:
        """The phase probabilities, to be combined with others.

        Raises
        ------
        InputError
            A concentration is infinite: nothing is missing from the model.
        """
        return von_mises(self.phase, self.concentration, np.where(self.centric, self.phase, np.nan))


def sim_weights(
    reflections: Reflections,
    calculated: ComplexArray,
    missing: ArrayLike,
    *,
    centric: BoolArray,
    epsilon: ArrayLike,
) -> ModelWeights:
    """Weights of a model that lacks atoms and is right otherwise.

    Parameters
    ----------
    reflections : Reflections
        Amplitudes on the absolute scale.
    calculated : complex128, shape (N,)
        F_c of the same indices, electrons.
    missing : float, shape (N,)
        Σ f²T² over the missing atoms of the whole cell, electrons², above zero.
    centric : bool, shape (N,)
    epsilon : float, shape (N,)
        Statistical weights ε, 1 or more.

    Raises
    ------
    InputError
        Intensities or an arbitrary scale; a column of wrong length, not finite or out of range.
    """
    observed = amplitudes(reflections)
    factors = calculated_for(reflections, calculated)
    if reflections.scale != "absolute":
        raise InputError(
            "scale",
            "is arbitrary, but the missing scattering is in electrons",
            "divide by the scale of `engine.phases.compare`",
        )
    two, multiple = _classes(reflections, centric, epsilon)
    absent = as_vector(missing, observed.size, "missing")
    refuse_rows(absent <= 0, "missing", "is not above zero", "give Σ f² over the missing atoms at this s")
    concentration = 2 * observed * np.abs(factors) / (multiple * absent) / np.where(two, 2, 1)
    return ModelWeights(
        phase=np.angle(factors),
        concentration=concentration,
        merit=merit_of_concentration(concentration, two),
        scaled_model=np.abs(factors),
        centric=two,
        source="given",
        sigma_a=None,
        shells=None,
    )


def estimated_weights(
    reflections: Reflections,
    calculated: ComplexArray,
    *,
    centric: BoolArray,
    epsilon: ArrayLike,
    shell_count: int,
    used: BoolArray | None = None,
) -> ModelWeights:
    """Weights of a model whose completeness and errors are estimated from the amplitudes.

    In each shell σ_A has the largest likelihood of the |E_o| given the |E_c|; no interpolation
    between shells. A shell whose amplitudes are not correlated has σ_A = 0 and m = 0.

    Parameters
    ----------
    reflections : Reflections
        Amplitudes, on any scale.
    calculated : complex128, shape (N,)
        F_c of the same indices, on any scale.
    centric : bool, shape (N,)
    epsilon : float, shape (N,)
        Statistical weights ε, 1 or more.
    shell_count : int
        Several hundred reflections a shell are good, `FEWEST` of those used must be.
    used : bool, shape (N,), optional
        Reflections that σ_A is estimated from; all by default. A model refined against the very
        amplitudes looks better than it is: then use some kept out of the refinement.

    Raises
    ------
    InputError
        Intensities; a column of wrong length, not finite or out of range; a shell with too few
        reflections, or whose amplitudes are all zero.
    """
    observed = amplitudes(reflections)
    factors = calculated_for(reflections, calculated)
    two, multiple = _classes(reflections, centric, epsilon)
    chosen = np.ones(observed.size, dtype=np.bool_) if used is None else np.asarray(used, dtype=np.bool_)
    if chosen.shape != observed.shape:
        raise InputError("used", f"has the shape {chosen.shape}", f"give {observed.size} of true or false")
    divided = shells(reflections.lattice, reflections.indices, shell_count)
    member, size = divided.member, divided.count.size
    count = np.bincount(member[chosen], minlength=size)
    if count.min() < FEWEST:
        raise InputError(
            "shell_count",
            f"leaves {int(count.min())} reflections in shell {int(count.argmin())} (counted from 0)",
            f"ask for fewer shells, so that each has {FEWEST} or more to estimate σ_A from",
        )
    modulus = np.abs(factors)
    power_observed = _shell_means(observed**2 / multiple, member, chosen, count)
    power_model = _shell_means(modulus**2 / multiple, member, chosen, count)
    for power, name in ((power_observed, "observed"), (power_model, "calculated")):
        if power.min() <= 0:
            raise InputError(name, f"is zero throughout shell {int(power.argmin())}", "leave that shell out")
    e_observed = observed / np.sqrt(multiple * power_observed[member])
    e_model = modulus / np.sqrt(multiple * power_model[member])
    sigma_a = _most_likely(e_observed[chosen], e_model[chosen], two[chosen], member[chosen], size)
    sigma = sigma_a[member]
    concentration = _exponent(sigma, e_observed, e_model, two)
    return ModelWeights(
        phase=np.angle(factors),
        concentration=concentration,
        merit=merit_of_concentration(concentration, two),
        scaled_model=sigma * np.sqrt(power_observed / power_model)[member] * modulus,
        centric=two,
        source="estimated",
        sigma_a=sigma_a,
        shells=divided,
    )


def _classes(reflections: Reflections, centric: BoolArray, epsilon: ArrayLike) -> tuple[BoolArray, FloatArray]:
    two = np.asarray(centric)
    if two.shape != (reflections.count,) or two.dtype != np.bool_:
        raise InputError("centric", "is not one true or false a reflection", f"give {reflections.count} of them")
    multiple = as_vector(epsilon, reflections.count, "epsilon")
    refuse_rows(multiple < 1, "epsilon", "is below 1", "give the statistical weights of the point group")
    return two, multiple


def _shell_means(column: FloatArray, member: IntArray, chosen: BoolArray, count: IntArray) -> FloatArray:
    return np.asarray(np.bincount(member[chosen], column[chosen], minlength=count.size) / count)


def _exponent(sigma: FloatArray, e_observed: FloatArray, e_model: FloatArray, centric: BoolArray) -> FloatArray:
    """κ of exp(κ cos(φ − φ_c)): X, or X/2 where centric."""
    return np.asarray(np.where(centric, 1, 2) * sigma * e_observed * e_model / (1 - sigma**2))


def _most_likely(
    e_observed: FloatArray, e_model: FloatArray, centric: BoolArray, member: IntArray, size: int
) -> FloatArray:
    """σ_A of every shell, (S,), by bisection for the zero of the likelihood's derivative.

    Times (1 − σ²)², a reflection contributes σ(1 − σ²) − σ(E_o² + E_c²) + (1 + σ²)E_oE_c m, twice
    for an acentric one. The sum is proportional to σ Σ(E_o² − 1)(E_c² − 1) near 0 and is
    −Σ(E_o − E_c)² at 1.
    """
    share = np.where(centric, 1.0, 2.0)
    squares = e_observed**2 + e_model**2
    product = e_observed * e_model
    low, high = np.zeros(size), np.ones(size)
    for _ in range(BISECTIONS):
        middle = (low + high) / 2
        sigma = middle[member]
        merit = merit_of_concentration(_exponent(sigma, e_observed, e_model, centric), centric)
        slope = share * (sigma * (1 - sigma**2) - sigma * squares + (1 + sigma**2) * product * merit)
        rises = np.bincount(member, slope, minlength=size) > 0
        low, high = np.where(rises, middle, low), np.where(rises, high, middle)
    return low

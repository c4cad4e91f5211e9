"""Normalised structure factors and what the statistics of their squares tell.

E² = I/(ε⟨I/ε⟩) at a reflection's resolution, so that ⟨E²⟩ = 1. Of atoms at random z = E² follows
Wilson's distributions (Wilson, Acta Cryst. 2 (1949) 318): acentric exp(−z), centric
exp(−z/2)/√(2πz); of a perfect twin of acentric crystals, the mean of two independent acentric
ones, 4z exp(−2z) (Stanley, J. Appl. Cryst. 5 (1972) 191).
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike
from scipy import special

from engine.amplitudes.checks import as_weights
from engine.amplitudes.shells import ShellMeans, intensities, s_squared, shell_means
from engine.arrays import BoolArray, FloatArray
from engine.errors import InputError
from engine.reflections import Reflections

ACENTRIC, CENTRIC, TWIN = "acentric", "centric", "twinned acentric"
MEAN_DEVIATION = {ACENTRIC: 2 / math.e, CENTRIC: 4 / math.sqrt(2 * math.pi * math.e), TWIN: 4 / math.e**2}
"""⟨|E² − 1|⟩: 0.736, 0.968, 0.541."""
DENSITY_AT_ONE = {ACENTRIC: 1 / math.e, CENTRIC: 1 / math.sqrt(2 * math.pi * math.e), TWIN: 4 / math.e**2}
"""Probability density of z = E² at 1."""
MEAN_AMPLITUDE = {
    ACENTRIC: math.sqrt(math.pi) / 2,
    CENTRIC: math.sqrt(2 / math.pi),
    TWIN: 0.75 * math.sqrt(math.pi / 2),
}
"""⟨|E|⟩: 0.886, 0.798, 0.940."""
FOURTH_MOMENT = {ACENTRIC: 2.0, CENTRIC: 3.0, TWIN: 1.5}
"""⟨E⁴⟩."""
Z_STEPS = np.round(np.arange(0.1, 1.01, 0.1), 1)
"""Where N(z) is compared, as Howells, Phillips & Rogers (1950) do."""
AGREES = 2.5
"""A hypothesis agrees within this many standard uncertainties, and is excluded beyond 4."""
EXCLUDED = 4.0
FEW = 50
"""Below this many reflections nothing is said."""
WEAK = 3.0
"""Median I/σ below which noise distorts the statistics."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Normalised:
    """E² of every reflection.

    Attributes
    ----------
    squared : float64, shape (N,)
        E²; negative where the intensity is.
    squared_sigma : float64, shape (N,), or None
        By the intensities' σ; that of the shells' means is left out.
    means : ShellMeans
        What they were normalised by.
    """

    squared: FloatArray
    squared_sigma: FloatArray | None
    means: ShellMeans

    def amplitudes(self) -> FloatArray:
        """|E|, NaN where E² is negative; shape (N,)."""
        return np.sqrt(np.where(self.squared < 0, np.nan, self.squared))


def normalise(
    reflections: Reflections,
    *,
    epsilon: ArrayLike | None = None,
    centric: ArrayLike | None = None,
    shells: int | None = None,
) -> Normalised:
    """Divide intensities by ε⟨I/ε⟩ of their resolution, then all alike so that ⟨E²⟩ = 1.

    Parameters
    ----------
    reflections : Reflections
        Intensities, or amplitudes, whose squares are taken; unique, without absences and the
        zero term.
    epsilon, centric, shells
        As ``shell_means``.

    Raises
    ------
    InputError
        As ``shell_means``, or a shell's mean is not above zero.
    """
    weights = as_weights(epsilon, reflections, "epsilon")
    means = shell_means(reflections, epsilon=weights, centric=centric, shells=shells)
    observed, sigma = intensities(reflections)
    local = weights * means.at(s_squared(reflections))
    local = local * (observed / local).mean()
    return Normalised(
        squared=observed / local,
        squared_sigma=None if sigma is None else sigma / local,
        means=means,
    )


@dataclass(frozen=True, slots=True)
class Estimate:
    """A number and its standard uncertainty by the counts."""

    value: float
    sigma: float

    def pull(self, expected: float) -> float:
        """(value − expected)/σ."""
        return (self.value - expected) / self.sigma


@dataclass(frozen=True, slots=True, kw_only=True)
class IntensityStatistics:
    """Moments and distribution of E², and what they say.

    Attributes
    ----------
    count : int
        Reflections.
    negative : int
        Those with E² < 0, which count as |E| = 0 in ``mean_amplitude`` alone.
    mean_amplitude : Estimate
        ⟨|E|⟩: acentric 0.886, centric 0.798, perfect twin 0.940.
    mean_deviation : Estimate
        ⟨|E² − 1|⟩: acentric 0.736, centric 0.968, perfect twin 0.541.
    fourth_moment : Estimate
        ⟨E⁴⟩, less the mean of σ²(E²) where it is known: acentric 2, centric 3, perfect twin 1.5.
    z : float64, shape (n,)
        Arguments of N(z), 0.1 … 1.
    observed : float64, shape (n,)
        N(z), the fraction of reflections with E² ≤ z (Howells, Phillips & Rogers, Acta Cryst. 3
        (1950) 210).
    acentric, centric, twin : float64, shape (n,)
        1 − exp(−z), erf√(z/2), and 1 − (1 + 2z) exp(−2z) of a perfect twin.
    verdict : {"acentric", "centric", "twinned acentric", "undecided"}
        By ⟨|E² − 1|⟩, with what noise adds to it: the one within 2.5 s.u. where the other two
        are beyond 4; undecided as well below 50 reflections or where the median of I/σ is
        below 3.
    words : str
        The verdict with its margin.
    notes : tuple of str
    """

    count: int
    negative: int
    mean_amplitude: Estimate
    mean_deviation: Estimate
    fourth_moment: Estimate
    z: FloatArray
    observed: FloatArray
    acentric: FloatArray
    centric: FloatArray
    twin: FloatArray
    verdict: str
    words: str
    notes: tuple[str, ...]


def intensity_statistics(normalised: Normalised, kept: BoolArray | None = None) -> IntensityStatistics:
    """Moments, N(z) and a verdict on the reflections chosen (bool, shape (N,); all where left out).

    To tell centric from acentric take the general reflections; for twinning those that are acentric
    by symmetry. Uncertainties are those of a sample, with the normalisation by the sample's own
    mean allowed for.

    Raises
    ------
    InputError
        `kept` is not one truth value a reflection, fewer than 2 different E² are chosen, or their
        mean is not above zero.
    """
    if kept is not None and (kept.dtype != np.bool_ or kept.shape != normalised.squared.shape):
        raise InputError(
            "kept", "is not one truth value a reflection", f"give {normalised.squared.size} of true or false"
        )
    z = normalised.squared if kept is None else normalised.squared[kept]
    sigma = normalised.squared_sigma
    if sigma is not None and kept is not None:
        sigma = sigma[kept]
    if z.size < 2 or np.ptp(z) == 0:
        raise InputError("kept", "chooses fewer than two different intensities", "choose more reflections")
    mean = float(z.mean())
    if mean <= 0:
        raise InputError("kept", "chooses intensities whose mean is not above zero", "choose reflections with signal")
    z = z / mean
    positive = np.maximum(z, 0.0)
    deviation = _moment(z, np.abs(z - 1), np.sign(z - 1))
    fourth = _moment(z, z**2, 2 * z)
    root = np.sqrt(positive)
    amplitude = _moment(z, root, np.divide(0.5, root, out=np.zeros_like(root), where=root > 0))
    notes = ["the expectations are those of atoms at random; heavy atoms, pseudo-symmetry and anisotropy shift them"]
    negative = int(np.count_nonzero(z < 0))
    if negative:
        notes.append(f"{negative} of {z.size} intensities are negative by noise")
    noise = 0.0
    weak = False
    if sigma is not None:
        noise = float(((sigma / mean) ** 2).mean())
        fourth = Estimate(fourth.value - noise, fourth.sigma)
        # z σ⁻¹ < 3 without dividing: a σ of zero is no noise.
        weak = int(np.count_nonzero(z * mean < WEAK * sigma)) > z.size / 2
        if weak:
            notes.append(
                f"the median of I/σ is below {WEAK:g}: noise widens the distribution and imitates a centric one"
            )
    verdict, words = _verdict(deviation, z.size, noise, weak)
    return IntensityStatistics(
        count=int(z.size),
        negative=negative,
        mean_amplitude=amplitude,
        mean_deviation=deviation,
        fourth_moment=fourth,
        z=Z_STEPS.copy(),
        observed=np.searchsorted(np.sort(z), Z_STEPS, side="right") / z.size,
        acentric=-np.expm1(-Z_STEPS),
        centric=np.asarray(special.erf(np.sqrt(Z_STEPS / 2))),
        twin=1 - (1 + 2 * Z_STEPS) * np.exp(-2 * Z_STEPS),
        verdict=verdict,
        words=words,
        notes=tuple(notes),
    )


def _moment(z: FloatArray, g: FloatArray, slope: FloatArray) -> Estimate:
    """⟨g(z/⟨z⟩)⟩ with its uncertainty by the influence of each reflection on g and on the mean (⟨z⟩ = 1)."""
    value = float(g.mean())
    influence = g - value - float((z * slope).mean()) * (z - 1)
    return Estimate(value, float(influence.std()) / math.sqrt(z.size))


def _verdict(deviation: Estimate, count: int, noise: float, weak: bool) -> tuple[str, str]:
    measured = f"⟨|E²−1|⟩ = {deviation.value:.3f} ± {deviation.sigma:.3f} of {count} reflections"
    if count < FEW:
        return "undecided", f"{measured}: too few to tell (at least {FEW} are wanted)"
    # Noise of variance v adds v·p(1) to ⟨|z − 1|⟩ in the first order, p the density of z.
    expected = {name: value + noise * DENSITY_AT_ONE[name] for name, value in MEAN_DEVIATION.items()}
    away = {name: abs(deviation.pull(value)) for name, value in expected.items()}
    listed = ", ".join(f"{name} {expected[name]:.3f} is {pull:.1f} s.u. away" for name, pull in away.items())
    if weak:
        return "undecided", f"{measured}: undecided, most intensities are drowned in noise; {listed}"
    best = min(away, key=away.__getitem__)
    others = [pull for name, pull in away.items() if name != best]
    if away[best] <= AGREES and min(others) >= EXCLUDED:
        return best, f"{measured}: {best}; {listed}"
    if away[best] > AGREES:
        return "undecided", f"{measured} fits none of the three, nearest is {best}; {listed}"
    return "undecided", f"{measured}: undecided, {best} agrees best but the others are not excluded; {listed}"

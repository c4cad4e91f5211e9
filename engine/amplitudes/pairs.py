"""The L-test for twinning: intensities of neighbours in reciprocal space.

L = (z₁ − z₂)/(z₁ + z₂) of pairs unrelated by symmetry, z = E². Anisotropy hardly matters, since both
of a pair share it (Padilla & Yeates, Acta Cryst. D59 (2003) 1124). They take the intensities
themselves; normalised ones are taken here because in a small cell the mean intensity falls
within a pair, and ⟨|L|⟩ rises with that. Untwinned acentric: L uniform, ⟨|L|⟩ = 1/2, ⟨L²⟩ = 1/3; perfect twin 3/8, 1/5;
centric 2/π, 1/2.
"""

from __future__ import annotations

import itertools
import math
from dataclasses import dataclass

import numpy as np

from engine.amplitudes.checks import as_flags
from engine.amplitudes.normalised import AGREES, EXCLUDED, FEW, Estimate, Normalised
from engine.arrays import BoolArray, FloatArray, IntArray
from engine.errors import InputError
from engine.reflections import Reflections

UNTWINNED, PERFECT_TWIN = 0.5, 0.375
STEP = 2
"""Index steps within a pair are 0 or ±2: even ones keep clear of the commonest pseudo-translations."""
FEWEST = 3
"""Reflections for two pairs, the least that has a scatter."""
L_STEPS = np.round(np.arange(0.1, 1.01, 0.1), 1)


@dataclass(frozen=True, slots=True, kw_only=True)
class PairStatistics:
    """The distribution of |L| and what it says.

    Attributes
    ----------
    pairs : int
        Pairs used.
    left_out : int
        Pairs of which an intensity is not above zero: L has no meaning there.
    mean_absolute : Estimate
        ⟨|L|⟩; its uncertainty allows for pairs that share a reflection.
    mean_square : Estimate
        ⟨L²⟩.
    l : float64, shape (n,)
        Arguments of N(|L|), 0.1 … 1.
    observed, untwinned, twin : float64, shape (n,)
        N(|L|): the fraction of pairs with at most that |L|; |L|; and |L|(3 − L²)/2 of a perfect twin.
    verdict : {"untwinned", "perfect twin", "partial twin or noise", "undecided"}
    words : str
        The verdict with its margin.
    notes : tuple of str
    """

    pairs: int
    left_out: int
    mean_absolute: Estimate
    mean_square: Estimate
    l: FloatArray
    observed: FloatArray
    untwinned: FloatArray
    twin: FloatArray
    verdict: str
    words: str
    notes: tuple[str, ...]


def pair_statistics(reflections: Reflections, normalised: Normalised, kept: BoolArray | None = None) -> PairStatistics:
    """The L-test on a set of unique reflections.

    Parameters
    ----------
    reflections : Reflections
        Each reflection once, one of each family of equivalents.
    normalised : Normalised
        Made of the same reflections.
    kept : bool array, shape (N,), optional
        The acentric reflections; all where left out.

    Raises
    ------
    InputError
        Repeated reflections, sets of different lengths, or fewer than 2 pairs.
    """
    reduced, indices, rows = normalised.squared, reflections.indices, reflections.row
    if reduced.size != reflections.count:
        raise InputError("normalised", f"holds {reduced.size} of {reflections.count} reflections", "normalise this set")
    if kept is not None:
        chosen = as_flags(kept, reflections, "kept")
        reduced, indices, rows = reduced[chosen], indices[chosen], rows[chosen]
    if len(indices) < FEWEST:
        raise InputError("reflections", f"are {len(indices)}, too few for pairs", f"give at least {FEWEST}")
    first, second = _neighbours(indices, rows)
    usable = (reduced[first] > 0) & (reduced[second] > 0)
    left_out = int(np.count_nonzero(~usable))
    first, second = first[usable], second[usable]
    if first.size < 2:
        raise InputError("reflections", "hold fewer than two pairs of neighbours", "give a more complete set")
    l = np.abs(reduced[first] - reduced[second]) / (reduced[first] + reduced[second])
    absolute, square = (_estimate(part, first, second, reduced.size) for part in (l, l**2))
    notes = []
    if left_out:
        share = left_out / (left_out + first.size)
        notes.append(
            f"{left_out} pairs ({share:.1%}) hold an intensity not above zero and are left out, which lowers ⟨|L|⟩ "
            "towards a twin's"
        )
    verdict, words = _verdict(absolute, first.size)
    return PairStatistics(
        pairs=int(first.size),
        left_out=left_out,
        mean_absolute=absolute,
        mean_square=square,
        l=L_STEPS.copy(),
        observed=np.searchsorted(np.sort(l), L_STEPS, side="right") / l.size,
        untwinned=L_STEPS.copy(),
        twin=L_STEPS * (3 - L_STEPS**2) / 2,
        verdict=verdict,
        words=words,
        notes=tuple(notes),
    )


def _neighbours(indices: IntArray, rows: IntArray) -> tuple[IntArray, IntArray]:
    """Places of both of each pair whose indices differ by 0 or ±2, each pair once."""
    dimension = indices.shape[1]
    lowest = indices.min(axis=0) - STEP
    sizes = indices.max(axis=0) + STEP - lowest + 1
    places = np.concatenate([[1], np.cumprod(sizes[:0:-1])])[::-1]
    codes = (indices - lowest) @ places
    order = np.argsort(codes, kind="stable")
    ordered = codes[order]
    repeated = np.flatnonzero(ordered[1:] == ordered[:-1])
    if repeated.size:
        raise InputError.for_rows("indices", rows[order[repeated + 1]], "repeat a reflection", "merge repeats first")
    firsts, seconds = [], []
    for step in itertools.product((-STEP, 0, STEP), repeat=dimension):
        if step > (0,) * dimension:
            shifted = codes + np.asarray(step) @ places
            at = np.minimum(np.searchsorted(ordered, shifted), ordered.size - 1)
            found = np.flatnonzero(ordered[at] == shifted)
            firsts.append(found)
            seconds.append(order[at[found]])
    return np.concatenate(firsts), np.concatenate(seconds)


def _estimate(values: FloatArray, first: IntArray, second: IntArray, size: int) -> Estimate:
    """Mean over pairs. Two pairs that share a reflection are correlated, all others independent:

    var = Σ_{p,q sharing} d_p d_q/P², d the deviations; summed by reflection, every pair has met
    itself once too often (Fafchamps & Gubert, J. Dev. Econ. 83 (2007) 326, for dyads).
    """
    mean = float(values.mean())
    deviation = values - mean
    by_reflection = np.bincount(first, deviation, size) + np.bincount(second, deviation, size)
    itself = float((deviation**2).sum())
    shared = float((by_reflection**2).sum()) - itself
    # A sum of sample products may fall below that of independent pairs, which is the least.
    return Estimate(mean, math.sqrt(max(shared, itself)) / values.size)


def _verdict(absolute: Estimate, pairs: int) -> tuple[str, str]:
    measured = f"⟨|L|⟩ = {absolute.value:.3f} ± {absolute.sigma:.3f} of {pairs} pairs"
    if pairs < FEW or absolute.sigma == 0:
        return "undecided", f"{measured}: too few to tell (at least {FEW} are wanted)"
    whole, twin = absolute.pull(UNTWINNED), absolute.pull(PERFECT_TWIN)
    listed = f"untwinned 0.5 is {abs(whole):.1f} s.u. away, a perfect twin 0.375 is {abs(twin):.1f}"
    if abs(whole) <= AGREES and abs(twin) >= EXCLUDED:
        return "untwinned", f"{measured}: untwinned; {listed}"
    if abs(twin) <= AGREES and abs(whole) >= EXCLUDED:
        return "perfect twin", f"{measured}: a perfect twin; {listed}"
    if whole <= -EXCLUDED and twin >= EXCLUDED:
        return "partial twin or noise", f"{measured} lies between the two, as of a partial twin; {listed}"
    if whole >= EXCLUDED:
        return "undecided", f"{measured} lies above both, as of centric reflections or a pseudo-translation; {listed}"
    return "undecided", f"{measured}: undecided; {listed}"

"""How well equivalent measurements agree: R values, CC½, χ², overall and by shells of resolution.

R_merge = Σ_h Σ_i |I_i − ⟨I⟩| / Σ_h Σ_i I_i over reflections measured n ≥ 2 times, ⟨I⟩ their plain
mean. R_meas carries the factor √(n/(n−1)) in each h of the numerator (Diederichs & Karplus,
Nature Struct. Biol. 4 (1997) 269), R_pim √(1/(n−1)) (Weiss, J. Appl. Cryst. 34 (2001) 130). CC½
is the correlation between the means of two random halves of the measurements (Karplus &
Diederichs, Science 336 (2012) 1030). χ² is reduced: Σ (I_i − Ī)²/σ_i² over Σ (n − 1), Ī weighted.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from engine.arrays import BoolArray, FloatArray, IntArray

_LEAST_CORRELATED = 3
"""Pairs below which a correlation says nothing: through two points there is always a line."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Agreement:
    """Statistics of one shell; None stands where nothing can be said.

    Attributes
    ----------
    d_max, d_min : float
        Largest and smallest spacing, Å; d_max is infinite where the zero term is among them.
    measurements, unique, repeated : int
        Rows, orbits, and orbits of two rows or more.
    redundancy : float
        Rows per orbit.
    r_merge, r_meas, r_pim : float or None
    cc_half : float or None
    chi_squared : float or None
        Of orbits whose σ are all above zero.
    mean_signal : float or None
        ⟨I/σ⟩ of the merged reflections with a σ above zero.
    """

    d_max: float
    d_min: float
    measurements: int
    unique: int
    repeated: int
    redundancy: float
    r_merge: float | None
    r_meas: float | None
    r_pim: float | None
    cc_half: float | None
    chi_squared: float | None
    mean_signal: float | None


@dataclass(frozen=True, slots=True, kw_only=True)
class OrbitSums:
    """What each orbit contributes; every array has the shape (M,).

    Attributes
    ----------
    spacing : float64
        Å.
    count : int64
        Rows.
    total, deviation : float64
        Σ I and Σ |I − ⟨I⟩|.
    first_half, second_half : float64
        Means of the two random halves; NaN where there is one row.
    chi_squared : float64
        Σ (I − Ī)²/σ²; NaN where σ are lacking.
    signal : float64
        I/σ after merging; NaN where σ is lacking.
    """

    spacing: FloatArray
    count: IntArray
    total: FloatArray
    deviation: FloatArray
    first_half: FloatArray
    second_half: FloatArray
    chi_squared: FloatArray
    signal: FloatArray


def orbit_sums(
    observed: FloatArray,
    weight: FloatArray,
    weighted: BoolArray,
    orbit: IntArray,
    *,
    spacing: FloatArray,
    signal: FloatArray,
    generator: np.random.Generator,
) -> OrbitSums:
    """Add up the rows (N,) of each orbit (M,).

    `weight` is 1/σ² in the orbits marked in `weighted` (M,), 1 in the others; `generator` draws
    the halves.
    """
    size = weighted.size
    count = np.bincount(orbit, minlength=size)
    total = np.asarray(np.bincount(orbit, observed, size), dtype=np.float64)
    mean = total / count
    weighted_mean = np.bincount(orbit, weight * observed, size) / np.bincount(orbit, weight, size)
    squares = np.bincount(orbit, weight * (observed - weighted_mean[orbit]) ** 2, size)
    second = _second_half(orbit, count, generator)
    halves = []
    for chosen in (~second, second):
        share = np.where(chosen, weight, 0.0)
        with np.errstate(invalid="ignore"):
            halves.append(np.bincount(orbit, share * observed, size) / np.bincount(orbit, share, size))
    single = count < 2
    return OrbitSums(
        spacing=spacing,
        count=count.astype(np.int64),
        total=total,
        deviation=np.asarray(np.bincount(orbit, np.abs(observed - mean[orbit]), size), dtype=np.float64),
        first_half=np.where(single, np.nan, halves[0]),
        second_half=np.where(single, np.nan, halves[1]),
        chi_squared=np.where(weighted, squares, np.nan),
        signal=signal,
    )


def _second_half(orbit: IntArray, count: IntArray, generator: np.random.Generator) -> BoolArray:
    """A random half of each orbit's rows; of an odd number, the odd one falls to either half."""
    order = np.lexsort((generator.random(orbit.size), orbit))
    rank = np.arange(orbit.size) - (np.cumsum(count) - count)[orbit[order]]
    offset = generator.integers(0, 2, count.size)
    second = np.empty(orbit.size, dtype=np.bool_)
    second[order] = (rank + offset[orbit[order]]) % 2 == 1
    return second


def agreements(sums: OrbitSums, shell: IntArray, shells: int) -> tuple[Agreement, ...]:
    """Statistics of each shell; `shell` (M,) holds the shell of each orbit, all of them occupied."""

    def add(values: FloatArray | IntArray, chosen: BoolArray | None = None) -> FloatArray:
        kept = values if chosen is None else np.where(chosen, values, 0)
        return np.asarray(np.bincount(shell, kept, shells), dtype=np.float64)

    repeated = sums.count > 1
    freedom = np.maximum(sums.count - 1, 1)
    strength = add(sums.total, repeated)
    r_merge = add(sums.deviation, repeated)
    r_meas = add(sums.deviation * np.sqrt(sums.count / freedom), repeated)
    r_pim = add(sums.deviation / np.sqrt(freedom), repeated)
    known = repeated & ~np.isnan(sums.chi_squared)
    chi_squared, degrees = add(sums.chi_squared, known), add(freedom, known)
    signalled = ~np.isnan(sums.signal)
    signal, signals = add(sums.signal, signalled), add(signalled.astype(np.int64))
    correlation = _correlation(sums.first_half[repeated], sums.second_half[repeated], shell[repeated], shells)
    measurements, unique = add(sums.count), np.bincount(shell, minlength=shells)
    repeats = add(repeated.astype(np.int64))
    d_max, d_min = np.zeros(shells), np.full(shells, np.inf)
    np.maximum.at(d_max, shell, sums.spacing)
    np.minimum.at(d_min, shell, sums.spacing)
    return tuple(
        Agreement(
            d_max=float(d_max[s]),
            d_min=float(d_min[s]),
            measurements=int(measurements[s]),
            unique=int(unique[s]),
            repeated=int(repeats[s]),
            redundancy=float(measurements[s] / unique[s]),
            r_merge=_ratio(r_merge[s], strength[s]),
            r_meas=_ratio(r_meas[s], strength[s]),
            r_pim=_ratio(r_pim[s], strength[s]),
            cc_half=None if np.isnan(correlation[s]) else float(correlation[s]),
            chi_squared=_ratio(chi_squared[s], degrees[s]),
            mean_signal=_ratio(signal[s], signals[s]),
        )
        for s in range(shells)
    )


def _ratio(part: float, whole: float) -> float | None:
    return float(part / whole) if whole > 0 else None


def _correlation(x: FloatArray, y: FloatArray, shell: IntArray, shells: int) -> FloatArray:
    """Pearson's correlation by shell; NaN where there are too few pairs or all are equal."""
    pairs = np.bincount(shell, minlength=shells)
    count = np.maximum(pairs, 1)
    dx = x - (np.bincount(shell, x, shells) / count)[shell]
    dy = y - (np.bincount(shell, y, shells) / count)[shell]
    both = np.sqrt(np.bincount(shell, dx**2, shells) * np.bincount(shell, dy**2, shells))
    usable = (pairs >= _LEAST_CORRELATED) & (both > 0)
    return np.where(usable, np.bincount(shell, dx * dy, shells) / np.where(usable, both, 1), np.nan)

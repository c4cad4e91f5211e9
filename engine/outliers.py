"""Weighted means of orbits, and the measurements that lie far from the others of their orbit."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from engine.arrays import BoolArray, FloatArray, IntArray
from engine.reflections import Reflections

_LEAST_TO_REJECT_FROM = 3
"""Of two measurements that differ nobody can tell which is wrong."""


@dataclass(frozen=True, slots=True)
class OrbitMeans:
    """Weighted means of M orbits with N rows.

    Attributes
    ----------
    count : int64, shape (M,)
        Rows.
    weighted : bool, shape (M,)
        Whether all rows have a σ above zero and so the weight 1/σ²; else each weighs 1.
    weight : float64, shape (N,)
    total : float64, shape (M,)
        Sum of the weights.
    mean : float64, shape (M,)
    """

    count: IntArray
    weighted: BoolArray
    weight: FloatArray
    total: FloatArray
    mean: FloatArray


@dataclass(frozen=True, slots=True, kw_only=True)
class Outliers:
    """Measurements far from the mean of the others of their orbit.

    Attributes
    ----------
    row : int64, shape (K,)
        Rows of the source, counted from 0.
    deviation : float64, shape (K,)
        (I_i − Ī_others)/√(σ_i² + σ²(Ī_others)), when it was found.
    rejected : bool, shape (K,)
        Whether it was left out of the mean.
    """

    row: IntArray
    deviation: FloatArray
    rejected: BoolArray


def orbit_means(given: Reflections, orbit: IntArray) -> OrbitMeans:
    """Mean of the rows of each orbit; `orbit` (N,) holds numbers from 0, each of which occurs."""
    count = np.bincount(orbit)
    squares = np.zeros(given.count) if given.sigma is None else given.sigma**2
    # A square below the normal numbers has no finite reciprocal: such a σ counts as zero.
    usable = squares >= np.finfo(np.float64).tiny
    weighted = np.bincount(orbit, usable) == count
    weight = np.ones(given.count)
    np.divide(1.0, squares, out=weight, where=weighted[orbit])
    total = np.asarray(np.bincount(orbit, weight), dtype=np.float64)
    return OrbitMeans(
        count.astype(np.int64), weighted, weight, total, np.bincount(orbit, weight * given.observed) / total
    )


def without_outliers(
    given: Reflections, orbit: IntArray, limit: float, *, reject: bool
) -> tuple[Reflections, IntArray, Outliers]:
    """List the rows that deviate by more than `limit` and, where asked, reject them.

    Rejection goes in rounds that take the worst row of an orbit, so that one bad row does not
    condemn the good ones that it pulled the mean away from. Orbits of two rows lose none.

    Returns
    -------
    Reflections, int64
        The rows that stay and their orbits.
    Outliers
    """
    rows, deviations, rejected = [], [], []
    while True:
        means = orbit_means(given, orbit)
        deviation = _deviations(given, orbit, means)
        size = np.abs(deviation)
        size[~(size > limit)] = 0.0
        worst = np.zeros(means.count.size)
        np.maximum.at(worst, orbit, size)
        taken = (size > 0) & (size == worst[orbit]) & (means.count[orbit] >= _LEAST_TO_REJECT_FROM)
        if not (reject and taken.any()):
            break
        # Two that are equally far off are taken one a round.
        _, first = np.unique(orbit[taken], return_index=True)
        out = np.flatnonzero(taken)[first]
        rows.append(given.row[out])
        deviations.append(deviation[out])
        rejected.append(np.ones(out.size, dtype=np.bool_))
        stays = np.ones(given.count, dtype=np.bool_)
        stays[out] = False
        given, orbit = given.select(stays), orbit[stays]
    listed = size > 0
    rows.append(given.row[listed])
    deviations.append(deviation[listed])
    rejected.append(np.zeros(np.count_nonzero(listed), dtype=np.bool_))
    return (
        given,
        orbit,
        Outliers(row=np.concatenate(rows), deviation=np.concatenate(deviations), rejected=np.concatenate(rejected)),
    )


def _deviations(given: Reflections, orbit: IntArray, means: OrbitMeans) -> FloatArray:
    """Deviation of each row from the mean of the others; NaN where there are no others or no weights.

    The sums of the others are totals less the row, except for the heaviest row of an orbit: its
    weight may swallow the digits of the others', so they are added up without it.
    """
    weight, size = means.weight, means.count.size
    heaviest = np.zeros(given.count, dtype=np.bool_)
    order = np.lexsort((weight, orbit))
    heaviest[order[np.cumsum(means.count) - 1]] = True
    light = np.where(heaviest, 0.0, weight)
    # Relative to the orbit's mean, so that large strengths do not swallow their differences.
    residual = given.observed - means.mean[orbit]
    total, moment = np.bincount(orbit, light, size), np.bincount(orbit, light * residual, size)
    top = np.bincount(orbit, np.where(heaviest, weight, 0.0), size)
    top_moment = np.bincount(orbit, np.where(heaviest, weight * residual, 0.0), size)
    others = np.where(heaviest, total[orbit], total[orbit] - weight + top[orbit])
    others_moment = np.where(heaviest, moment[orbit], moment[orbit] - weight * residual + top_moment[orbit])
    usable = means.weighted[orbit] & (means.count[orbit] > 1)
    made = np.full(given.count, np.nan)
    safe = np.where(usable, others, 1.0)
    np.divide(residual - others_moment / safe, np.sqrt(1 / weight + 1 / safe), out=made, where=usable)
    return made

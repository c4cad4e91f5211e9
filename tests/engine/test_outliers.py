"""Deviations from the others of an orbit, against a loop that leaves out one row after the other."""

from __future__ import annotations

import numpy as np
import pytest

from engine.outliers import orbit_means, without_outliers
from tests.engine.symmetry import crystals
from tests.strategies import CRYSTAL


def rows_of(observed, sigma):
    h = np.tile([1, 2, 3], (len(observed), 1))
    return crystals.reflections_of(CRYSTAL, h, observed=observed, sigma=sigma, quantity="intensity")


def plain_deviation(observed, sigma, orbit, row):
    others = [i for i in range(len(observed)) if orbit[i] == orbit[row] and i != row]
    total = sum(1 / sigma[i] ** 2 for i in others)
    mean = sum(observed[i] / sigma[i] ** 2 for i in others) / total
    return (observed[row] - mean) / np.sqrt(sigma[row] ** 2 + 1 / total)


def example(size=400, orbits=60, seed=3):
    rng = np.random.default_rng(seed)
    orbit = np.concatenate([np.arange(orbits), rng.integers(0, orbits, size - orbits)])
    sigma = 10 ** rng.uniform(-4, 3, size)
    return 1e5 * rng.random(orbits)[orbit] + sigma * rng.normal(size=size), sigma, orbit


def test_weighted_means_by_plain_sums():
    observed, sigma, orbit = example()
    sigma = sigma.copy()
    sigma[5] = 0.0
    means = orbit_means(rows_of(observed, sigma), orbit)
    for o in range(60):
        members = np.flatnonzero(orbit == o)
        plain = orbit[5] == o
        weight = np.ones(members.size) if plain else 1 / sigma[members] ** 2
        assert means.mean[o] == pytest.approx(sum(weight * observed[members]) / sum(weight), rel=1e-12)
        assert means.weighted[o] != plain
        assert means.count[o] == members.size


def test_deviations_from_the_mean_of_the_others():
    """σ spread over seven decades, so that one row outweighs its orbit by 1e14.

    Bound 1e-6: subtracting the means of strengths of 1e5 with σ of 1e-4 loses nine digits of sixteen.
    """
    observed, sigma, orbit = example()
    _, _, found = without_outliers(rows_of(observed, sigma), orbit, 1e-9, reject=False)
    repeated = np.bincount(orbit)[orbit] > 1
    assert found.row.tolist() == np.flatnonzero(repeated).tolist()
    expected = [plain_deviation(observed, sigma, orbit, row) for row in found.row]
    np.testing.assert_allclose(found.deviation, expected, rtol=1e-6, atol=1e-6)
    assert not found.rejected.any()


def test_deviations_of_good_data_are_normal():
    """Unit variance and 0.27 % beyond 3 (the normal distribution); 4 standard errors allowed."""
    rng = np.random.default_rng(12)
    orbit = np.repeat(np.arange(5000), 6)
    sigma = rng.uniform(0.5, 2, orbit.size)
    given = rows_of(rng.normal(size=orbit.size) * sigma, sigma)
    _, _, every = without_outliers(given, orbit, 1e-12, reject=False)
    assert np.std(every.deviation) == pytest.approx(1, abs=4 / np.sqrt(2 * 25000))
    _, _, beyond = without_outliers(given, orbit, 3.0, reject=False)
    assert beyond.row.size == pytest.approx(0.0027 * 30000, abs=4 * 9)


def test_one_bad_row_does_not_condemn_the_others():
    """100 among four of 0 ± 1: each good one lies 17 σ from the others' mean, but only the bad one goes."""
    given = rows_of([0.1, -0.2, 100.0, 0.3, 0.0], np.ones(5))
    orbit = np.zeros(5, dtype=np.int64)
    _, _, listed = without_outliers(given, orbit, 6.0, reject=False)
    assert listed.row.tolist() == [0, 1, 2, 3, 4]
    kept, left, found = without_outliers(given, orbit, 6.0, reject=True)
    assert found.row.tolist() == [2]
    assert found.rejected.tolist() == [True]
    assert found.deviation[0] == pytest.approx((100 - 0.05) / np.sqrt(1 + 1 / 4))
    assert kept.row.tolist() == [0, 1, 3, 4]
    assert left.tolist() == [0, 0, 0, 0]


def test_rejection_goes_on_until_none_is_left():
    given = rows_of([0.0, 0.1, 0.2, 500.0, 100.0, 3.0, 3.1, 3.2], np.ones(8))
    orbit = np.array([0, 0, 0, 0, 0, 1, 1, 1])
    kept, _, found = without_outliers(given, orbit, 6.0, reject=True)
    assert found.row.tolist() == [3, 4]
    assert found.rejected.all()
    assert kept.row.tolist() == [0, 1, 2, 5, 6, 7]


def test_of_two_rows_none_is_rejected():
    given = rows_of([0.0, 50.0, 7.0], np.ones(3))
    kept, _, found = without_outliers(given, np.array([0, 0, 1]), 6.0, reject=True)
    assert kept.count == 3
    assert found.row.tolist() == [0, 1]
    np.testing.assert_allclose(found.deviation, [-50 / np.sqrt(2), 50 / np.sqrt(2)])
    assert not found.rejected.any()


@pytest.mark.parametrize("sigma", [None, [1, 0, 1]])
def test_without_uncertainties_nothing_is_an_outlier(sigma):
    _, _, found = without_outliers(rows_of([0, 0, 1e9], sigma), np.zeros(3, dtype=np.int64), 6.0, reject=True)
    assert found.row.size == 0

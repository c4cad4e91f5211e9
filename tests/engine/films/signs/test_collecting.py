import numpy as np
import pytest

from engine.films.signs.collecting import Best, Sums


def test_the_best_are_those_of_a_sort_however_they_come():
    generator = np.random.default_rng(2)
    scores = generator.integers(0, 300, 1000).astype(float)
    best = Best(25)
    order = generator.permutation(1000)
    for part in np.array_split(order, 37):
        best.add(part, scores[part])
    expected = np.lexsort((np.arange(1000), scores))[:25]
    np.testing.assert_array_equal(best.codes, expected)
    assert best.worst == scores[expected[-1]]
    assert Best(3).worst == np.inf


def test_of_equal_scores_the_lower_codes_stay():
    best = Best(2)
    for code in (5, 3, 4, 1):
        best.add(np.array([code]), np.array([7.0]))
    assert best.codes.tolist() == [1, 3]


def test_sums_do_not_depend_on_when_the_best_is_met():
    generator = np.random.default_rng(3)
    scores = generator.normal(size=(4, 8)) * 900
    whole = Sums(4, 3, np.inf)
    for row in (2, 0):
        whole.add(row, np.arange(8), scores[row])
    other = Sums(4, 3, np.inf)
    for row in (1, 3):
        other.add(row, np.arange(8)[::2], scores[row, ::2])
    whole.join(other)
    used = np.where(np.isin(np.arange(4), [0, 2])[:, None] | (np.arange(8) % 2 == 0), scores, np.inf)
    share = np.exp(0.5 * (used.min() - used))
    np.testing.assert_allclose(whole.sum_first, share.sum(axis=1), atol=1e-12)
    np.testing.assert_allclose(whole.sum_last, share.sum(axis=0), atol=1e-12)
    np.testing.assert_array_equal(whole.least_first, used.min(axis=1))
    np.testing.assert_array_equal(whole.least_last, used.min(axis=0))
    assert whole.best == used.min()


def test_nothing_added_changes_nothing():
    sums = Sums(2, 1, np.inf)
    sums.add(0, np.zeros(0, dtype=np.int64), np.zeros(0))
    assert sums.best == np.inf
    sums.add(1, np.array([0]), np.array([5.0]))
    assert sums.sum_first.tolist() == pytest.approx([0, 1])

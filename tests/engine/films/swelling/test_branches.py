"""Search over signs against enumeration of all."""

from __future__ import annotations

import itertools

import numpy as np
import pytest

from engine.films.swelling.branches import MOST_INTERVALS, alternatives, branch, neighbours, whitened
from engine.films.swelling.observations import gather
from tests.engine.films.swelling.invented import layer, read


def seen_of(seed, most=5):
    rng = np.random.default_rng(seed)
    made = layer(rng)
    periods = 2 * made.half * np.array([1.0, 1.15, 1.35])
    return gather(read(rng, made, periods, most=most, least=4)[0], 2 * made.half, relative_sigma=None, model_error=0.01)


def all_signs(count):
    return np.array([(1, *rest) for rest in itertools.product([1, -1], repeat=count - 1)], dtype=float)


@pytest.mark.parametrize("seed", range(3))
def test_misfit_is_that_of_least_squares_with_expected_sizes(seed):
    seen = seen_of(seed)
    scales = np.array([1.0, 1.3, 0.8])
    own, tau = scales[seen.which], seen.expected_squares(scales)
    signs = np.where(np.random.default_rng(seed).normal(size=seen.count) < 0, -1.0, 1.0)
    design = np.vstack([seen.weights * (own / seen.sigma)[:, None], np.diag(tau**-0.5)])
    target = np.concatenate([signs * seen.amplitude / seen.sigma, np.zeros(tau.size)])
    best, *_ = np.linalg.lstsq(design, target, rcond=None)
    expected = np.sum((target - design @ best) ** 2)
    root = whitened(seen, scales)
    assert np.sum((root @ signs) ** 2) == pytest.approx(expected, rel=1e-8)


@pytest.mark.parametrize("seed", range(6))
def test_a_narrow_search_finds_the_best_of_all_choices(seed):
    seen = seen_of(seed)
    root = whitened(seen, np.ones(3))
    every = all_signs(seen.count)
    misfit = np.sum((every @ root.T) ** 2, axis=1)
    found, values = branch(root, 64)
    assert values[0] == pytest.approx(misfit.min())
    np.testing.assert_array_equal(found[0], every[misfit.argmin()])
    np.testing.assert_allclose(values, np.sum((found @ root.T) ** 2, axis=1))
    assert (np.diff(values) >= 0).all()


def test_a_wide_search_is_complete():
    seen = seen_of(2, most=4)
    root = whitened(seen, np.ones(3))
    every = all_signs(seen.count)
    found, values = branch(root, len(every))
    np.testing.assert_allclose(values, np.sort(np.sum((every @ root.T) ** 2, axis=1)))
    assert np.unique(found, axis=0).shape == every.shape


def test_neighbours_reverse_runs():
    root = np.tril(np.random.default_rng(0).normal(size=(5, 5)))
    signs = np.array([1.0, 1, -1, -1, 1])
    made, misfit = neighbours(root, signs)
    expected = {
        tuple(np.where((np.arange(5) >= i) & (np.arange(5) <= j), -signs, signs)) for i in range(5) for j in range(i, 5)
    } - {tuple(-signs)}
    assert {tuple(row) for row in made} == expected
    np.testing.assert_allclose(misfit, np.sum((made @ root.T) ** 2, axis=1))


def test_of_many_orders_short_runs_and_all_that_reach_the_end_are_tried():
    count = 150
    made, _ = neighbours(np.eye(count), np.ones(count))
    first, length = (made < 0).argmax(axis=1), (made < 0).sum(axis=1)
    longest = MOST_INTERVALS // count
    assert set(first[first + length == count]) == set(range(1, count))
    assert length[first + length < count].max() == longest
    assert len(made) < 1.1 * MOST_INTERVALS


def test_alternatives_keep_the_best_and_one_for_each_order():
    rng = np.random.default_rng(1)
    signs = np.where(rng.normal(size=(400, 9)) < 0, -1.0, 1.0)
    misfit = rng.uniform(size=400)
    power = rng.uniform(size=9)
    made, values = alternatives(signs, misfit, power, 3)
    assert values[0] == misfit.min()
    assert (np.diff(values) >= 0).all()
    best = signs[misfit.argmin()]
    turned = signs * np.where((signs * best) @ power < 0, -1.0, 1.0)[:, None]
    for place in range(9):
        other = turned[:, place] != best[place]
        assert values[made[:, place] != best[place]].min() == misfit[other].min()

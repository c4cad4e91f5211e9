"""The bare sum: one of each pair, both of each pair, extents."""

from __future__ import annotations

import itertools

import numpy as np
import pytest

from engine.series import Series, faces_backward
from tests.strategies import CRYSTAL, LATTICES, PLANAR, STACK, forward, listing, oracle


@pytest.mark.parametrize("dimension", [1, 2, 3])
def test_of_each_pair_exactly_one_faces_backward(dimension):
    indices = np.array(list(itertools.product(range(-2, 3), repeat=dimension)))
    backward, opposite = faces_backward(indices), faces_backward(-indices)
    zero = ~indices.any(axis=1)
    np.testing.assert_array_equal(backward ^ opposite, ~zero)
    assert not backward[zero].any()
    np.testing.assert_array_equal(backward, ~forward(indices))


def test_the_last_index_decides():
    rows = np.array([[5, 5, -1], [-5, -5, 1], [3, -2, 0], [-3, 2, 0], [-1, 0, 0], [1, 0, 0]])
    np.testing.assert_array_equal(faces_backward(rows), [True, False, True, False, True, False])


@pytest.mark.parametrize("dimension", [1, 2, 3])
def test_complete_writes_out_both_of_each_pair(dimension):
    whole = listing(LATTICES[dimension], seed=2)
    complete = whole.series().complete()
    assert not complete.real
    found = dict(zip(map(tuple, complete.indices.tolist()), complete.values, strict=True))
    wanted = dict(zip(map(tuple, whole.indices.tolist()), whole.values, strict=True))
    assert found == wanted


def test_a_complex_series_is_complete():
    series = listing(PLANAR, real=False).series()
    assert series.complete() is series


def test_doubled_values_sum_to_the_real_density():
    whole = listing(CRYSTAL, seed=3)
    series = whole.series()
    x = np.random.default_rng(1).random((15, 3))
    found = oracle(series.indices, series.doubled(), x).real
    assert np.abs(found - whole.at(x)).max() < 1e-13 * whole.weight


def test_the_zero_term():
    whole = listing(CRYSTAL, seed=3)
    zero = whole.values[~whole.indices.any(axis=1)][0]
    assert whole.series().zero_term == zero
    assert listing(CRYSTAL, seed=3, zero=False).series().zero_term == 0
    indices = np.array([[0, 1], [0, 0], [1, 0]])
    assert Series(PLANAR, indices, np.array([1, 2j, 3]), real=False).zero_term == 2j


def test_extents():
    series = listing(CRYSTAL, real=False, seed=3).series()
    np.testing.assert_array_equal(series.low, series.indices.min(axis=0))
    np.testing.assert_array_equal(series.high, series.indices.max(axis=0))


def test_a_series_of_nothing():
    series = Series(STACK, np.empty((0, 1), dtype=np.int64), np.empty(0, dtype=np.complex128), real=True)
    assert series.count == 0
    assert series.low.tolist() == series.high.tolist() == [0]
    assert series.zero_term == 0
    assert series.doubled().size == 0
    assert series.complete().count == 0

"""Commensurate grids: finding them, and folding indices onto their frequencies."""

from __future__ import annotations

import math

import numpy as np
import pytest

from engine.synthesis.folding import LARGEST, find_fold, fold
from tests.strategies import (
    COMMENSURATE,
    CRYSTAL,
    INCOMMENSURATE,
    LATTICES,
    PLANAR,
    STACK,
    Listing,
    example,
    grid,
    listing,
    oracle,
)


@pytest.mark.parametrize("name", COMMENSURATE)
def test_a_fold_is_the_grid_in_whole_numbers(name):
    _, sampling = COMMENSURATE[name]
    found = find_fold(sampling)
    lengths = np.array(found.lengths)
    np.testing.assert_allclose(found.translations / lengths[:, None], sampling.steps, rtol=1e-15)
    # The lengths are the smallest: nothing divides a length and its translation both.
    for translation, length in zip(found.translations, lengths, strict=True):
        assert math.gcd(int(length), *(int(t) for t in translation)) == 1


@pytest.mark.parametrize("name", INCOMMENSURATE)
def test_other_grids_have_none(name):
    assert find_fold(INCOMMENSURATE[name][1]) is None


@pytest.mark.parametrize("shape", [(7,), (8, 9), (6, 7, 10)], ids=str)
def test_the_whole_cell_folds_onto_itself(shape):
    found = find_fold(grid(np.zeros(len(shape)), np.diag(1 / np.array(shape)), shape))
    assert found.lengths == shape
    np.testing.assert_array_equal(found.translations, np.eye(len(shape)))


def test_every_length_of_a_cell_is_found():
    for count in range(1, 3000):
        assert find_fold(grid([0], [1.0 / count], (count,))).lengths == (count,)


@pytest.mark.parametrize("count", [LARGEST - 1, LARGEST])
def test_the_longest_transforms_are_found(count):
    assert find_fold(grid([0], [1 / count], (5,))).lengths == (count,)


def test_longer_ones_are_not():
    assert find_fold(grid([0], [1 / (LARGEST + 1)], (5,))) is None
    # The lowest common multiple of the two counts.
    assert find_fold(grid([0, 0], [[1 / 1021, 1 / 1031]], (5,))) is None


@pytest.mark.parametrize("step", [1 / 3 + 1e-15, 0.333333333333, 1e-9, math.pi / 10, 0.1 + 1e-14])
def test_steps_that_are_only_close_to_a_fraction_are_not_taken_for_one(step):
    assert find_fold(grid([0], [step], (5,))) is None


@pytest.mark.parametrize("name", COMMENSURATE)
@pytest.mark.parametrize("real", [True, False], ids=["real", "complex"])
def test_folded_coefficients_give_the_same_values_at_the_samples(name, real):
    """Σ v exp(2πi Σ_j m_j s_j/N_j) over the folded modes, by the oracle in sample numbers."""
    wanted, sampling, expected = example(name, real)
    found = find_fold(sampling)
    modes = fold(wanted.series(), sampling, found)
    samples = np.stack(np.meshgrid(*(np.arange(n) for n in sampling.shape), indexing="ij"), axis=-1)
    x = samples / np.array(found.lengths)
    if real:
        # The term m = 0 of the series is the one that has no mate; folded, others may lie there too.
        zero = wanted.series().zero_term
        made = 2 * oracle(modes.indices, modes.values, x).real - zero.real
    else:
        made = oracle(modes.indices, modes.values, x)
    assert np.abs(made - expected).max() < 1e-12 * np.abs(expected).max()


@pytest.mark.parametrize("name", COMMENSURATE)
@pytest.mark.parametrize("real", [True, False], ids=["real", "complex"])
def test_folded_indices_are_centred(name, real):
    wanted, sampling, _ = example(name, real)
    found = find_fold(sampling)
    modes = fold(wanted.series(), sampling, found)
    lengths = np.array(found.lengths)
    assert (2 * np.abs(modes.indices) <= lengths).all()
    if real:
        assert (modes.indices[:, -1] >= 0).all()
    assert modes.zero == wanted.series().zero_term


@pytest.mark.parametrize("name", COMMENSURATE)
@pytest.mark.parametrize("real", [True, False], ids=["real", "complex"])
def test_rows_that_are_called_distinct_are(name, real):
    """What a real grid holds of the mates on the last plane counts along: they are written there too."""
    wanted, sampling, _ = example(name, real)
    found = find_fold(sampling)
    modes = fold(wanted.series(), sampling, found)
    if not modes.distinct:
        return
    rows = modes.indices
    if real:
        own = (rows[:, -1] == 0) & rows.any(axis=1)
        rows = np.concatenate([rows, -rows[own]])
    rows = rows % np.array(found.lengths)
    assert len(np.unique(rows, axis=0)) == len(rows)


def test_a_grid_fine_enough_is_distinct_and_others_are_not():
    wanted = listing(CRYSTAL, seed=2).series()
    for shape, distinct in (((9, 7, 11), True), ((8, 7, 11), False), ((9, 6, 11), False), ((9, 7, 10), False)):
        sampling = grid([0, 0, 0], np.diag(1 / np.array(shape)), shape)
        assert fold(wanted, sampling, find_fold(sampling)).distinct is distinct


def test_the_whole_cell_costs_no_copy():
    series = listing(CRYSTAL, seed=2).series()
    sampling = grid([0, 0, 0], np.diag([1 / 9, 1 / 7, 1 / 11]), (9, 7, 11))
    modes = fold(series, sampling, find_fold(sampling))
    assert modes.indices is series.indices
    assert modes.values is series.values


def test_an_origin_becomes_a_phase():
    series = Listing(PLANAR, np.array([[2, 3], [-2, -3]]), np.array([2j, -2j]), True).series()
    sampling = grid([0.1, -0.2], np.diag([1 / 7, 1 / 9]), (7, 9))
    modes = fold(series, sampling, find_fold(sampling))
    np.testing.assert_allclose(modes.values, [2j * np.exp(2j * np.pi * (0.2 - 0.6))], rtol=1e-14)


def test_translations_of_another_setting():
    steps = [[1 / 11, 1 / 11], [-1 / 18, 2 / 18]]
    found = find_fold(grid([0, 0], steps, (11, 18)))
    assert found.lengths == (11, 18)
    np.testing.assert_array_equal(found.translations, [[1, 1], [-1, 2]])


def test_a_series_of_nothing_folds():
    empty = Listing(STACK, np.empty((0, 1), dtype=np.int64), np.empty(0, dtype=complex), False).series()
    sampling = grid([0], [1 / 5], (5,))
    assert fold(empty, sampling, find_fold(sampling)).values.size == 0


def test_all_dimensions_are_met():
    assert {COMMENSURATE[name][0] for name in COMMENSURATE} == set(LATTICES)

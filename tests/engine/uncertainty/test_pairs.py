"""The series of a variance against squares of plain sums."""

from __future__ import annotations

import tracemalloc
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from engine import InputError, Lattice, TooLargeError
from engine.symmetry import space_group
from engine.uncertainty import errors_of, pairs
from engine.uncertainty.pairs import estimate, variance_series
from tests.engine.uncertainty.measured import CRYSTALS, TRICLINIC, measured
from tests.strategies import forward


def crystal(name, **options):
    group, lattice, d_min, _ = CRYSTALS[name]
    return errors_of(measured(group, lattice, d_min, phase_sigma=0.5, **options).coefficients())


def random_strengths(errors, kinds, seed):
    """Any strengths; a zero term of a real density is real."""
    rng = np.random.default_rng(seed)
    made = rng.normal(size=(kinds, errors.count)) + 1j * rng.normal(size=(kinds, errors.count))
    if errors.real:
        made[:, ~errors.indices.any(axis=1)] = 1.5
    return tuple(made)


def displacements(errors, strengths, positions):
    """X of every measurement at every position, by plain sums: (M, K)."""
    waves = np.exp(2j * np.pi * errors.indices @ positions.T) * strengths[:, None]
    if errors.real:
        waves = np.where(errors.indices.any(axis=1), 2.0, 1.0)[:, None] * waves.real
    return np.stack([part.sum(axis=0) for part in np.split(waves, errors.starts[1:])])


def series_at(series, positions):
    """Plain sum of a real series that holds one of each pair."""
    weight = np.where(series.indices.any(axis=1), 2.0, 1.0) * series.values
    return (np.exp(2j * np.pi * positions @ series.indices.T) @ weight).real


def assert_is_the_square(errors, first, second, **options):
    rng = np.random.default_rng(7)
    positions = rng.uniform(-1, 1, (9, errors.lattice.dimension))
    series = variance_series(errors, first, second, **options)
    expected = sum(
        np.sum((displacements(errors, a, positions) * displacements(errors, b, positions).conj()).real, axis=0)
        for a, b in zip(first, second, strict=True)
    )
    scale = sum(np.abs(displacements(errors, a, positions)).max() ** 2 for a in first)
    np.testing.assert_allclose(series_at(series, positions), expected, rtol=1e-10, atol=1e-10 * scale)
    assert series.real
    assert forward(series.indices).all()
    assert len({tuple(row) for row in series.indices.tolist()}) == series.count
    return series


@pytest.mark.parametrize("kinds", [1, 2])
@pytest.mark.parametrize("real", [True, False])
@pytest.mark.parametrize("name", CRYSTALS)
def test_series_is_the_sum_of_squares(name, real, kinds):
    errors = crystal(name, real=real, zero=True)
    strengths = random_strengths(errors, kinds, 1)
    assert_is_the_square(errors, strengths, strengths)


@pytest.mark.parametrize("name", ["P1", "P212121", "Pa-3", "p3", "stack"])
@pytest.mark.parametrize("kinds", [1, 2])
def test_series_of_a_covariance(name, kinds):
    errors = crystal(name, zero=True)
    first, second = random_strengths(errors, kinds, 1), random_strengths(errors, kinds, 2)
    made = assert_is_the_square(errors, first, second)
    other = variance_series(errors, second, first)
    np.testing.assert_array_equal(other.indices, made.indices)
    np.testing.assert_allclose(other.values, made.values, atol=1e-9 * np.abs(made.values).max())


def test_equal_strengths_in_other_arrays_give_the_same():
    errors = crystal("Pa-3", zero=True)
    strengths = random_strengths(errors, 2, 3)
    quick = variance_series(errors, strengths, strengths)
    slow = variance_series(errors, strengths, tuple(one.copy() for one in strengths))
    table = {tuple(row): value for row, value in zip(slow.indices.tolist(), slow.values, strict=True)}
    largest = np.abs(quick.values).max()
    for row, value in zip(quick.indices.tolist(), quick.values, strict=True):
        assert abs(table.pop(tuple(row), 0) - value) < 1e-12 * largest
    assert all(abs(value) < 1e-12 * largest for value in table.values())


@pytest.mark.parametrize("chunk", [1, 5, 64])
def test_pieces_of_any_size_give_the_same(chunk, monkeypatch):
    errors = crystal("P212121", zero=True)
    strengths = random_strengths(errors, 2, 3)
    monkeypatch.setattr(pairs, "CHUNK", chunk)
    assert_is_the_square(errors, strengths, strengths)


@given(st.sampled_from(sorted(CRYSTALS)), st.booleans(), st.booleans(), st.integers(0, 2**16))
@settings(max_examples=25)
def test_a_table_and_sorted_pairs_give_the_same(name, real, same, seed):
    errors = crystal(name, real=real, seed=seed, zero=bool(seed % 2))
    first = random_strengths(errors, 2, seed)
    second = first if same else random_strengths(errors, 2, seed + 1)
    made = []
    for room in (1e9, 0):
        with pytest.MonkeyPatch.context() as patch:
            patch.setattr(pairs, "ROOM_PER_PAIR", room)
            assert estimate(errors, same=same).dense == (room > 0 and estimate(errors, same=same).pairs > 0)
            made.append(variance_series(errors, first, second))
    table = {tuple(row): value for row, value in zip(made[1].indices.tolist(), made[1].values, strict=True)}
    largest = np.abs(made[0].values).max()
    for row, value in zip(made[0].indices.tolist(), made[0].values, strict=True):
        assert abs(table.pop(tuple(row)) - value) <= 1e-12 * largest
    # Sums that are nothing stay in a sorted list.
    assert all(abs(value) < 1e-12 * largest for value in table.values())


def test_few_far_reflections_are_sorted_and_many_near_ones_are_not():
    near = crystal("Pa-3")
    assert estimate(near).dense
    far = replace(near, indices=np.asfortranarray(near.indices * 4))
    assert not estimate(far).dense
    strengths = random_strengths(far, 1, 0)
    assert_is_the_square(far, strengths, strengths)


def test_indices_whose_sums_cannot_be_numbered_are_refused():
    errors = crystal("P1")
    reach = int(np.abs(errors.indices).max())
    near, far = (
        replace(errors, indices=np.asfortranarray(errors.indices * (limit // reach))) for limit in (2**19, 2**20)
    )
    strengths = random_strengths(near, 1, 0)
    assert variance_series(near, strengths, strengths).count == errors.count + 1
    with pytest.raises(InputError) as caught:
        variance_series(far, strengths, strengths)
    assert caught.value.path == ("indices",)


def counted(errors, same):
    """Pairs by their definition: sums and differences of two coefficients, of one with itself only the sum."""
    sizes = np.diff(errors.starts, append=errors.count).tolist()
    if same:
        sums, differences = (sum(s * (s + 1) // 2 for s in sizes), sum(s * (s - 1) // 2 for s in sizes))
    else:
        sums, differences = sum(s * s for s in sizes), sum(s * (s - 1) for s in sizes)
    return sums * errors.real + differences


@pytest.mark.parametrize("same", [True, False])
@pytest.mark.parametrize("real", [True, False])
@pytest.mark.parametrize("name", ["P1", "P212121", "Pm-3m"])
def test_pairs_are_counted_beforehand(name, real, same):
    errors = crystal(name, real=real)
    assert estimate(errors, same=same).pairs == counted(errors, same)


@pytest.mark.parametrize("kinds", [1, 2])
@pytest.mark.parametrize("same", [True, False])
@pytest.mark.parametrize("dense", [True, False])
@pytest.mark.parametrize("name", ["P1", "P212121", "Pa-3"])
def test_memory_is_that_of_the_estimate(name, dense, same, kinds, monkeypatch):
    group = space_group(name)
    lattice = TRICLINIC if name == "P1" else Lattice.from_parameters(12, 12, 12, 90, 90, 90)
    errors = errors_of(measured(group, lattice, 0.35 if name == "P1" else 0.55).coefficients())
    first = random_strengths(errors, kinds, 1)
    second = first if same else random_strengths(errors, kinds, 2)
    monkeypatch.setattr(pairs, "ROOM_PER_PAIR", 1e9 if dense else 0)
    cost = estimate(errors, kinds=kinds, same=same)
    variance_series(errors, first, second)
    tracemalloc.start()
    try:
        before = tracemalloc.get_traced_memory()[0]
        series = variance_series(errors, first, second)
        peak = tracemalloc.get_traced_memory()[1] - before
    finally:
        tracemalloc.stop()
    told = cost.at_peak(series.count)
    assert peak <= told <= 2.2 * peak
    assert cost.least <= told + (0 if dense else cost.pairs * cost.term)
    # The limit is kept, and what fits is not refused.
    with pytest.raises(TooLargeError) as caught:
        variance_series(errors, first, second, max_bytes=told - 1 if dense else cost.least - 1)
    assert caught.value.path == ("uncertainty",)
    assert f"{cost.pairs:,} pairs" in caught.value.reason
    enough = told if dense else cost.least
    np.testing.assert_array_equal(variance_series(errors, first, second, max_bytes=enough).values, series.values)

"""Weighted means and the agreement of sets."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from engine import evaluate
from engine.combination import AS_GIVEN, average, difference, fitted_scale
from engine.sampling import FreePoints
from tests.engine.combination.crystals import measured, random_set, table
from tests.strategies import refusal_of

seeds = st.integers(0, 2**16)
POINTS = FreePoints(np.array([[0.0, 0, 0], [0.25, 0.25, 0.0], [0.13, 0.31, 0.72]]))


@given(seeds, st.sampled_from((1, 2, 3)), st.booleans(), st.integers(1, 4), st.sampled_from(("sigma", "equal")))
def test_mean_of_equal_sets_is_the_set(seed, dimension, real, count, weights):
    one = random_set(dimension, seed=seed, real=real, phase_sigma=1e-4)
    made = average([one] * count, weights=weights)
    np.testing.assert_allclose(made.coefficients.values, one.values, rtol=1e-12)
    np.testing.assert_allclose(made.coefficients.sigma, one.sigma / np.sqrt(count), rtol=1e-3)
    assert np.all(made.counts == count)
    assert made.degrees == (count - 1) * one.count
    assert made.chi_squared is None if count == 1 else made.chi_squared < 1e-20


def test_each_term_is_averaged_over_the_sets_that_have_it():
    sets = [random_set(seed=seed, phase_sigma=None) for seed in (1, 2, 3)]
    tables = [table(one) for one in sets]
    sigmas = [dict(zip(map(tuple, one.indices.tolist()), one.sigma.tolist(), strict=True)) for one in sets]
    for weights in ("sigma", "equal", (1.0, 2.0, 0.5)):
        made = average(sets, weights=weights)
        found = table(made.coefficients)
        assert found.keys() == set().union(*tables)
        for row, (h, value) in enumerate(found.items()):
            held = [number for number in range(3) if h in tables[number]]
            w = np.ones(3)[held] if weights == "equal" else np.array([1 / sigmas[n][h] ** 2 for n in held])
            if not isinstance(weights, str):
                w = np.array(weights)[held]
            w = w / w.sum()
            assert value == pytest.approx(sum(w * [tables[n][h] for n in held]), rel=1e-9)
            assert made.counts[row] == len(held)
        assert any("not all sets have" in words for words in made.combined.applied)


def test_mean_of_amplitudes_takes_the_phases_of_the_first():
    first, second = random_set(seed=1), random_set(seed=2)
    a, b = table(first), table(second)
    made = average([first, second], phases="first", weights="equal")
    found = table(made.coefficients)
    assert found.keys() == a.keys()
    for h, value in found.items():
        wanted = (abs(a[h]) + abs(b[h])) / 2 * a[h] / abs(a[h]) if h in b else a[h]
        if h == (0, 0, 0):
            wanted = (a[h] + b[h]) / 2
        assert value == pytest.approx(wanted, rel=1e-9)
    assert any("first set does not phase" in words for words in made.combined.applied)


@pytest.mark.parametrize("phases", ["own", "first"])
def test_chi_squared_is_about_one_where_errors_explain_the_scatter(phases):
    """Errors of phases are those of complex numbers; amplitudes know nothing of them."""
    crystal = measured("P1", 3, relative=0.02, phase=0.02, reach=(4, 4, 4))
    rng = np.random.default_rng(8)
    drawn = crystal.drawn(rng, 4)
    sets = [replace(crystal, values=one).coefficients() for one in drawn]
    made = average(sets, phases=phases)
    scatter = np.sqrt(2 / made.degrees)
    assert made.chi_squared == pytest.approx(1, abs=5 * scatter)
    assert not any("scatter" in note for note in made.combined.notes)
    worse = [replace(one, sigma=one.sigma / 4, phase_sigma=one.phase_sigma / 4) for one in sets]
    again = average(worse, phases=phases)
    assert again.chi_squared == pytest.approx(16 * made.chi_squared, rel=0.05)
    assert any("scatter" in note for note in again.combined.notes)


def test_sigma_of_a_mean_by_monte_carlo():
    first, second = (measured("P212121", seed, relative=0.1, phase=0.3) for seed in (3, 4))
    made = average([first.coefficients(), second.coefficients()], weights=(1.0, 3.0))
    field = evaluate(made.coefficients, POINTS, uncertainty=True)
    rng = np.random.default_rng(9)
    kernels = first.kernels(POINTS.fractional)
    drawn = ((0.25 * first.drawn(rng, 20000) + 0.75 * second.drawn(rng, 20000)) @ kernels).real
    wanted = drawn.std(axis=0)
    np.testing.assert_allclose(field.sigma.values, wanted, rtol=0.025, atol=1e-6 * wanted.max())


def test_a_mean_with_other_scales_is_brought_to_the_first():
    first = random_set(seed=1, share=1)
    second = replace(first, values=first.values / 3, sigma=first.sigma / 3)
    made = average([first, second], scale=fitted_scale())
    np.testing.assert_allclose(made.coefficients.values, first.values, rtol=1e-6)
    # On one scale both weigh the same.
    np.testing.assert_allclose(
        made.coefficients.plane_errors.along, average([first, first]).coefficients.plane_errors.along, rtol=1e-6
    )


def test_terms_with_a_sigma_of_zero_are_averaged_equally():
    first, second = random_set(seed=1, share=1, phase_sigma=None), random_set(seed=2, share=1, phase_sigma=None)
    zero = ~first.indices.any(axis=1)
    first = replace(first, sigma=np.where(zero, 0.0, first.sigma))
    made = average([first, second])
    np.testing.assert_allclose(made.coefficients.values[zero], (first.values[zero] + second.values[zero]) / 2)
    assert any("σ of zero" in words for words in made.combined.applied)
    assert made.degrees == first.count - 1


def test_coefficients_without_phase_are_told():
    first, second = random_set(seed=1, share=1), random_set(seed=2, share=1)
    first = replace(first, phase_known=np.arange(first.count) > 4)
    made = average([first, second])
    assert made.coefficients.count == second.count
    np.testing.assert_array_equal(made.counts, np.where(np.arange(first.count) > 4, 2, 1))
    np.testing.assert_allclose(made.coefficients.values[:5], second.values[:5])
    assert any("5 coefficients of single sets have no phase" in words for words in made.combined.applied)


def test_refusals():
    first, second = random_set(seed=1), random_set(seed=2, sigma=None, phase_sigma=None)
    assert refusal_of(lambda: average([first, second])).path == ("weights",)
    assert refusal_of(lambda: average([first, first], weights=(1, 0))).path == ("weights",)
    assert refusal_of(lambda: average([first, first], weights=(1,))).path == ("weights",)
    assert refusal_of(lambda: average([first, first], weights="merit")).path == ("weights",)
    assert refusal_of(lambda: average([first, first], phases="second")).path == ("phases",)
    assert refusal_of(lambda: average([])).path == ("sets",)
    made = average([first, second], weights="equal")
    assert made.chi_squared is None


def test_a_mean_of_differences_keeps_their_covariances():
    sets = [random_set(seed=seed, share=1) for seed in (1, 2, 3)]
    changes = [difference(one, sets[0], scale=AS_GIVEN).coefficients for one in sets[1:]]
    assert np.abs(changes[0].plane_errors.mixed).max() > 0
    made = average(changes, weights="equal").coefficients.plane_errors
    axes = made.phasor
    wanted = sum(one.plane_errors.towards(axes).mixed / 4 for one in changes)
    np.testing.assert_allclose(made.mixed, wanted, atol=1e-12)

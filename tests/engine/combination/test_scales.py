"""Scales of one set to another."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from scipy import optimize

from engine.combination.scales import AS_GIVEN, ScaleChoice, find_scale, fitted_scale, given_scale
from tests.engine.combination.crystals import measured, random_set
from tests.strategies import refusal_of

S_SQUARED = np.array([[0.0, 0, 1], [0, 0, 3], [1, 1, 1], [2, -1, 4]]).astype(np.int64)


def noisy(base, k, b, rng, relative=0.02):
    """Two measurements of one set; the second must be multiplied by k exp(−B s²)."""
    lattice = base.lattice
    true = 20 + np.abs(base.values)
    factor = k * np.exp(-b * lattice.sine_over_wavelength(base.indices) ** 2)
    pair = []
    for size in (true, true / factor):
        sigma = relative * size
        pair.append(replace(base, values=(size + sigma * rng.normal(size=base.count)).astype(complex), sigma=sigma))
    return pair


def test_fit_is_the_minimum_of_the_sum_of_squares():
    first, second = noisy(random_set(seed=1), 2.5, 0.0, np.random.default_rng(4))
    found = find_scale(first, second, fitted_scale())
    others = first.indices.any(axis=1)
    x1, x2 = np.abs(first.values[others]), np.abs(second.values[others])
    s1, s2 = first.sigma[others], second.sigma[others]
    best = optimize.minimize_scalar(
        lambda k: np.sum((x1 - k * x2) ** 2 / (s1**2 + k**2 * s2**2)), bounds=(2, 3), options={"xatol": 1e-10}
    )
    assert found.k == pytest.approx(best.x, rel=1e-6)
    assert found.fit.common == np.count_nonzero(others)


def test_sigma_of_the_scale_is_its_scatter():
    rng = np.random.default_rng(5)
    base = random_set(seed=1)
    found = [find_scale(*noisy(base, 2.5, 8.0, rng, 0.1), fitted_scale(displacement=True)) for _ in range(150)]
    k, b = np.array([one.k for one in found]), np.array([one.b for one in found])
    assert k.mean() == pytest.approx(2.5, abs=4 * k.std() / 12)
    assert b.mean() == pytest.approx(8.0, abs=4 * b.std() / 12)
    assert np.mean([one.k_sigma for one in found]) == pytest.approx(k.std(), rel=0.25)
    assert np.mean([one.b_sigma for one in found]) == pytest.approx(b.std(), rel=0.25)


def test_equivalents_count_once_in_a_fit():
    crystal = measured("P212121", 3)
    rng = np.random.default_rng(6)
    again = replace(crystal, values=1.5 * crystal.values * rng.normal(1, 0.05, len(crystal.values)))
    first, second = again.coefficients(), crystal.coefficients()
    found = find_scale(first, second, fitted_scale())
    assert found.fit.common == len(crystal.indices)
    apart = find_scale(replace(first, group=None), second, fitted_scale())
    assert apart.fit.common == first.count
    # Taken as independent, equivalents feign a better scale.
    assert apart.k_sigma < 0.7 * found.k_sigma


def test_outliers_pull_a_robust_fit_less():
    first, second = noisy(random_set(seed=1), 2.5, 0.0, np.random.default_rng(4))
    values = second.values.copy()
    values[::9] *= 3
    second = replace(second, values=values)
    plain, robust = (find_scale(first, second, fitted_scale(robust=choice)) for choice in (False, True))
    assert abs(robust.k - 2.5) < 0.2 * abs(plain.k - 2.5)
    assert "down-weighted" in robust.words


def test_factors_of_a_scale():
    base = random_set()
    s = base.lattice.magnitudes(S_SQUARED) / (4 * np.pi)
    made = find_scale(base, base, given_scale(1.7, k_sigma=0.1, b=3.0))
    np.testing.assert_allclose(made.factors(base.lattice, S_SQUARED), 1.7 * np.exp(-3 * s**2))
    np.testing.assert_allclose(find_scale(base, base, given_scale(1.7)).factors(base.lattice, S_SQUARED), 1.7)
    np.testing.assert_allclose(find_scale(base, base, AS_GIVEN).factors(base.lattice, S_SQUARED), 1)
    (change,) = made.displacements(base.lattice, S_SQUARED)
    np.testing.assert_allclose(change, 0.1 / 1.7)


def test_displacements_have_the_covariance_of_the_factors():
    first, second = noisy(random_set(seed=1), 2.5, 8.0, np.random.default_rng(4))
    made = find_scale(first, second, fitted_scale(displacement=True))
    s_squared = (first.lattice.magnitudes(S_SQUARED) / (4 * np.pi)) ** 2
    slopes = np.stack([np.ones(4), -s_squared], axis=1)
    changes = np.stack(made.displacements(first.lattice, S_SQUARED), axis=1)
    assert abs(made.covariance[0, 1]) > 0.1 * np.sqrt(np.prod(np.diag(made.covariance)))
    np.testing.assert_allclose(changes @ changes.T, slopes @ made.covariance @ slopes.T, rtol=1e-9)


def test_refusals():
    base = random_set()
    for wrong in (0.0, -1.0, np.inf):
        assert refusal_of(lambda wrong=wrong: given_scale(wrong)).path == ("scale", "k")
    assert refusal_of(lambda: given_scale(1, k_sigma=-1)).path == ("scale", "k_sigma")
    assert refusal_of(lambda: given_scale(1, b=np.nan)).path == ("scale", "b")
    assert refusal_of(lambda: ScaleChoice(kind="guessed")).path == ("scale",)
    other = replace(base, unit="e/Å³")
    assert refusal_of(lambda: find_scale(base, other, AS_GIVEN)).path == ("scale",)
    assert find_scale(base, other, given_scale(2.0)).k == 2
    certain = replace(base, sigma=np.zeros(base.count))
    assert refusal_of(lambda: find_scale(base, certain, fitted_scale())).path == ("scale", "sigma")
    single = base.select(np.arange(base.count) == 3)
    assert refusal_of(lambda: find_scale(base, single, fitted_scale())).path == ("scale", "second")


def test_a_fit_without_sigma_says_so():
    first, second = noisy(random_set(seed=1), 2.5, 0.0, np.random.default_rng(4))
    assert "weighs the same" in find_scale(first, replace(second, sigma=None), fitted_scale()).words

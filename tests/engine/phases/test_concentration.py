"""m, κ and σ against Bessel functions in 60 digits (mpmath) and against defining integrals."""

from __future__ import annotations

import mpmath
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.integrate import quad

from engine.phases import (
    concentration_of_merit,
    concentration_of_sigma,
    merit_of_concentration,
    merit_of_sigma,
    sigma_of_merit,
)
from tests.strategies import refusal_of

DIGITS = 60
# On both sides of every change of method: 1, 30 and the halves and tails of the inversion.
CONCENTRATIONS = [1e-12, 1e-3, 0.5, 0.999, 1.001, 1.8, 5.0, 29.9, 30.1, 200.0, 1e5, 1e9, 5e11]
MERITS = [1e-300, 1e-9, 0.1, 0.4999, 0.5, 0.53, 0.84, 0.86, 0.98, 0.999, 1 - 1e-6, 1 - 1e-9, 1 - 1e-12, 1 - 2**-53]


def ratio(kappa):
    """I₁/I₀ as an mpf."""
    return mpmath.besseli(1, mpmath.mpf(kappa)) / mpmath.besseli(0, mpmath.mpf(kappa))


@pytest.mark.parametrize("kappa", CONCENTRATIONS)
def test_merit_is_the_ratio_of_bessel_functions(kappa):
    with mpmath.workdps(DIGITS):
        expected = ratio(kappa)
    # Chebyshev expansions of the two functions err by a few units of the last place.
    assert merit_of_concentration(kappa)[0] == pytest.approx(float(expected), rel=1e-15)


@pytest.mark.parametrize("merit", MERITS)
def test_concentration_solves_for_the_very_double_given(merit):
    """In the complement 1 − m, whose relative precision is what a sharp distribution needs."""
    kappa = concentration_of_merit(merit)[0]
    with mpmath.workdps(DIGITS):
        wrong = abs(ratio(kappa) - mpmath.mpf(merit)) / min(mpmath.mpf(merit), 1 - mpmath.mpf(merit))
    # Below κ = 30 the complement is a difference of doubles: 1e-16/0.017; beyond, a series.
    assert wrong < 2e-14


def test_concentration_is_vectorised_and_keeps_the_shape():
    merit = np.linspace(0, 1, 24).reshape(2, 3, 4)
    kappa = concentration_of_merit(merit)
    assert kappa.shape == merit.shape
    assert kappa[0, 0, 0] == 0
    assert kappa[-1, -1, -1] == np.inf
    np.testing.assert_allclose(merit_of_concentration(kappa), merit, atol=1e-15)


def test_centric_is_a_hyperbolic_tangent():
    """Two phases with the weights e^κ and e^−κ: their mean cosine."""
    kappa = np.array([0.0, 0.3, 2.0, 8.0])
    centric = np.ones(4, dtype=bool)
    weights = np.exp(np.stack([kappa, -kappa]))
    expected = (weights[0] - weights[1]) / weights.sum(axis=0)
    np.testing.assert_allclose(merit_of_concentration(kappa, centric), expected, atol=1e-15)
    np.testing.assert_allclose(concentration_of_merit(expected, centric), kappa, rtol=1e-9)
    assert concentration_of_merit([1.0], np.array([True]))[0] == np.inf
    mixed = merit_of_concentration([2.0, 2.0], np.array([True, False]))
    assert mixed[0] == np.tanh(2)
    assert mixed[1] == merit_of_concentration(2.0)[0]


@pytest.mark.parametrize("sigma", [0.01, 0.4, 1.0, 2.5])
def test_circular_sigma_of_a_wrapped_normal_distribution(sigma):
    """By integration: of a normal distribution wrapped on the circle, m = exp(−σ²/2)."""
    limit = 12 * sigma
    density = quad(lambda t: np.exp(-(t**2) / (2 * sigma**2)) * np.cos(t), -limit, limit, epsabs=1e-13, limit=400)[0]
    expected = density / (sigma * np.sqrt(2 * np.pi))
    assert merit_of_sigma(sigma, "circular")[0] == pytest.approx(expected, abs=1e-11)
    assert sigma_of_merit(expected, "circular")[0] == pytest.approx(sigma, rel=1e-9)


@pytest.mark.parametrize("kappa", [0.2, 3.0, 400.0])
def test_small_angle_sigma_is_the_curvature_of_the_peak(kappa):
    assert concentration_of_sigma(kappa**-0.5, "small_angle")[0] == pytest.approx(kappa, rel=1e-15)
    merit = quad(lambda t: np.cos(t) * np.exp(kappa * (np.cos(t) - 1)), -np.pi, np.pi, points=[0])[0]
    merit /= quad(lambda t: np.exp(kappa * (np.cos(t) - 1)), -np.pi, np.pi, points=[0])[0]
    assert merit_of_sigma(kappa**-0.5, "small_angle")[0] == pytest.approx(merit, rel=1e-8)
    assert sigma_of_merit(merit, "small_angle")[0] == pytest.approx(kappa**-0.5, rel=1e-6)


def test_the_two_sigmas_part_as_they_grow():
    """1 − m = 1/2κ + 1/8κ² + … so that the circular σ² = 1/κ + 1/2κ² + O(κ⁻³)."""
    for kappa in (1e2, 1e4, 1e6):
        circular = sigma_of_merit(merit_of_concentration(kappa), "circular")[0]
        assert circular**2 * kappa - 1 == pytest.approx(1 / (2 * kappa), rel=1e-2 + 1e-9 * kappa)


@pytest.mark.parametrize("sigma", [1e-9, 1e-6, 1e-3])
def test_a_small_sigma_keeps_its_digits(sigma):
    """κ = 1/σ² to first order for either meaning, next term of relative size σ²/2."""
    for meaning in ("circular", "small_angle"):
        assert concentration_of_sigma(sigma, meaning)[0] * sigma**2 == pytest.approx(1, rel=sigma**2 + 1e-14)


def test_limits():
    assert merit_of_concentration([0.0, np.inf]).tolist() == [0, 1]
    for meaning in ("circular", "small_angle"):
        assert sigma_of_merit([0.0, 1.0], meaning).tolist() == [np.inf, 0]
        assert merit_of_sigma([0.0, np.inf], meaning).tolist() == [1, 0]
        assert concentration_of_sigma([0.0, np.inf], meaning).tolist() == [np.inf, 0]


@given(st.floats(0, 1, exclude_max=True), st.sampled_from(["circular", "small_angle"]))
def test_round_trip(merit, meaning):
    back = merit_of_sigma(sigma_of_merit(merit, meaning), meaning)[0]
    assert back == pytest.approx(merit, rel=1e-12, abs=1e-15)


@given(st.lists(st.floats(0, 1), min_size=2, max_size=20))
def test_concentration_rises_with_merit(merits):
    kappa = concentration_of_merit(np.sort(merits))
    # Equal but for rounding may stand for neighbours that differ in the last place.
    assert np.all(kappa[1:] >= kappa[:-1] * (1 - 1e-13))


@pytest.mark.parametrize(
    ("call", "path", "rows"),
    [
        (lambda: merit_of_concentration([1.0, -1.0]), "concentration", (1,)),
        (lambda: concentration_of_merit([0.5, 1.5, np.nan]), "merit", (1, 2)),
        (lambda: merit_of_sigma([-0.1], "circular"), "sigma", (0,)),
        (lambda: sigma_of_merit([np.inf], "circular"), "merit", (0,)),
        (lambda: sigma_of_merit([0.5], "width"), "meaning", ()),
        (lambda: concentration_of_sigma([0.5], "width"), "meaning", ()),
    ],
)
def test_refusals(call, path, rows):
    refusal = refusal_of(call)
    assert refusal.path == (path,)
    assert refusal.rows == rows

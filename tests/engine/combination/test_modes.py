"""Errors of scales as densities of their own."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from engine import Treatment, evaluate
from engine.combination import AS_GIVEN, difference, fitted_scale, given_scale, scale_sigma_of, with_scale_errors
from engine.sampling import FreePoints
from engine.uncertainty import PointDerivatives, covariance, errors_of
from tests.engine.combination.crystals import random_set
from tests.strategies import refusal_of

POINTS = FreePoints(np.random.default_rng(0).random((7, 3)))


def at(coefficients):
    return evaluate(coefficients, POINTS).values


@pytest.mark.parametrize("phases", ["own", "first"])
def test_a_given_scale_moves_the_second_part_alone(phases):
    first, second = random_set(seed=1), random_set(seed=2)
    made, more = (difference(first, second, scale=given_scale(k, k_sigma=0.2), phases=phases) for k in (1.5, 1.7))
    np.testing.assert_allclose(
        scale_sigma_of(made.scale_modes, POINTS), np.abs(at(more.coefficients) - at(made.coefficients)), rtol=1e-6
    )
    assert made.coefficients.scale_sigma == 0


def test_a_fitted_scale_moves_it_by_its_covariance():
    first = random_set(seed=1, share=1)
    second = replace(first, values=first.values * (1 + 0.1 * np.random.default_rng(1).normal(size=first.count)))
    made = difference(first, second, scale=fitted_scale(displacement=True))
    scale = made.scales[1]
    assert scale.b_sigma > 0

    def moved(k, b):
        return at(difference(first, second, scale=given_scale(k, b=b)).coefficients)

    step = 1e-5
    by_k = (moved(scale.k * np.exp(step), scale.b) - moved(scale.k * np.exp(-step), scale.b)) / (2 * step)
    by_b = (moved(scale.k, scale.b + step) - moved(scale.k, scale.b - step)) / (2 * step)
    slopes = np.stack([by_k, by_b])
    wanted = np.sqrt(np.einsum("ip,ij,jp->p", slopes, scale.covariance, slopes))
    np.testing.assert_allclose(scale_sigma_of(made.scale_modes, POINTS), wanted, rtol=1e-5)


def test_scales_of_sets_taken_as_given_are_independent():
    first, second = replace(random_set(seed=1), scale_sigma=0.03), replace(random_set(seed=2), scale_sigma=0.05)
    made = difference(first, second, scale=given_scale(2.0))
    common = [h in set(map(tuple, second.indices.tolist())) for h in map(tuple, first.indices.tolist())]
    other = [h in set(map(tuple, first.indices.tolist())) for h in map(tuple, second.indices.tolist())]
    wanted = np.hypot(0.03 * at(first.select(np.array(common))), 0.1 * at(second.select(np.array(other))))
    np.testing.assert_allclose(scale_sigma_of(made.scale_modes, POINTS), wanted, rtol=1e-6)
    assert any("scale modes" in note for note in made.notes)


def test_a_mean_that_was_given_does_not_move():
    first = random_set(seed=1)
    zero = ~first.indices.any(axis=1)
    second = replace(first, tally=replace(first.tally, zero_term="given"))
    (mode,) = difference(first, second, scale=given_scale(2.0, k_sigma=0.1)).scale_modes
    assert mode.values[zero] == 0
    assert np.all(mode.values[~zero] != 0)
    (mode,) = difference(first, first, scale=given_scale(2.0, k_sigma=0.1)).scale_modes
    assert mode.values[zero] == pytest.approx(-0.1 * first.values[zero])


def test_vectors_have_a_sigma_a_component():
    first, second = random_set(seed=1), random_set(seed=2)
    made = difference(first, second, scale=given_scale(1.0, k_sigma=0.1))
    treatment = Treatment(field="gradient")
    found = scale_sigma_of(made.scale_modes, POINTS, treatment)
    np.testing.assert_allclose(found, np.abs(evaluate(made.scale_modes[0], POINTS, treatment).values))


def test_refusals():
    first = random_set()
    assert refusal_of(lambda: scale_sigma_of((), POINTS)).path == ("modes",)
    made = difference(first, first, scale=given_scale(1.0, k_sigma=0.1))
    for field in ("gradient_magnitude", "autocorrelation", "response"):
        fault = refusal_of(lambda field=field: scale_sigma_of(made.scale_modes, POINTS, Treatment(field=field)))
        assert fault.path == ("field",)
    assert difference(first, first, scale=AS_GIVEN).scale_modes == ()


@pytest.mark.parametrize("field", ["density", "gradient", "laplacian"])
def test_sets_with_scale_errors_have_them_in_every_uncertainty(field):
    """σ² with the scales is σ² without them and the squares of the modes, on samples and of linear numbers."""
    first, second = random_set(seed=1), random_set(seed=2)
    made = difference(first, second, scale=given_scale(1.3, k_sigma=0.2, b=0.1))
    whole = with_scale_errors(made.coefficients, made.scale_modes)
    treatment = Treatment(field=field)
    alone = evaluate(made.coefficients, POINTS, treatment, uncertainty=True).sigma
    found = evaluate(whole, POINTS, treatment, uncertainty=True).sigma
    modes = scale_sigma_of(made.scale_modes, POINTS, treatment)
    np.testing.assert_allclose(found.values**2, alone.values**2 + modes**2, rtol=1e-6)
    assert any("scales of the sets" in words for words in found.contains)
    assert not any("scales of the sets" in words for words in found.omits)
    if field == "density":
        errors = errors_of(whole)
        at_points = covariance(errors, PointDerivatives(POINTS.fractional))
        np.testing.assert_allclose(np.sqrt(np.diag(at_points)), found.values, rtol=1e-6)
    assert with_scale_errors(made.coefficients, ()) is made.coefficients

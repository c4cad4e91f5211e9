"""Least squares for transform and scales."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import optimize

from engine.films.swelling.fit import SCALE_SPREAD, covariance_of, refine, scales_from_squares
from engine.films.swelling.observations import gather
from tests.engine.films.swelling.invented import series


def prepared(seed):
    made, sets, truths, scales = series(seed)
    seen = gather(sets, 2 * made.half, relative_sigma=None, model_error=0.005)
    flat = np.concatenate(truths)
    starts = np.concatenate([[0], np.cumsum([entry.count for entry in sets])])
    signs = np.sign(flat[starts[seen.which] + seen.row])
    return made, seen, signs, scales


def test_scales_without_signs():
    """Sets on scales between 1/e and e of the first come together within some per cent."""
    errors = []
    for seed in range(20):
        _, seen, _, scales = prepared(seed)
        errors.append(np.log(scales_from_squares(seen) / scales))
    assert np.abs(errors).max() < 0.3
    assert np.median(np.abs(errors)) < 0.06


@pytest.mark.parametrize("seed", range(3))
def test_a_fit_is_that_of_a_general_search(seed):
    _, seen, signs, scales = prepared(seed)
    start = scales * np.array([1.0, 1.1, 0.92, 1.06])
    tau = seen.expected_squares(start)
    count = tau.size

    def misfit(x):
        own = start * np.exp(np.concatenate([[0], x[count:]]))
        residual = (signs * seen.amplitude - own[seen.which] * (seen.weights @ x[:count])) / seen.sigma
        return np.concatenate([residual, x[:count] / np.sqrt(tau), x[count:] / SCALE_SPREAD])

    expected = optimize.least_squares(misfit, np.zeros(count + 3), xtol=1e-14, ftol=1e-14, gtol=1e-14)
    made = refine(seen, signs[None, :], start, free=True)
    assert made.misfit[0] == pytest.approx(2 * expected.cost, rel=1e-6)
    np.testing.assert_allclose(made.nodes[0], expected.x[:count], rtol=1e-4, atol=1e-4 * np.sqrt(tau.max()))
    np.testing.assert_allclose(made.scales[0, 1:], start[1:] * np.exp(expected.x[count:]), rtol=1e-4)
    covariance, spent = covariance_of(seen, signs, start, made, free=True)
    jacobian = expected.jac
    np.testing.assert_allclose(np.diag(covariance), np.diag(np.linalg.inv(jacobian.T @ jacobian)), rtol=1e-3)
    hat = jacobian[: seen.count] @ covariance @ jacobian[: seen.count].T
    assert spent == pytest.approx(np.trace(hat), rel=1e-3)


def test_common_scales_stay():
    _, seen, signs, scales = prepared(5)
    made = refine(seen, np.stack([signs, -signs]), scales, free=False)
    np.testing.assert_array_equal(made.scales, [scales, scales])
    np.testing.assert_allclose(made.nodes[0], -made.nodes[1])
    assert made.misfit[0] == pytest.approx(made.misfit[1])


def test_scales_and_transform_have_the_errors_they_say():
    pulls = []
    for seed in range(40):
        made, seen, signs, scales = prepared(seed)
        start = scales_from_squares(seen)
        fits = refine(seen, signs[None, :], start, free=True)
        covariance, _ = covariance_of(seen, signs, start, fits, free=True)
        sigma = np.sqrt(np.diag(covariance))
        inside = 1 + np.arange(5)
        truth = made.transform(np.pi * inside / made.half)
        pulls.append((fits.nodes[0, inside] - truth) / sigma[inside])
        pulls.append(np.log(fits.scales[0, 1:] / scales[1:]) / sigma[-3:])
    assert np.std(np.concatenate(pulls)) == pytest.approx(1.0, abs=0.25)

"""How a layer's numbers move, against small changes of single coefficients."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from engine import sampling as where
from engine.features.layer_numbers import NAMES, baseline_of, layer_numbers
from engine.features.linear import density_of
from engine.features.profiles import line_of, merged, parts_of, profile_of
from tests.engine.features.stacks import CROWDED, PERIOD, gaussians

BASELINES = [("minima", 0.0), ("higher_minimum", 0.0), ("level", 0.02)]


def analysed(coefficients, sampling, kind, level):
    density = density_of(coefficients)
    profile = profile_of(density, line_of(density, sampling))
    parts, _ = merged(profile, parts_of(profile), 0.01, 0.0)
    return layer_numbers(profile, parts, baseline_of(parts, kind, level))


@pytest.mark.parametrize("whole", [True, False])
@pytest.mark.parametrize(("kind", "level"), BASELINES)
def test_first_order_is_the_difference_quotient(kind, level, whole):
    """With σ of one coefficient alone the covariance of all numbers is the outer product of their derivatives."""
    base = gaussians(CROWDED, orders=20, background=0.02)
    if whole:
        line = where.normal_line(base.lattice, [1], 2)
    else:
        line = where.line(base.lattice, [9 / PERIOD], [47 / PERIOD], 2)
    h = 1e-6
    for row in (1, 4, 9):
        sigma = np.where(np.arange(base.count) == row, 1.0, 0.0)
        found = analysed(replace(base, sigma=sigma), line, kind, level)
        phasor = base.values[row] / abs(base.values[row])
        step = np.where(np.arange(base.count) == row, h * phasor, 0)
        up = analysed(replace(base, values=base.values + step), line, kind, level).values
        down = analysed(replace(base, values=base.values - step), line, kind, level).values
        assert up.shape == found.values.shape == (len(NAMES), 4)
        slope = (up - down) / (2 * h)
        expected = slope[:, :, None, None] * slope[None, None]
        known = np.isfinite(expected)
        assert known.mean() > 0.6
        np.testing.assert_array_equal(np.isfinite(found.covariance), known)
        size = np.nanmax(np.abs(slope), axis=1)
        scale = (size[:, None, None, None] * size[None, None, :, None] + 1e-12) * np.ones_like(expected)
        np.testing.assert_allclose(found.covariance[known] / scale[known], expected[known] / scale[known], atol=2e-5)


def test_half_heights_lie_at_half_height():
    base = gaussians(CROWDED, orders=20)
    density = density_of(base)
    profile = profile_of(density, line_of(density, where.normal_line(base.lattice, [1], 2)))
    parts, _ = merged(profile, parts_of(profile), 0.01, 0.0)
    baseline = baseline_of(parts, "minima", 0.0)
    made = layer_numbers(profile, parts, baseline)
    for side in (0, 1):
        at = made.crossings[side]
        share = (at - parts.bounds[:-1]) / np.diff(parts.bounds)
        line = baseline.at_lower * (1 - share) + baseline.at_upper * share
        half = 0.5 * (parts.heights - made.base)
        np.testing.assert_allclose(profile.derivatives(at, (0,))[0] - line, half, rtol=1e-10)
    assert made.covariance is None


def test_a_maximum_below_its_baseline_has_no_width():
    base = gaussians(CROWDED, orders=20)
    made = analysed(base, where.normal_line(base.lattice, [1], 2), "level", 50.0)
    assert np.isnan(made.values[NAMES.index("width")]).all()
    assert np.isnan(made.values[NAMES.index("centroid")]).all()
    assert np.isfinite(made.values[NAMES.index("area")]).all()

"""Line widths of stacks against published laws and against stacks that are drawn layer by layer."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import optimize

from engine.films.line_widths import LineWidths
from engine.films.widths import fit_widths


def test_half_width_of_n_layers():
    """Laue: the half width of (sin Nx/sin x)²; Scherrer's constant of a stack of planes, 0.886 (common practice)."""
    layers, period = 40, 14.2

    def laue(x):
        return (np.sin(layers * x) / np.sin(x)) ** 2 - layers**2 / 2

    half = optimize.brentq(laue, 1e-6, np.pi / layers * 0.9)
    width = 2 * half * 2 / period  # x = q d/2
    orders = np.arange(1, 6)
    given = LineWidths.of(orders, 2 * np.pi * orders / period, np.full(5, width), np.full(5, width / 100))
    for model in ("size", "stack"):
        found = fit_widths(given, period, model, shape="laue")
        assert found.thickness == pytest.approx(layers * period, rel=1e-3)
    by_hand = 0.886 * 2 * np.pi / width
    assert found.thickness == pytest.approx(by_hand, rel=1e-3)


def test_scherrer_in_degrees():
    """L = K λ/(β cos θ): K = 0.94, λ = 1.5406 Å, 0.5° at 2θ = 30°: 171.8 Å (common practice, by hand)."""
    given = LineWidths.from_two_theta([1], [30.0], [0.5], [0.01], wavelength=1.5406)
    found = fit_widths(given, 2.976, "size", k=0.94)
    assert found.thickness == pytest.approx(0.94 * 1.5406 / (np.radians(0.5) * np.cos(np.radians(15))), rel=1e-6)
    assert found.thickness == pytest.approx(171.8, abs=0.1)


def test_a_stack_drawn_layer_by_layer():
    """Hosemann & Bagchi's disorder, drawn: spacings 52 ± 1.04 Å, 24 layers, |Σ exp(iqz)|² of 4000 stacks.

    Half widths are read off the mean intensity. N and g come back within 4 %: the draws know a width to about 2 %.
    """
    rng = np.random.default_rng(1962)
    period, g, layers, drawn = 52.0, 0.02, 24, 4000
    steps = period * (1 + g * rng.standard_normal((drawn, layers - 1)))
    z = np.concatenate([np.zeros((drawn, 1)), np.cumsum(steps, axis=1)], axis=1)
    orders, widths = np.arange(1, 8), []
    for order in orders.tolist():
        reach = 0.06 + (np.pi * g * order) ** 2
        h = np.linspace(order - reach, order + reach, 81)
        wave = np.exp(2j * np.pi * (h[0] / period) * z)
        step = np.exp(2j * np.pi * ((h[1] - h[0]) / period) * z)
        intensity = np.empty(h.size)
        for row in range(h.size):
            intensity[row] = np.mean(np.abs(wave.sum(axis=1)) ** 2)
            wave *= step
        above = np.flatnonzero(intensity > intensity.max() / 2)
        left, right = above[0], above[-1]
        ends = [
            np.interp(intensity.max() / 2, intensity[left - 1 : left + 1], h[left - 1 : left + 1]),
            np.interp(-intensity.max() / 2, -intensity[right : right + 2], h[right : right + 2]),
        ]
        widths.append(ends[1] - ends[0])
    width = 2 * np.pi / period * np.array(widths)
    given = LineWidths.of(orders, 2 * np.pi * orders / period, width, 0.02 * width)
    found = fit_widths(given, period, "stack")
    assert found.layers == pytest.approx(layers, rel=0.04)
    assert found.disorder == pytest.approx(g, rel=0.04)
    assert found.spacing_sigma == pytest.approx(1.04, rel=0.04)

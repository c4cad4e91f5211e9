"""The lattice factor of a disordered stack against sums, drawn stacks and quadrature."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import integrate

from engine.films.paracrystal import (
    breadth,
    half_width,
    integral,
    integral_slope,
    lattice_factor,
    share_above_valley,
    share_within,
)
from tests.engine.films.stacks import full_width, summed

NODES, WEIGHTS = np.polynomial.legendre.leggauss(600)


@pytest.mark.parametrize(("g", "layers"), [(0.0, 7), (0.02, 20), (0.1, 5), (0.03, 200), (0.3, 1)])
def test_closed_form_is_the_sum(g, layers):
    h = np.concatenate([np.linspace(0, 4, 401), [1e-7, 1 + 1e-6, 2.0001, 3 - 1e-4, 1.00016, 1e-3]])
    np.testing.assert_allclose(lattice_factor(h, g, layers), summed(h, g, layers), rtol=1e-9, atol=1e-10 * layers)


def test_drawn_stacks():
    """|Σ exp(iqz)|²/N averaged over stacks whose spacings are drawn."""
    rng = np.random.default_rng(7)
    h, g, layers, drawn = np.array([0.3, 0.97, 1.0, 2.0, 2.04, 3.0]), 0.04, 12, 20000
    z = np.concatenate([np.zeros((drawn, 1)), 1 + g * rng.standard_normal((drawn, layers - 1))], axis=1).cumsum(axis=1)
    intensity = np.abs(np.exp(2j * np.pi * h[:, None, None] * z).sum(axis=2)) ** 2 / layers
    error = intensity.std(axis=1) / np.sqrt(drawn)
    assert (np.abs(intensity.mean(axis=1) - lattice_factor(h, g, layers)) < 4 * error).all()


@given(st.floats(0, 300), st.floats(-300, 300))
def test_integral_by_quadrature(real, imaginary):
    """D(z) = 2 ∫₀¹ (1 − t) e^{−zt} dt by Gauss's rule, D′ by its derivative under the integral."""
    t, z = (NODES + 1) / 2, complex(real, imaginary)
    kernel = WEIGHTS * (1 - t) * np.exp(-z * t)
    assert integral(np.array([z]))[0] == pytest.approx(kernel.sum(), abs=2e-13)
    assert integral_slope(np.array([z]))[0] == pytest.approx(-(t * kernel).sum(), abs=2e-12)


def test_limits_of_the_widths():
    """The Laue function's 0.8859 and 1, a Lorentzian's u/π and u/2."""
    width, _ = half_width(np.array([0.0, 1e6]))
    area, _ = breadth(np.array([0.0, 1e6]))
    np.testing.assert_allclose(width, [0.88589294, 1e6 / np.pi], rtol=2e-6)
    np.testing.assert_allclose(area, [1, 5e5], rtol=2e-6)


def test_half_width_is_where_the_peak_is_halved():
    u = np.concatenate([[0.0], np.geomspace(1e-5, 1e5, 200)])
    t = np.pi * half_width(u)[0]
    np.testing.assert_allclose(integral(u + 1j * t).real, integral(u).real / 2, rtol=1e-11)
    assert (np.diff(t) >= 0).all()


@pytest.mark.parametrize("function", [half_width, breadth])
def test_slopes_of_the_widths(function):
    u, step = np.array([1e-4, 0.02, 0.9, 1.1, 4.0, 60.0]), 1e-5
    numeric = (function(u + step)[0] - function(u - step)[0]) / (2 * step)
    np.testing.assert_allclose(function(u)[1], numeric, rtol=1e-6)


@pytest.mark.parametrize(
    ("g", "layers", "order", "bound"), [(0, 30, 4, 1e-3), (0.02, 25, 5, 0.01), (0.03, 40, 3, 0.01)]
)
def test_width_of_a_line_of_a_stack(g, layers, order, bound):
    """Against the half width of the sum in which the disorder's damping changes across the line."""
    u = np.array([2 * np.pi**2 * g**2 * order**2 * layers])
    assert half_width(u)[0][0] / layers == pytest.approx(full_width(order, g, layers), rel=bound)
    assert breadth(u)[0][0] / layers == pytest.approx(1 / summed(order, g, layers)[0], rel=bound)


@given(st.floats(0.001, 0.3), st.integers(1, 6), st.floats(0.01, 0.5))
def test_shares_by_quadrature(g, order, reach):
    r = np.exp(-2 * np.pi**2 * g**2 * order**2)

    def line(h):
        return (1 - r**2) / (1 - 2 * r * np.cos(2 * np.pi * h) + r**2)

    def inside(reach):
        return 2 * integrate.quad(line, 0, reach, points=[min(reach, 1 - r) / 2], limit=500)[0]

    assert inside(0.5) == pytest.approx(1, rel=1e-7)
    assert share_within([order], g, reach)[0] == pytest.approx(inside(reach), rel=1e-7)
    assert share_above_valley([order], g)[0] == pytest.approx(1 - line(0.5), rel=1e-7, abs=1e-12)

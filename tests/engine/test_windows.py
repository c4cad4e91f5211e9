"""Termination windows: their factors, and the width they give a point."""

from __future__ import annotations

import math

import numpy as np
import pytest
from scipy import optimize, special

from engine import Columns, Lattice, Treatment, Window, assemble, evaluate
from engine.sampling import line
from engine.windows import NO_WINDOW, gaussian, point_width
from tests.strategies import refusal_of

G_MAX = 6.3
D_MIN = 2 * math.pi / G_MAX
WINDOWS = [NO_WINDOW, Window("lanczos"), Window("raised_cosine"), Window("gaussian", 2.0)]


def factor(window, u):
    return window.factors(np.array([u * G_MAX]), G_MAX)[0]


@pytest.mark.parametrize(
    ("kind", "u", "value"),
    [
        ("none", 0.0, 1.0),
        ("none", 1.0, 1.0),
        ("lanczos", 0.0, 1.0),
        ("lanczos", 0.5, 2 / math.pi),
        ("lanczos", 1 / 6, 3 / math.pi),
        ("lanczos", 1.0, 0.0),
        ("raised_cosine", 0.0, 1.0),
        ("raised_cosine", 1 / 3, 0.75),
        ("raised_cosine", 0.5, 0.5),
        ("raised_cosine", 1.0, 0.0),
    ],
)
def test_factors(kind, u, value):
    assert factor(Window(kind), u) == pytest.approx(value, abs=1e-15)


def test_the_gaussian_is_that_of_a_displacement():
    lattice = Lattice.from_period(20.0)
    orders = np.array([[0], [1], [7]])
    # exp(−B sin²θ/λ²) with sin θ/λ = 1/2d.
    expected = np.exp(-2.0 * np.array([0, 1 / 40, 7 / 40]) ** 2)
    np.testing.assert_allclose(Window("gaussian", 2.0).factors(lattice.magnitudes(orders), 1.0), expected, rtol=1e-14)
    np.testing.assert_allclose(gaussian(lattice.magnitudes(orders), 2.0), 1 / expected, rtol=1e-14)
    np.testing.assert_allclose(gaussian(lattice.magnitudes(orders), -2.0), expected, rtol=1e-14)


@pytest.mark.parametrize("window", WINDOWS, ids=lambda window: window.kind)
def test_windows_fall_from_one(window):
    factors = window.factors(np.linspace(0, G_MAX, 200), G_MAX)
    assert factors[0] == 1
    assert (np.diff(factors) <= 1e-15).all()
    assert (factors >= 0).all()


@pytest.mark.parametrize("kind", ["lanczos", "raised_cosine"])
def test_rounding_at_the_edge_gives_no_negative_factor(kind):
    assert Window(kind).factors(np.array([G_MAX * (1 + 1e-15)]), G_MAX)[0] >= 0


@pytest.mark.parametrize(("dimension", "width"), [(1, 0.603), (2, 0.705), (3, 0.795)])
def test_widths_without_a_window(dimension, width):
    assert point_width(NO_WINDOW, dimension, G_MAX) / D_MIN == pytest.approx(width, abs=6e-4)


@pytest.mark.parametrize("dimension", [1, 2, 3])
def test_widths_without_a_window_by_the_closed_forms(dimension):
    def response(u):
        if dimension == 1:
            return math.sin(u) / u
        return 2 * special.j1(u) / u if dimension == 2 else 3 * (math.sin(u) - u * math.cos(u)) / u**3

    half = optimize.brentq(lambda u: response(u) - 0.5, 0.5, 4.0)
    assert point_width(NO_WINDOW, dimension, G_MAX) == pytest.approx(2 * half / G_MAX, rel=1e-7)


@pytest.mark.parametrize("dimension", [1, 2, 3])
@pytest.mark.parametrize("b", [200.0, 1e4, 1e5])
def test_a_narrow_gaussian_gives_its_own_width(dimension, b):
    """exp(−B s²) cut far out transforms to exp(−4π² r²/B): half at r = √(B ln 2)/2π, in any dimension."""
    expected = math.sqrt(b * math.log(2)) / math.pi
    assert point_width(Window("gaussian", b), dimension, G_MAX) == pytest.approx(expected, rel=1e-6)


@pytest.mark.parametrize("dimension", [1, 2, 3])
@pytest.mark.parametrize("window", WINDOWS, ids=lambda window: window.kind)
def test_widths_scale_with_the_resolution(window, dimension):
    scaled = window if window.b is None else Window("gaussian", window.b * 4)
    assert point_width(scaled, dimension, G_MAX / 2) == pytest.approx(2 * point_width(window, dimension, G_MAX))


@pytest.mark.parametrize("window", WINDOWS, ids=lambda window: window.kind)
def test_a_summed_point_is_as_wide_as_was_said(window):
    """The response of 400 orders, half its peak found on the profile. The series is a sum where the
    width is an integral: they differ by half an order at the edge, 1/800."""
    lattice = Lattice.from_period(1000.0)
    columns = Columns(indices=(np.arange(401),), amplitude=np.ones(401), phase_deg=np.zeros(401))
    point = assemble(lattice, columns, values="density_coefficient")
    treatment = Treatment(field="response", window=window)
    profile = evaluate(point, line(lattice, [0], [0.004], 4001), treatment, method="direct")
    falling = slice(0, 1 + int(np.argmax(profile.values < 0.3)))
    half = np.interp(-0.5, -profile.values[falling], profile.axes[0].coordinates()[falling])
    assert 2 * half == pytest.approx(point_width(window, 1, 400 * 2 * math.pi / 1000), rel=2e-3)


def test_windows_take_the_ripple_of_a_step_away():
    """Overshoot of a cut step: 8.949 % of the jump without a window (Gibbs phenomenon, Wilbraham's constant),
    1.187 % with Lanczos' factors; both in the limit of many orders, of which there are 400."""
    lattice = Lattice.from_period(1000.0)
    odd = np.arange(1, 800, 2)
    # A jump of 1: the wave is +½ and −½, its odd orders 1/(iπl).
    coefficients = assemble(
        lattice,
        Columns(indices=(odd,), amplitude=1 / (math.pi * odd), phase_deg=np.full(odd.size, -90.0)),
        values="density_coefficient",
    )
    overshoot = {}
    for window in WINDOWS[:3]:
        values = evaluate(coefficients, line(lattice, [0], [0.25], 20_001), Treatment(window=window)).values
        overshoot[window.kind] = values.max() - 0.5
    assert overshoot["none"] == pytest.approx(0.08949, abs=1e-4)
    assert overshoot["lanczos"] == pytest.approx(0.01187, abs=3e-4)
    assert overshoot["raised_cosine"] < overshoot["lanczos"]


@pytest.mark.parametrize("dimension", [1, 2, 3])
def test_a_window_says_how_much_it_widens(dimension):
    assert NO_WINDOW.describe(dimension, G_MAX) == "no termination window"
    for window in WINDOWS[1:]:
        ratio = point_width(window, dimension, G_MAX) / point_width(NO_WINDOW, dimension, G_MAX)
        assert ratio > 1
        words = window.describe(dimension, G_MAX)
        assert window.kind in words
        assert f"{ratio:.3g} times" in words
    assert "B = 2 Å²" in WINDOWS[3].describe(dimension, G_MAX)


@pytest.mark.parametrize(
    ("call", "path"),
    [
        (lambda: Window("gaussian"), ("b",)),
        (lambda: Window("gaussian", 0.0), ("b",)),
        (lambda: Window("gaussian", -1.0), ("b",)),
        (lambda: Window("gaussian", math.nan), ("b",)),
        (lambda: Window("lanczos", 2.0), ("b",)),
        (lambda: Window("none", 2.0), ("b",)),
        (lambda: Window("hann"), ("kind",)),
        (lambda: Window(""), ("kind",)),
    ],
)
def test_windows_that_are_refused(call, path):
    assert refusal_of(call).path == path

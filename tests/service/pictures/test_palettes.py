"""Palettes against the colour space itself, its matrices inverted here, and against how colour is seen."""

from __future__ import annotations

import numpy as np
import pytest

from service.pictures import palettes
from service.pictures.palettes import colours, lightness, palette, path, srgb

EVERY = [("sequential", "light"), ("sequential", "dark"), ("diverging", "light"), ("diverging", "dark")]
STEPS = np.linspace(0, 1, 257)


def oklab(colour):
    """OKLab of sRGB colours: the way back, step by step."""
    colour = np.asarray(colour)
    linear = np.where(colour <= 0.04045, colour / 12.92, ((colour + 0.055) / 1.055) ** 2.4)
    roots = np.cbrt(linear @ np.linalg.inv(palettes._TO_LINEAR).T)
    return roots @ np.linalg.inv(palettes._TO_ROOTS).T


def luminance(colour):
    """Relative luminance, IEC 61966-2-1."""
    colour = np.asarray(colour)
    linear = np.where(colour <= 0.04045, colour / 12.92, ((colour + 0.055) / 1.055) ** 2.4)
    return float(linear @ [0.2126, 0.7152, 0.0722])


def contrast(one, other):
    """Of two colours as WCAG 2 counts it."""
    low, high = sorted((luminance(one), luminance(other)))
    return (high + 0.05) / (low + 0.05)


def test_white_black_and_grey_are_without_hue():
    np.testing.assert_allclose(srgb(np.array([[1.0, 0, 0], [0.0, 0, 0]])), [[1, 1, 1], [0, 0, 0]], atol=1e-6)
    grey = srgb(np.array([0.6, 0, 0]))
    assert np.ptp(grey) < 1e-6
    # Luminance is the cube of the lightness of a grey.
    assert luminance(grey) == pytest.approx(0.216, abs=1e-4)


def test_primaries_of_the_screen_where_the_space_puts_them():
    # Of sRGB red, green, blue as the space was published with.
    expected = [[0.62796, 0.22486, 0.12585], [0.86644, -0.23389, 0.17950], [0.45201, -0.03246, -0.31153]]
    np.testing.assert_allclose(srgb(np.array(expected)), np.eye(3), atol=5e-4)


@pytest.mark.parametrize(("kind", "theme"), EVERY)
def test_no_colour_is_clipped(kind, theme):
    wanted = srgb(path(kind, theme, STEPS))
    assert wanted.min() >= 0
    assert wanted.max() <= 1
    np.testing.assert_allclose(oklab(palette(kind, theme, STEPS)), path(kind, theme, STEPS), atol=1e-6)


@pytest.mark.parametrize("theme", ["light", "dark"])
def test_sequential_lightness_rises_evenly(theme):
    steps = np.diff(oklab(palette("sequential", theme, STEPS))[:, 0])
    assert np.all(steps > 0)
    assert np.ptp(steps) < 1e-5
    assert steps.sum() > 0.7


@pytest.mark.parametrize(("theme", "sign"), [("light", -1), ("dark", 1)])
def test_diverging_lightness_is_even_on_both_sides_of_its_centre(theme, sign):
    light = oklab(palette("diverging", theme, STEPS))[:, 0]
    left, right = np.diff(light[:129]) * -sign, np.diff(light[128:]) * sign
    assert min(left.min(), right.min()) > 0
    assert max(np.ptp(left), np.ptp(right)) < 1e-5
    np.testing.assert_allclose(light, light[::-1], atol=1e-5)


@pytest.mark.parametrize(("kind", "theme"), EVERY)
def test_equal_steps_look_equal(kind, theme):
    seen = np.linalg.norm(np.diff(oklab(palette(kind, theme, STEPS)), axis=0), axis=1)
    assert seen.max() < 1.3 * seen.min()


@pytest.mark.parametrize("theme", ["light", "dark"])
def test_the_diverging_centre_is_grey_and_the_ends_differ_in_blueness(theme):
    lab = oklab(palette("diverging", theme, np.array([0.0, 0.5, 1.0])))
    assert np.hypot(*lab[1, 1:]) < 1e-6
    # Of blue and yellow every kind of red-green blindness keeps the difference: b alone must tell the ends apart.
    assert lab[2, 2] - lab[0, 2] > 0.15


@pytest.mark.parametrize("theme", ["light", "dark"])
def test_ink_and_curves_stand_out(theme):
    found = colours(theme)
    assert contrast(found.ink, found.paper) > 7
    assert min(contrast(curve, found.paper) for curve in found.curves) > 4.5
    assert contrast(found.faint, found.paper) > 1.8


def test_lightness_is_that_of_the_path():
    np.testing.assert_array_equal(lightness("diverging", "light", STEPS), path("diverging", "light", STEPS)[:, 0])

"""Line widths at the border: units and refusals."""

from __future__ import annotations

import numpy as np
import pytest

from engine.films.line_widths import LineWidths
from tests.strategies import refusal_of

ORDERS, Q, WIDTH = [1, 2, 3], [0.1, 0.2, 0.3], [0.01, 0.011, 0.012]


def test_two_theta_to_q():
    """q and its differences by q = (4π/λ) sin θ at both ends of the width."""
    wavelength, angles, width = 1.5406, np.array([1.7, 20.0, 95.0]), np.array([0.1, 0.2, 0.4])

    def q(two_theta):
        return 4 * np.pi / wavelength * np.sin(np.radians(two_theta / 2))

    made = LineWidths.from_two_theta(
        ORDERS, angles, width, width / 10, wavelength=wavelength, instrument=0.05, instrument_sigma=0.01
    )
    np.testing.assert_allclose(made.position, q(angles))
    np.testing.assert_allclose(made.width, q(angles + width / 2) - q(angles - width / 2), rtol=1e-5)
    np.testing.assert_allclose(made.sigma, made.width / 10)
    np.testing.assert_allclose(made.instrument, made.width * 0.05 / width)
    np.testing.assert_allclose(made.instrument_sigma, made.width * 0.01 / width)


@pytest.mark.parametrize(
    ("call", "path", "reason"),
    [
        (lambda: LineWidths.of([0, 1, 2], Q, WIDTH), "order", "not a positive whole"),
        (lambda: LineWidths.of([1, 1, 2], Q, WIDTH), "order", "twice"),
        (lambda: LineWidths.of([1.5, 1, 2], Q, WIDTH), "order", "not a positive whole"),
        (lambda: LineWidths.of(ORDERS, Q, [0.01, 0, 0.02]), "width", "not above zero"),
        (lambda: LineWidths.of(ORDERS, Q, WIDTH, [0.1, -1, 1]), "sigma", "not above zero"),
        (lambda: LineWidths.of(ORDERS, Q[:2], WIDTH), "q", "shape"),
        (lambda: LineWidths.of(ORDERS, Q, WIDTH, instrument=-0.1), "instrument", "negative"),
        (lambda: LineWidths.of(ORDERS, Q, WIDTH, instrument=[0.1, 0.2]), "instrument", "shape"),
        (lambda: LineWidths.of(ORDERS, Q, WIDTH, rule="voigt"), "rule", "known word"),
        (lambda: LineWidths.of(ORDERS, Q, WIDTH, measure="hwhm"), "measure", "known word"),
        (lambda: LineWidths.from_two_theta(ORDERS, [1, 2, 190], WIDTH, wavelength=1.5), "two_theta", "180"),
        (lambda: LineWidths.from_two_theta(ORDERS, Q, WIDTH, wavelength=0), "wavelength", "above zero"),
    ],
)
def test_refusals(call, path, reason):
    refusal = refusal_of(call)
    assert refusal.path[0] == path
    assert reason in refusal.reason


def test_words_of_the_instrument():
    assert "none" in LineWidths.of(ORDERS, Q, WIDTH).words[0]
    assert "squares" in LineWidths.of(ORDERS, Q, WIDTH, instrument=0.001).words[0]
    assert "linearly" in LineWidths.of(ORDERS, Q, WIDTH, instrument=0.001, rule="lorentzian").words[0]

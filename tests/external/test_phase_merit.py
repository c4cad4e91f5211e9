"""Check 14: the figure of merit of a von Mises phase distribution is m = I₁(X)/I₀(X).

Source: Sim, Acta Cryst. 13 (1960) 511; Bessel functions of scipy.special and, in 40 digits, of
mpmath.
"""

from __future__ import annotations

import mpmath
import numpy as np
import pytest
from scipy.special import iv, ive

from engine.lattice import Lattice
from engine.phases import (
    concentration_of_merit,
    hendrickson_lattman,
    merit_of_concentration,
    probabilities,
    sim_weights,
    summarize,
    summarize_table,
    von_mises,
)
from engine.reflections import Reflections

X = np.concatenate([[1e-6, 1e-3], np.linspace(0.05, 60, 1200), np.geomspace(60, 1e6, 200)])
ROUNDING = 1e-14
"""Of two Bessel functions, each to a few units of the last place, and their ratio."""


def test_merit():
    expected = ive(1, X) / ive(0, X)
    np.testing.assert_allclose(merit_of_concentration(X), expected, rtol=ROUNDING)


def test_merit_through_coefficients_and_through_tables():
    """The same number from A = X cos φ, B = X sin φ by Hendrickson & Lattman, and from 2000 angles."""
    some = X[X < 600][::5]
    phase = np.linspace(-3, 3, some.size)
    expected = ive(1, some) / ive(0, some)
    made = von_mises(phase, some)
    summary = summarize(made)
    np.testing.assert_allclose(summary.merit, expected, rtol=ROUNDING)
    np.testing.assert_allclose(summary.phase, phase, atol=ROUNDING)
    # C = 1e-20 changes nothing but the way: integration on the circle instead of the closed form.
    integrated = summarize(hendrickson_lattman(made.coefficients + np.array([0, 0, 1e-20, 0])))
    np.testing.assert_allclose(integrated.merit, expected, atol=2e-13)
    angles = np.arange(2000) * np.pi / 1000
    tabulated = summarize_table(probabilities(made, angles), angles)
    np.testing.assert_allclose(tabulated.merit, expected, atol=2e-13)


def test_sims_x():
    """X = 2|F_o||F_c|/Σ f² over the missing atoms; half of it in a hyperbolic tangent where centric."""
    lattice = Lattice.from_parameters(5, 6, 7, 90, 90, 90)
    indices = np.array([[1, 0, 0], [0, 1, 0], [0, 0, 1], [1, 1, 1]])
    reflections = Reflections(
        lattice=lattice,
        indices=indices,
        quantity="amplitude",
        observed=np.array([30.0, 80.0, 30.0, 80.0]),
        sigma=None,
        phase=None,
        phase_sigma=None,
        merit=None,
        row=np.arange(4),
        scale="absolute",
    )
    calculated = np.array([20.0, 70j, -20.0, -70.0])
    centric = np.array([False, False, True, True])
    found = sim_weights(reflections, calculated, np.full(4, 900.0), centric=centric, epsilon=np.array([1, 2, 1, 4.0]))
    # Of a reflection with the statistical weight ε the missing part is ε times as strong.
    x = 2 * np.array([30 * 20, 80 * 70 / 2, 30 * 20, 80 * 70 / 4]) / 900
    expected = [*(iv(1, x[:2]) / iv(0, x[:2])), *np.tanh(x[2:] / 2)]
    np.testing.assert_allclose(found.merit, expected, rtol=ROUNDING)


@pytest.mark.parametrize("merit", [0.01, 0.3, 0.7, 0.99, 1 - 1e-9, 1 - 1e-12])
def test_the_inverse(merit):
    """X from m, in the complement 1 − m, which is what remains of a sharp distribution."""
    x = concentration_of_merit(merit)[0]
    with mpmath.workdps(40):
        ratio = mpmath.besseli(1, mpmath.mpf(x)) / mpmath.besseli(0, mpmath.mpf(x))
        assert abs((1 - ratio) / (1 - mpmath.mpf(merit)) - 1) < 2e-14

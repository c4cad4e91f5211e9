"""The stack of graphite's layers from its published structure.

Cell a = 2.464, c = 6.711 Å (Trucano & Chen, Nature 258 (1975) 136, written down from memory): layers c/2 apart, two
carbon atoms on each area a²√3/2. Form factors of carbon: Waasmaier & Kirfel, Acta Cryst. A51 (1995) 416, by a
reference library that is not the engine's.
"""

from __future__ import annotations

import numpy as np
import pytest
import xraydb

from engine.films.trial import Plane, Stack, calculated

A, C = 2.464, 6.711
AREA = A**2 * np.sqrt(3) / 2


def graphite(width=0.0, probe="xray"):
    layers = [Plane.of(name, z, formula="C2", area=AREA, width=width) for name, z in (("A", C / 4), ("B", 3 * C / 4))]
    return Stack.of(C, layers, probe=probe)


def test_odd_orders_are_absent_exactly():
    odd = calculated(graphite(), np.arange(1, 20, 2))
    assert np.abs(odd).max() < 1e-14


def test_the_even_orders_by_hand():
    """F_l of two layers a quarter of c from the origin: 2 · 2 f(l/2c)/area · cos(πl/2)."""
    made = calculated(graphite(), [0, 2, 4])
    f = [float(xraydb.f0("C", l / (2 * C))[0]) for l in (0, 2, 4)]
    expected = [4 * f[0] / AREA, -4 * f[1] / AREA, 4 * f[2] / AREA]
    np.testing.assert_allclose(made, expected, rtol=2e-4)


def test_the_second_order_from_the_tabulated_form_factor():
    """f(0.1) = 5.1098, f(0.2) = 3.5572: at s = 0.14901 Å⁻¹ a little below the chord, the curve being convex there."""
    s = 2 / (2 * C)
    chord = 5.1098 + (s - 0.1) / 0.1 * (3.5572 - 5.1098)
    made = -calculated(graphite(), [2])[0].real
    assert 0.98 * 4 * chord / AREA < made < 4 * chord / AREA


def test_one_layer_a_period_of_half_the_length_is_the_same_film():
    half = Stack.of(C / 2, [Plane.of("A", 0.0, formula="C2", area=AREA)], symmetry="m")
    np.testing.assert_allclose(np.abs(calculated(graphite(), [2, 4, 6])), 2 * calculated(half, [1, 2, 3]).real)


def test_mean_density_is_that_of_graphite():
    """ρ = 4 · 12.011 u / (a²c√3/2) = 2.26 g/cm³; electrons 6/12.011 of it."""
    electrons = calculated(graphite(), [0])[0].real / C
    grams = electrons / 6 * 12.011 / 0.602214076
    assert grams == pytest.approx(2.26, abs=0.01)


def test_displacements_are_a_debye_waller_factor():
    u = 0.12
    q = 2 * np.pi * np.array([2, 4, 6]) / C
    ratio = calculated(graphite(u), [2, 4, 6]) / calculated(graphite(), [2, 4, 6])
    np.testing.assert_allclose(ratio.real, np.exp(-(q**2) * u**2 / 2), rtol=1e-12)


def test_neutrons():
    """b(C) = 6.6460 fm (Sears, Neutron News 3 (1992) 26)."""
    made = calculated(graphite(probe="neutron"), [0])[0].real / C
    assert made == pytest.approx(10 * 4 * 6.6460 / (AREA * C), rel=2e-3)

"""Checks 9 and 10: what a series cut at G_max does to a step and to a point."""

from __future__ import annotations

from functools import cache

import numpy as np
import pytest
from scipy import optimize, special

from engine import Columns, Lattice, Treatment, Window, assemble, evaluate, sampling
from engine.coefficients import CoefficientSet
from engine.resolution import compare_windows

PERIOD = 100.0
"""Period of the layer stack of check 9, Å."""


def step_profile(terms: int) -> CoefficientSet:
    """Density 1 for |z| < P/4 and 0 elsewhere: n_l = sin(πl/2)/(πl), l odd up to 2·terms − 1."""
    l = np.arange(1, 2 * terms, 2)
    columns = Columns(indices=[l], real=np.sin(np.pi * l / 2) / (np.pi * l), imag=np.zeros(l.size))
    return assemble(Lattice.from_period(PERIOD), columns, values="density_coefficient", mean=0.5)


def near_the_step(coefficients: CoefficientSet, terms: int, window: str) -> np.ndarray:
    """6001 samples over the three ripples on each side of the step at z = P/4."""
    reach = 1.5 / terms
    line = sampling.line(coefficients.lattice, [0.25 - reach], [0.25 + reach], 6001)
    return evaluate(coefficients, line, Treatment(window=Window(window))).values


@pytest.mark.parametrize("terms", [500, 4000])
@pytest.mark.parametrize(("window", "expected"), [("none", 0.08949), ("lanczos", 0.01187)])
def test_a_step_overshoots_by_the_same_however_many_orders(terms, window, expected):
    """Check 9: Gibbs phenomenon (Wilbraham's constant) 8.949 % of the jump; with Lanczos σ 1.187 %.

    The bound is half a unit of the last digit. The overshoot of n terms exceeds its limit by
    about 0.04/n², 2e-7 at 500, and the samples find a maximum to 1e-7, so no extrapolation is
    needed.
    """
    values = near_the_step(step_profile(terms), terms, window)
    assert values.max() - 1 == pytest.approx(expected, abs=0.5e-5)
    assert -values.min() == pytest.approx(expected, abs=0.5e-5)
    assert values[3000] == pytest.approx(0.5, abs=1e-8)


def test_the_overshoot_is_wilbrahams_constant():
    """Check 9 in closed form, Si(π)/π − ½, to seven digits instead of four."""
    values = near_the_step(step_profile(4000), 4000, "none")
    assert values.max() - 1 == pytest.approx(special.sici(np.pi)[0] / np.pi - 0.5, abs=2e-8)
    # The first maximum of n terms lies P/4n from the step: sample 2500 of 6001.
    assert int(values.argmax()) == 2500


# Check 10: conventions §8, from James, The Optical Principles of the Diffraction of X-rays, 1948
# (three dimensions); in units of d_min = 2π/G_max, with the response in u = G_max r.
RESPONSES = {
    1: lambda u: np.sinc(u / np.pi),
    2: lambda u: 2 * special.j1(u) / u,
    3: lambda u: 3 * special.spherical_jn(1, u) / u,
}
FIRST_ZERO = {1: 0.500, 2: 0.610, 3: 0.715}
FULL_WIDTH = {1: 0.603, 2: 0.705, 3: 0.795}

D_MIN = 1.0
OBLIQUE = {
    1: Lattice.from_period(1000.5),
    2: Lattice.from_planar_parameters(431, 447, 103),
    3: Lattice.from_parameters(57, 61, 64, 82, 97, 105),
}
"""Big cells: some 10⁴ (3-D) to 10⁵ spots to the volume of a response. Oblique, so that the sphere of
coefficients is round in Å⁻¹ and not in indices. The period ends half an order beyond the last one,
where the sum over 2N + 1 orders has the limits of the integral."""
LATTICE_BOUND = 3e-4
"""Of d_min: what the ragged rim of a complete set does to its radius; measured, up to 1.3e-4."""


@cache
def complete_set(dimension: int) -> CoefficientSet:
    """Every G with |G| ≤ 2π/d_min, one of each pair, with strengths that must not matter."""
    lattice = OBLIQUE[dimension]
    g_max = 2 * np.pi / D_MIN
    bounds = [int(g_max * length / (2 * np.pi)) + 1 for length in lattice.lengths]
    # The leading index from 0 up: half of the pairs, and for index 0 both, which are then joined.
    axes = [np.arange(0 if axis == 0 else -bound, bound + 1) for axis, bound in enumerate(bounds)]
    indices = np.stack(np.meshgrid(*axes, indexing="ij"), axis=-1).reshape(-1, dimension)
    indices = indices[lattice.magnitudes(indices) <= g_max]
    strengths = 1 + np.abs(indices).sum(axis=1)
    columns = Columns(indices=list(indices.T), amplitude=strengths, phase_deg=np.zeros(len(indices)))
    return assemble(lattice, columns, values="density_coefficient")


def crossing(radii: np.ndarray, values: np.ndarray, level: float) -> float:
    """Where sampled values first fall to a level, interpolated."""
    after = int(np.flatnonzero(values <= level)[0])
    share = (values[after - 1] - level) / (values[after - 1] - values[after])
    return float(radii[after - 1] + share * (radii[after] - radii[after - 1]))


@pytest.mark.parametrize("dimension", [1, 2, 3])
def test_closed_forms_have_the_zeros_and_widths_of_the_conventions(dimension):
    """Check 10: Bessel zeros by scipy.special; bound half a unit of the last digit written."""
    response = RESPONSES[dimension]
    zero = optimize.brentq(response, 2.0, 5.0) / (2 * np.pi)
    half = optimize.brentq(lambda u: response(u) - 0.5, 0.5, 3.0) / (2 * np.pi)
    assert zero == pytest.approx(FIRST_ZERO[dimension], abs=0.5e-3)
    assert 2 * half == pytest.approx(FULL_WIDTH[dimension], abs=0.5e-3)


@pytest.mark.parametrize("direction", ["along x", "diagonal"])
@pytest.mark.parametrize("dimension", [1, 2, 3])
def test_a_point_is_as_wide_as_its_complete_set_makes_it(dimension, direction):
    """Check 10 through the engine: the response of a complete set out to G_max, along a line."""
    coefficients = complete_set(dimension)
    step = np.eye(dimension)[0] if direction == "along x" else np.ones(dimension) / dimension**0.5
    where = sampling.line(coefficients.lattice, np.zeros(dimension), step * D_MIN, 2001, coordinates="cartesian")
    field = evaluate(coefficients, where, Treatment(field="response"))
    radii, values = field.axes[0].coordinates(), field.values

    response = RESPONSES[dimension]
    u = 2 * np.pi * radii[1:] / D_MIN
    assert values[0] == pytest.approx(1, abs=1e-9)
    # The whole curve: 1 at the origin down to the first negative lobe and up again.
    np.testing.assert_allclose(values[1:], response(u), atol=2e-3)
    zero = optimize.brentq(response, 2.0, 5.0) / (2 * np.pi) * D_MIN
    half = optimize.brentq(lambda v: response(v) - 0.5, 0.5, 3.0) / (2 * np.pi) * D_MIN
    assert crossing(radii, values, 0.0) == pytest.approx(zero, abs=LATTICE_BOUND)
    assert 2 * crossing(radii, values, 0.5) == pytest.approx(2 * half, abs=LATTICE_BOUND)
    assert field.resolution[0] == pytest.approx(D_MIN, rel=1e-3)


@pytest.mark.parametrize("terms", [500, 4000])
@pytest.mark.parametrize(("window", "expected"), [("none", 0.08949), ("lanczos", 0.01187)])
def test_the_overshoot_reported_for_a_window_is_that_of_the_step_summed(terms, window, expected):
    """Check 9 through the comparison of windows, which knows the terms but no density."""
    orders = np.arange(1, 2 * terms + 1)
    columns = Columns(indices=[orders], real=1 / orders, imag=np.zeros(orders.size))
    given = assemble(Lattice.from_period(PERIOD), columns, values="density_coefficient", mean=0.5)
    (found,) = compare_windows(given, windows=[Window(window)])
    assert found.overshoot == pytest.approx(expected, abs=0.5e-5)
    # The square wave of odd orders alone, summed on samples: the same terms make the same ripple.
    values = near_the_step(step_profile(terms), terms, window)
    assert found.overshoot == pytest.approx(values.max() - 1, abs=2e-6)
    assert found.step_orders == 2 * terms

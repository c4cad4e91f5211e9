"""The model of positions: Bragg's law written out, derivatives by differences, the least squares by a library."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import optimize

from engine.errors import InputError
from engine.films.positions import Model, covariance_of, critical_square, refine

CU = 1.5405929


def written_out(order, period, critical, zero_deg, ratio):
    """2θ in degrees, step by step."""
    inner = 2 * math.pi * order / period
    outer = math.sqrt(inner**2 + critical)
    theta = math.asin(outer * CU / (4 * math.pi))
    return math.degrees(2 * theta - 2 * ratio * math.cos(theta)) + zero_deg


@given(
    period=st.floats(14, 200),
    critical=st.floats(-2e-4, 2e-3),
    zero=st.floats(-0.2, 0.2),
    ratio=st.floats(-2e-3, 2e-3),
)
def test_positions_are_those_of_the_formulas(period, critical, zero, ratio):
    orders = np.array([1.0, 2.0, 5.0])
    if (2 * math.pi / period) ** 2 + critical <= 1e-6:
        return
    expected = [written_out(order, period, critical, zero, ratio) for order in orders]
    angle = Model("two_theta", CU, orders, critical).positions(math.log(period), math.radians(zero), ratio)[0]
    np.testing.assert_allclose(angle, expected, rtol=1e-11)
    q = Model("q", CU, orders, critical).positions(math.log(period), math.radians(zero), ratio)[0]
    np.testing.assert_allclose(q, 4 * np.pi / CU * np.sin(np.radians(expected) / 2), rtol=1e-11)


@pytest.mark.parametrize("kind", ["two_theta", "q"])
@pytest.mark.parametrize("critical", [0.0, 9e-4])
def test_derivatives_are_those_of_differences(kind, critical):
    model = Model(kind, CU, np.array([1.0, 2.0, 5.0, 9.0]), critical)
    point = np.array([math.log(31.0), 1e-3, -4e-4])
    slopes = model.radians(*point)[1]
    for place in range(3):
        step = np.zeros(3)
        step[place] = 1e-6
        difference = (model.radians(*(point + step))[0] - model.radians(*(point - step))[0]) / 2e-6
        np.testing.assert_allclose(slopes[:, place], difference, rtol=1e-7)


def test_without_a_wavelength_q_depends_on_the_period_alone():
    found, slopes = Model("q", None, np.array([1.0, 3.0]), 0.0).radians(math.log(31.0), 0.0, 0.0)
    np.testing.assert_allclose(found, 2 * np.pi * np.array([1, 3]) / 31, rtol=1e-14)
    assert not slopes[:, 1:].any()


def test_critical_squares_of_water_and_its_heavy_kind():
    """q_c of water 0.0217 Å⁻¹ for X-rays (0.334 e/Å³); for neutrons 0.0179 with D₂O (6.4), imaginary with H₂O."""
    assert math.sqrt(critical_square(0.334, "xray")) == pytest.approx(4 * math.sqrt(math.pi * 2.8179403e-5 * 0.334))
    assert math.sqrt(critical_square(0.334, "xray")) == pytest.approx(0.0217, abs=1e-4)
    assert math.sqrt(critical_square(6.4, "neutron")) == pytest.approx(0.0179, abs=1e-4)
    assert critical_square(-0.56, "neutron") < 0


def test_the_least_is_that_of_another_minimiser():
    rng = np.random.default_rng(2)
    orders = np.arange(1.0, 10.0)
    model = Model("two_theta", CU, orders, 5e-4)
    spread = rng.uniform(5e-5, 2e-4, 9)
    measured = model.radians(math.log(20.0), 1e-3, 3e-4)[0] + spread * rng.normal(size=9)
    start = np.array([math.log(20.3), 0.0, 0.0])
    found, jacobian = refine(model, measured, spread, start, np.array([True, True, True]))

    def chi_squared(values):
        return np.sum(((measured - model.radians(values[0], 1e-3 * values[1], 1e-3 * values[2])[0]) / spread) ** 2)

    simplex = optimize.minimize(
        chi_squared, [math.log(20.0), 0.0, 0.0], method="Nelder-Mead", options={"xatol": 1e-10, "fatol": 1e-10}
    )
    scaled = found * [1, 1e3, 1e3]
    assert chi_squared(scaled) <= simplex.fun + 1e-6
    np.testing.assert_allclose(
        covariance_of(jacobian, ("a", "b", "c")), np.linalg.inv(jacobian.T @ jacobian), rtol=1e-6
    )


def test_parameters_not_refined_stay():
    model = Model("two_theta", CU, np.arange(1.0, 5.0), 0.0)
    measured = model.radians(math.log(20.0), 1e-3, 0.0)[0]
    found, jacobian = refine(
        model, measured, np.ones(4), np.array([math.log(21.0), 1e-3, 0.0]), np.array([True, False, False])
    )
    np.testing.assert_allclose(found, [math.log(20.0), 1e-3, 0.0], atol=1e-10)
    assert jacobian.shape == (4, 1)


def test_columns_that_are_parallel_are_refused():
    with pytest.raises(InputError, match="do not tell a and b apart"):
        covariance_of(np.array([[1.0, 2.0], [2.0, 4.0], [3.0, 6.0]]), ("a", "b"))

"""Orders of a film: what is refused, and the coefficient set against the series written out."""

from __future__ import annotations

import numpy as np
import pytest

from engine.evaluate import evaluate
from engine.fields import Treatment
from engine.films.orders import FilmOrders
from engine.sampling import lattice_line
from tests.strategies import refusal_of

PERIOD = 21.5
ORDER = [3, 1, 4, 2, 6]
AMPLITUDE = [2.0, 5.5, 0.0, 3.25, 1.5]
SIGMA = [0.3, 0.1, 0.4, 0.2, 0.5]
PHASE = [180.0, 0.0, 0.0, 73.0, -41.0]


def series(z, orders, amplitudes, phases, mean=0.0):
    """Mean + (2/d) Σ |F| cos(2πlz/d − φ): n_l = F_{−l}/d = conj(F_l)/d of a real density."""
    total = np.full_like(z, mean)
    for order, amplitude, phase in zip(orders, amplitudes, phases, strict=True):
        total += 2 / PERIOD * amplitude * np.cos(2 * np.pi * order * z / PERIOD - np.radians(phase))
    return total


def made(**more):
    return FilmOrders.of(PERIOD, ORDER, AMPLITUDE, SIGMA, **more)


def profile(orders, phases, mean=None):
    found = evaluate(orders.coefficients(phases, mean), lattice_line(orders.coefficients(phases).lattice, [1], 101))
    return np.asarray(found.values)


def test_rows_are_sorted_by_order_with_their_columns():
    found = made(period_sigma=0.02)
    assert found.order.tolist() == [1, 2, 3, 4, 6]
    assert found.amplitude.tolist() == [5.5, 3.25, 2.0, 0.0, 1.5]
    assert found.sigma.tolist() == [0.1, 0.2, 0.3, 0.4, 0.5]
    assert (found.count, found.period, found.period_sigma) == (5, PERIOD, 0.02)
    assert (found.scale, found.unit, found.scale_sigma) == ("arbitrary", "arbitrary", 0.0)


def test_no_sigma_stays_none():
    assert FilmOrders.of(PERIOD, ORDER, AMPLITUDE).sigma is None


@pytest.mark.parametrize(
    ("order", "amplitude", "sigma", "period", "path"),
    [
        ([], [], None, PERIOD, "order"),
        ([[1, 2]], [1.0, 2.0], None, PERIOD, "order"),
        ([1, 1.5], [1.0, 2.0], None, PERIOD, "order"),
        ([0, 1], [1.0, 2.0], None, PERIOD, "order"),
        ([-1, 1], [1.0, 2.0], None, PERIOD, "order"),
        ([np.nan, 1], [1.0, 2.0], None, PERIOD, "order"),
        ([2, 1, 2], [1.0, 2.0, 3.0], None, PERIOD, "order"),
        ([1, 2], [1.0, -2.0], None, PERIOD, "amplitude"),
        ([1, 2], [1.0, np.nan], None, PERIOD, "amplitude"),
        ([1, 2], [1.0], None, PERIOD, "amplitude"),
        ([1, 2], [1.0, 2.0], [0.1, -0.1], PERIOD, "sigma"),
        ([1, 2], [1.0, 2.0], [0.1, np.inf], PERIOD, "sigma"),
        ([1, 2], [1.0, 2.0], [0.1], PERIOD, "sigma"),
        ([1, 2], [1.0, 2.0], None, 0.0, "period"),
        ([1, 2], [1.0, 2.0], None, -3.0, "period"),
        ([1, 2], [1.0, 2.0], None, np.nan, "period"),
    ],
)
def test_refusals(order, amplitude, sigma, period, path):
    assert refusal_of(lambda: FilmOrders.of(period, order, amplitude, sigma)).path[0] == path


def test_coefficients_sum_to_the_series_written_out():
    found = made()
    z = np.linspace(0, PERIOD, 101)
    order = np.argsort(ORDER)
    phases = np.array(PHASE)[order]
    expected = series(z, ORDER, AMPLITUDE, PHASE, mean=0.37)
    assert np.abs(profile(found, phases, 0.37) - expected).max() < 1e-12
    assert np.abs(profile(found, phases) - (expected - 0.37)).max() < 1e-12


def test_unphased_orders_are_left_out_of_the_profile_and_counted():
    phases = np.array([0.0, np.nan, 180.0, 0.0, np.nan])
    held = made().coefficients(phases, 0.2)
    assert held.unphased == 2
    z = np.linspace(0, PERIOD, 101)
    expected = series(z, [1, 3], [5.5, 2.0], [0.0, 180.0], mean=0.2)
    assert np.abs(profile(made(), phases, 0.2) - expected).max() < 1e-12


def test_merit_weights_the_amplitudes_where_that_is_asked_for():
    merit = np.array([0.9, 0.8, 0.5, 1.0, 0.0])
    phases = np.zeros(5)
    held = made().coefficients(phases, merit=merit)
    line = lattice_line(held.lattice, [1], 101)
    found = np.asarray(evaluate(held, line, Treatment(apply_merit=True)).values)
    z = np.linspace(0, PERIOD, 101)
    expected = series(z, [1, 2, 3, 4, 6], np.array([5.5, 3.25, 2.0, 0.0, 1.5]) * merit, phases)
    assert np.abs(found - expected).max() < 1e-12


def test_profile_sigma_is_that_of_the_amplitudes():
    held = made().coefficients(np.zeros(5), 0.3)
    line = lattice_line(held.lattice, [1], 101)
    found = evaluate(held, line, uncertainty=True)
    z = np.linspace(0, PERIOD, 101)
    waves = 2 / PERIOD * np.cos(2 * np.pi * np.outer([1, 2, 3, 4, 6], z) / PERIOD)
    # An amplitude of 0 has no phase: its error is as large in every phase, the mean of cos² is a half.
    waves[3] = 2 / PERIOD * np.sqrt(0.5)
    expected = np.sqrt((waves**2).T @ np.array([0.1, 0.2, 0.3, 0.4, 0.5]) ** 2)
    assert np.abs(found.sigma.values - expected).max() < 1e-12


def test_scaling_multiplies_amplitudes_and_sigma_and_says_so():
    found = made().scaled(3.0, scale_sigma=0.05, unit="e/Å³", words="scaled by 3 from a guess")
    assert np.allclose(found.amplitude, 3 * made().amplitude, rtol=1e-15)
    assert np.allclose(found.sigma, 3 * made().sigma, rtol=1e-15)
    assert (found.scale, found.unit, found.scale_sigma) == ("absolute", "e/Å³", 0.05)
    again = found.scaled(2.0, unit="e/Å³", words="and doubled")
    assert again.applied == ("scaled by 3 from a guess", "and doubled")
    held = found.coefficients(np.zeros(5), 0.3)
    assert held.history == ("scaled by 3 from a guess",)
    assert held.scale_sigma == 0.05
    assert held.unit == "e/Å³"


def test_phases_of_another_length_are_refused():
    assert refusal_of(lambda: made().coefficients([0.0, 180.0])).path[-1] in ("phase_deg", "phase")

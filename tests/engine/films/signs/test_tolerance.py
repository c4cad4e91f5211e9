import math

import numpy as np
import pytest

from engine.films.orders import FilmOrders
from engine.films.signs.tolerance import expected_strengths, stack_of
from engine.resolution.envelope import Envelope
from tests.engine.films.signs.problems import film


def test_expected_strengths_are_the_mean_over_all_falls():
    """The unknowns summed over on fine grids, from the normal distributions themselves."""
    order, amplitude = np.array([1, 2, 3, 5]), np.array([3.0, 1.4, 0.8, 0.5])
    wanted = np.array([4, 7])
    log_c = np.linspace(-6, 40, 1500)[:, None]
    total, mean = 0.0, np.zeros(2)
    for power in (0, 1, 2):
        low = (2 - power) / 4
        # Middles of 400 steps: no ends to be halved.
        falls = low + (9 - low) * (np.arange(400) + 0.5) / 400
        # Each power has the same prior, spread over its falls.
        joint = np.ones((1500, 400))
        for l, value in zip(order, amplitude, strict=True):
            variance = np.exp(log_c - falls * l**2 / 25) / l**power
            joint *= np.exp(-0.5 * value**2 / variance) / np.sqrt(variance)
        total += joint.sum()
        for place, l in enumerate(wanted):
            mean[place] += (joint * np.exp(log_c - falls * l**2 / 25) / l**power).sum()
    found = expected_strengths(FilmOrders.of(30.0, order, amplitude), wanted)
    np.testing.assert_allclose(found, mean / total, rtol=3e-3)


def test_strengths_scale_as_the_amplitudes_do():
    orders = film(7, 3)
    beyond = np.array([8, 9, 20])
    doubled = FilmOrders.of(42.0, orders.order, 2 * orders.amplitude)
    np.testing.assert_allclose(expected_strengths(doubled, beyond), 4 * expected_strengths(orders, beyond), rtol=1e-12)


def test_sharp_edges_and_smeared_ones_are_told_apart():
    order = np.arange(1, 13)
    sharp = FilmOrders.of(40.0, order, 5.0 / order)
    smeared = FilmOrders.of(40.0, order, 5.0 / order * np.exp(-0.5 * 5 * (order / 12) ** 2))
    beyond = np.array([13])
    assert math.sqrt(expected_strengths(sharp, beyond)[0]) == pytest.approx(5 / 13, rel=0.35)
    expected = 5 / 13 * math.exp(-0.5 * 5 * (13 / 12) ** 2)
    # Of what twelve orders leave open, slower falls weigh most.
    assert expected < math.sqrt(expected_strengths(smeared, beyond)[0]) < 2 * expected


def test_a_stack_lists_what_is_missing_inside_and_beyond():
    orders = film(6, 1, missing=(4,))
    stack = stack_of(orders, None)
    assert stack.top == 7
    assert stack.other_order[0] == 4
    np.testing.assert_array_equal(stack.other_order[1:], np.arange(8, 57))
    np.testing.assert_allclose(stack.variance, orders.sigma**2)
    assert any("Not measured below the highest order: 4;" in line for line in stack.words)


def test_a_given_envelope_is_used_as_it_is():
    stack = stack_of(film(3, 1), Envelope.from_bound(0.2, 30.0))
    l = stack.other_order
    np.testing.assert_allclose(np.sqrt(stack.other_variance), 42 * 0.2 * np.exp(-30 * (l / 84) ** 2), rtol=1e-12)


def test_the_scale_adds_to_the_errors_and_missing_sigmas_are_told():
    orders = FilmOrders.of(42.0, [1, 2], [3.0, 4.0]).scaled(1.0, scale_sigma=0.1, unit="e/Å³", words="scaled")
    stack = stack_of(orders, None)
    np.testing.assert_allclose(stack.variance, [0.09, 0.16])
    assert any(line.startswith("No σ") for line in stack.words)
    assert any("10 %" in line for line in stack.words)


def test_orders_without_a_sign_become_errors():
    stack = stack_of(film(4, 1), None)
    part = stack.only(np.array([True, False, True, False]))
    assert part.order.tolist() == [1, 3]
    assert part.other_order[-2:].tolist() == [2, 4]
    np.testing.assert_allclose(part.other_variance[-2:], (stack.amplitude**2 + stack.variance)[[1, 3]])
    assert part.top == stack.top
    assert part.errors()[0].size == stack.errors()[0].size

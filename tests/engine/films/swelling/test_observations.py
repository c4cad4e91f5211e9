"""Orders of a swelling series side by side."""

from __future__ import annotations

import numpy as np
import pytest

from engine import InputError
from engine.films.orders import FilmOrders
from engine.films.swelling.observations import MOST_ORDERS, check_series, gather
from engine.films.swelling.transform import basis_slope


def pair(**more):
    first = FilmOrders.of(20.0, [1, 2, 4], [5.0, 3.0, 1.0], [0.2, 0.1, 0.1], **more)
    return [first, FilmOrders.of(26.0, [1, 3], [4.0, 2.0], [0.3, 0.2])]


def test_orders_are_sorted_by_q_and_found_again():
    seen = gather(pair(), 20.0, relative_sigma=None, model_error=0.0)
    q = 2 * np.pi * np.array([1 / 26, 1 / 20, 2 / 20, 3 / 26, 4 / 20])
    np.testing.assert_allclose(seen.q, q)
    np.testing.assert_array_equal(seen.amplitude, [4, 5, 3, 2, 1])
    np.testing.assert_array_equal(seen.sigma, [0.3, 0.2, 0.1, 0.2, 0.1])
    back = seen.by_set(seen.amplitude)
    np.testing.assert_array_equal(back[0], [5, 3, 1])
    np.testing.assert_array_equal(back[1], [4, 2])


def test_the_models_error_is_added_to_each_sigma():
    seen = gather(pair(), 20.0, relative_sigma=None, model_error=0.1)
    rms = np.array([np.sqrt((16 + 4) / 2), np.sqrt((25 + 9 + 1) / 3)])
    np.testing.assert_allclose(seen.sigma[:2] ** 2, np.array([0.09, 0.04]) + (0.1 * rms) ** 2)


def test_a_missing_sigma_is_assumed_where_asked():
    sets = [pair()[0], FilmOrders.of(26.0, [1, 3], [4.0, 2.0])]
    seen = gather(sets, 20.0, relative_sigma=0.05, model_error=0.0)
    np.testing.assert_allclose(seen.by_set(seen.sigma)[1], [0.2, 0.1])
    np.testing.assert_allclose(seen.by_set(seen.sigma)[0], [0.2, 0.1, 0.1])


def test_an_uncertain_period_widens_by_the_expected_slope():
    seen = gather(pair(period_sigma=0.04), 20.0, relative_sigma=None, model_error=0.0)
    plain = gather(pair(), 20.0, relative_sigma=None, model_error=0.0)
    slope = basis_slope(seen.q, 20.0, seen.weights.shape[1]) ** 2 @ plain.expected_squares(np.ones(2))
    added = np.where(seen.which == 0, (seen.q * 0.002) ** 2 * slope, 0.0)
    np.testing.assert_allclose(seen.sigma**2, plain.sigma**2 + added)
    assert (added[seen.which == 0] > 0).all()


def test_expected_squares_are_those_of_the_amplitudes_near():
    flat = [FilmOrders.of(d, np.arange(1, 9), np.full(8, 2.0), np.full(8, 0.1)) for d in (20.0, 23.0, 26.0)]
    made = gather(flat, 20.0, relative_sigma=None, model_error=0.0).expected_squares(np.ones(3))
    np.testing.assert_allclose(made[1:], 4.0)
    assert made[0] == 16.0
    half = gather(flat, 20.0, relative_sigma=None, model_error=0.0).expected_squares(np.full(3, 2.0))
    np.testing.assert_allclose(half, made / 4)


def orders(d, sigma=0.0, scale="arbitrary", count=3):
    l = np.arange(1, count + 1)
    return FilmOrders.of(d, l, np.ones(count), np.ones(count), period_sigma=sigma, scale=scale)


@pytest.mark.parametrize(
    ("sets", "place"),
    [
        ([orders(20.0)], "one period only"),
        ([], "one period only"),
        ([orders(20.0), orders(20.01)], "equal within"),
        ([orders(20.0, 0.3), orders(21.0, 0.3)], "equal within"),
        ([orders(20.0), orders(24.0, scale="absolute")], "scale or unit"),
        ([orders(20.0), FilmOrders.of(24.0, [1], [0.0])], "zero throughout"),
        ([orders(20.0, count=MOST_ORDERS), orders(24.0)], "at most"),
    ],
)
def test_refusals(sets, place):
    with pytest.raises(InputError, match=place):
        check_series(sets)


def test_sigmas_are_wanted():
    bare = [FilmOrders.of(20.0, [1], [1.0]), orders(24.0)]
    with pytest.raises(InputError, match="sigma"):
        gather(bare, 20.0, relative_sigma=None, model_error=0.01)
    exact = [FilmOrders.of(20.0, [1], [1.0], [0.0]), orders(24.0)]
    with pytest.raises(InputError, match="is zero"):
        gather(exact, 20.0, relative_sigma=None, model_error=0.0)

"""Starts and ends of the search for a trial stack."""

from __future__ import annotations

import numpy as np
import pytest

from engine.films.orders import FilmOrders
from engine.films.trial import Plane, Stack, calculated
from engine.films.trial.search import inside, places, rivals, search

INF = np.inf


def test_the_first_start_is_the_model_and_all_lie_strictly_within_the_bounds():
    names, begin = ("a.position", "a.width", "scale"), np.array([2.0, 0.0, 3.0])
    low, high = np.array([-INF, 0.0, 1.0]), np.array([INF, INF, 9.0])
    made = places(names, begin, low, high, 40)
    np.testing.assert_allclose(made[0], inside(begin, low, high))
    np.testing.assert_allclose(made[0], begin, atol=1e-3)
    assert (made > low).all()
    assert (made < high).all()
    # Bounds on both sides are filled; without, the start's surroundings are.
    assert np.ptp(made[:, 2]) > 6
    assert 0.9 < np.ptp(made[:, 0]) <= 1.2
    assert np.unique(made, axis=0).shape == (40, 3)
    np.testing.assert_array_equal(made, places(names, begin, low, high, 40))


def test_a_search_ends_at_the_minimum():
    end = search(
        lambda x: np.array([x[0] - 2, 3 * (x[1] + 1)]),
        np.array([0.5, 0.5]),
        np.array([-INF, -0.5]),
        np.array([INF, INF]),
        np.ones(2),
        exact=True,
    )
    np.testing.assert_allclose(end.x, [2, -0.5], atol=1e-6)


class End:
    def __init__(self, x, cost):
        self.x, self.cost = np.array([x]), cost


def test_rivals_differ_in_signs():
    model = Stack.of(10.0, [Plane.of("a", 0.0, strength=1.0), Plane.of("b", 5.0, strength=0.5)], symmetry="m")
    orders = FilmOrders.of(10.0, [1, 2, 3], [1.0, 1.0, 1.0])
    ends = [End(0.5, 1.0), End(0.6, 1.1), End(2.0, 3.0), End(2.5, 4.0), End(-3.0, 5.0)]
    made = rivals(model, orders, ("b.strength",), np.array([0.5]), ends)
    # F_l = 1 + (−1)^l b: b above 1 turns the odd orders, below −1 the even ones.
    assert [(rival.values[0], rival.sign_changes) for rival in made] == [(2.0, (1, 3)), (-3.0, (2,))]
    assert [rival.chi_square for rival in made] == [6.0, 10.0]
    assert calculated(model, [1])[0] == pytest.approx(0.5)

"""Orders of a request."""

from __future__ import annotations

import numpy as np
import pytest

from service.films.orders import orders_of
from service.problems import Problem
from service.schemas.film_models import OrdersIn


def given(**members):
    return OrdersIn.model_validate({"period": 20.0, "order": [2, 1], "amplitude": [1.0, 3.0], **members})


def test_columns_are_sorted_and_keep_their_scale():
    made = orders_of(given(sigma=[0.1, 0.2], absolute=True, unit="e/Å³", period_sigma=0.01), ("orders",))
    np.testing.assert_array_equal(made.order, [1, 2])
    np.testing.assert_array_equal(made.amplitude, [3, 1])
    np.testing.assert_array_equal(made.sigma, [0.2, 0.1])
    assert (made.scale, made.unit, made.period_sigma) == ("absolute", "e/Å³", 0.01)
    assert orders_of(given(), ("orders",)).scale == "arbitrary"


@pytest.mark.parametrize(
    ("members", "pointer"),
    [
        ({"order": [1, 1]}, "/sets/3/order"),
        ({"order": [0, 1]}, "/sets/3/order"),
        ({"amplitude": [1.0, -1.0]}, "/sets/3/amplitude"),
        ({"sigma": [1.0]}, "/sets/3/sigma"),
    ],
)
def test_faults_point_below_their_place(members, pointer):
    with pytest.raises(Problem) as caught:
        orders_of(given(**members), ("sets", 3))
    assert caught.value.places[0].pointer == pointer

"""What fixes the common sign."""

from __future__ import annotations

import numpy as np
import pytest

from engine import InputError
from engine.films.swelling import UNDECIDED, excess, known_order, never_negative, total
from engine.films.swelling.orientation import penalties

NODES = np.array([[3.0, 1.0, 0.5], [-1.0, 2.0, 0.1]])
COVARIANCE = np.diag([0.25, 0.01, 0.01])


def test_an_excess_costs_what_it_takes_to_bring_t0_to_zero():
    made = penalties(excess("positive"), NODES, COVARIANCE, 10.0)
    np.testing.assert_allclose(made, [[0, 36], [4, 0]])
    np.testing.assert_allclose(penalties(excess("negative"), NODES, COVARIANCE, 10.0), made[:, ::-1])


def test_a_total_is_one_more_measurement():
    made = penalties(total(2.0, 0.5), NODES, COVARIANCE, 10.0)
    np.testing.assert_allclose(made, [[1 / 0.5, 25 / 0.5], [9 / 0.5, 1 / 0.5]])


def test_a_density_below_zero_counts_in_its_sigma():
    """A constant contrast c = T_0/D: −0.3 in a solvent of 0.2 is 0.1 below zero, with σ = 0.5/10."""
    nodes, covariance = np.array([[3.0, 0.0, 0.0]]), np.diag([0.25, 0.0, 0.0])
    made = penalties(never_negative(0.2), nodes, covariance, 10.0)
    np.testing.assert_allclose(made, [[0.0, (0.1 / 0.05) ** 2]])


def test_nothing_known_costs_nothing():
    assert not penalties(UNDECIDED, NODES, COVARIANCE, 10.0).any()


@pytest.mark.parametrize(
    "call",
    [
        lambda: excess("up"),
        lambda: total(np.nan, 1.0),
        lambda: total(1.0, 0.0),
        lambda: known_order(-1, 1, "positive"),
        lambda: known_order(0, 0, "positive"),
        lambda: known_order(0, 1, "yes"),
        lambda: never_negative(np.inf),
    ],
)
def test_refusals(call):
    with pytest.raises(InputError):
        call()

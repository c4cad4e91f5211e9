"""Distances between layers, and their σ with the covariance of two places."""

from __future__ import annotations

import numpy as np
import pytest

from engine import Columns, assemble
from engine import sampling as where
from engine.features.layer_distances import layer_distances, layer_spacings
from engine.features.layers import layers, stack_layers
from tests.engine.features.drawn import doubled, draws, uncertain
from tests.engine.features.stacks import CROWDED, PERIOD, Drawn, gaussians
from tests.strategies import STACK, refusal_of

MADE = uncertain(gaussians(CROWDED, orders=20), relative=1e-3, phase=1e-3)
FOUND = stack_layers(MADE, [1], least_prominence=0.01)


def test_all_pairs():
    made = layer_distances(FOUND)
    assert list(zip(made.first, made.second, strict=True)) == [(0, 1), (0, 2), (0, 3), (1, 2), (1, 3), (2, 3)]
    np.testing.assert_allclose(made.distance, FOUND.position[made.second] - FOUND.position[made.first])
    assert not made.periods.any()


@pytest.mark.parametrize("of", ["position", "centroid"])
def test_spacings_go_round_the_period(of):
    made = layer_spacings(FOUND, of=of)
    assert list(made.second) == [1, 2, 3, 0]
    assert list(made.periods) == [0, 0, 0, 1]
    assert made.distance.sum() == pytest.approx(PERIOD)
    assert (made.distance > 0).all()


def test_sigma_is_that_of_draws():
    orders, weight = doubled(MADE)
    drawn = Drawn(orders[:, 0], weight, draws(MADE, 4000), PERIOD)
    places = np.stack([drawn.extremum(place) for place in FOUND.position])
    made = layer_spacings(FOUND)
    spread = (places[made.second] - places[made.first]).std(axis=1, ddof=1)
    np.testing.assert_allclose(made.sigma, spread, rtol=0.06)


def test_what_moves_together_keeps_its_distance():
    """All maxima of one cosine shift with its phase: their distances have no error at all."""
    columns = Columns(indices=[[3]], amplitude=[1.0], phase_deg=[10.0], phase_sigma_deg=[0.5])
    found = stack_layers(assemble(STACK, columns, values="density_coefficient"), [1])
    assert (found.position_sigma > 0.01).all()
    np.testing.assert_allclose(layer_distances(found).sigma, 0, atol=1e-9)


def test_chosen_pairs_and_periods():
    made = layer_distances(FOUND, [[2, 0, 1], [0, 0, 2], [3, 1, 0]])
    np.testing.assert_allclose(
        made.distance,
        [
            FOUND.position[0] + PERIOD - FOUND.position[2],
            2 * PERIOD,
            FOUND.position[1] - FOUND.position[3],
        ],
    )
    assert made.sigma[1] == pytest.approx(0, abs=1e-12)


def test_an_open_line_has_one_spacing_fewer():
    line = where.line(MADE.lattice, [9 / PERIOD], [47 / PERIOD], 30)
    found = layers(MADE, line, least_prominence=0.01)
    assert layer_spacings(found).distance.shape == (3,)
    assert refusal_of(lambda: layer_distances(found, [[0, 1, 1]])).path == ("pairs",)


def test_one_layer_alone():
    line = where.line(MADE.lattice, [9 / PERIOD], [12 / PERIOD], 30)
    found = layers(MADE, line, least_prominence=0.01)
    assert found.count == 1
    assert layer_spacings(found).distance.shape == (0,)


def test_no_uncertainties():
    assert layer_distances(stack_layers(gaussians(CROWDED, orders=20), [1])).sigma is None


@pytest.mark.parametrize("pairs", [[[0, 9]], [[-1, 0]], [[0.5, 1]], [[0, 1, 0, 0]], [0, 1], [[0]]])
def test_refusals(pairs):
    assert refusal_of(lambda: layer_distances(FOUND, pairs)).path[0] == "pairs"


def test_a_place_that_is_not_known():
    assert refusal_of(lambda: layer_distances(FOUND, of="edge")).path == ("of",)

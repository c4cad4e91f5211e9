"""Free points."""

from __future__ import annotations

import numpy as np
import pytest

from engine.sampling import FreePoints, points
from tests.strategies import CRYSTAL, LATTICES, refusal_of


@pytest.mark.parametrize("dimension", [1, 2, 3])
def test_points_in_both_coordinates(dimension):
    lattice = LATTICES[dimension]
    x = np.random.default_rng(4).uniform(-3, 3, (7, dimension))
    made = points(lattice, x.tolist())
    assert isinstance(made, FreePoints)
    np.testing.assert_array_equal(made.positions(), x)
    cartesian = points(lattice, x @ lattice.vectors, coordinates="cartesian")
    np.testing.assert_allclose(cartesian.positions(), x, atol=1e-13)


@pytest.mark.parametrize(
    ("value", "path"),
    [
        ([], ("positions",)),
        (np.empty((0, 3)), ("positions",)),
        ([0, 0, 0], ("positions",)),
        ([[0, 0]], ("positions",)),
        ([[0, 0, 0], [0, 0]], ("positions",)),
        ([[0, 0, 0], [0, np.nan, 0]], ("positions", 1, 1)),
        ([["0", "0", "0"]], ("positions",)),
    ],
    ids=["nothing", "no rows", "one row", "two columns", "ragged", "not finite", "words"],
)
def test_points_that_are_refused(value, path):
    assert refusal_of(lambda: points(CRYSTAL, value)).path == path

"""Positions and vectors as a caller gives them."""

from __future__ import annotations

import numpy as np
import pytest

from engine.sampling.positions import as_fractional, as_fractional_rows, refuse_null
from tests.strategies import CRYSTAL, LATTICES, refusal_of


@pytest.mark.parametrize("dimension", [1, 2, 3])
def test_cartesian_becomes_fractional(dimension):
    lattice = LATTICES[dimension]
    x = np.random.default_rng(1).uniform(-2, 2, (6, dimension))
    r = sum(x[:, j, None] * lattice.vectors[j] for j in range(dimension))
    np.testing.assert_allclose(as_fractional_rows(lattice, r, "cartesian", "positions"), x, atol=1e-13)
    np.testing.assert_allclose(as_fractional(lattice, r[0], "cartesian", "origin"), x[0], atol=1e-13)


def test_fractional_stays_as_it_is():
    x = np.array([[0.1, 0.2, 0.3]])
    np.testing.assert_array_equal(as_fractional_rows(CRYSTAL, x, "fractional", "positions"), x)
    np.testing.assert_array_equal(as_fractional(CRYSTAL, x[0], "fractional", "origin"), x[0])


def test_faults_name_the_place():
    assert refusal_of(lambda: as_fractional(CRYSTAL, [0, 0], "fractional", "origin")).path == ("origin",)
    assert refusal_of(lambda: as_fractional(CRYSTAL, [0, np.nan, 0], "cartesian", "origin")).path == ("origin", 1)
    rows = [[0, 0, 0], [0, 0, np.inf]]
    assert refusal_of(lambda: as_fractional_rows(CRYSTAL, rows, "fractional", "at")).path == ("at", 1, 2)


@pytest.mark.parametrize("call", [as_fractional, as_fractional_rows])
def test_other_coordinates_are_refused(call):
    value = [0.0, 0.0, 0.0] if call is as_fractional else [[0.0, 0.0, 0.0]]
    assert refusal_of(lambda: call(CRYSTAL, value, "polar", "origin")).path == ("coordinates",)


def test_a_vector_without_length_is_refused():
    refuse_null(np.array([0, 1e-300, 0]), "edge_1")
    assert refusal_of(lambda: refuse_null(np.zeros(3), ("edges", 1))).path == ("edges", 1)

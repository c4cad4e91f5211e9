"""Demands, dtypes and the error that arithmetic leaves."""

from __future__ import annotations

import numpy as np
import pytest

from engine.synthesis import DEFAULT_TOLERANCE, Demand, result_dtype
from engine.synthesis.estimate import largest_turns, rounding, turns_on
from tests.strategies import CRYSTAL as LATTICE
from tests.strategies import GRIDS, example, free_points, grid, listing, positions_of, refusal_of


def test_what_is_demanded_by_default():
    assert Demand() == Demand(precision="double", tolerance=DEFAULT_TOLERANCE, threads=1)


def test_an_unknown_precision_is_refused():
    assert refusal_of(lambda: Demand(precision="half")).path == ("precision",)


@pytest.mark.parametrize(
    ("real", "precision", "dtype"),
    [
        (True, "double", np.float64),
        (True, "single", np.float32),
        (False, "double", np.complex128),
        (False, "single", np.complex64),
    ],
)
def test_the_type_of_a_value(real, precision, dtype):
    assert result_dtype(real, precision) == np.dtype(dtype)


def test_rounding_grows_with_phases_of_many_turns():
    assert rounding("double", 0.0) == rounding("double", 100.0) == 1e-12
    assert rounding("single", 1e6) == 1e-5
    assert rounding("double", 1e6) == pytest.approx(1e-9)


@pytest.mark.parametrize("name", GRIDS)
def test_turns_are_a_bound_of_every_phase(name):
    wanted, sampling, _ = example(name, False)
    # Whole cells are taken off the origin first.
    x = positions_of(sampling) - np.rint(sampling.origin)
    turns = np.abs(x.reshape(-1, x.shape[-1]) @ wanted.indices.T).max()
    bound = turns_on(wanted.series(), sampling)
    assert turns <= bound * (1 + 1e-12)


def test_turns_of_free_points_are_those_within_the_cell_around_the_origin():
    series = listing(LATTICE, seed=1).series()
    assert turns_on(series, free_points(3)) == pytest.approx(0.5 * (4 + 3 + 5))


def test_whole_cells_in_an_origin_count_for_nothing():
    series = listing(LATTICE, seed=1).series()
    assert largest_turns(series, np.array([7.0, -3.0, 1e6]), np.zeros(3)) == 0
    near, far = (grid(origin, np.eye(3) / 8, (3, 4, 5)) for origin in ([0.1, 0.2, 0.3], [64.1, 0.2, -63.7]))
    assert turns_on(series, far) == pytest.approx(turns_on(series, near))

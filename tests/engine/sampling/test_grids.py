"""Grids and points as plain data: positions, axes, counts."""

from __future__ import annotations

import numpy as np
import pytest

from engine.sampling import AffineGrid, Axis, FreePoints
from engine.sampling.grids import wrapped
from tests.strategies import CRYSTAL, GRIDS, grid, positions_of


@pytest.mark.parametrize("name", GRIDS)
def test_positions_are_origin_plus_steps(name):
    _, sampling = GRIDS[name]
    positions = sampling.positions()
    assert positions.shape == (*sampling.shape, sampling.origin.size)
    np.testing.assert_allclose(positions, positions_of(sampling), rtol=0, atol=1e-14)
    assert sampling.samples == positions[..., 0].size


def test_axes_are_in_angstrom_along_the_steps():
    sampling = AffineGrid(np.zeros(3), np.array([[0.1, 0, 0], [0, 0.05, 0.05]]), (4, 3), ("across", "up"), (-1.5, 0.25))
    across, up = sampling.axes(CRYSTAL)
    assert (across.label, across.count, up.label, up.count) == ("across", 4, "up", 3)
    np.testing.assert_allclose(across.step, 0.73, rtol=1e-14)
    np.testing.assert_allclose(across.direction, [1, 0, 0], atol=1e-15)
    step = 0.05 * (CRYSTAL.vectors[1] + CRYSTAL.vectors[2])
    np.testing.assert_allclose(up.step, np.linalg.norm(step), rtol=1e-14)
    np.testing.assert_allclose(up.direction, step / np.linalg.norm(step), atol=1e-14)
    np.testing.assert_allclose(across.coordinates(), -1.5 + 0.73 * np.arange(4), rtol=1e-14)
    np.testing.assert_allclose(up.coordinates()[0], 0.25)


def test_coordinates_of_an_axis():
    axis = Axis("distance", 2.0, 0.5, 3, np.array([1.0]))
    np.testing.assert_array_equal(axis.coordinates(), [2.0, 2.5, 3.0])


def test_a_step_of_no_length_has_no_direction():
    (axis,) = grid([0, 0, 0], [[0, 0, 0]], (1,)).axes(CRYSTAL)
    assert axis.step == 0
    assert np.isfinite(axis.direction).all()


def test_samples_may_be_more_than_an_int64_holds():
    assert grid([0, 0, 0], np.eye(3), (10**7, 10**7, 10**7)).samples == 10**21


def test_free_points():
    points = FreePoints(np.arange(6.0).reshape(2, 3))
    assert points.shape == (2,)
    assert points.samples == 2
    assert points.positions() is points.fractional


def test_wrapped_positions_differ_by_whole_cells():
    x = np.random.default_rng(2).uniform(-1e6, 1e6, (50, 3))
    near = wrapped(x)
    assert np.abs(near).max() <= 0.5
    # Exact: the difference of a float and the whole number next to it needs no rounding.
    np.testing.assert_array_equal(x - near, np.rint(x))

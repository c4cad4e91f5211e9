from __future__ import annotations

import numpy as np
import pytest

from engine.errors import InputError
from service.pictures.contours import contour_levels, finer
from service.pictures.options import PictureOptions


def test_levels_are_every_whole_multiple_of_the_step_but_zero():
    found = contour_levels((-0.25, 0.31), None, PictureOptions(level_step=0.1))
    np.testing.assert_allclose(found, [-0.2, -0.1, 0.1, 0.2, 0.3])
    with_zero = contour_levels((-0.25, 0.31), None, PictureOptions(level_step=0.1, zero_contour=True))
    np.testing.assert_allclose(with_zero, [-0.2, -0.1, 0.0, 0.1, 0.2, 0.3])


def test_levels_in_sigma_follow_its_root_mean_square():
    found = contour_levels((-1.0, 2.0), 0.2, PictureOptions(level_sigmas=3.0))
    np.testing.assert_allclose(found, [-0.6, 0.6, 1.2, 1.8])


def test_levels_by_name_are_sorted_and_those_outside_left_out():
    found = contour_levels((0.0, 2.0), None, PictureOptions(levels=(1.5, 0.5, 9.0, 0.5)))
    assert found.tolist() == [0.5, 1.5]


def test_no_levels_unless_asked():
    assert contour_levels((0.0, 2.0), 0.1, PictureOptions()).size == 0


@pytest.mark.parametrize("sigma", [None, 0.0])
def test_levels_in_sigma_without_sigma_are_refused(sigma):
    with pytest.raises(InputError, match="level_sigmas"):
        contour_levels((0.0, 2.0), sigma, PictureOptions(level_sigmas=3.0))


def test_too_many_levels_are_refused_before_they_are_made():
    with pytest.raises(InputError, match="level_step"):
        contour_levels((0.0, 2.0), None, PictureOptions(level_step=1e-12))


def test_a_cubic_is_refined_exactly():
    x, y = np.arange(7.0), np.arange(9.0)
    values = (x**3 - 4 * x)[:, None] + (0.5 * y**2)[None, :]
    first, second, found = finer(values, (4, 3))
    assert (first.size, second.size) == (25, 25)
    np.testing.assert_allclose(found, (first**3 - 4 * first)[:, None] + (0.5 * second**2)[None, :], atol=1e-9)
    np.testing.assert_allclose(found[::4, ::3], values, atol=1e-9)


@pytest.mark.parametrize("shape", [(3, 9), (9, 3)])
def test_short_axes_and_holes_are_left_as_they_are(shape):
    values = np.random.default_rng(1).normal(size=shape)
    np.testing.assert_array_equal(finer(values, (4, 4))[2], values)
    holed = np.ones((8, 8))
    holed[3, 3] = np.nan
    np.testing.assert_array_equal(finer(holed, (4, 4))[2], holed)

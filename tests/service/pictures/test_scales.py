from __future__ import annotations

import numpy as np
import pytest

from engine.errors import InputError
from service.pictures.options import PictureOptions
from service.pictures.palettes import palette
from service.pictures.scales import SHADES, colour_scale, limits, value_range


def test_range_passes_over_what_is_not_finite():
    assert value_range([np.array([np.nan, 2.0, -1.0]), np.array([[5.0, -np.inf]])]) == (-1.0, 5.0)
    assert value_range([np.array([np.nan])]) == (0.0, 0.0)


def test_a_deep_negative_part_calls_for_two_colours_and_ripples_do_not():
    assert colour_scale((-0.04, 1.0), 0.3, PictureOptions()).kind == "sequential"
    assert colour_scale((-0.5, 1.0), 0.3, PictureOptions()).kind == "diverging"
    assert colour_scale((-0.5, 1.0), 0.3, PictureOptions(palette="sequential")).kind == "sequential"


def test_the_diverging_centre_stands_for_zero_or_the_mean():
    for options, centre in ((PictureOptions(), 0.0), (PictureOptions(palette="diverging", centre="mean"), 0.3)):
        scale = colour_scale((-1.0, 3.0), 0.3, options)
        assert scale.centre == centre
        share = (centre - scale.low) / (scale.high - scale.low)
        position = scale.first + share * (scale.last - scale.first)
        assert position == pytest.approx(0.5)
        # Equal distances from the centre get equally strong colours: the longer side alone reaches its end.
        assert scale.last == 1.0
        assert scale.first == pytest.approx(0.5 - 0.5 * (centre + 1) / (3 - centre))
        assert scale.lightness_at(np.array([centre - 0.5])) == pytest.approx(
            scale.lightness_at(np.array([centre + 0.5]))
        )


def test_colours_run_from_the_first_to_the_last():
    scale = colour_scale((-1.0, 3.0), 0.0, PictureOptions(theme="dark"))
    found = scale.colours()
    assert found.shape == (SHADES, 3)
    np.testing.assert_allclose(found[[0, -1]], palette("diverging", "dark", np.array([scale.first, 1.0])))


def test_limits_are_kept_and_what_lies_beyond_is_known():
    scale = colour_scale((0.0, 3.0), 1.0, PictureOptions(low=1.0))
    assert (scale.low, scale.high, scale.beyond) == (1.0, 3.0, "min")
    assert colour_scale((0.0, 3.0), 1.0, PictureOptions(high=2.0)).beyond == "max"
    assert colour_scale((0.0, 3.0), 1.0, PictureOptions(low=1.0, high=2.0)).beyond == "both"
    assert colour_scale((0.0, 3.0), 1.0, PictureOptions(low=-1.0, high=4.0)).beyond == "neither"


def test_a_constant_gets_a_scale_about_it():
    assert limits((7.0, 7.0), PictureOptions()) == (3.5, 10.5)
    low, high = limits((0.0, 0.0), PictureOptions())
    assert low < 0 < high
    assert limits((7.0, np.nextafter(7.0, 8)), PictureOptions())[1] > 10


@pytest.mark.parametrize(("given", "path"), [({"low": 4.0}, "low"), ({"high": -1.0}, "high"), ({"low": 3.0}, "low")])
def test_one_limit_beyond_all_values_is_refused(given, path):
    with pytest.raises(InputError) as fault:
        limits((0.0, 3.0), PictureOptions(**given))
    assert fault.value.path == (path,)

from __future__ import annotations

import math

import pytest

from engine.errors import InputError
from service.pictures.options import MOST_LEVELS, MOST_MARKERS, PictureOptions


def test_the_usual_options_stand():
    options = PictureOptions()
    assert options.inches == (pytest.approx(9.0), pytest.approx(6.4))


@pytest.mark.parametrize(("width", "dpi"), [(601, 97.0), (1237, 113.3), (3000, 59.9)])
def test_pixels_survive_the_way_through_inches(width, dpi):
    assert int(PictureOptions(width=width, height=700, dpi=dpi).inches[0] * dpi) == width


def test_inches_are_taken_as_they_are():
    assert PictureOptions(width=6.5, height=4.0, size_unit="inches", dpi=150).inches == (6.5, 4.0)


@pytest.mark.parametrize(
    ("given", "path"),
    [
        ({"theme": "grey"}, ("theme",)),
        ({"palette": "other"}, ("palette",)),
        ({"centre": "median"}, ("centre",)),
        ({"size_unit": "cm"}, ("size_unit",)),
        ({"width": 250}, ("width",)),
        ({"width": 600.5}, ("width",)),
        ({"height": 7000}, ("height",)),
        ({"height": math.nan}, ("height",)),
        ({"dpi": 1}, ("dpi",)),
        ({"low": math.inf}, ("low",)),
        ({"low": 1.0, "high": 1.0}, ("low",)),
        ({"levels": (1.0, math.nan)}, ("levels", 1)),
        ({"levels": tuple(map(float, range(MOST_LEVELS + 1)))}, ("levels",)),
        ({"level_step": 0.0}, ("level_step",)),
        ({"level_sigmas": -1.0}, ("level_sigmas",)),
        ({"level_sigmas": 1.0, "level_step": 1.0}, ("levels",)),
        ({"levels": (1.0,), "level_step": 1.0}, ("levels",)),
        ({"band": -1.0}, ("band",)),
        ({"title": "x" * 201}, ("title",)),
        ({"markers": ((math.nan, "a"),)}, ("markers", 0)),
        ({"markers": ((1.0, "a"), (1.0, "b" * 41))}, ("markers", 1)),
        ({"markers": ((1.0, "a"),) * (MOST_MARKERS + 1)}, ("markers",)),
        ({"sections": 0}, ("sections",)),
        ({"sections": 65}, ("sections",)),
        ({"columns": 65}, ("columns",)),
    ],
)
def test_what_is_out_of_range_is_refused_by_name(given, path):
    with pytest.raises(InputError) as fault:
        PictureOptions(**given)
    assert fault.value.path == path

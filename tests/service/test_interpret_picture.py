"""From a request's picture to the options of a drawing."""

from __future__ import annotations

import pytest

from engine import Treatment, sampling
from service.intake import check
from service.interpret_picture import options, picture_options, with_layers
from service.pictures.options import MOST_MARKERS, PictureOptions
from service.problems import Problem
from tests.service import bodies

FILM = bodies.coefficients(bodies.FILM)


def asked(**members):
    more = {"uncertainty": True} if "level_sigmas" in members else {}
    return check("profile", {**bodies.PROFILE, **more, "picture": members}, {}, max_body_bytes=2**20)[1]


def test_members_become_options():
    request = asked(
        title="x", width=700, height=500, theme="dark", palette="sequential", low=-1.0, band=2.0, levels=[0.1, 0.2]
    )
    made = options(request, request.picture)
    assert (made.title, made.width, made.height, made.theme) == ("x", 700, 500, "dark")
    assert (made.palette, made.low, made.high, made.band, made.levels) == ("sequential", -1.0, None, 2.0, (0.1, 0.2))


def test_nothing_asked_is_the_default():
    assert picture_options(None) == PictureOptions()


def test_markers():
    request = asked(markers=[{"position": 3.5, "label": "sheet"}, {"position": 7.0}])
    assert options(request, request.picture).markers == ((3.5, "sheet"), (7.0, ""))


def test_levels_in_sigma_need_the_uncertainty():
    request = asked(level_sigmas=3.0)
    assert options(request, request.picture).level_sigmas == 3.0
    without = check("profile", {**bodies.PROFILE, "picture": {"level_sigmas": 3.0}}, {}, max_body_bytes=2**20)[1]
    with pytest.raises(Problem) as caught:
        options(without, without.picture)
    assert caught.value.places[0].pointer == "/picture/level_sigmas"


def test_bad_option_points_to_its_place():
    request = asked(low=2.0, high=1.0)
    with pytest.raises(Problem) as caught:
        options(request, request.picture)
    assert caught.value.places[0].pointer == "/picture/low"


def test_layers_are_marked_where_they_are():
    line = sampling.lattice_line(FILM.lattice, [1], 65)
    drawn = with_layers(PictureOptions(markers=((1.0, "mine"),)), FILM, line, Treatment())
    assert drawn.markers[0] == (1.0, "mine")
    assert 1 < len(drawn.markers) <= MOST_MARKERS
    for position, label in drawn.markers[1:]:
        assert label == f"{position:.4g} Å"

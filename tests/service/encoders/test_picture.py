"""Pictures of answers, and what is said where none can be drawn."""

from __future__ import annotations

import sys
from xml.etree import ElementTree

import pytest

from engine import evaluate, sampling
from service.encoders import picture as module
from service.encoders.describe import Shown
from service.encoders.picture import picture, require_drawing
from service.pictures.options import PictureOptions
from service.problems import Problem
from tests.service import bodies

FILM = bodies.coefficients(bodies.FILM)


def shown(where):
    field = evaluate(FILM, where)
    return Shown(product="profile", kind="density", quantity="value", coefficients=FILM, field=field)


def test_forms():
    line = sampling.line(FILM.lattice, [0], [1], 65)
    assert picture(shown(line), "png", None).startswith(b"\x89PNG")
    options = PictureOptions(width=600, height=400)
    root = ElementTree.fromstring(picture(shown(line), "svg", options))
    assert root.tag.endswith("svg")
    assert float(root.get("width").removesuffix("pt")) / 72 == pytest.approx(6.0, rel=1e-4)


def test_fault_points_into_the_picture():
    with pytest.raises(Problem) as caught:
        picture(shown(sampling.points(FILM.lattice, [[0.1]])), "png", None)
    assert caught.value.status == 422
    assert caught.value.places[0].pointer.startswith("/picture")


def test_absent_package_is_named(monkeypatch):
    monkeypatch.setattr(module, "find_spec", lambda name: None)
    with pytest.raises(Problem) as caught:
        require_drawing()
    assert caught.value.status == 501
    assert "pictures" in caught.value.detail
    monkeypatch.setattr(module, "find_spec", lambda name: sys)
    require_drawing()

"""The page of a trial stack."""

from __future__ import annotations

import json
from xml.etree import ElementTree

import numpy as np
import pytest
from matplotlib.image import imread

from service.films.trial import trial_picture
from service.intake import check
from tests import samples_films

REQUEST = samples_films.requests("")["coating_trial.json"]
SVG = "{http://www.w3.org/2000/svg}"


def drawn(form, **members):
    request = check("film_trial", {**REQUEST, **members}, {}, max_body_bytes=2**20)[1]
    return trial_picture(request, None, form)


@pytest.mark.parametrize("theme", ["light", "dark"])
def test_png_has_its_size(tmp_path, theme):
    path = tmp_path / "page.png"
    path.write_bytes(drawn("png", picture={"width": 700, "height": 520, "theme": theme}))
    assert imread(path).shape[:2] == (520, 700)


def test_svg_shows_each_order_twice_and_both_profiles():
    root = ElementTree.fromstring(drawn("svg"))
    names = {one.get("id") for one in root.iter() if one.get("id")}
    assert {"observed", "residual"} <= names
    text = " ".join("".join(one.itertext()) for one in root.iter(f"{SVG}text"))
    assert "measured" in text
    assert "calculated" in text
    assert "R = " in text
    assert "wrong model" in " ".join(text.split())


def test_picture_over_http(client):
    answer = client.post("/v1/films/trial?format=png", json=json.loads(json.dumps(REQUEST)))
    assert answer.status_code == 200
    assert answer.headers["content-type"] == "image/png"
    assert np.frombuffer(answer.content[:4], np.uint8).tolist() == [0x89, 0x50, 0x4E, 0x47]

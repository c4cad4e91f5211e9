from __future__ import annotations

import json

import pytest

from tests.service.analyses import asked

TREATED = {"window": {"kind": "lanczos"}, "resolution": {"d_min": 5.0}}


def document(product, body):
    return json.loads(asked.answered(product, body))


@pytest.mark.parametrize("treated", [{}, TREATED])
def test_each_part_is_the_answer_of_its_own_address(treated):
    found = document("features", {**asked.GOOD["features"], **treated})
    film = {"set": asked.FILM, **treated}
    sought = {"kinds": ["maximum", "minimum"], "within": 9.0}
    assert found["extrema"] == document("extrema", {**film, **sought})
    assert found["statistics"] == document("statistics", film)
    assert found["layers"] == document("layers", {**film, "normal_to": [1]})
    assert found["product"] == "features"
    assert found["unit"] == "e/Å³"


def test_a_crystal_has_no_layers():
    found = document("features", {"set": asked.FEW})
    assert found["layers"] is None
    assert len(found["extrema"]["extrema"]) == found["extrema"]["found"] > 0

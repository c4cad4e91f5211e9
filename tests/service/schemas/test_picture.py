"""Pictures in requests."""

from __future__ import annotations

import dataclasses

import pytest
from pydantic import ValidationError

from service.pictures.options import PictureOptions
from service.schemas.picture import PictureIn


def test_members_are_the_options_of_the_drawing():
    own = {field.name for field in dataclasses.fields(PictureOptions)} - {"size_unit"}
    assert set(PictureIn.model_fields) == own | {"mark_layers"}


def test_defaults_are_those_of_the_drawing():
    made, drawn = PictureIn(), PictureOptions()
    for name in set(PictureIn.model_fields) - {"markers", "levels", "mark_layers"}:
        assert getattr(made, name) == getattr(drawn, name), name


@pytest.mark.parametrize(
    "members",
    [{"width": 0}, {"width": 7000}, {"dpi": 10}, {"theme": "red"}, {"band": -1}, {"colour": "x"}, {"levels": [1] * 61}],
)
def test_bad_members(members):
    with pytest.raises(ValidationError):
        PictureIn.model_validate(members)

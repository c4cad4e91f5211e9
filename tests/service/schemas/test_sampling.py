from __future__ import annotations

import pytest
from pydantic import BaseModel, ValidationError

from service.schemas import sampling
from service.schemas.products import PRODUCTS
from service.schemas.sampling import FreePointsIn, LineIn, PlaneIn, SampledLineIn, VolumeIn
from tests.service import bodies

FORMS = {"profile": SampledLineIn, "slice": PlaneIn, "grid": VolumeIn, "points": FreePointsIn}


@pytest.mark.parametrize("product", FORMS)
def test_products_have_their_places(product):
    form = FORMS[product]
    assert issubclass(PRODUCTS[product], form)
    members = {field.alias or name for name, field in form.model_fields.items()}
    given = {name: value for name, value in bodies.GOOD[product].items() if name in members}
    made = form.model_validate(given)
    assert made.model_dump(by_alias=True, exclude_unset=True).keys() == given.keys()


def test_ends_are_called_from_and_to():
    made = LineIn.model_validate({"from": [0], "to": [1]})
    assert (made.start, made.end, made.include_end) == ([0], [1], True)
    with pytest.raises(ValidationError):
        LineIn.model_validate({"start": [0], "end": [1]})


@pytest.mark.parametrize(
    ("form", "members"),
    [
        (LineIn, {"from": []}),
        (LineIn, {"from": [0, 0, 0, 0]}),
        (LineIn, {"from": [1e9]}),
        (LineIn, {"along": [0.5]}),
        (LineIn, {"length": 0}),
        (LineIn, {"samples": 3}),
        (SampledLineIn, {"from": [0], "to": [1]}),
        (SampledLineIn, {"samples": 1}),
        (PlaneIn, {"shape": [0, 3]}),
        (PlaneIn, {"offset": 1e9}),
        (PlaneIn, {"spacing": -1}),
        (VolumeIn, {"edges": []}),
        (VolumeIn, {"edges": [[1], [1], [1], [1]]}),
        (FreePointsIn, {}),
    ],
)
def test_bad_members(form, members):
    with pytest.raises(ValidationError):
        form.model_validate(members)


def test_every_member_is_described():
    for model in vars(sampling).values():
        if isinstance(model, type) and issubclass(model, BaseModel) and model.__module__ == sampling.__name__:
            assert model.__doc__
            assert all(field.description for field in model.model_fields.values())

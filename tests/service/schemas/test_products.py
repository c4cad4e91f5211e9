from __future__ import annotations

import typing

import pytest
from pydantic import ValidationError

from engine.fields import FieldKind
from engine.synthesis.estimate import DEFAULT_TOLERANCE, Precision
from engine.windows import WindowKind
from service.schemas.products import PRODUCTS, ProductIn, ProfileIn
from service.schemas.treatment import AverageIn, WindowIn
from tests.service import bodies


@pytest.mark.parametrize(
    ("model", "member", "kinds"),
    [(ProductIn, "field", FieldKind), (ProductIn, "precision", Precision), (WindowIn, "kind", WindowKind)],
)
def test_choices_are_those_of_the_engine(model, member, kinds):
    assert typing.get_args(model.model_fields[member].annotation) == typing.get_args(kinds)


def test_default_tolerance_is_that_of_the_engine():
    assert ProductIn.model_fields["tolerance"].default == DEFAULT_TOLERANCE


def test_products_are_named_as_in_a_file():
    annotation = ProductIn.model_fields["product"].annotation
    named = next(typing.get_args(one) for one in typing.get_args(annotation) if typing.get_args(one))
    assert named == tuple(PRODUCTS)


@pytest.mark.parametrize("product", PRODUCTS)
def test_good_requests(product):
    made = PRODUCTS[product].model_validate({**bodies.GOOD[product], "product": product, "remark": "for people"})
    assert made.product == product
    assert (made.field, made.precision, made.missing_phase) == ("density", "double", "omit")
    assert (made.window.kind, made.average, made.sharpen, made.apply_merit) == ("none", None, 0.0, False)


def test_names_of_the_api_alone_are_understood():
    with pytest.raises(ValidationError):
        ProfileIn.model_validate({"set": bodies.FILM, "start": [0], "end": [1], "samples": 3})


def test_short_form_of_the_lateral_average():
    made = ProfileIn.model_validate({**bodies.PROFILE, "average": "lateral"})
    assert made.average == AverageIn(kind="lateral")


@pytest.mark.parametrize("product", PRODUCTS)
@pytest.mark.parametrize(
    "members",
    [
        {"remark": "x" * 2001},
        {"product": "cube"},
        {"coordinates": "polar"},
        {"field": "density "},
        {"window": "lanczos"},
        {"window": {"kind": "gaussian", "b": 0}},
        {"window": None},
        {"average": "ball"},
        {"average": {"kind": "disc"}},
        {"average": {}},
        {"average": {"kind": "ball", "radius": -1}},
        {"average": {"kind": "box", "edges": []}},
        {"resolution": {"d_min": 0}},
        {"resolution": {"dmin": 1}},
        {"missing_phase": "zero"},
        {"precision": "half"},
        {"tolerance": 0.1},
        {"tolerance": 1e-13},
        {"apply_merit": "yes"},
        {"uncertainty": "yes"},
        {"quantity": "variance"},
    ],
)
def test_bad_members(product, members):
    with pytest.raises(ValidationError):
        PRODUCTS[product].model_validate({**bodies.GOOD[product], **members})


def test_every_member_of_its_own_is_described():
    plain = {"set", "origin", "edge_1", "edge_2", "field", "window", "average", "resolution", "coordinates"}
    plain |= {"precision", "samples", "edges", "positions", "kind", "normal"}
    for model in (*PRODUCTS.values(), WindowIn, AverageIn):
        for name, member in model.model_fields.items():
            assert member.description or name in plain, (model.__name__, name)

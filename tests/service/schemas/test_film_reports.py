"""The documented answers about films are the answers."""

from __future__ import annotations

import json
import typing

import pytest
from pydantic import BaseModel, ValidationError

from service.schemas.film_reports import FILM_REPORTS
from tests.service.films.asked import FILM, GIVEN, RUN, SIMPLE, answered, changed
from tests.service.schemas.test_reports import models

BODIES = [
    ("film", FILM),
    ("film", GIVEN),
    ("film", SIMPLE),
    ("film", changed(SIMPLE, amplitudes="root", scan__intensity_sigma=..., scan__position_sigma=...)),
    ("film", changed(SIMPLE, spacing={"zero_shift": True, "displacement": True, "radius_mm": 185.0})),
    ("film", changed(FILM, window={"kind": "gaussian", "b": 4.0}, spacing__mean_density=0.7)),
    ("film_run", RUN),
]


@pytest.fixture(scope="module")
def documents():
    return [(product, answered(product, body)) for product, body in BODIES]


def exact(value, model):
    """Whether the members are those documented, all the way down."""
    names = {field.alias or name: field for name, field in model.model_fields.items()}
    assert set(value) == set(names), model.__name__
    for name, field in names.items():
        for one in (field.annotation, *typing.get_args(field.annotation)):
            if isinstance(one, type) and issubclass(one, BaseModel) and value[name] is not None:
                for inner in value[name] if isinstance(value[name], list) else [value[name]]:
                    exact(inner, one)


def test_answers_conform(documents):
    for product, document in documents:
        FILM_REPORTS[product].model_validate(document, strict=True)
        exact(document, FILM_REPORTS[product])


def test_models_are_strict_enough_to_fail(documents):
    product, document = documents[0]
    model = FILM_REPORTS[product]
    for name in model.model_fields:
        wrong = 3 if isinstance(document[name], str) else "?"
        with pytest.raises(ValidationError):
            model.model_validate({**document, name: wrong}, strict=True)
        with pytest.raises(ValidationError):
            model.model_validate({one: value for one, value in document.items() if one != name}, strict=True)


@pytest.mark.parametrize("product", ["film", "film_run"])
def test_every_model_is_described(product):
    for model in models(FILM_REPORTS[product]):
        assert model.__doc__, model
    json.dumps(FILM_REPORTS[product].model_json_schema())

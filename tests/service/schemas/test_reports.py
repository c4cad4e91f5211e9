"""The documented answers are the answers; how they conform is in encoders/test_report.py."""

from __future__ import annotations

import json
import typing

import pytest
from pydantic import BaseModel, ValidationError

from service.schemas.reports import REPORTS, ReportOut
from tests.service.analyses import asked


def models(model):
    """A model and those within it."""
    yield model
    for field in model.model_fields.values():
        for one in (field.annotation, *typing.get_args(field.annotation)):
            if isinstance(one, type) and issubclass(one, BaseModel):
                yield from models(one)


def assert_members(value, model):
    """Exactly the members that are documented, all the way down."""
    assert set(value) == set(model.model_fields), model.__name__
    for name, field in model.model_fields.items():
        for one in (field.annotation, *typing.get_args(field.annotation)):
            if isinstance(one, type) and issubclass(one, BaseModel) and value[name] is not None:
                for inner in value[name] if isinstance(value[name], list) else [value[name]]:
                    assert_members(inner, one)


@pytest.mark.parametrize("product", REPORTS)
def test_answers_have_the_members_documented(client, product):
    answer = client.post(f"/v1/{product}", json=asked.GOOD[product])
    assert answer.status_code == 200, answer.text
    assert answer.headers["content-type"] == "application/json"
    assert_members(answer.json(), REPORTS[product])


@pytest.mark.parametrize("product", REPORTS)
def test_models_are_strict_enough_to_fail(product):
    document = json.loads(asked.answered(product, asked.GOOD[product]))
    for name in REPORTS[product].model_fields:
        with pytest.raises(ValidationError):
            REPORTS[product].model_validate(
                {**document, name: "?" if name != "product" else 3}, strict=True
            ) if name not in (
                "unit",
                "area_unit",
            ) else REPORTS[product].model_validate({**document, name: 3}, strict=True)


def test_every_model_is_described():
    for product, report in REPORTS.items():
        assert issubclass(report, ReportOut)
        for model in models(report):
            assert model.__doc__, product

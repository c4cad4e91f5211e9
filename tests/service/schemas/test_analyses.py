from __future__ import annotations

import typing

import pytest
from pydantic import ValidationError

from engine.features.comparison import Terms
from engine.features.extrema import KINDS
from engine.features.integrals import Per
from service.analyses.integrals import MEMBERS
from service.schemas.analyses import ANALYSES, CompareIn, ExtremaIn, IntegralIn, LayersIn
from tests.service.analyses import asked


def choices(model, member):
    return typing.get_args(model.model_fields[member].annotation)


def test_choices_are_those_of_the_engine():
    assert choices(IntegralIn, "per") == typing.get_args(Per)
    assert choices(CompareIn, "terms") == typing.get_args(Terms)
    (kinds,) = choices(ExtremaIn, "kinds")
    assert set(typing.get_args(kinds)) == set(KINDS)
    assert choices(IntegralIn, "kind") == tuple(MEMBERS)
    for needed, others in MEMBERS.values():
        assert {*needed, *others} <= set(IntegralIn.model_fields)


@pytest.mark.parametrize("product", ANALYSES)
def test_good_requests_name_their_analysis(product):
    made = ANALYSES[product].model_validate({**asked.GOOD[product], "product": product, "remark": "for people"})
    assert made.product == product
    with pytest.raises(ValidationError):
        ANALYSES[product].model_validate({**asked.GOOD[product], "product": "profile"})
    with pytest.raises(ValidationError):
        ANALYSES[product].model_validate({**asked.GOOD[product], "uncertainty": True})


@pytest.mark.parametrize(("given", "expected"), [("zero", "zero"), (0, 0.0), (-1.5, -1.5)])
def test_baselines(given, expected):
    assert LayersIn.model_validate({**asked.GOOD["layers"], "baseline": given}).baseline == expected


@pytest.mark.parametrize(
    ("product", "members"),
    [
        ("extrema", {"most": 0}),
        ("extrema", {"most": 10**6}),
        ("extrema", {"kinds": ["maximum"] * 4}),
        ("extrema", {"within": 0}),
        ("extrema", {"least_significance": 0}),
        ("extrema", {"least_value": "1"}),
        ("extrema", {"distances": [[1, 2]] * 10_001}),
        ("extrema", {"distances": [[1, 1.5]]}),
        ("extrema", {"region": {"radius": 0}}),
        ("integrals", {"regions": [{"kind": "ball", "radius": 1.0}] * 1001}),
        ("integrals", {"regions": [{"kind": "ball", "radius": 1.0, "label": "x" * 81}]}),
        ("layers", {"baseline": "mean"}),
        ("layers", {"baseline": float("inf")}),
        ("layers", {"least_prominence": -0.1}),
        ("statistics", {"bins": 1.5}),
        ("windows", {"windows": []}),
        ("compare", {"shells": 0}),
        ("compare", {"other": asked.FILM}),
    ],
)
def test_bad_members(product, members):
    with pytest.raises(ValidationError):
        ANALYSES[product].model_validate({**asked.GOOD[product], **members})


def test_every_model_says_what_it_is_for():
    for model in ANALYSES.values():
        assert model.__doc__
        for name, field in model.model_fields.items():
            if name in model.__annotations__:
                assert field.description or name in ("product", "kinds", "regions", "most", "bins"), name

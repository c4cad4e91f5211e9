from __future__ import annotations

import json

import pytest
from hypothesis import given
from hypothesis import strategies as st

from service import query
from service.problems import Problem
from service.routes.stored import BY_GET
from service.schemas.requests import REQUESTS
from tests.service import bodies


def read(product, **members):
    return query.document(product, [(name.replace("__", "."), text) for name, text in members.items()])


@pytest.mark.parametrize(
    ("product", "members", "document"),
    [
        ("profile", {"samples": "512"}, {"samples": 512}),
        ("profile", {"from": "0,0,0.25", "to": "[1,0,0]"}, {"from": [0, 0, 0.25], "to": [1, 0, 0]}),
        ("profile", {"normal_to": "0,0,1"}, {"normal_to": [0, 0, 1]}),
        ("profile", {"average": "lateral"}, {"average": "lateral"}),
        ("profile", {"average__kind": "ball", "average__radius": "2"}, {"average": {"kind": "ball", "radius": 2}}),
        ("profile", {"window__kind": "gaussian", "window__b": "3"}, {"window": {"kind": "gaussian", "b": 3}}),
        ("profile", {"window": '{"kind":"lanczos"}'}, {"window": {"kind": "lanczos"}}),
        ("profile", {"resolution__d_min": "1.4"}, {"resolution": {"d_min": 1.4}}),
        ("profile", {"uncertainty": "true", "include_end": "false"}, {"uncertainty": True, "include_end": False}),
        (
            "slice",
            {"picture__title": "12", "picture__levels": "1,2.5"},
            {"picture": {"title": "12", "levels": [1, 2.5]}},
        ),
        ("slice", {"picture__markers": '[{"position":1}]'}, {"picture": {"markers": [{"position": 1}]}}),
        ("points", {"positions": "[[0,0,0.1],[0,0,0.2]]"}, {"positions": [[0, 0, 0.1], [0, 0, 0.2]]}),
        ("layers", {"baseline": "zero"}, {"baseline": "zero"}),
        ("layers", {"baseline": "0.25"}, {"baseline": 0.25}),
        ("extrema", {"kinds": "maximum,minimum"}, {"kinds": ["maximum", "minimum"]}),
        ("extrema", {"distances": "[[1,2]]"}, {"distances": [[1, 2]]}),
        ("grid", {"shape": "4,5,6"}, {"shape": [4, 5, 6]}),
        ("windows", {"windows": '[{"kind":"lanczos"}]'}, {"windows": [{"kind": "lanczos"}]}),
    ],
)
def test_members_mean_what_they_mean_in_a_body(product, members, document):
    assert read(product, **members) == document


@pytest.mark.parametrize(
    ("product", "members", "words"),
    [
        ("profile", {"foo": "1"}, "/foo: is no member"),
        ("profile", {"set": "{}"}, "/set: is no member"),
        ("profile", {"set_id": "x"}, "/set_id: is no member"),
        ("profile", {"samples": "x"}, "Give a whole number"),
        ("profile", {"samples": "true"}, "Give a whole number"),
        ("profile", {"samples": ""}, "Give a whole number"),
        ("profile", {"samples": "NaN"}, "Give a whole number"),
        ("profile", {"uncertainty": "1"}, "Give true or false"),
        ("profile", {"from": "0,x,0"}, "Give a list"),
        ("profile", {"from": "[0,"}, "Give a list"),
        ("profile", {"field": "colour"}, "one of density, gradient"),
        ("profile", {"window__kind__deep": "x"}, "is no member"),
        ("profile", {"window": '{"kind":"lanczos"}', "window__kind": "none"}, "given twice"),
        ("profile", {"window__kind": "none", "window": "{}"}, "given twice"),
    ],
)
def test_what_cannot_be_read_is_named(product, members, words):
    with pytest.raises(Problem, match=words):
        read(product, **members)


def test_a_member_given_twice_is_refused():
    with pytest.raises(Problem, match="given twice"):
        query.document("profile", [("samples", "3"), ("samples", "4")])


@given(st.text(max_size=30), st.sampled_from(sorted(query.members("slice"))))
def test_no_text_is_more_than_a_problem(text, name):
    try:
        document = query.document("slice", [(name, text)])
    except Problem:
        return
    json.dumps(document)


@pytest.mark.parametrize("product", BY_GET)
def test_every_member_of_a_body_is_a_parameter(product):
    names = {field.alias or name for name, field in REQUESTS[product].model_fields.items()}
    assert set(query.members(product)) >= names - set(query.NOT_IN_QUERY)
    assert query.required(product) <= set(query.members(product))


def test_a_whole_request_survives_the_way():
    body = {name: value for name, value in bodies.PROFILE.items() if name != "set"}
    pairs = [(name, value if isinstance(value, str) else json.dumps(value)) for name, value in body.items()]
    assert query.document("profile", pairs) == body

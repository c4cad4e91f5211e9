from __future__ import annotations

import json

import pytest

from service import query
from service.app import create_app
from service.encoders.negotiation import formats_of
from service.routes.stored import BY_GET
from service.settings import Settings
from service.store.shelf import ID

DOCUMENT = create_app(Settings()).openapi()


def operation(product):
    return DOCUMENT["paths"][f"/v1/sets/{{identity}}/{product}"]["get"]


def parameters(product):
    return {one["name"]: one for one in operation(product)["parameters"]}


@pytest.mark.parametrize("product", BY_GET)
def test_parameters_are_the_members_that_a_query_may_hold(product):
    found = parameters(product)
    assert set(found) - {"identity", "format"} <= set(query.members(product))
    assert {name for name, one in found.items() if one["required"]} == {"identity", *query.required(product)}
    assert found["format"]["schema"]["enum"] == list(formats_of(product))
    assert found["identity"]["schema"]["pattern"] == ID.pattern
    for name, schema in query.members(product).items():
        if name not in found:
            kinds = {one.get("type") for one in schema["choices"]}
            assert kinds == {"object"}, name
            assert any(other.startswith(f"{name}.") for other in found)


@pytest.mark.parametrize("product", BY_GET)
def test_what_a_parameter_states_is_a_plain_schema(product):
    for name, one in parameters(product).items():
        assert ("schema" in one) != ("content" in one), name
        text = json.dumps(one)
        assert "$ref" not in text
        assert "choices" not in text


def test_lists_are_written_with_commas_and_what_is_deeper_as_json():
    line = parameters("profile")["from"]
    assert (line["style"], line["explode"]) == ("form", False)
    assert line["schema"]["items"]["type"] == "number"
    rows = parameters("points")["positions"]
    assert rows["content"]["application/json"]["schema"]["type"] == "array"


def test_each_says_where_its_meaning_is_told():
    for product in BY_GET:
        told = operation(product)
        assert f"POST /v1/{product}" in told["description"]
        assert {"200", "304", "404", "406", "422"} <= set(told["responses"])


def test_keeping_is_described():
    told = DOCUMENT["paths"]["/v1/sets"]["post"]
    assert {"application/json", "multipart/form-data", "chemical/x-cif"} <= set(told["requestBody"]["content"])
    assert {"200", "201", "413", "422", "503", "507"} <= set(told["responses"])
    assert {one["name"] for one in told["parameters"]} == {"name", "tag"}

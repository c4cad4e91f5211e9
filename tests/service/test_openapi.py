"""The OpenAPI document against the service it describes."""

from __future__ import annotations

import json
import re

import pytest

from service.app import create_app
from service.encoders.negotiation import MEDIA_TYPES, formats_of
from service.intake import FILE_TYPES, FILES
from service.openapi import EXAMPLES
from service.problems import TITLES
from service.routes.compute import ADDRESSES
from service.routes.stored import BY_GET
from service.schemas.answers import Answer, StackAnswer
from service.schemas.film_models import MODELS
from service.schemas.film_reports import FILM_REPORTS
from service.schemas.products import PRODUCTS
from service.schemas.reports import REPORTS
from service.schemas.requests import INSPECT, KEEP, REQUESTS, SERIES
from service.settings import Settings
from tests.service import bodies
from tests.service.problem_shape import assert_problem
from tests.service.raw_files import AMPLITUDES, CELL, CIF, TABLE, sent

DOCUMENT = create_app(Settings(require_keys=False)).openapi()
OPERATIONS = {
    (method, path): operation for path, methods in DOCUMENT["paths"].items() for method, operation in methods.items()
}
each_operation = pytest.mark.parametrize("operation", OPERATIONS.values(), ids=[path for _, path in OPERATIONS])
STATEMENTS = {
    "$ref", "type", "properties", "required", "additionalProperties", "items", "minItems", "maxItems", "enum", "const",
    "anyOf", "allOf", "oneOf", "minimum", "maximum", "exclusiveMinimum", "exclusiveMaximum", "minLength", "maxLength",
    "title", "description", "default", "format", "pattern", "examples", "maxProperties", "discriminator",
}  # fmt: skip
GUARDED = (401, 403, 408, 421, 429)
"""What may be answered before a body is read."""
TYPES = {"object", "array", "string", "number", "integer", "boolean", "null"}


def nodes(value, path="#"):
    yield path, value
    if isinstance(value, dict):
        for key, inner in value.items():
            yield from nodes(inner, f"{path}/{key}")
    elif isinstance(value, list):
        for place, inner in enumerate(value):
            yield from nodes(inner, f"{path}/{place}")


def resolved(reference):
    assert reference.startswith("#/")
    found = DOCUMENT
    for part in reference[2:].split("/"):
        found = found[part]
    return found


def schemas(schema):
    """A schema and all within it."""
    yield schema
    for name in ("items", "additionalProperties"):
        if isinstance(schema.get(name), dict):
            yield from schemas(schema[name])
    for name in ("anyOf", "allOf", "oneOf"):
        for inner in schema.get(name, []):
            yield from schemas(inner)
    for inner in schema.get("properties", {}).values():
        yield from schemas(inner)


def test_document_is_served(client):
    answer = client.get("/openapi.json")
    assert answer.headers["content-type"] == "application/json"
    assert answer.json() == json.loads(json.dumps(DOCUMENT))


def test_frame():
    assert DOCUMENT["openapi"].startswith("3.1.")
    assert DOCUMENT["info"]["title"] == "densityloom"
    assert DOCUMENT["info"]["version"]
    assert "phases" in DOCUMENT["info"]["description"]
    assert set(DOCUMENT) <= {"openapi", "info", "paths", "components", "tags", "servers"}
    assert {path for _, path in OPERATIONS} == {
        *(f"/v1{address}" for address in ADDRESSES.values()),
        *(f"/v1/sets{address}" for address in ("", "/{identity}", "/{identity}/summary", "/{identity}/columns")),
        *(f"/v1/sets/{{identity}}/{product}" for product in BY_GET),
        "/health/live",
        "/health/ready",
        "/metrics",
    }


@pytest.mark.parametrize("required", [True, False])
def test_keys_are_described(required):
    document = create_app(Settings(require_keys=required)).openapi()
    (scheme,) = document["components"]["securitySchemes"].values()
    assert (scheme["type"], scheme["scheme"]) == ("http", "bearer")

    def asked(method, path):
        return document["paths"][path][method].get("security")

    free = [] if required else [{}]
    assert asked("post", "/v1/profile") == [{"key": ["compute"]}, *free]
    assert asked("post", "/v1/sets/inspect") == [{"key": ["compute"]}, *free]
    assert asked("post", "/v1/sets") == asked("delete", "/v1/sets/{identity}") == [{"key": ["write"]}, *free]
    assert asked("get", "/v1/sets/{identity}/profile") == asked("get", "/metrics") == [{"key": ["read"]}, *free]
    assert asked("get", "/health/ready") is None
    assert {"401", "403", "429"} <= set(map(str, document["paths"]["/metrics"]["get"]["responses"]))


def test_every_reference_resolves():
    references = [value for path, value in nodes(DOCUMENT) if path.endswith("/$ref")]
    assert len(references) > 20
    for reference in references:
        assert resolved(reference)


def test_every_component_is_used():
    used = {value.rpartition("/")[2] for path, value in nodes(DOCUMENT) if path.endswith("/$ref")}
    assert set(DOCUMENT["components"]["schemas"]) == used


@each_operation
def test_operation_is_described(operation):
    assert operation["summary"].strip()
    assert len(operation["description"].strip()) > 20
    assert operation["tags"]
    assert {"200", "204"} & set(operation["responses"])
    for status, response in operation["responses"].items():
        assert re.fullmatch(r"[1-5]\d\d", str(status))
        assert response["description"].strip()
        for media_type, content in response.get("content", {}).items():
            assert "/" in media_type
            assert "schema" in content


def test_operation_ids_differ():
    identifiers = [operation["operationId"] for operation in OPERATIONS.values()]
    assert len(set(identifiers)) == len(identifiers)


def test_schemas_state_only_what_the_standard_knows():
    for name, component in DOCUMENT["components"]["schemas"].items():
        for schema in schemas(component):
            assert set(schema) <= STATEMENTS, (name, set(schema) - STATEMENTS)
            kinds = schema.get("type", [])
            assert set([kinds] if isinstance(kinds, str) else kinds) <= TYPES
            if "type" in schema:
                assert set(schema.get("required", [])) <= set(schema.get("properties", {}))


def test_bodies_are_described_as_strictly_as_they_are_checked():
    for model in PRODUCTS.values():
        assert DOCUMENT["components"]["schemas"][model.__name__]["additionalProperties"] is False
    line = DOCUMENT["components"]["schemas"]["ProfileIn"]["properties"]
    assert {"from", "to", "samples"} <= set(line)
    assert "start" not in line
    phases = DOCUMENT["components"]["schemas"]["CoefficientSetIn"]["properties"]["phase_deg"]["anyOf"][0]
    assert phases["items"]["type"] == ["number", "null"]


@pytest.mark.parametrize("product", PRODUCTS)
def test_errors_are_described(product):
    responses = OPERATIONS["post", f"/v1/{product}"]["responses"]
    assert set(map(int, responses)) == {200, *GUARDED, 400, 404, 406, 413, 415, 422, 500, 501, 503, 504}
    for status, response in responses.items():
        if int(status) != 200:
            assert list(response["content"]) == ["application/problem+json"]
            assert int(status) in {known for known, _ in TITLES.values()}


@pytest.mark.parametrize("product", PRODUCTS)
def test_forms_of_answer_are_described_and_given(client, product):
    operation = OPERATIONS["post", f"/v1/{product}"]
    described = set(operation["responses"]["200"]["content"])
    assert described == {MEDIA_TYPES[form].split(";")[0] for form in formats_of(product)}
    parameter = next(one for one in operation["parameters"] if one["name"] == "format")
    assert parameter["description"]
    assert parameter["schema"]["enum"] == list(formats_of(product))
    for form in parameter["schema"]["enum"]:
        # A mesh is that of a surface, which no other form holds.
        body = {**bodies.GOOD[product], **({"surface": {"level_rms": 0}} if form == "glb" else {})}
        answer = client.post(f"/v1/{product}", params={"format": form}, json=body)
        assert answer.status_code == 200
        assert answer.headers["content-type"].split(";")[0] in described


@pytest.mark.parametrize("product", sorted(EXAMPLES.keys() - {KEEP}))
def test_every_example_is_answered(client, product):
    address = f"/v1{ADDRESSES[product]}"
    body = OPERATIONS["post", address]["requestBody"]
    assert body["required"] is True
    # A stack of models has no table beside it.
    assert set(body["content"]) == {"application/json"} | ({"multipart/form-data"} if product not in MODELS else set())
    examples = body["content"]["application/json"]["examples"]
    assert examples
    for example in examples.values():
        assert example["summary"]
        answer = client.post(address, json=example["value"])
        assert answer.status_code == 200, answer.text
        shapes = {SERIES: StackAnswer, **REPORTS, **FILM_REPORTS}
        check_shape(answer.json(), shapes.get(product, Answer).__name__)


def test_examples_are_of_every_product_and_analysis():
    assert set(EXAMPLES) == set(REQUESTS) - {INSPECT}


INSPECTION = OPERATIONS["post", "/v1/sets/inspect"]


def test_files_are_described_wherever_they_are_taken():
    for product in PRODUCTS:
        form = OPERATIONS["post", f"/v1/{product}"]["requestBody"]["content"]["multipart/form-data"]
        parts = {"request", *FILES}
        assert set(form["schema"]["properties"]) == parts == set(form["encoding"])
        assert form["schema"]["required"] == ["request"]
    content = INSPECTION["requestBody"]["content"]
    assert set(content) == {"multipart/form-data", *FILE_TYPES}
    form = content["multipart/form-data"]
    assert form["schema"]["properties"]["request"] == {"$ref": "#/components/schemas/InspectIn"}
    assert form["schema"]["required"] == ["reflections"]
    assert form["encoding"]["reflections"]["contentType"] == ", ".join(FILE_TYPES)
    assert DOCUMENT["components"]["schemas"]["InspectIn"]["additionalProperties"] is False


def test_a_file_is_no_component():
    """It comes as a part of a form, so a body of JSON can only leave it out."""
    assert "Part" not in DOCUMENT["components"]["schemas"]
    file = DOCUMENT["components"]["schemas"]["CoefficientSetIn"]["properties"]["reflections"]
    assert {one["type"] for one in file["anyOf"]} == {"null"}


def test_errors_of_an_inspection_are_described():
    assert set(map(int, INSPECTION["responses"])) == {200, *GUARDED, 400, 406, 413, 415, 422, 500, 501, 503, 504}


def test_forms_of_a_summary_are_described():
    answers = INSPECTION["responses"]["200"]["content"]
    assert answers == {"application/json": {"schema": {"$ref": "#/components/schemas/SummaryAnswer"}}}
    assert INSPECTION["parameters"][0]["schema"]["enum"] == ["json"]


def test_example_of_an_inspection_is_answered(client):
    (example,) = INSPECTION["requestBody"]["content"]["multipart/form-data"]["examples"].values()
    body = sent(example["value"]["request"], example["value"]["reflections"], "text/csv")
    answer = client.post("/v1/sets/inspect", content=body, headers={"Content-Type": bodies.FORM})
    assert answer.status_code == 200, answer.text
    assert (answer.json()["rows"], answer.json()["unique"]) == (3, 2)


@pytest.mark.parametrize(
    ("file", "members"),
    [
        (CIF, {}),
        (TABLE, {"cell": CELL, "density": "complex"}),
        (AMPLITUDES, {"cell": CELL}),
        (AMPLITUDES.replace("sigma", "merit"), {"cell": CELL, "symmetry": {"space_group": 19}}),
        ("l,f_squared,sigma\n0,40,1\n1,20,1\n-1,21,1\n2,7,1\n", {"cell": {"period": 30.0}}),
        (bodies.CRYSTAL_FILE, {"preparation": bodies.SCALED}),
    ],
    ids=["cif", "complex", "amplitudes", "merit", "stack", "sample"],
)
def test_summary_has_the_shape_described(client, file, members):
    body = sent({"set": members}, file)
    answer = client.post("/v1/sets/inspect", content=body, headers={"Content-Type": bodies.FORM})
    assert answer.status_code == 200, answer.text
    check_shape(answer.json(), "SummaryAnswer")


def test_problems_have_the_shape_described(client):
    check_shape(assert_problem(client.post("/v1/profile", json={}), 422, "/set"), "ProblemDocument")


def test_health_has_the_shape_described(client):
    for name in ("live", "ready"):
        answer = client.get(f"/health/{name}").json()
        schema = OPERATIONS["get", f"/health/{name}"]["responses"]["200"]["content"]["application/json"]["schema"]
        check_shape(answer, schema["$ref"].rpartition("/")[2])


def check_shape(value, name):
    """The members of an answer are those described, no more and no fewer, of the types described."""
    conforms(value, DOCUMENT["components"]["schemas"][name], name)


def conforms(value, schema, place):
    if "$ref" in schema:
        return conforms(value, resolved(schema["$ref"]), place)
    if "anyOf" in schema:
        for one in schema["anyOf"]:
            try:
                return conforms(value, one, place)
            except AssertionError:
                continue
        raise AssertionError(f"{place}: {value!r} is none of {schema['anyOf']}")
    kinds = {"object": dict, "array": list, "string": str, "number": (int, float), "integer": int, "null": type(None)}
    if schema.get("type") == "boolean":
        assert isinstance(value, bool), place
    elif "type" in schema:
        assert isinstance(value, kinds[schema["type"]]), place
        assert not isinstance(value, bool), place
    if "const" in schema:
        assert value == schema["const"], place
    if "properties" in schema:
        assert set(schema.get("required", [])) <= set(value) <= set(schema["properties"]), place
        for key, inner in value.items():
            conforms(inner, schema["properties"][key], f"{place}/{key}")
    if isinstance(value, list) and "items" in schema:
        for inner in value:
            conforms(inner, schema["items"], place)
    return None

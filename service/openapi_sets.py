"""What the OpenAPI document says of kept sets: parameters of a GET are the members of the POST's body."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

from service import query
from service.encoders.negotiation import formats_of
from service.openapi import POST_PROBLEMS, SCHEMAS, SUMMARIES, answers, bodies, problems
from service.schemas.requests import KEEP, REQUESTS
from service.schemas.store import KeptOut, ListOut

_BINARY = {"schema": {"type": "string", "format": "binary"}}
_STORE = ("malformed-request", "internal", "store-unavailable")
GET_PROBLEMS = (
    "malformed-request",
    "not-found",
    "not-acceptable",
    "invalid-request",
    "internal",
    "busy",
    "timeout",
    "not-installed",
)


def _json(model: type) -> dict[str, Any]:
    return {"application/json": {"schema": {"$ref": SCHEMAS + model.__name__}}}


def keeping() -> dict[str, Any]:
    """Of the address that keeps a set."""
    text = {"type": "string", "minLength": 1, "maxLength": 200}
    return {
        "operation_id": "keep_set",
        "summary": SUMMARIES[KEEP],
        "description": f"{REQUESTS[KEEP].__doc__} The answer comes when the set is on the disk. The id is the hash of "
        "its content: sending the same set again changes nothing and answers 200.",
        "status_code": 201,
        "responses": {
            201: {"description": "The set is kept", "content": _json(KeptOut)},
            200: {"description": "It was there already, under the name and tags it has", "content": _json(KeptOut)},
            **problems((*POST_PROBLEMS, "store-full")),
        },
        "openapi_extra": {
            "parameters": [
                _parameter("name", text, "of the set, where the body has no place for it"),
                _parameter("tag", {"type": "array", "items": text}, "a tag of the set; may be repeated"),
            ],
            "requestBody": {
                "required": True,
                "content": bodies(KEEP, {"$ref": SCHEMAS + REQUESTS[KEEP].__name__}),
            },
        },
    }


_LOOKING: dict[str, tuple[str, int, dict[str, Any], Sequence[str]]] = {
    "list": ("Sets that are kept, newest first", 200, _json(ListOut), ("invalid-request", *_STORE)),
    "set": ("A set and its summary", 200, _json(KeptOut), ("not-found", "invalid-request", *_STORE)),
    "summary": ("A set and its summary", 200, _json(KeptOut), ("not-found", "invalid-request", *_STORE)),
    "columns": (
        "The columns bit for bit, or the file as it was sent",
        200,
        dict.fromkeys(("application/x-npz", "application/octet-stream"), _BINARY),
        ("not-found", "invalid-request", *_STORE),
    ),
    "delete": ("Forget a set", 204, {}, ("not-found", "invalid-request", *_STORE)),
}


_MORE = {
    "list": "Read in parts: each names the `after` of the next one. A search looks for text in names, file names and "
    "ids, whatever the case; a set must have all tags asked for.",
    "set": "Where and when it was kept, how many terms it has, and what to know before looking at a density of it.",
    "summary": "The same as the address of the set itself.",
    "columns": "A set of columns answers an archive of binary64 arrays, NaN where a phase is unknown; a file of "
    "reflections comes back byte by byte, with the media type it was sent with.",
    "delete": "The set and all that was kept of it; the same content can be sent anew.",
}


def looking(name: str) -> dict[str, Any]:
    """Of an address that lists, shows or deletes."""
    summary, status, content, kinds = _LOOKING[name]
    answer: dict[str, Any] = {"description": summary}
    if content:
        answer["content"] = content
    return {
        "operation_id": f"{name}_sets" if name == "list" else f"{name}_of_set",
        "summary": summary,
        "description": _MORE[name],
        "responses": {status: answer, **problems(kinds)},
    }


def stored_operation(product: str) -> dict[str, Any]:
    """Of the address of a product of a stored set."""
    required = query.required(product)
    parameters = [
        made
        for name, schema in query.members(product).items()
        if (made := _member(name, schema, name in required)) is not None
    ]
    forms = {"type": "string", "enum": list(formats_of(product))}
    return {
        "operation_id": f"{product}_of_set",
        "summary": SUMMARIES[product],
        "description": f"{REQUESTS[product].__doc__} Parameters mean what the members of the same names mean in the "
        f"body of `POST /v1/{product}`. Answers carry a strong entity tag and may be kept by clients.",
        "responses": {
            200: {"description": "The answer", "content": answers(product)},
            304: {"description": "The client has it"},
            **problems(GET_PROBLEMS),
        },
        "openapi_extra": {
            "parameters": [_parameter("format", forms, "form of the answer; goes before Accept"), *parameters]
        },
    }


def _member(name: str, schema: dict[str, Any], required: bool) -> dict[str, Any] | None:
    """A member as a parameter; None of an object, whose members are parameters of their own."""
    choices = [one for one in schema["choices"] if one.get("type") != "object"]
    if not choices:
        return None
    plain = [_plain(one) for one in choices]
    made = _parameter(name, plain[0] if len(plain) == 1 else {"anyOf": plain}, schema.get("description", ""), required)
    inner = [item for one in choices for item in one.get("items", [])]
    if any(item.get("type") in ("array", "object") for item in inner):
        # Too deep for commas: JSON text.
        made["content"] = {"application/json": {"schema": made.pop("schema")}}
    elif inner:
        made |= {"style": "form", "explode": False}
    return made


def _plain(schema: dict[str, Any]) -> dict[str, Any]:
    """A schema without what belongs to the model it comes from."""
    kept = {key: value for key, value in schema.items() if key not in ("title", "description", "default", "items")}
    if schema.get("type") == "object":
        return {"type": "object"}
    if "items" in schema:
        inner = [_plain(one) for one in schema["items"]]
        kept["items"] = inner[0] if len(inner) == 1 else {"anyOf": inner}
    return kept


def _parameter(name: str, schema: dict[str, Any], description: str, required: bool = False) -> dict[str, Any]:
    """A parameter of a query."""
    made: dict[str, Any] = {"name": name, "in": "query", "required": required}
    if description:
        made["description"] = description
    return made | {"schema": schema}

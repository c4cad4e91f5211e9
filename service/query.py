"""Members of a request in the query of an address: ``from=0,0,0&window.kind=lanczos&samples=512``.

Members mean what they mean in a body. A member of an object is named by the way to it, with dots;
lists of numbers or words are written with commas; what is deeper, as JSON text. A value's type is
that of the member's schema, so that ``picture.title=12`` is a text and ``samples=12`` a number.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from functools import cache
from typing import Any

import orjson

from service.problems import at
from service.schemas.coefficient_set import CoefficientSetIn
from service.schemas.requests import REQUESTS

NOT_IN_QUERY = ("set", "set_id", "product", "remark", "combination", "with")
"""The address says which set and product; second sets travel in bodies."""
PLACEHOLDER = CoefficientSetIn(values="density_coefficient")
"""Stands for the stored set while the rest of a request is checked."""

Schema = dict[str, Any]


@cache
def _schema(product: str) -> Schema:
    return REQUESTS[product].model_json_schema(by_alias=True)


@cache
def members(product: str) -> dict[str, Schema]:
    """Schemas of the members a query may hold, by their names with dots, references resolved."""
    whole = _schema(product)
    found: dict[str, Schema] = {}
    for name, schema in whole["properties"].items():
        if name not in NOT_IN_QUERY:
            _collect(name, schema, whole.get("$defs", {}), found)
    return found


def required(product: str) -> frozenset[str]:
    """Members that a query must hold."""
    return frozenset(_schema(product).get("required", ())) - {*NOT_IN_QUERY}


def _collect(name: str, schema: Schema, definitions: Schema, found: dict[str, Schema]) -> None:
    choices = _choices(schema, definitions)
    objects = [one for one in choices if one.get("type") == "object" and "properties" in one]
    found[name] = {**schema, "choices": choices}
    for one in objects:
        for inner, below in one["properties"].items():
            _collect(f"{name}.{inner}", below, definitions, found)


def _choices(schema: Schema, definitions: Schema) -> list[Schema]:
    """The plain schemas a value may have, null left out."""
    if "$ref" in schema:
        return _choices(definitions[schema["$ref"].rsplit("/", 1)[1]], definitions)
    for word in ("anyOf", "oneOf", "allOf"):
        if word in schema:
            return [
                plain for one in schema[word] for plain in _choices(one, definitions) if plain.get("type") != "null"
            ]
    return [{**schema, "items": _choices(schema["items"], definitions)} if "items" in schema else schema]


def document(product: str, pairs: Iterable[tuple[str, str]]) -> dict[str, Any]:
    """The request that a query stands for, without its set.

    Raises
    ------
    Problem
        422: a name that is no member, one given twice, or a value that cannot be read.
    """
    known = members(product)
    made: dict[str, Any] = {}
    for name, text in pairs:
        if name not in known:
            raise at(name.split("."), f"is no member of a {product} by GET", "see the address's parameters at /docs")
        holder: Any = made
        *outer, last = name.split(".")
        for step in outer:
            holder = holder.setdefault(step, {})
            if not isinstance(holder, dict):
                break
        if not isinstance(holder, dict) or last in holder:
            raise at(name.split("."), "is given twice", "give it once")
        holder[last] = _value(name, text, known[name]["choices"])
    return made


def _value(name: str, text: str, choices: Sequence[Schema]) -> Any:  # noqa: ANN401
    found = _first(text, choices)
    if found is not _UNREAD:
        return found
    wanted = " or ".join(sorted({_words(choice) for choice in choices}))
    raise at(name.split("."), "cannot be read", f"give {wanted}")


_UNREAD = object()
_NUMBERS = ("number", "integer")


def _first(text: str, choices: Sequence[Schema]) -> Any:  # noqa: ANN401
    """The text as the first of the choices that it can be read as."""
    return next((found for choice in choices if (found := _read(text, choice)) is not _UNREAD), _UNREAD)


def _read(text: str, schema: Schema) -> Any:  # noqa: ANN401
    kind = schema.get("type")
    if kind == "string" or ("enum" in schema and kind is None) or "const" in schema:
        allowed = schema.get("enum", [schema["const"]] if "const" in schema else None)
        return text if allowed is None or text in allowed else _UNREAD
    if kind == "boolean":
        return {"true": True, "false": False}.get(text, _UNREAD)
    if kind in _NUMBERS:
        found = _json(text)
        return found if type(found) in (int, float) else _UNREAD
    if kind == "array" and not text.startswith("["):
        parts = [_first(part, schema.get("items", [])) for part in text.split(",")]
        return _UNREAD if any(part is _UNREAD for part in parts) else parts
    return _json(text) if kind in ("array", "object") else _UNREAD


def _json(text: str) -> Any:  # noqa: ANN401
    try:
        return orjson.loads(text)
    except orjson.JSONDecodeError:
        return _UNREAD


def _words(schema: Schema) -> str:
    if "enum" in schema:
        return f"one of {', '.join(map(str, schema['enum']))}"
    if "const" in schema:
        return str(schema["const"])
    return {
        "string": "text",
        "boolean": "true or false",
        "number": "a number",
        "integer": "a whole number",
        "array": "a list with commas, or as JSON",
        "object": "an object as JSON, or its members by dots",
    }.get(schema.get("type", ""), "JSON")

"""From the bytes of a request to its checked model.

Two media types are understood:

application/json
    The whole request, columns included.
multipart/form-data
    A part ``request`` with the JSON of the request, without columns in its ``set``; and a part
    ``columns`` with the columns as ``text/csv`` or ``application/x-npz``.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
import orjson
import python_multipart
from numpy.typing import NDArray
from pydantic import ValidationError
from python_multipart.exceptions import FormParserError
from python_multipart.multipart import MultipartParser, parse_options_header

from engine.errors import InputError, TooLargeError
from engine.readers import read_delimited, read_npz
from service.problems import Problem, at, from_validation
from service.schemas.coefficient_set import COLUMN_NAMES
from service.schemas.products import PRODUCTS, ProductIn

JSON = "application/json"
MULTIPART = "multipart/form-data"
CSV = "text/csv"
NPZ = "application/x-npz"
UNPACKED_RATIO = 8
"""An archive may unpack to this many times the longest body; columns hardly compress further."""


@dataclass(frozen=True, slots=True)
class Table:
    """Columns sent beside a request: their media type and bytes."""

    media_type: str
    data: bytes


def read(product: str | None, content_type: str, body: bytes, *, max_body_bytes: int) -> tuple[str, ProductIn]:
    """Parse and check a request.

    Parameters
    ----------
    product : str or None
        What the address asks for; None: the request itself says so.

    Raises
    ------
    Problem
        415, 400 or 422, naming the place.
    """
    media_type = content_type.split(";")[0].strip().lower()
    if media_type == JSON:
        return check(product, decode(body), None, max_body_bytes=max_body_bytes)
    if media_type == MULTIPART:
        request, table = _parts(content_type, body)
        return check(product, request, table, max_body_bytes=max_body_bytes)
    raise Problem(
        "unsupported-media-type",
        f"The body is {media_type[:60] or 'of no stated type'}; send {JSON}, or {MULTIPART} with the parts request "
        f"({JSON}) and columns ({CSV} or {NPZ}).",
    )


def decode(body: bytes) -> dict[str, Any]:
    """A JSON object.

    Raises
    ------
    Problem
        400: not JSON, not an object, or a number that JSON does not know.
    """
    try:
        document = orjson.loads(body)
    except orjson.JSONDecodeError as fault:
        raise Problem(
            "malformed-body",
            f"The body is not JSON: {fault.msg.lower()}, line {fault.lineno}, column {fault.colno}. "
            "NaN and infinity are no JSON numbers; a phase that is unknown is null.",
        ) from fault
    if not isinstance(document, dict):
        raise Problem("malformed-body", "The body is JSON, but not an object; send one object with the member set.")
    return document


def check(
    product: str | None, document: dict[str, Any], table: Table | None, *, max_body_bytes: int
) -> tuple[str, ProductIn]:
    """Check a request against the schema of its product, joined with the columns sent beside it."""
    named = document.get("product")
    if product is None:
        if not isinstance(named, str) or named not in PRODUCTS:
            raise at(("product",), "names no product", f"give one of {', '.join(PRODUCTS)}")
        product = named
    elif named is not None and named != product:
        raise at(("product",), f"differs from the address, which asks for a {product}", "make the two agree")
    if table is not None:
        document = _joined(document, columns(table, max_body_bytes=max_body_bytes))
    try:
        return product, PRODUCTS[product].model_validate(document)
    except ValidationError as fault:
        raise from_validation(fault) from fault


def columns(table: Table, *, max_body_bytes: int) -> dict[str, NDArray[np.float64]]:
    """Columns of a table.

    Raises
    ------
    Problem
        415: a media type that is not understood; 422: a table at fault.
    """
    try:
        if table.media_type == CSV:
            return read_delimited(table.data, COLUMN_NAMES)
        if table.media_type == NPZ:
            return read_npz(table.data, COLUMN_NAMES, max_bytes=UNPACKED_RATIO * max_body_bytes)
    except InputError as fault:
        kind = "too-costly" if isinstance(fault, TooLargeError) else "invalid-request"
        raise at(("set",), f"the part columns: {fault.reason}", fault.cure, kind=kind) from fault
    raise Problem("unsupported-media-type", f"The part columns is {table.media_type[:60]!r}; send {CSV} or {NPZ}.")


def _joined(document: dict[str, Any], found: Mapping[str, NDArray[np.float64]]) -> dict[str, Any]:
    given = document.get("set")
    if not isinstance(given, dict):
        raise at(("set",), "is absent or not an object", "give the cell and the meaning of the columns there")
    twice = sorted(set(given) & set(found))
    if twice:
        raise at(("set", twice[0]), "is given in the request and again in the part columns", "give it once")
    return {**document, "set": {**given, **found}}


def _parts(content_type: str, body: bytes) -> tuple[dict[str, Any], Table | None]:
    """The parts of a multipart body."""
    parts = _split(content_type, body)
    unknown = sorted(set(parts) - {"request", "columns"})
    if unknown or "request" not in parts:
        what = f"has the part {unknown[0][:40]!r}" if unknown else "has no part request"
        raise Problem("malformed-body", f"The form {what}; send the parts request and columns.")
    table = parts.get("columns")
    return decode(parts["request"].data), table


def _split(content_type: str, body: bytes) -> dict[str, Table]:
    _, options = parse_options_header(content_type)
    boundary = options.get(b"boundary")
    if not boundary:
        raise Problem("malformed-body", "The form names no boundary in its Content-Type.")
    collector = _Collector()
    try:
        parser = MultipartParser(boundary, collector.callbacks())
        parser.write(body)
        parser.finalize()
    except FormParserError as fault:
        raise Problem("malformed-body", f"The form cannot be read: {str(fault)[:200]}.") from fault
    if not collector.ended:
        raise Problem("malformed-body", "The form is cut short: its closing boundary is missing.")
    return collector.parts


class _Collector:
    """Gathers the parts that the parser calls out."""

    def __init__(self) -> None:
        self.parts: dict[str, Table] = {}
        self.ended = False
        self._headers: dict[bytes, bytes] = {}
        self._name, self._value, self._data = bytearray(), bytearray(), bytearray()

    def callbacks(self) -> python_multipart.multipart.MultipartCallbacks:
        return {
            "on_part_begin": self._begin,
            "on_header_field": lambda data, start, end: self._name.extend(data[start:end]),
            "on_header_value": lambda data, start, end: self._value.extend(data[start:end]),
            "on_header_end": self._header,
            "on_part_data": lambda data, start, end: self._data.extend(memoryview(data)[start:end]),
            "on_part_end": self._part,
            "on_end": self._end,
        }

    def _begin(self) -> None:
        self._headers = {}
        self._data = bytearray()

    def _header(self) -> None:
        self._headers[bytes(self._name).lower()] = bytes(self._value)
        self._name, self._value = bytearray(), bytearray()

    def _part(self) -> None:
        _, options = parse_options_header(self._headers.get(b"content-disposition", b""))
        name = options.get(b"name", b"").decode("utf-8", "replace")
        if name in self.parts:
            raise Problem("malformed-body", f"The form has the part {name[:40]!r} twice.")
        media_type = self._headers.get(b"content-type", b"").split(b";")[0].strip().lower().decode("ascii", "replace")
        self.parts[name] = Table(media_type, bytes(self._data))

    def _end(self) -> None:
        self.ended = True

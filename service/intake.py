"""From the bytes of a request to its checked model.

Two media types are understood:

application/json
    The whole request, columns included.
multipart/form-data
    A part ``request`` with the JSON of the request, without columns in its ``set``; and either a part
    ``columns`` with the columns as ``text/csv`` or ``application/x-npz``, or a part ``reflections``
    with a laboratory's file, which is prepared as ``set.preparation`` says.

The second set of a combination or a comparison comes in the same way, as ``with_columns`` or
``with_reflections``. An inspection, and a set to be kept, take a file of reflections as the whole body too.

A set of the store is named by ``set_id`` in place of the member ``set``, and by an object with ``set_id``
alone where a second set stands.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from typing import Any

import numpy as np
import orjson
from numpy.typing import NDArray
from pydantic import ValidationError

from engine.errors import InputError, TooLargeError
from engine.readers import read_delimited, read_npz
from service.forms import split
from service.parts import Part
from service.problems import Problem, at, from_validation
from service.schemas.coefficient_set import COLUMN_NAMES, StoredSetIn
from service.schemas.films import SCAN_COLUMNS, SCANS
from service.schemas.requests import INSPECT, KEEP, REQUESTS, Request
from service.schemas.treatment import SetRequestIn

JSON = "application/json"
MULTIPART = "multipart/form-data"
CSV = "text/csv"
NPZ = "application/x-npz"
FILE_TYPES = ("chemical/x-cif", CSV, "text/tab-separated-values", "text/plain", NPZ, "application/octet-stream")
"""Media types of a file of reflections; its content decides what it is."""
FILES = ("columns", "reflections", "reference", "with_columns", "with_reflections", "with_reference")
"""Parts of a form that hold files."""
UNPACKED_RATIO = 8
"""An archive may unpack to this many times the longest body; columns hardly compress further."""


Shelf = Callable[[str], StoredSetIn]
FILE_ALONE: dict[str, dict[str, Any]] = {INSPECT: {"set": {}}, KEEP: {"set": {"values": "structure_factor"}}}
"""Requests that a file of reflections makes by itself; such files hold structure factors."""
NO_MEMBERS: Mapping[str, Any] = {}


def read(
    product: str | None,
    content_type: str,
    body: bytes,
    *,
    max_body_bytes: int,
    shelf: Shelf | None = None,
    members: Mapping[str, Any] = NO_MEMBERS,
) -> tuple[str, Request]:
    """Parse and check a request.

    Parameters
    ----------
    product : str or None
        What the address asks for; None: the request itself says so.
    shelf : callable, optional
        Hands out sets of the store by their ids.
    members : mapping
        Members of the request that came with the address.

    Raises
    ------
    Problem
        415, 400 or 422, naming the place.
    """
    media_type = content_type.split(";")[0].strip().lower()
    files: Mapping[str, Part] = {}
    if media_type == JSON:
        document = decode(body)
    elif media_type == MULTIPART:
        document, files = _parts(content_type, body, product)
    elif product in FILE_ALONE and media_type in FILE_TYPES:
        document, files = FILE_ALONE[product], {"reflections": Part(media_type, body)}
    else:
        send = f"{JSON}, or {MULTIPART} with the parts request ({JSON}) and columns ({CSV} or {NPZ})"
        if product in FILE_ALONE:
            send = f"the file as {', '.join(FILE_TYPES)}, or as the part reflections of {MULTIPART}"
        raise Problem("unsupported-media-type", f"The body is {media_type[:60] or 'of no stated type'}; send {send}.")
    twice = sorted(set(members) & set(document))
    if twice:
        raise at((twice[0],), "is given in the body and again in the address", "give it once")
    return check(product, {**document, **members}, files, max_body_bytes=max_body_bytes, shelf=shelf)


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
    product: str | None,
    document: dict[str, Any],
    files: Mapping[str, Part],
    *,
    max_body_bytes: int,
    shelf: Shelf | None = None,
) -> tuple[str, Request]:
    """Check a request against the schema of its product, joined with what was sent beside it.

    Parameters
    ----------
    files : mapping
        By the names of `FILES`.

    Raises
    ------
    Problem
        As `read`.
    """
    named = document.get("product")
    if product is None:
        if not isinstance(named, str) or named not in REQUESTS:
            raise at(("product",), "names no product", f"give one of {', '.join(REQUESTS)}")
        product = named
    elif named is not None and named != product:
        raise at(("product",), f"differs from the address, which asks for {product}", "make the two agree")
    if issubclass(REQUESTS[product], SetRequestIn):
        document = _fetched(document, shelf)
    for prefix in ("", "with_"):
        found: dict[str, NDArray[np.float64] | Part] = {
            name: files[prefix + name] for name in ("reflections", "reference") if prefix + name in files
        }
        table = files.get(f"{prefix}columns")
        place = _place(prefix, document) if product not in SCANS else ("scan",)
        if table is not None:
            names = COLUMN_NAMES if product not in SCANS else SCAN_COLUMNS
            part = f"{prefix}columns"
            found |= columns(table, max_body_bytes=max_body_bytes, part=part, place=place, names=names)
        if found:
            document = _joined(document, found, place)
    try:
        return product, REQUESTS[product].model_validate(document)
    except ValidationError as fault:
        raise from_validation(fault) from fault


def _fetched(document: dict[str, Any], shelf: Shelf | None) -> dict[str, Any]:
    """The document with sets of the store where it names them."""
    if "set_id" in document:
        if "set" in document:
            raise at(("set_id",), "is given beside a set", "give one of the two")
        stored = _stored(document["set_id"], ("set_id",), shelf)
        document = {"set": stored, **{name: value for name, value in document.items() if name != "set_id"}}
    for place in (("combination", "with"), ("combination", "third"), ("with",)):
        *outer, last = place
        holder: Any = document
        for name in outer:
            holder = holder.get(name) if isinstance(holder, dict) else None
        named = holder.get(last) if isinstance(holder, dict) else None
        if isinstance(named, dict) and set(named) == {"set_id"}:
            whole: Any = {**holder, last: _stored(named["set_id"], (*place, "set_id"), shelf)}
            document = {**document, outer[0]: whole} if outer else whole
    return document


def _stored(identity: object, place: tuple[str, ...], shelf: Shelf | None) -> StoredSetIn:
    if not isinstance(identity, str):
        raise at(place, "is not text", "give the id of a set of the store")
    if shelf is None:
        raise at(place, "names a set of the store, and there is none here", "give the set itself")
    return shelf(identity)


def _place(prefix: str, document: dict[str, Any]) -> tuple[str, ...]:
    """Where the set stands that files with this prefix belong to."""
    if not prefix:
        return ("set",)
    return ("combination", "with") if "combination" in document else ("with",)


def columns(
    table: Part,
    *,
    max_body_bytes: int,
    part: str = "columns",
    place: tuple[str, ...] = ("set",),
    names: Sequence[str] = COLUMN_NAMES,
) -> dict[str, NDArray[np.float64]]:
    """Columns of a table, for the set at a place.

    Raises
    ------
    Problem
        415: a media type that is not understood; 422: a table at fault.
    """
    try:
        if table.media_type == CSV:
            return read_delimited(table.data, names)
        if table.media_type == NPZ:
            return read_npz(table.data, names, max_bytes=UNPACKED_RATIO * max_body_bytes)
    except InputError as fault:
        kind = "too-costly" if isinstance(fault, TooLargeError) else "invalid-request"
        raise at(place, f"the part {part}: {fault.reason}", fault.cure, kind=kind) from fault
    raise Problem("unsupported-media-type", f"The part {part} is {table.media_type[:60]!r}; send {CSV} or {NPZ}.")


def _joined(
    document: dict[str, Any], found: Mapping[str, NDArray[np.float64] | Part], place: tuple[str, ...]
) -> dict[str, Any]:
    """The document with columns or files in the set at a place."""
    given: Any = document
    for name in place:
        given = given.get(name) if isinstance(given, dict) else None
    if not isinstance(given, dict):
        raise at(place, "is absent or not an object", "give the cell and the meaning of the columns there")
    twice = sorted(set(given) & set(found))
    if twice:
        raise at((*place, twice[0]), "is given in the request and again in a part of the form", "give it once")
    whole: Any = {**given, **found}
    for depth in range(len(place) - 1, -1, -1):
        outer: Any = document
        for name in place[:depth]:
            outer = outer[name]
        whole = {**outer, place[depth]: whole}
    return dict(whole)


def _parts(content_type: str, body: bytes, product: str | None) -> tuple[dict[str, Any], dict[str, Part]]:
    """The request and the files of a form."""
    parts = split(content_type, body)
    unknown = sorted(set(parts) - {"request", *FILES})
    if unknown:
        raise Problem(
            "malformed-body",
            f"The form has the part {unknown[0][:40]!r}; send the part request, and columns or reflections.",
        )
    files = {name: part for name, part in parts.items() if name != "request"}
    if "request" not in parts:
        if product not in FILE_ALONE:
            raise Problem("malformed-body", "The form has no part request; send it as JSON.")
        return FILE_ALONE[product], files
    return decode(parts["request"].data), files

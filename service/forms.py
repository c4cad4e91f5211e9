"""Forms (multipart/form-data, RFC 7578), parsed whole, off the event loop."""

from __future__ import annotations

import re

import python_multipart
from python_multipart.exceptions import FormParserError
from python_multipart.multipart import MultipartParser, parse_options_header

from service.parts import Part
from service.problems import Problem

_MEDIA_TYPE = re.compile(r"[a-z0-9!#$&^_.+-]{1,64}/[a-z0-9!#$&^_.+-]{1,64}")
"""RFC 6838 §4.2."""


def split(content_type: str, body: bytes) -> dict[str, Part]:
    """The parts of a form by their names.

    Raises
    ------
    Problem
        400: no boundary, not a form, cut short, or a part that comes twice.
    """
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
        self.parts: dict[str, Part] = {}
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
        if media_type and not _MEDIA_TYPE.fullmatch(media_type):
            raise Problem("malformed-body", f"The part {name[:40]!r} has a Content-Type that is none.")
        file = options.get(b"filename", b"").decode("utf-8", "replace")
        if not file.isprintable():
            raise Problem("malformed-body", f"The part {name[:40]!r} has a file name that does not print.")
        self.parts[name] = Part(media_type, bytes(self._data), file)

    def _end(self) -> None:
        self.ended = True

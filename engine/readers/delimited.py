"""Comma-separated text with a header line."""

from __future__ import annotations

import io
import re
from collections.abc import Collection

import numpy as np

from engine.arrays import FloatArray
from engine.errors import InputError

_EMPTY = re.compile(rb"(?:(?<=,)|(?<=\n)|(?<=\A))[ \t]*(?=,)|(?<=,)[ \t]*(?=\n|#|\Z)")
_BLANK = re.compile(rb"\n[ \t]+(?=\n|\Z)")


def read_delimited(text: bytes, names: Collection[str]) -> dict[str, FloatArray]:
    """Columns of a comma-separated table.

    The first line that is neither blank nor a comment (``#``) names the columns. An empty field
    is read as NaN, which means unknown.

    Parameters
    ----------
    text : bytes
        UTF-8.
    names : collection of str
        Column names that are understood.

    Returns
    -------
    dict of str to float64 array, each of shape (rows,)

    Raises
    ------
    InputError
        A header that is absent, repeats a name or has an unknown one; no rows; a field that is
        not a number or a row of another length, with its line and column.
    """
    if b"\x00" in text:
        raise InputError((), "the text holds a NUL byte", "send plain comma-separated text")
    text = text.replace(b"\r\n", b"\n").replace(b"\r", b"\n")
    if b" \n" in text or b"\t\n" in text or text.endswith((b" ", b"\t")):
        text = _BLANK.sub(b"\n", text)
    start, header = _header(text)
    columns = [name.strip() for name in header.split(",")]
    unknown = [name for name in columns if name not in names]
    if unknown:
        shown = unknown[0][:40]
        raise InputError((), f"the header names the column {shown!r}", f"use the names {', '.join(sorted(names))}")
    if len(set(columns)) < len(columns):
        raise InputError((), "the header names a column twice", "name each column once")
    body = _EMPTY.sub(b"nan", text[start:])
    if len(columns) == 1:
        # A blank line in a table of one column cannot be told from an empty field.
        body = text[start:]
    if not re.search(rb"^[ \t]*[^#\s]", body, re.MULTILINE):
        raise InputError((), "the table has a header and no rows", "give at least one row")
    try:
        table = np.loadtxt(io.BytesIO(body), delimiter=",", comments="#", ndmin=2)
    except ValueError as fault:
        raise _located(text, start, columns) from fault
    if table.shape[1] != len(columns):
        raise _located(text, start, columns)
    return {name: np.ascontiguousarray(column) for name, column in zip(columns, table.T, strict=True)}


def _header(text: bytes) -> tuple[int, str]:
    """Offset of the first line after the header, and the header."""
    start = 3 if text.startswith(b"\xef\xbb\xbf") else 0
    while start < len(text):
        end = text.find(b"\n", start)
        stop = len(text) if end < 0 else end
        line = text[start:stop].strip()
        start = stop + 1
        if line and not line.startswith(b"#"):
            try:
                return start, line.decode("utf-8")
            except UnicodeDecodeError as fault:
                raise InputError((), "the header is not UTF-8 text", "send plain UTF-8 text") from fault
    raise InputError((), "the table is empty", "begin with a line that names the columns")


def _located(text: bytes, start: int, columns: list[str]) -> InputError:
    """The first field at fault, found field by field: only ever done once, to report it."""
    line_number = text.count(b"\n", 0, start)
    for offset, line in enumerate(text[start:].split(b"\n"), start=1):
        content = line.split(b"#")[0].strip()
        if not content:
            continue
        fields = content.split(b",")
        where = f"line {line_number + offset}"
        if len(fields) != len(columns):
            return InputError((), f"{where} has {len(fields)} fields", f"give {len(columns)}: {', '.join(columns)}")
        for place, (field, name) in enumerate(zip(fields, columns, strict=True), start=1):
            if not _is_number(field):
                shown = field.strip()[:20].decode("utf-8", "replace")
                return InputError((), f"{where}, field {place} ({name}): {shown!r} is not a number", "give a number")
    return InputError((), "the table cannot be read", "check its quoting and line ends")


def _is_number(field: bytes) -> bool:
    try:
        float(field.strip() or b"nan")
    except ValueError:
        return False
    # Python alone reads 1_000 as a number.
    return b"_" not in field

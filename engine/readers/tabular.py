"""Delimited text with a header line, read in chunks of lines."""

from __future__ import annotations

import io
import re
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import BinaryIO

import numpy as np

from engine.arrays import BoolArray, FloatArray, IntArray
from engine.errors import InputError
from engine.readers.mapping import STATUS_LETTERS, Status, resolve
from engine.readers.table import ReadTable, make_table

Progress = Callable[[int, int], None]

BLANKS = " "
"""The delimiter that stands for any run of blanks and tabs."""
DELIMITERS = (",", ";", "\t", BLANKS)
CHUNK_BYTES = 2**22
LONGEST_LINE = 2**16
"""A line longer than this is not a row of a table; without it a file without line ends would be read whole."""
_NEWLINE = 10
_BEYOND_ASCII = bytes(range(128)) + b"~" * 128
_COMMENT = re.compile(rb"#[^\n]*")
_ONLY_BLANKS = re.compile(rb"^[ \t]+$", re.MULTILINE)


@dataclass(frozen=True, slots=True)
class _Layout:
    """What the header says: delimiter, columns of the file, and the quantity of each."""

    delimiter: str
    names: tuple[str, ...]
    quantities: tuple[str | None, ...]
    where: tuple[str, ...]

    @property
    def used(self) -> list[int]:
        return [place for place, quantity in enumerate(self.quantities) if quantity is not None]


def read_tabular(
    stream: BinaryIO,
    total: int,
    *,
    delimiter: str | None = None,
    mapping: Mapping[str, str] | None = None,
    source: str = "",
    progress: Progress | None = None,
) -> ReadTable:
    """Reflections of a table in text.

    The first line that is neither blank nor a comment (``#`` to the end of the line) names the
    columns. An empty field, or ``nan``, is unknown; a column ``status`` holds letters of
    ``engine.readers.mapping.STATUS_LETTERS``. Numbers have a decimal point.

    Parameters
    ----------
    stream : binary file
        UTF-8 or ASCII text.
    total : int
        Its size in bytes, for `progress`.
    delimiter : {",", ";", "\\t", " "}, optional
        A blank stands for any run of blanks and tabs. Left out, it is the first of comma,
        semicolon, tab and blank that the header line has.
    mapping : mapping of str to str, optional
        As of `engine.readers.mapping.resolve`.
    source : str
        File name for messages.
    progress : callable, optional
        Called with bytes done and bytes in all after each chunk of lines.

    Raises
    ------
    InputError
        No header, columns that nothing names, a row of another length, a field that is not a
        number; with line and column. Nothing is returned of a file that has a fault.
    """
    where = (source,) if source else ()
    if delimiter is not None and delimiter not in DELIMITERS:
        raise InputError("delimiter", "is not one that is read", 'give ",", ";", a tab or a blank')
    reader = _Lines(stream, where)
    header, line = _header(reader, where)
    layout = _layout(header, line, delimiter, mapping, where)
    parts: list[FloatArray] = []
    at: list[IntArray] = []
    while (chunk := reader.next()) is not None:
        table, numbered = _parse(chunk, reader.first_line, layout)
        if numbered.size:
            parts.append(table)
            at.append(numbered)
        if progress is not None:
            progress(reader.done, total)
    if not parts:
        raise InputError(where, "the table has a header and no rows", "give at least one row")
    columns: dict[str, FloatArray] = {}
    names: dict[str, str] = {}
    for place, column in enumerate(layout.used):
        quantity = str(layout.quantities[column])
        columns[quantity] = np.concatenate([part[place] for part in parts])
        names[quantity] = layout.names[column]
    lines = np.concatenate(at)
    # The parts are as large as the whole, and the checks need room of their own.
    parts.clear()
    at.clear()
    return make_table(columns, names, kind="delimited", source=source, lines=lines)


class _Lines:
    """Chunks of whole lines of a stream, with unix line ends."""

    def __init__(self, stream: BinaryIO, where: tuple[str, ...]) -> None:
        self.stream = stream
        self.where = where
        self.done = 0
        self.first_line = 1
        self._next_line = 1
        self._rest = b""

    def next(self) -> bytes | None:
        """The next chunk, which ends with a line end; None at the end of the stream."""
        self.first_line = self._next_line
        block = self.stream.read(CHUNK_BYTES)
        while block:
            self.done += len(block)
            # A chunk that ends with a carriage return keeps it for the line feed that may follow.
            chunk = self._rest + block
            held = b"\r" if chunk.endswith(b"\r") else b""
            chunk = chunk.removesuffix(b"\r").replace(b"\r\n", b"\n").replace(b"\r", b"\n")
            end = chunk.rfind(b"\n") + 1
            self._rest = chunk[end:] + held
            self._check_length(chunk[end:])
            if end:
                return self._counted(chunk[:end])
            block = self.stream.read(CHUNK_BYTES)
        chunk = self._rest.replace(b"\r", b"\n")
        self._rest = b""
        if not chunk:
            return None
        return self._counted(chunk if chunk.endswith(b"\n") else chunk + b"\n")

    def give_back(self, chunk: bytes) -> None:
        """Put lines before those that are still to come."""
        self._next_line -= chunk.count(b"\n")
        self._rest = chunk + self._rest

    def _counted(self, chunk: bytes) -> bytes:
        if b"\x00" in chunk:
            line = self.first_line + chunk.count(b"\n", 0, chunk.index(b"\x00"))
            raise InputError((*self.where, f"line {line}"), "there is a NUL byte", "give plain text")
        self._next_line += chunk.count(b"\n")
        return chunk

    def _check_length(self, rest: bytes) -> None:
        if len(rest) > LONGEST_LINE:
            reason = f"is longer than {LONGEST_LINE} bytes"
            raise InputError((*self.where, "a line"), reason, "give plain text with one row a line")


def _header(reader: _Lines, where: tuple[str, ...]) -> tuple[str, int]:
    """The line that names the columns, and its number; the reader stands behind it."""
    while (chunk := reader.next()) is not None:
        if reader.first_line == 1:
            chunk = chunk.removeprefix(b"\xef\xbb\xbf")
        start = 0
        line = reader.first_line
        while start < len(chunk):
            end = chunk.index(b"\n", start)
            content = chunk[start:end].split(b"#")[0]
            start = end + 1
            if content.strip():
                reader.give_back(chunk[start:])
                try:
                    return content.decode("utf-8"), line
                except UnicodeDecodeError as fault:
                    place = (*where, f"line {line}")
                    raise InputError(place, "the header is not UTF-8 text", "write plain UTF-8 text") from fault
            line += 1
    raise InputError(where, "the table is empty", "begin with a line that names the columns")


def _layout(
    header: str, line: int, delimiter: str | None, mapping: Mapping[str, str] | None, where: tuple[str, ...]
) -> _Layout:
    place = (*where, f"line {line}")
    chosen = next((mark for mark in DELIMITERS if mark in header.strip()), ",") if delimiter is None else delimiter
    fields = header.split() if chosen == BLANKS else header.split(chosen)
    names = tuple(_unquoted(field.strip()) for field in fields)
    if "" in names:
        raise InputError(place, f"column {names.index('') + 1} of the header has no name", "name every column")
    if len(set(names)) < len(names):
        double = next(name for name in names if names.count(name) > 1)
        raise InputError(place, f"the header names the column {double[:40]!r} twice", "name each column once")
    quantities = resolve(names, mapping, where=place)
    if not any(quantities):
        raise InputError(place, "all columns are ignored", "map at least one to a quantity")
    return _Layout(chosen, names, quantities, where)


def _unquoted(name: str) -> str:
    return name[1:-1].strip() if len(name) > 1 and name[0] == name[-1] == '"' else name


def _parse(chunk: bytes, first_line: int, layout: _Layout) -> tuple[FloatArray, IntArray]:
    """Used columns, shape (columns, rows), and the lines of the rows."""
    if b"#" in chunk:
        chunk = _COMMENT.sub(b"", chunk)
    content, fields = _count_fields(chunk, layout)
    lines = first_line + np.flatnonzero(content)
    wrong = np.flatnonzero(fields[content] != len(layout.names))
    if wrong.size:
        line = int(lines[wrong[0]])
        have = int(fields[content][wrong[0]])
        reason = f"there are {have} fields, where the header names {len(layout.names)} columns"
        raise InputError((*layout.where, f"line {line}"), reason, f"give {', '.join(layout.names)}")
    if not lines.size:
        return np.empty((len(layout.used), 0)), lines
    body = _ready(chunk, content, layout.delimiter)
    converters: dict[int | str, Callable[[str], float]] = {
        place: _status_number for place, quantity in enumerate(layout.quantities) if quantity == "status"
    }
    try:
        table = np.loadtxt(
            # The library takes some characters beyond ASCII for blanks; none of them is part of a number.
            io.BytesIO(body.translate(_BEYOND_ASCII)),
            delimiter=None if layout.delimiter == BLANKS else layout.delimiter,
            comments=None,
            ndmin=2,
            usecols=layout.used,
            converters=converters or None,
            encoding="ascii",
            unpack=True,
        )
    except ValueError as fault:
        raise _located(chunk, first_line, layout) from fault
    if table.shape[1] != lines.size or np.isinf(table).any():
        raise _located(chunk, first_line, layout)
    return np.ascontiguousarray(table), lines


def _count_fields(chunk: bytes, layout: _Layout) -> tuple[BoolArray, IntArray]:
    """Whether each line has content, and its number of fields."""
    text = np.frombuffer(chunk, dtype=np.uint8)
    ends = np.flatnonzero(text == _NEWLINE)
    starts = np.concatenate([[0], ends[:-1] + 1])
    visible = text > ord(" ")
    content = np.logical_or.reduceat(visible, starts)
    if layout.delimiter == BLANKS:
        begins = visible.copy()
        begins[1:] &= ~visible[:-1]
        return content, np.add.reduceat(begins, starts, dtype=np.int64)
    delimiter = text == ord(layout.delimiter)
    content |= np.logical_or.reduceat(delimiter, starts)
    return content, np.add.reduceat(delimiter, starts, dtype=np.int64) + 1


def _ready(chunk: bytes, content: BoolArray, delimiter: str) -> bytes:
    """The chunk with empty fields filled with nan and without the blanks of blank lines."""
    if delimiter != BLANKS:
        text = np.frombuffer(chunk, dtype=np.uint8)
        at_delimiter = text == ord(delimiter)
        at_end = text == _NEWLINE
        marks = np.flatnonzero(at_delimiter | at_end)
        starts = np.concatenate([[0], marks[:-1] + 1])
        empty = ~np.logical_or.reduceat((text > ord(" ")) & ~at_delimiter, starts)
        # A line of one empty field is a blank line.
        line = np.cumsum(at_end[marks]) - at_end[marks]
        holes = marks[empty & content[line]]
        if holes.size:
            filler = np.tile(np.frombuffer(b"nan", dtype=np.uint8), holes.size)
            chunk = np.insert(text, np.repeat(holes, 3), filler).tobytes()
    return chunk if content.all() else _ONLY_BLANKS.sub(b"", chunk)


def _status_number(text: str) -> float:
    word = text.strip()
    if word in ("nan", ""):
        return float(Status.UNSTATED)
    if word not in STATUS_LETTERS:
        raise ValueError(word)
    return float(STATUS_LETTERS[word])


def _located(chunk: bytes, first_line: int, layout: _Layout) -> InputError:
    """The first field at fault, found field by field: only ever done once, to report it."""
    mark = None if layout.delimiter == BLANKS else layout.delimiter.encode()
    for number, line in enumerate(chunk.split(b"\n"), start=first_line):
        if not line.strip():
            continue
        for place, field in enumerate(line.split(mark)):
            quantity = layout.quantities[place]
            text = field.strip().decode("utf-8", "replace")
            if quantity is None or _is_good(text, quantity):
                continue
            path = (*layout.where, f"line {number}", f"column {place + 1} ({layout.names[place]})")
            if quantity == "status":
                return InputError(path, f"{text[:20]!r} is not a status", f"give one of {' '.join(STATUS_LETTERS)}")
            return InputError(path, f"{text[:20]!r} is not a finite number", "give numbers with a decimal point")
    return InputError(layout.where, "the table cannot be read", "check its quoting and line ends")


def _is_good(text: str, quantity: str) -> bool:
    if quantity == "status":
        return text in ("", "nan") or text in STATUS_LETTERS
    try:
        value = float(text or "nan")
    except ValueError:
        return False
    # Python alone reads 1_000, and digits of other scripts, as numbers.
    return text.isascii() and "_" not in text and abs(value) != float("inf")

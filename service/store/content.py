"""What is kept of a set, and the name that follows from it.

A set's content is its document, without what is at its default, and its columns or files. The id is
the SHA-256 of these, so the same content has the same id wherever and whenever it is sent.
"""

from __future__ import annotations

import hashlib
from dataclasses import dataclass
from typing import Any

import numpy as np
import orjson
from numpy.typing import NDArray

from service.parts import Part
from service.schemas.coefficient_set import COLUMN_NAMES, CoefficientSetIn, StoredSetIn

DOCUMENT = "document"
"""Part that holds the document."""
FILE_NAMES = ("reflections", "reference")
COLUMN_TYPE = "application/x-float64"
"""Media type of a column: little-endian binary64, NaN where a phase is unknown."""
_JSON = "application/json"


class Damaged(Exception):
    """A stored set does not hash to its id."""


@dataclass(frozen=True, slots=True)
class Content:
    """All parts of a set by their names: the document, then columns or files.

    Attributes
    ----------
    parts : dict of str to Part
    """

    parts: dict[str, Part]

    @property
    def id(self) -> str:
        """SHA-256 over names of parts, lengths and bytes, in the order of the names; hexadecimal.

        What a file was called, and as what it was announced, is no part of it: its bytes decide how it is read.
        """
        total = hashlib.sha256(b"densityloom set 1\n")
        for name in sorted(self.parts):
            part = self.parts[name]
            total.update(orjson.dumps([name, len(part.data)]))
            total.update(hashlib.sha256(part.data).digest())
        return total.hexdigest()

    @property
    def kind(self) -> str:
        """``columns`` or ``reflections``."""
        return "reflections" if "reflections" in self.parts else "columns"

    @property
    def file(self) -> str:
        """Name of the file of reflections as its sender gave it, or empty."""
        return self.parts["reflections"].name if "reflections" in self.parts else ""

    @property
    def bytes(self) -> int:
        return sum(len(part.data) for part in self.parts.values())

    def columns(self) -> dict[str, NDArray[np.float64]]:
        """The columns, in their usual order."""
        return {
            name: np.frombuffer(self.parts[name].data, dtype="<f8").astype(np.float64, copy=False)
            for name in COLUMN_NAMES
            if name in self.parts
        }

    def document(self) -> dict[str, Any]:
        """The document without columns and files."""
        found: dict[str, Any] = orjson.loads(self.parts[DOCUMENT].data)
        return found

    def checked(self, wanted: str) -> Content:
        """Itself, if its id is the one wanted.

        Raises
        ------
        Damaged
            It is not.
        """
        if self.id != wanted:
            raise Damaged(wanted)
        return self


def content_of(given: CoefficientSetIn) -> Content:
    """The content of a checked set."""
    held = (*COLUMN_NAMES, *FILE_NAMES)
    document = given.model_dump(mode="json", by_alias=True, exclude=set(held), exclude_defaults=True)
    parts = {DOCUMENT: Part(_JSON, orjson.dumps(document, option=orjson.OPT_SORT_KEYS))}
    for name in held:
        value = getattr(given, name)
        if isinstance(value, Part):
            parts[name] = value
        elif value is not None:
            parts[name] = Part(COLUMN_TYPE, np.ascontiguousarray(value, dtype="<f8").tobytes())
    return Content(parts)


def stored_set(content: Content) -> StoredSetIn:
    """The set again; the inverse of `content_of`."""
    files = {name: content.parts[name] for name in FILE_NAMES if name in content.parts}
    return StoredSetIn.model_validate({**content.document(), **content.columns(), **files})

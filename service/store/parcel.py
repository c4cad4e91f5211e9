"""A set on its way from the process that has read it to the process that keeps it: one run of bytes."""

from __future__ import annotations

from dataclasses import asdict, dataclass

import orjson

from service.parts import Part
from service.spool import Spool
from service.store.content import Content
from service.store.records import Facts, Labels

_LENGTH_BYTES = 8


@dataclass(frozen=True, slots=True)
class Parcel:
    """Everything that is kept of a set.

    Attributes
    ----------
    content : Content
    labels : Labels
    facts : Facts
    summary : bytes
        JSON.
    """

    content: Content
    labels: Labels
    facts: Facts
    summary: bytes


def pack(parcel: Parcel, spool: Spool) -> None:
    """Write a parcel: the length of its head, the head as JSON, then the parts as they are."""
    parts = parcel.content.parts
    head = orjson.dumps(
        {
            "labels": asdict(parcel.labels),
            "facts": asdict(parcel.facts),
            "summary": parcel.summary.decode(),
            "parts": [[name, part.media_type, part.name, len(part.data)] for name, part in parts.items()],
        }
    )
    spool.append(len(head).to_bytes(_LENGTH_BYTES, "big"))
    spool.append(head)
    for part in parts.values():
        spool.append(part.data)


def unpack(data: memoryview) -> Parcel:
    """The inverse of `pack`."""
    place = _LENGTH_BYTES + int.from_bytes(data[:_LENGTH_BYTES], "big")
    head = orjson.loads(data[_LENGTH_BYTES:place])
    parts: dict[str, Part] = {}
    for name, media_type, file, length in head["parts"]:
        parts[name] = Part(media_type, bytes(data[place : place + length]), file)
        place += length
    labels = Labels(name=head["labels"]["name"], tags=tuple(head["labels"]["tags"]))
    return Parcel(Content(parts), labels, Facts(**head["facts"]), head["summary"].encode())

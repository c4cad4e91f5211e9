"""Content codings (RFC 9110 §8.4): which a client takes, and what they make of a body."""

from __future__ import annotations

import gzip

import zstandard

CODINGS = ("zstd", "gzip")
"""In the order in which they are chosen between equals."""
SMALLEST = 1024
"""Bytes below which coding gains nothing."""
TEXTS = (
    *("application/json", "text/csv", "image/svg+xml", "model/gltf-binary"),
    *("application/x-samples-u8", "application/x-samples-u16"),
    *("text/html", "text/css", "text/javascript"),
)
"""Media types that shrink; binary64 and binary32 maps do not (7 %), pictures are compressed already."""
ZSTD_LEVEL = 1
GZIP_LEVEL = 5


def choose_coding(accepted: str, media_type: str, size: int) -> str | None:
    """The coding of an answer; None for the body as it is.

    Parameters
    ----------
    accepted : str
        The Accept-Encoding header.
    """
    if size < SMALLEST or media_type.split(";")[0] not in TEXTS:
        return None
    weights = dict(_weight(item) for item in accepted.lower().split(",") if item.strip())
    offered = [(weights.get(name, weights.get("*", 0.0)), -place, name) for place, name in enumerate(CODINGS)]
    best = max(offered)
    plain = weights.get("identity", 0.0)
    return best[2] if best[0] > 0 and best[0] >= plain else None


def _weight(item: str) -> tuple[str, float]:
    name, _, parameters = item.partition(";")
    text = parameters.strip().removeprefix("q=")
    try:
        return name.strip(), float(text) if parameters.strip() else 1.0
    except ValueError:
        return name.strip(), 0.0


def entity_tag(name: str, coding: str | None) -> str:
    """A strong entity tag, which differs by the coding (RFC 9110 §8.8.3)."""
    return f'"{name}"' if coding is None else f'"{name}-{coding}"'


def encode(body: memoryview, coding: str) -> bytes:
    """The body in a coding; the same bytes each time."""
    if coding == "zstd":
        return zstandard.ZstdCompressor(level=ZSTD_LEVEL).compress(body)
    return gzip.compress(body, GZIP_LEVEL, mtime=0)

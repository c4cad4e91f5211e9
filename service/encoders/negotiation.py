"""Which form an answer takes: ``?format=`` first, else the Accept header (RFC 9110 §12.5.1)."""

from __future__ import annotations

from dataclasses import dataclass

from service.problems import Problem
from service.schemas.analyses import ANALYSES
from service.schemas.film_models import MODELS
from service.schemas.films import SCANS

ARRAY_FORMATS = ("json", "npy", "npz")
ROW_FORMATS = (*ARRAY_FORMATS, "csv")
"""Profiles and points are rows and may be had as CSV too."""
PICTURE_FORMATS = ("png", "svg")
"""Profiles, slices and grids may be had as pictures."""
SAMPLE_FORMATS = ("f32", "u16", "u8")
"""And without wrapping, for a browser."""
SURFACE_FORMAT = "glb"
"""A grid may be had as the mesh of a surface."""
REPORT_FORMATS = ("json", "csv")
"""An analysis answers a document, or its main table."""

MEDIA_TYPES = {
    "json": "application/json",
    "npy": "application/x-npy",
    "npz": "application/x-npz",
    "csv": "text/csv; charset=utf-8",
    "png": "image/png",
    "svg": "image/svg+xml",
    "glb": "model/gltf-binary",
    "f32": "application/x-samples-f32",
    "u16": "application/x-samples-u16",
    "u8": "application/x-samples-u8",
}


@dataclass(frozen=True, slots=True)
class _Range:
    kind: str
    subtype: str
    quality: float

    def covers(self, media_type: str) -> bool:
        kind, subtype = media_type.split(";")[0].split("/")
        return self.kind in ("*", kind) and self.subtype in ("*", subtype)

    def specificity(self) -> int:
        return (self.kind != "*") + (self.subtype != "*")


def formats_of(product: str) -> tuple[str, ...]:
    """Formats a product may be had in."""
    if product == "inspect":
        return ("json",)
    if product in ANALYSES:
        return REPORT_FORMATS
    if product in MODELS and product != "film_trial":
        return REPORT_FORMATS
    if product in SCANS or product in MODELS:
        return (*REPORT_FORMATS, *PICTURE_FORMATS)
    if product == "series":
        return ROW_FORMATS
    rows = ROW_FORMATS if product in ("profile", "points") else ARRAY_FORMATS
    mesh = (SURFACE_FORMAT,) if product == "grid" else ()
    return rows if product == "points" else (*rows, *PICTURE_FORMATS, *mesh, *SAMPLE_FORMATS)


def choose(product: str, accept: str | None, wanted: str | None) -> str:
    """The format of an answer.

    Raises
    ------
    Problem
        406: the format is unknown for the product, or the client accepts none of its formats.
    """
    formats = formats_of(product)
    if wanted is not None:
        if wanted not in formats:
            raise _unacceptable(product, f"format={wanted[:20]!r}")
        return wanted
    ranges = _parse(accept or "*/*")
    best, best_quality = None, 0.0
    for name in formats:
        covering = [one for one in ranges if one.covers(MEDIA_TYPES[name])]
        if covering:
            quality = max(covering, key=_Range.specificity).quality
            if quality > best_quality:
                best, best_quality = name, quality
    if best is None:
        raise _unacceptable(product, "the Accept header")
    return best


def _unacceptable(product: str, what: str) -> Problem:
    listed = ", ".join(f"{name} ({MEDIA_TYPES[name].split(';')[0]})" for name in formats_of(product))
    return Problem("not-acceptable", f"The answer of {product} comes as {listed}; {what} asks for none of them.")


def _parse(accept: str) -> list[_Range]:
    ranges = []
    for item in accept.split(","):
        media, *parameters = (part.strip() for part in item.split(";"))
        kind, slash, subtype = media.lower().partition("/")
        if not slash:
            continue
        quality = 1.0
        for parameter in parameters:
            name, _, value = parameter.partition("=")
            if name.strip().lower() == "q":
                try:
                    quality = min(max(float(value), 0.0), 1.0)
                except ValueError:
                    quality = 0.0
        ranges.append(_Range(kind, subtype, quality))
    return ranges

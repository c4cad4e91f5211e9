"""Samples without any wrapping, for a browser: little-endian, in the order of the axes, told about in one header.

``f32`` are the values as binary32; ``u16`` and ``u8`` are whole numbers on a linear scale from the
smallest to the largest value, where the highest number stands for a value that does not exist.
"""

from __future__ import annotations

import json
from typing import Any

import numpy as np

from engine.arrays import AnyArray
from engine.evaluate import Field
from service.encoders.describe import Shown, describe
from service.problems import Problem

HEADER = "Samples-Description"
"""Name of the header: JSON in ASCII on one line."""
LONGEST_HEADER = 6000
"""Bytes that proxies let pass; remarks that do not fit are counted instead."""
TYPES: dict[str, str] = {"f32": "<f4", "u16": "<u2", "u8": "|u1"}
LARGEST = float(np.finfo(np.float32).max)


def samples(made: Field, form: str) -> AnyArray:
    """The values in the form asked for.

    Raises
    ------
    Problem
        406: complex values, or values beyond binary32.
    """
    if made.values.dtype.kind == "c":
        raise Problem("not-acceptable", f"Values are complex, and {form} holds real ones: ask for application/x-npy.")
    if form == "f32":
        if max(abs(made.statistics.minimum), abs(made.statistics.maximum)) > LARGEST:
            raise Problem("not-acceptable", "Values exceed what f32 holds: ask for application/x-npy.")
        return np.asarray(made.values, dtype="<f4")
    scale, offset = _scale(made, form)
    none = np.iinfo(TYPES[form]).max
    steps = np.rint((made.values - offset) / scale)
    return np.asarray(np.where(np.isfinite(steps), steps, none).astype(TYPES[form]))


def samples_header(shown: Shown, form: str) -> dict[str, str]:
    """The header that tells what the samples are."""
    made = shown.field
    scale, offset = _scale(made, form)
    told = describe(shown)
    resolution = told["summary"]["resolution"]
    document: dict[str, Any] = {
        "shape": told["shape"],
        "dtype": TYPES[form],
        "scale": scale,
        "offset": offset,
        "no_value": None if form == "f32" else int(np.iinfo(TYPES[form]).max),
        **{name: told[name] for name in ("unit", "field", "quantity", "components", "axes", "origin")},
        "summary": {
            **{name: told["summary"][name] for name in ("minimum", "maximum", "mean", "rms", "coefficients", "method")},
            "resolution": None if resolution is None else {name: resolution[name] for name in ("d_min", "d_max")},
        },
        "statement": "A density is only as good as its phases.",
        "applied": told["applied"],
        "notes": told["notes"],
    }
    text = _ascii(document)
    while len(text) > LONGEST_HEADER and (document["notes"] or document["applied"]):
        document["remarks_left_out"] = document.get("remarks_left_out", 0) + 1
        (document["notes"] or document["applied"]).pop()
        text = _ascii(document)
    return {HEADER: text}


def _ascii(document: dict[str, Any]) -> str:
    return json.dumps(document, ensure_ascii=True, separators=(",", ":"), allow_nan=False)


def _scale(made: Field, form: str) -> tuple[float, float]:
    """Value of one step, and of the number 0."""
    if form == "f32":
        return 1.0, 0.0
    low, high = made.statistics.minimum, made.statistics.maximum
    steps = int(np.iinfo(TYPES[form]).max) - 1
    return ((high - low) / steps if high > low else 1.0), low

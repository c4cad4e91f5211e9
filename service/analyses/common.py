"""What every report has, and what several of them say in the same way."""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import Any

import numpy as np

from engine.coefficients import CoefficientSet
from service.analyses.report import Column

OF_SET: dict[str, tuple[str | int, ...]] = {
    "density": ("set", "density"),
    "phase_deg": ("set", "phase_deg"),
    "sigma": ("set", "sigma"),
    "amplitude": ("set",),
    "uncertainty": ("set",),
}
"""What the engine finds at fault in a set, and where that stands in a request."""


def heading(
    product: str,
    coefficients: CoefficientSet,
    *,
    unit: str,
    contains: Sequence[str],
    omits: Sequence[str],
    applied: Sequence[str],
    notes: Sequence[str],
) -> dict[str, Any]:
    """Members of every report: what it is of, and what to know before trusting it."""
    resolution = coefficients.phased().resolution()
    return {
        "product": product,
        "unit": unit,
        "resolution": None if resolution is None else {"d_min": resolution[0], "d_max": resolution[1], "unit": "Å"},
        "uncertainty": {"contains": list(contains), "omits": list(omits)} if contains else None,
        "applied": list(applied),
        "notes": list(notes),
    }


def told(document: dict[str, Any]) -> tuple[str, ...]:
    """The same as lines above a table."""
    uncertainty = document["uncertainty"]
    return (
        f"{document['product']}; unit: {document['unit']}",
        *([] if uncertainty is None else [f"uncertainty contains: {'; '.join(uncertainty['contains'])}"]),
        *([] if uncertainty is None else [f"uncertainty omits: {'; '.join(uncertainty['omits'])}"]),
        *document["applied"],
        *document["notes"],
    )


def rows(columns: dict[str, Any]) -> list[dict[str, Any]]:
    """Columns of equal length, arrays or lists, as a list of records; None stays None in each."""
    count = next(len(column) for column in columns.values() if column is not None)
    lists = {
        name: [None] * count if column is None else column.tolist() if isinstance(column, np.ndarray) else column
        for name, column in columns.items()
    }
    return [dict(zip(lists, values, strict=True)) for values in zip(*lists.values(), strict=True)]


def table_of(columns: dict[str, Any]) -> tuple[Column, ...]:
    """Columns as a table, without those that do not exist."""
    return tuple((name, column) for name, column in columns.items() if column is not None)


def finite(value: float | None) -> float | None:
    """The number, or None where it is absent, endless or not a number: JSON has none of these."""
    return None if value is None or not math.isfinite(value) else value

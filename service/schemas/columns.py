"""Columns of numbers in a JSON body, checked as a whole: a million rows cost no million objects."""

from __future__ import annotations

from typing import Annotated, Any

import numpy as np
from numpy.typing import NDArray
from pydantic import PlainValidator, WithJsonSchema
from pydantic_core import PydanticCustomError

from engine.arrays import MAX_INDEX
from service.schemas.base import FARTHEST


def _column(value: Any, allowed: frozenset[type], wanted: str) -> NDArray[np.float64]:  # noqa: ANN401
    if isinstance(value, np.ndarray):  # from a table sent beside the request; its reader has checked it
        return value
    if not isinstance(value, list):
        raise PydanticCustomError("column", "is not an array", {"cure": f"give an array of {wanted}"})
    if not value:
        raise PydanticCustomError("column", "is empty", {"cure": f"give {wanted}, or leave it out"})
    # One pass in C finds the kinds of element; only a fault makes us look for its row.
    if not allowed.issuperset(map(type, value)):
        row = next(row for row, element in enumerate(value) if type(element) not in allowed)
        raise PydanticCustomError("column", f"is not one of {wanted}", {"row": row, "cure": f"give {wanted}"})
    try:
        return np.array(value, dtype=np.float64)
    except OverflowError as fault:
        row = next(row for row, element in enumerate(value) if isinstance(element, int) and abs(element) > 2**1023)
        raise PydanticCustomError("column", "is too large", {"row": row, "cure": "give finite numbers"}) from fault


def _indices(value: Any) -> NDArray[np.float64]:  # noqa: ANN401
    return _column(value, frozenset({int, float}), "integers")


def _numbers(value: Any) -> NDArray[np.float64]:  # noqa: ANN401
    return _column(value, frozenset({int, float}), "numbers")


def _numbers_or_null(value: Any) -> NDArray[np.float64]:  # noqa: ANN401
    return _column(value, frozenset({int, float, type(None)}), "numbers or null")


IndexColumn = Annotated[
    NDArray[np.float64],
    PlainValidator(_indices),
    WithJsonSchema(
        {
            "type": "array",
            "minItems": 1,
            "items": {"type": "integer", "minimum": -MAX_INDEX, "maximum": MAX_INDEX},
        }
    ),
]
NumberColumn = Annotated[
    NDArray[np.float64],
    PlainValidator(_numbers),
    WithJsonSchema({"type": "array", "minItems": 1, "items": {"type": "number"}}),
]
PhaseColumn = Annotated[
    NDArray[np.float64],
    PlainValidator(_numbers_or_null),
    WithJsonSchema({"type": "array", "minItems": 1, "items": {"type": ["number", "null"]}}),
]


def _rows(value: Any) -> NDArray[np.float64]:  # noqa: ANN401
    """Rows of coordinates; flattened to one column for the check and shaped again."""
    if not isinstance(value, list) or not value:
        raise PydanticCustomError("rows", "is not an array of positions", {"cure": "give rows of coordinates"})
    for row, element in enumerate(value):
        if not isinstance(element, list) or len(element) != len(value[0]) or not element:
            raise PydanticCustomError(
                "rows", "is not a row like the first", {"row": row, "cure": "give rows of equal length"}
            )
    width = len(value[0])
    try:
        flat = _column([number for row in value for number in row], frozenset({int, float}), "numbers")
    except PydanticCustomError as fault:
        context = fault.context or {}
        raise PydanticCustomError(
            "rows", "holds something other than numbers", {**context, "row": context.get("row", 0) // width}
        ) from fault
    far = np.flatnonzero(np.abs(flat) > FARTHEST)
    if far.size:
        raise PydanticCustomError(
            "rows",
            "lies too far out",
            {"row": int(far[0]) // width, "cure": f"give coordinates within ±{FARTHEST:g}, in the unit stated"},
        )
    return flat.reshape(-1, width)


PositionRows = Annotated[
    NDArray[np.float64],
    PlainValidator(_rows),
    WithJsonSchema(
        {
            "type": "array",
            "minItems": 1,
            "items": {
                "type": "array",
                "minItems": 1,
                "maxItems": 3,
                "items": {"type": "number", "minimum": -FARTHEST, "maximum": FARTHEST},
            },
        }
    ),
]

"""What all request models share."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import BaseModel, ConfigDict, Field


class Strict(BaseModel):
    """No unknown keys, no numbers in disguise, nothing that is not finite."""

    model_config = ConfigDict(extra="forbid", strict=True, allow_inf_nan=False, frozen=True)


PRINTABLE = r"^[^\x00-\x1f\x7f]*$"
"""Texts that people read: no control characters."""
FARTHEST = 1.0e8
"""Bound of coordinates (cells or Å) and lengths (Å): beyond it a unit has been mistaken."""

Length = Annotated[float, Field(gt=0, le=FARTHEST)]
Coordinate = Annotated[float, Field(ge=-FARTHEST, le=FARTHEST)]
Vector = Annotated[list[Coordinate], Field(min_length=1, max_length=3)]
IndexVector = Annotated[list[int], Field(min_length=1, max_length=3)]
Counts = Annotated[list[Annotated[int, Field(ge=1)]], Field(min_length=1, max_length=3)]
Coordinates = Literal["fractional", "cartesian"]

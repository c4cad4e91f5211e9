"""Sets that are kept: what is sent, and what is answered about them."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import BaseModel, Field

from service.schemas.answers import CoverageOut
from service.schemas.base import PRINTABLE, Strict
from service.schemas.coefficient_set import CoefficientSetIn
from service.schemas.summary import SummaryAnswer

Label = Annotated[str, Field(min_length=1, max_length=200, pattern=PRINTABLE)]
Tag = Annotated[str, Field(min_length=1, max_length=64, pattern=r"^[^\x00-\x1f\x7f,]*$")]
MOST_TAGS = 20


class KeepIn(Strict):
    """A coefficient set to be kept, of columns or of a file of reflections."""

    product: Literal["keep"] | None = None
    remark: str | None = Field(None, max_length=2000, description="for people; the service does not read it")
    set: CoefficientSetIn
    name: Label | None = Field(None, description="for people; by default the file's name, or the cell in words")
    tags: list[Tag] = Field([], max_length=MOST_TAGS)


class KeptCellOut(BaseModel):
    """The lattice of a set."""

    dimension: int
    vectors: list[list[float]] = Field(description="direct vectors as rows, Å")
    lengths: list[float] = Field(description="Å")
    angles: list[float] = Field(description="degrees: α, β, γ of a crystal; γ of a planar lattice; none of a stack")
    volume: float = Field(description="Å, Å² or Å³ by dimension")


class CountsOut(BaseModel):
    """Coefficients of a set, one of each Friedel pair where the density is real."""

    rows: int = Field(description="rows sent")
    held: int = Field(description="after expansion by symmetry, the zero term included")
    without_phase: int
    repeats_joined: int
    friedel_pairs_averaged: int
    zero_term: str = Field(description="measured, given or absent")


class KeptSummaryOut(BaseModel):
    """What a set is worth, found out when it was kept."""

    cell: KeptCellOut
    group: str | None
    density: Literal["real", "complex"]
    unit: str
    coefficients: CountsOut
    d_min: float | None = Field(description="smallest spacing, Å")
    d_max: float | None
    coverage: CoverageOut | None
    columns: list[str] = Field(description="which of sigma, phase_sigma, merit the set has")
    history: list[str] = Field(description="what was done to the measurements before they were coefficients")
    warnings: list[str]
    inspection: SummaryAnswer | None = Field(description="of a file of reflections, as /v1/sets/inspect answers it")


class RecordOut(BaseModel):
    """A set in the list."""

    id: str = Field(pattern="^[0-9a-f]{64}$", description="SHA-256 of the content: the same set, the same id")
    name: str
    tags: list[str]
    created: str = Field(description="ISO 8601, UTC")
    kind: Literal["columns", "reflections"]
    file: str = Field(description="name of the file of reflections, or empty")
    dimension: int
    rows: int
    coefficients: int
    d_min: float | None
    d_max: float | None
    unit: str
    bytes: int


class KeptOut(RecordOut):
    """A set with its summary."""

    summary: KeptSummaryOut


class ListOut(BaseModel):
    """A part of the list of sets, newest first."""

    sets: list[RecordOut]
    next: int | None = Field(description="value of `after` for the next part; null at the end")
    total: int = Field(description="sets that the search found, on all parts")

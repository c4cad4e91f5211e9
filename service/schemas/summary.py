"""The answer of an inspection, for the OpenAPI document."""

from __future__ import annotations

from pydantic import BaseModel, Field


class RemarkOut(BaseModel):
    """Something about the file that a reader must know."""

    kind: str = Field(description="absent, default, contradictory, unread or text")
    items: list[str]
    words: str


class LeftOutOut(BaseModel):
    """Rows that were not carried on."""

    reason: str
    rows: int


class FileOut(BaseModel):
    """The file as it was read."""

    kind: str
    block: str | None
    category: str | None
    columns: dict[str, str] = Field(description="quantity: its column in the file")
    rows_read: int
    left_out: list[LeftOutOut]
    remarks: list[RemarkOut]
    cell: list[float] | None
    cell_sigma: list[float | None] | None
    wavelengths: list[float]
    radiation: str | None


class CompletenessOut(BaseModel):
    """One shell of resolution."""

    d_max: float
    d_min: float
    possible: int
    observed: int
    completeness: float


class AgreementOut(BaseModel):
    """How well equivalents agree, and how strong they are."""

    d_max: float | None
    d_min: float
    measurements: int
    unique: int
    repeated: int
    redundancy: float
    r_merge: float | None
    r_meas: float | None
    r_pim: float | None
    cc_half: float | None
    chi_squared: float | None
    mean_signal: float | None = Field(description="mean of I/σ after merging")


class SummaryAnswer(BaseModel):
    """A file of reflections in numbers and words."""

    file: FileOut
    rows: int
    unique: int
    expanded: int
    group: str
    cell_volume: float
    d_max: float
    d_min: float
    completeness: float
    completeness_shells: list[CompletenessOut]
    agreement: AgreementOut
    agreement_shells: list[AgreementOut]
    absences: int
    absence_signal: float | None
    other_signal: float | None
    outliers: int
    outlier_rows: list[int] = Field(description="the worst, at most 100; rows of the file, counted from 0")
    negative: int | None = Field(description="merged intensities below zero; null where amplitudes were given")
    centric_share: float
    phased: int
    scale: str
    wilson_scale: float | None
    wilson_scale_sigma: float | None
    wilson_b: float | None
    wilson_b_sigma: float | None
    model_r: float | None
    model_weighted_r: float | None
    statistics: str | None
    applied: list[str]
    warnings: list[str]

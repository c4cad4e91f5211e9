"""Answers, for the OpenAPI document; the encoders write them without building these objects."""

from __future__ import annotations

from typing import Any

from pydantic import BaseModel, Field


class AxisOut(BaseModel):
    """Sample s lies at start + s·step along the axis."""

    label: str
    unit: str
    start: float
    step: float
    count: int
    direction: list[float] = Field(description="Cartesian unit vector along which the coordinate grows")


class OriginOut(BaseModel):
    """Position of the first sample."""

    fractional: list[float]
    cartesian: list[float] = Field(description="Å")


class CoefficientsOut(BaseModel):
    """What became of the rows of the set."""

    rows: int
    summed: int = Field(description="terms in the sum, both of each Friedel pair counted")
    without_phase: int
    beyond_resolution: int
    friedel_pairs_averaged: int
    repeats_joined: int
    zero_term: str = Field(description="measured, given or absent")


class ResolutionOut(BaseModel):
    """Spacings of the coefficients summed."""

    d_min: float
    d_max: float
    unit: str


class ContourLevel(BaseModel):
    """A level offered for a contour line."""

    sigmas: float = Field(description="multiple of the rms uncertainty")
    value: float


class UncertaintyOut(BaseModel):
    """What the standard uncertainties contain, and how large they are."""

    contains: list[str]
    omits: list[str]
    minimum: float
    maximum: float
    rms: float
    accuracy: float = Field(description="largest error of the summation, relative to the largest uncertainty")
    contour_levels: list[ContourLevel]


class SummaryOut(BaseModel):
    """Numbers over all values, and how they were made. Of complex values the extremes are moduli."""

    minimum: float
    maximum: float
    mean: float | dict[str, float]
    rms: float
    coefficients: CoefficientsOut
    resolution: ResolutionOut | None
    uncertainty: UncertaintyOut | None
    method: str
    accuracy: float = Field(description="largest error of the summation, relative to the largest |value|")
    sign_convention: str


class Answer(BaseModel):
    """Values and all that is needed to read them."""

    values: Any = Field(description="nested arrays in the order of the axes; complex values as real and imag")
    uncertainty: Any = Field(description="standard uncertainty of each value where asked for, else null")
    product: str
    field: str
    quantity: str = Field(description="what the values are: value, sigma or significance")
    unit: str
    shape: list[int]
    components: list[str] = Field(description="Cartesian components, last in the shape; empty for a scalar")
    axes: list[AxisOut] = Field(description="empty for free points")
    origin: OriginOut | None
    summary: SummaryOut
    applied: list[str] = Field(description="every treatment, in words")
    notes: list[str] = Field(description="what to know before trusting the values")


class ProblemPlace(BaseModel):
    """One place at fault."""

    pointer: str = Field(description="JSON pointer (RFC 6901) into the body")
    reason: str
    cure: str


class ProblemDocument(BaseModel):
    """RFC 9457."""

    type: str
    title: str
    status: int
    detail: str
    errors: list[ProblemPlace] = []

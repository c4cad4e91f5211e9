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


class LimitsOut(BaseModel):
    """Smallest and largest spacing of the coefficients."""

    d_min: float
    d_max: float
    unit: str


class PointOut(BaseModel):
    """What the series makes of a point of height 1, by exactly the coefficients summed, window and average included."""

    directions: list[list[float]] = Field(description="principal directions, Cartesian unit vectors, sharpest first")
    widths: list[float | None] = Field(description="full width at half maximum along each, Å; null: endless")
    ripple: float = Field(description="most negative value found")
    ripple_at: float | None = Field(description="its distance from the point, Å")
    searched: str = Field(description="where the ripple was looked for")


class ResolutionOut(LimitsOut):
    """Spacings of the coefficients summed, and what they make of a point."""

    point: PointOut | None


class AbsentOut(BaseModel):
    """A term of low order that is not in the sum."""

    indices: list[int]
    d: float = Field(description="Å")


class CoverageOut(BaseModel):
    """Terms possible and present down to d_min, one of each Friedel pair, the zero term aside."""

    d_min: float
    possible: int = Field(description="that symmetry does not forbid")
    present: int = Field(description="with a phase")
    without_phase: int
    missing: int
    fraction: float
    estimated: bool = Field(description="whether `possible` comes from volumes")
    region: str
    lowest_absent: list[AbsentOut]


class UnmeasuredOut(BaseModel):
    """What terms that were not measured could do; no part of the uncertainty."""

    rms: float = Field(description="root mean square change over all samples and phases")
    largest_inside: float = Field(description="change were all phases aligned: terms missing down to d_min")
    largest_beyond: float = Field(description="the same of the terms beyond")
    assumed: list[str]


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
    coverage: CoverageOut | None
    resolution: ResolutionOut | None
    uncertainty: UncertaintyOut | None
    unmeasured: UnmeasuredOut | None
    method: str
    accuracy: float = Field(description="largest error of the summation, relative to the largest |value|")
    sign_convention: str


class Answer(BaseModel):
    """Values and all that is needed to read them."""

    values: Any = Field(description="nested arrays in the order of the axes; complex values as real and imag")
    uncertainty: Any = Field(description="standard uncertainty of each value where asked for, else null")
    unmeasured: Any = Field(description="rms change by terms that were not measured where asked for, else null")
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


class VariableOut(BaseModel):
    """What a series runs along."""

    name: str
    unit: str
    values: list[float] = Field(description="of each member")


class ErrorsOut(BaseModel):
    """Which errors the standard uncertainties contain, and which they do not."""

    contains: list[str]
    omits: list[str]


class MemberOut(BaseModel):
    """What was done to one member, and what to know of it."""

    value: float
    applied: list[str]
    notes: list[str]
    uncertainty: ErrorsOut | None


class StackAnswer(BaseModel):
    """Fields of a series on the same samples."""

    values: Any = Field(description="nested arrays, the members first")
    uncertainty: Any = Field(description="of each value where asked for, else null")
    product: str
    field: str
    unit: str
    shape: list[int]
    components: list[str]
    variable: VariableOut
    reference: int = Field(description="number of the member that others were brought to")
    difference: bool
    axes: list[AxisOut]
    members: list[MemberOut]


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

"""Reports of analyses, for the OpenAPI document; the analyses write them without building these objects."""

from __future__ import annotations

from pydantic import BaseModel, Field

from service.schemas.answers import ResolutionOut


class ErrorsOut(BaseModel):
    """Which errors the standard uncertainties contain, and which they do not."""

    contains: list[str]
    omits: list[str]


class ReportOut(BaseModel):
    """What every report has."""

    product: str
    unit: str = Field(description="of the density")
    resolution: ResolutionOut | None
    uncertainty: ErrorsOut | None = Field(description="null where the set has no uncertainties")
    applied: list[str] = Field(description="every treatment, in words")
    notes: list[str] = Field(description="what to know before trusting the numbers")


class IntegralOut(BaseModel):
    """The integral over one region."""

    label: str
    region: str = Field(description="in words")
    integral: float
    sigma: float | None
    unit: str
    measure: float = Field(description="length, area or volume of the region")
    measure_unit: str
    mean: float = Field(description="mean density in the region")
    mean_sigma: float | None
    scattering_length: float | None = Field(description="of a scattering-length density in 10⁻⁶ Å⁻², in fm")
    scattering_length_sigma: float | None
    scattering_length_unit: str | None


class IntegralsReport(ReportOut):
    """Integrals over regions."""

    integrals: list[IntegralOut]
    covariance: list[list[float]] | None = Field(description="of the integrals, in the order of the regions")


REPORTS: dict[str, type[ReportOut]] = {"integrals": IntegralsReport}

"""How a picture of a field looks."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field

from service.schemas.base import Coordinate, Strict


class MarkerIn(Strict):
    """A mark on the axis of a profile."""

    position: Coordinate = Field(description="Å along the profile")
    label: str = Field("", max_length=40)


class PictureIn(Strict):
    """Of an answer as image/png or image/svg+xml: a profile with its σ band, a slice as a map, a cell or box as a sheet
    of sections."""

    title: str = Field("", max_length=200)
    width: Annotated[int, Field(ge=1, le=6000)] = Field(900, description="pixels")
    height: Annotated[int, Field(ge=1, le=6000)] = Field(640, description="pixels")
    dpi: float = Field(100.0, ge=50, le=600, description="pixels to the inch: larger makes text larger")
    theme: Literal["light", "dark"] = "light"
    palette: Literal["auto", "sequential", "diverging"] = Field(
        "auto", description="auto: diverging where negative values reach deep"
    )
    centre: Literal["zero", "mean"] = Field("zero", description="what the middle of a diverging palette stands for")
    low: float | None = Field(None, description="end of the colour scale or of the value axis")
    high: float | None = None
    levels: list[float] = Field([], max_length=60, description="contour lines at these values")
    level_step: float | None = Field(None, gt=0, description="contour lines at every multiple of it")
    level_sigmas: float | None = Field(
        None, gt=0, description="contour lines at every multiple of so many rms σ; with uncertainty"
    )
    zero_contour: bool = False
    band: float = Field(1.0, ge=0, description="half width of the band about a profile, σ; with uncertainty")
    markers: list[MarkerIn] = Field([], max_length=40)
    mark_layers: bool = Field(False, description="profile: mark the layers and their distances from the start")
    part: str | None = Field(
        None, max_length=20, description="component of a vector; real, imaginary or modulus of a complex field"
    )
    cells: bool = Field(True, description="outlines of unit cells on a slice")
    sections_along: str | None = Field(None, max_length=20, description="grid: label of the axis that is cut along")
    sections: Annotated[int, Field(ge=1, le=64)] | None = None
    columns: Annotated[int, Field(ge=1, le=64)] | None = None

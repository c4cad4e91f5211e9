"""Where values are wanted: lines, planes, cells and boxes, points."""

from __future__ import annotations

from typing import Annotated

from pydantic import Field

from service.schemas.base import Coordinate, Counts, IndexVector, Length, Strict, Vector
from service.schemas.columns import PositionRows


class LineIn(Strict):
    """A line: from … to; or `along` a lattice direction; or along the normal of planes."""

    start: Vector | None = Field(None, alias="from", description="first end of the line")
    end: Vector | None = Field(None, alias="to", description="second end of the line")
    along: IndexVector | None = Field(None, description="lattice direction [uvw], one translation long")
    normal_to: IndexVector | None = Field(None, description="indices of planes; one repeat along their normal")
    length: Length | None = Field(None, description="Å along the normal, instead of one repeat")
    origin: Vector | None = Field(None, description="first end, for `along` and `normal_to`; default 0")
    include_end: bool = Field(True, description="whether the last sample falls on the far end")


class SampledLineIn(LineIn):
    """Values along a line."""

    samples: Annotated[int, Field(ge=2, description="samples along the line")]


class PlaneIn(Strict):
    """Values on a plane: by origin and edges; or parallel to a lattice plane."""

    origin: Vector | None = Field(None, description="position of the first sample")
    edge_1: Vector | None = Field(None, description="first edge from there, as a vector")
    edge_2: Vector | None = Field(None, description="second edge from there, as a vector")
    shape: Counts | None = Field(None, description="samples along edge_1 and edge_2")
    include_end: bool = Field(False, description="whether the last samples fall on the far edges")
    plane: IndexVector | None = Field(None, description="indices of a lattice plane")
    offset: Coordinate = Field(0.0, description="Å along the plane's normal")
    width: Length | None = Field(None, description="Å")
    height: Length | None = Field(None, description="Å")
    spacing: Length | None = Field(None, description="Å between samples")
    centre: Vector | None = Field(None, description="middle of the rectangle before the offset; default 0")


class VolumeIn(Strict):
    """Values in the whole cell by `shape` or `spacing`; or in a box by origin, edges and shape."""

    shape: Counts | None = Field(None, description="samples along each direct vector or edge")
    spacing: Length | None = Field(None, description="whole cell: samples at most this far apart, Å")
    origin: Vector | None = Field(None, description="box: position of the first sample")
    edges: list[Vector] | None = Field(
        None, min_length=1, max_length=3, description="box: its edges from there, one vector per dimension"
    )
    include_end: bool = Field(False, description="box: whether the last samples fall on the far faces")


class FreePointsIn(Strict):
    """Values at free points."""

    positions: PositionRows = Field(description="one row of coordinates per point")

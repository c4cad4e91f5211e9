"""The four products: profile, slice, grid, points."""

from __future__ import annotations

from typing import Literal

from pydantic import Field

from service.schemas.base import Strict
from service.schemas.picture import PictureIn
from service.schemas.sampling import FreePointsIn, PlaneIn, SampledLineIn, VolumeIn
from service.schemas.surface import SurfaceIn
from service.schemas.treatment import TreatedIn


class UnmeasuredIn(Strict):
    """How strong terms are expected to be that were not measured.

    By a composition: `formula`, `units` in the cell and overall `b`; or by a bound: `amplitude`·exp(−b s²) of
    |n_G|."""

    formula: str | None = Field(None, max_length=1000, description="composition of a formula unit, such as SiO2")
    units: float = Field(1.0, gt=0, le=1e6, description="formula units in the cell")
    amplitude: float | None = Field(None, gt=0, le=1e30, description="of the bound at s = 0, in the density's unit")
    b: float = Field(gt=0, description="B of exp(−B s²), s = |G|/4π, Å²")
    d_stop: float | None = Field(None, gt=0, description="spacing down to which terms are listed, Å; the rest is added")


class ProductIn(TreatedIn):
    """What the four products have in common."""

    product: Literal["profile", "slice", "grid", "points"] | None = Field(
        None, description="names the product in a file for the command line; here it must match the address"
    )
    uncertainty: bool = Field(False, description="also the standard uncertainty of every value, by those of the set")
    quantity: Literal["value", "sigma", "significance"] = Field(
        "value", description="what the values of the answer are: the field, its standard uncertainty, or their ratio"
    )
    unmeasured: UnmeasuredIn | None = Field(
        None, description="also how far terms that were not measured could change each value of a density"
    )
    precision: Literal["double", "single"] = "double"
    tolerance: float = Field(
        1e-9, ge=1e-12, le=1e-2, description="largest error of the summation relative to the largest |value|"
    )


class DrawnIn(ProductIn):
    """A product that can be had as a picture."""

    picture: PictureIn | None = Field(None, description="how it is drawn, as image/png or image/svg+xml")


class ProfileIn(SampledLineIn, DrawnIn):
    """Values along a line: from … to; or `along` a lattice direction; or along the normal of planes."""


class SliceIn(PlaneIn, DrawnIn):
    """Values on a plane: by origin and edges; or parallel to a lattice plane."""


class GridIn(VolumeIn, DrawnIn):
    """Values in the whole cell by `shape` or `spacing`; or in a box by origin, edges and shape."""

    surface: SurfaceIn | None = Field(None, description="the surface to make a mesh of, as model/gltf-binary alone")
    preview: int | None = Field(
        None,
        ge=8,
        le=2**31,
        description="whole cell: answer a low-resolution first version of at most so many samples, from the terms of "
        "large spacing alone; the answer says which",
    )


class PointsIn(FreePointsIn, ProductIn):
    """Values at free points."""


PRODUCTS: dict[str, type[ProductIn]] = {
    "profile": ProfileIn,
    "slice": SliceIn,
    "grid": GridIn,
    "points": PointsIn,
}

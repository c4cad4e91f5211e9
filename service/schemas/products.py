"""The four products: profile, slice, grid, points."""

from __future__ import annotations

from typing import Literal

from pydantic import Field

from service.schemas.sampling import FreePointsIn, PlaneIn, SampledLineIn, VolumeIn
from service.schemas.treatment import TreatedIn


class ProductIn(TreatedIn):
    """What the four products have in common."""

    product: Literal["profile", "slice", "grid", "points"] | None = Field(
        None, description="names the product in a file for the command line; here it must match the address"
    )
    uncertainty: bool = Field(False, description="also the standard uncertainty of every value, by those of the set")
    quantity: Literal["value", "sigma", "significance"] = Field(
        "value", description="what the values of the answer are: the field, its standard uncertainty, or their ratio"
    )
    precision: Literal["double", "single"] = "double"
    tolerance: float = Field(
        1e-9, ge=1e-12, le=1e-2, description="largest error of the summation relative to the largest |value|"
    )


class ProfileIn(SampledLineIn, ProductIn):
    """Values along a line: from … to; or `along` a lattice direction; or along the normal of planes."""


class SliceIn(PlaneIn, ProductIn):
    """Values on a plane: by origin and edges; or parallel to a lattice plane."""


class GridIn(VolumeIn, ProductIn):
    """Values in the whole cell by `shape` or `spacing`; or in a box by origin, edges and shape."""


class PointsIn(FreePointsIn, ProductIn):
    """Values at free points."""


PRODUCTS: dict[str, type[ProductIn]] = {
    "profile": ProfileIn,
    "slice": SliceIn,
    "grid": GridIn,
    "points": PointsIn,
}

"""The four products: profile, slice, grid, points."""

from __future__ import annotations

from typing import Annotated, Any, Literal

from pydantic import Field, model_validator

from service.schemas.base import Coordinate, Coordinates, Counts, IndexVector, Length, Strict, Vector
from service.schemas.coefficient_set import CoefficientSetIn
from service.schemas.columns import PositionRows


class WindowIn(Strict):
    """Termination window w(|G|/G_max)."""

    kind: Literal["none", "lanczos", "raised_cosine", "gaussian"] = "none"
    b: float | None = Field(None, gt=0, description="B of exp(−B s²), s = |G|/4π, Å²; gaussian only")


class ResolutionIn(Strict):
    """Only coefficients with d_min ≤ d ≤ d_max are summed."""

    d_min: float | None = Field(None, gt=0, description="Å")
    d_max: float | None = Field(None, gt=0, description="Å")


class AverageIn(Strict):
    """A region that each sample is averaged over, in closed form.

    lateral: all directions perpendicular to the normal. slab: `thickness` (Å) along the normal of
    the planes `normal`. box: a parallelepiped with the given fractional `edges`. ball: `radius` (Å).
    ``"lateral"`` alone is short for ``{"kind": "lateral"}``."""

    kind: Literal["lateral", "slab", "box", "ball"]
    normal: IndexVector | None = Field(
        None, description="indices of the planes; by default those of normal_to (profile) or plane (slice)"
    )
    thickness: Length | None = Field(None, description="Å")
    edges: list[Vector] | None = Field(None, min_length=1, max_length=3, description="fractional")
    radius: Length | None = Field(None, description="Å")

    @model_validator(mode="before")
    @classmethod
    def _short_form(cls, data: Any) -> Any:  # noqa: ANN401
        return {"kind": "lateral"} if data == "lateral" else data


class ProductIn(Strict):
    """What the four products have in common."""

    product: Literal["profile", "slice", "grid", "points"] | None = Field(
        None, description="names the product in a file for the command line; here it must match the address"
    )
    remark: str | None = Field(None, max_length=2000, description="for people; the service does not read it")
    set: CoefficientSetIn
    coordinates: Coordinates = Field(
        "fractional", description="of every position and vector but indices; Cartesian in Å"
    )
    field: Literal["density", "gradient", "gradient_magnitude", "laplacian", "autocorrelation", "response"] = "density"
    window: WindowIn = WindowIn()
    sharpen: float = Field(0.0, description="B of a factor exp(+B s²), Å²; negative smooths")
    average: AverageIn | None = None
    apply_merit: bool = Field(False, description="multiply each coefficient by its figure of merit")
    self_term: float = Field(
        0.0,
        description="autocorrelation only: subtracted from every squared amplitude, in the square of its unit",
    )
    resolution: ResolutionIn = ResolutionIn()
    uncertainty: bool = Field(
        False,
        description="also the standard uncertainty of every value, from sigma, phase_sigma_deg, merit, scale_sigma",
    )
    quantity: Literal["value", "sigma", "significance"] = Field(
        "value", description="what the values of the answer are: the field, its standard uncertainty, or their ratio"
    )
    missing_phase: Literal["omit", "refuse"] = Field(
        "omit", description="coefficients without phase: leave out and count, or refuse the request"
    )
    precision: Literal["double", "single"] = "double"
    tolerance: float = Field(
        1e-9, ge=1e-12, le=1e-2, description="largest error of the summation relative to the largest |value|"
    )


class ProfileIn(ProductIn):
    """Values along a line: from … to; or `along` a lattice direction; or along the normal of planes."""

    start: Vector | None = Field(None, alias="from", description="first end of the line")
    end: Vector | None = Field(None, alias="to", description="second end of the line")
    along: IndexVector | None = Field(None, description="lattice direction [uvw], one translation long")
    normal_to: IndexVector | None = Field(None, description="indices of planes; one repeat along their normal")
    length: Length | None = Field(None, description="Å along the normal, instead of one repeat")
    origin: Vector | None = Field(None, description="first end, for `along` and `normal_to`; default 0")
    samples: Annotated[int, Field(ge=2, description="samples along the line")]
    include_end: bool = Field(True, description="whether the last sample falls on the far end")


class SliceIn(ProductIn):
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


class GridIn(ProductIn):
    """Values in the whole cell by `shape` or `spacing`; or in a box by origin, edges and shape."""

    shape: Counts | None = Field(None, description="samples along each direct vector or edge")
    spacing: Length | None = Field(None, description="whole cell: samples at most this far apart, Å")
    origin: Vector | None = Field(None, description="box: position of the first sample")
    edges: list[Vector] | None = Field(
        None, min_length=1, max_length=3, description="box: its edges from there, one vector per dimension"
    )
    include_end: bool = Field(False, description="box: whether the last samples fall on the far faces")


class PointsIn(ProductIn):
    """Values at free points."""

    positions: PositionRows = Field(description="one row of coordinates per point")


PRODUCTS: dict[str, type[ProductIn]] = {
    "profile": ProfileIn,
    "slice": SliceIn,
    "grid": GridIn,
    "points": PointsIn,
}

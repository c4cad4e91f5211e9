"""Analyses: from a density to numbers that are reported."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field

from service.schemas.base import Coordinate, IndexVector, Length, Strict, Vector
from service.schemas.coefficient_set import CoefficientSetIn, or_stored
from service.schemas.sampling import LineIn
from service.schemas.treatment import SetRequestIn, TreatedIn, WindowIn

Number = Annotated[int, Field(ge=1, description="number of an extremum in the list, from 1")]


class RegionIn(Strict):
    """A part of space: a parallelepiped by origin and edges, or a ball by centre and radius."""

    origin: Vector | None = Field(None, description="corner of the parallelepiped")
    edges: list[Vector] | None = Field(None, min_length=1, max_length=3, description="its edges from there")
    centre: Vector | None = Field(None, description="middle of the ball")
    radius: Length | None = Field(None, description="Å")


class SoughtIn(TreatedIn):
    """Which extrema are sought, and what is measured between them."""

    kinds: list[Literal["maximum", "minimum", "saddle"]] = Field(["maximum"], min_length=1, max_length=3)
    region: RegionIn | None = Field(None, description="only extrema inside; default the whole cell")
    least_value: float | None = Field(None, description="only those of at least this value")
    greatest_value: float | None = Field(None, description="only those of at most this value")
    least_significance: float | None = Field(None, gt=0, description="only those of at least so many σ")
    most: Annotated[int, Field(ge=1, le=100_000)] = 1000
    spacing: Length | None = Field(None, description="of the grid that is searched, Å; default by the resolution")
    within: Length | None = Field(None, description="also all distances up to this, Å, between those listed")
    distances: list[Annotated[list[Number], Field(min_length=2, max_length=2)]] = Field(
        [], max_length=10_000, description="pairs of extrema whose shortest distance is wanted"
    )
    angles: list[Annotated[list[Number], Field(min_length=3, max_length=3)]] = Field(
        [], max_length=10_000, description="triples of extrema; the angle is at the second"
    )


class ExtremaIn(SoughtIn):
    """Maxima, minima and saddle points of a density, refined on the series itself."""

    product: Literal["extrema"] | None = None


class IntegralIn(Strict):
    """A region that a density is integrated over.

    slab: between two planes parallel to `normal`, `from` and `to` in Å along it; per unit area, or over one
    cell (`per`). line: the straight line `from` one point `to` another. box: a parallelepiped with
    `edges` from `origin`, or about `centre`. ball: `radius` (Å) about `centre`; by dimension an
    interval, a disc or a ball."""

    kind: Literal["slab", "line", "box", "ball"]
    label: str | None = Field(None, max_length=80)
    normal: IndexVector | None = Field(None, description="slab: indices of planes; of a stack its own")
    start: Coordinate | Vector | None = Field(None, alias="from", description="slab: Å along the normal; line: a point")
    end: Coordinate | Vector | None = Field(None, alias="to", description="slab: Å along the normal; line: a point")
    per: Literal["area", "cell"] = Field("area", description="slab: per unit area, or for one cell of the planes")
    origin: Vector | None = None
    centre: Vector | None = None
    edges: list[Vector] | None = Field(None, min_length=1, max_length=3)
    radius: Length | None = Field(None, description="Å")


class IntegralsIn(TreatedIn):
    """Integrals of a density over regions, in closed form."""

    product: Literal["integrals"] | None = None
    regions: list[IntegralIn] = Field(min_length=1, max_length=1000)


class LayersIn(LineIn, TreatedIn):
    """Layers of a profile: intervals between its minima, with position, height, width and area."""

    product: Literal["layers"] | None = None
    baseline: Literal["minima", "higher_minimum", "zero"] | float = Field(
        "minima",
        description="what half heights, centroids and areas above are counted from: the line through the two minima, "
        "the higher of them, zero, or a level",
    )
    least_prominence: float = Field(
        0.0, ge=0, description="maxima that stand out less are merged with a neighbour; unit of the density"
    )
    least_significance: float = Field(0.0, ge=0, description="the same, in σ of the prominence")


class StatisticsIn(TreatedIn):
    """Moments and histogram of a field over the whole cell."""

    product: Literal["statistics"] | None = None
    spacing: Length | None = Field(None, description="of the samples, Å; default so that all moments are exact")
    bins: Annotated[int, Field(ge=1, le=10_000)] = 64


class FeaturesIn(SoughtIn):
    """What stands out in a density: extrema, moments, and the layers of a layer stack, in one answer."""

    product: Literal["features"] | None = None


class WindowsIn(SetRequestIn):
    """What each termination window does to a point and to a step."""

    product: Literal["windows"] | None = None
    windows: list[WindowIn] | None = Field(None, min_length=1, max_length=20, description="default one of each kind")


class CompareIn(SetRequestIn):
    """How two densities on one cell agree."""

    product: Literal["compare"] | None = None
    other: CoefficientSetIn = Field(alias="with", description="the second set", json_schema_extra=or_stored)
    terms: Literal["all", "common"] = Field("all", description="the densities as they are, or their common terms alone")
    shells: Annotated[int, Field(ge=1, le=100)] | None = Field(None, description="of resolution; default 50 terms each")


ANALYSES: dict[str, type[SetRequestIn]] = {
    "extrema": ExtremaIn,
    "integrals": IntegralsIn,
    "layers": LayersIn,
    "statistics": StatisticsIn,
    "features": FeaturesIn,
    "windows": WindowsIn,
    "compare": CompareIn,
}

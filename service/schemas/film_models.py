"""Films: one layer at several periods or contrasts, and trial stacks."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field

from service.schemas.base import Coordinate, Length, Strict
from service.schemas.columns import NumberColumn
from service.schemas.films import FilmRequestIn, OrientationIn
from service.schemas.picture import PictureIn

Name = Annotated[str, Field(min_length=1, max_length=60)]


class OrdersIn(Strict):
    """Amplitudes of a film's orders."""

    period: Length = Field(description="Å")
    period_sigma: float = Field(0.0, ge=0)
    order: NumberColumn = Field(description="l of each, above 0")
    amplitude: NumberColumn = Field(description="|F|, by any scale unless `absolute`")
    sigma: NumberColumn | None = None
    absolute: bool = Field(False, description="whether amplitudes are density × Å")
    unit: str = Field("arbitrary", min_length=1, max_length=40, description="of the density")


class SwellingIn(FilmRequestIn):
    """Signs of one symmetric layer from several periods (humidity, solvent): its transform is continuous."""

    product: Literal["film_swelling"] | None = None
    sets: list[OrdersIn] = Field(min_length=1, max_length=50)
    orientation: OrientationIn = OrientationIn(kind="undecided")
    thickness: Length | None = Field(None, description="of the layer, Å; the smallest period where not given")
    scales: Literal["free", "common"] | None = Field(None, description="common where all sets are absolute")
    relative_sigma: float | None = Field(None, gt=0, description="σ/|F| of sets without σ")
    samples: Annotated[int, Field(ge=16, le=100_000)] = Field(256, description="of the transform and the profiles")


class ContrastSetIn(OrdersIn):
    """Amplitudes of the film at one contrast."""

    contrast: float = Field(description="x, such as the share of heavy water or of the heavier ion")


class ContrastIn(FilmRequestIn):
    """Signs of one symmetric stack from several contrasts at one period: amplitudes are linear in the contrast."""

    product: Literal["film_contrast"] | None = None
    sets: list[ContrastSetIn] = Field(min_length=1, max_length=50, description="all on one scale")
    exchange: Literal["centre", "edge"] | None = Field(
        None, description="where the matter that scatters more with x sits, as one sheet: about z = 0 or about z = d/2"
    )
    slope_sign: NumberColumn | None = Field(
        None, description="instead of `exchange`: sign of dF/dx of l = 1 to the highest order, 0 where unknown"
    )
    relative_sigma: float | None = Field(None, gt=0, description="σ/|F| of sets without σ")
    model_error: float = Field(
        0.005, ge=0, lt=1, description="added to each σ in quadrature, over the rms amplitude of its set"
    )


class PlaneIn(Strict):
    """A sheet of atoms: a formula on an area, or a strength (density × Å)."""

    kind: Literal["plane"]
    name: Name
    position: Coordinate = Field(description="Å")
    width: float = Field(0.0, ge=0, description="rms, Å")
    occupancy: float = Field(1.0, ge=0)
    formula: str | None = Field(None, max_length=1000)
    area: Length | None = Field(None, description="Å² that holds the formula")
    strength: float | None = None
    displaced: float = Field(0.0, ge=0, description="Å of the background that it takes the place of")


class SlabIn(Strict):
    """A uniform layer between two edges."""

    kind: Literal["slab"]
    name: Name
    lower: Coordinate = Field(description="Å")
    upper: Coordinate = Field(description="Å")
    density: float
    roughness: float = Field(0.0, ge=0, description="rms of the edges, Å")


class TrialIn(FilmRequestIn):
    """A trial stack against measured amplitudes: refined on request, with the profile it gives phases to."""

    product: Literal["film_trial"] | None = None
    orders: OrdersIn
    parts: list[Annotated[PlaneIn | SlabIn, Field(discriminator="kind")]] = Field(min_length=1, max_length=100)
    symmetry: Literal["1", "m", "-1"] = Field("m", description="m, -1: every part has its image about 0")
    probe: Literal["xray", "neutron"] = "xray"
    background: float = Field(0.0, description="density of what fills the rest")
    b_iso: float = Field(0.0, description="B of exp(−B s²), Å²")
    scale: float = Field(1.0, gt=0, description="measured over calculated amplitudes")
    refine: list[Annotated[str, Field(max_length=90)]] = Field(
        [], max_length=50, description="scale, B, background, or part.member such as sheet.position"
    )
    bounds: dict[str, Annotated[list[float], Field(min_length=2, max_length=2)]] = Field({}, max_length=50)
    samples: Annotated[int, Field(ge=16, le=100_000)] = Field(513, description="of the profiles")
    picture: PictureIn | None = None
    table: Literal["parameters", "orders", "profile"] = Field(
        "parameters", description="which table is answered as CSV"
    )


MODELS: dict[str, type[FilmRequestIn]] = {
    "film_swelling": SwellingIn,
    "film_contrast": ContrastIn,
    "film_trial": TrialIn,
}

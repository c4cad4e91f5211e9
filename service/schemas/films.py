"""Layered films: a scan's order table and what is to be made of it."""

from __future__ import annotations

from typing import Annotated, Any, Literal

from pydantic import Field, model_validator

from engine.films.signs import DECISIVE
from service.schemas.base import Coordinate, Length, Strict
from service.schemas.columns import NumberColumn, PhaseColumn
from service.schemas.picture import PictureIn
from service.schemas.preparation import CorrectionIn
from service.schemas.products import UnmeasuredIn
from service.schemas.treatment import WindowIn

LARGEST = 1e30
"""Bound of densities, σ's and weights: squares of larger numbers leave the range of floating point."""
Density = Annotated[float, Field(ge=-LARGEST, le=LARGEST)]
Spread = Annotated[float, Field(ge=0, le=LARGEST)]
Positive = Annotated[float, Field(gt=0, le=LARGEST)]

SCAN_COLUMNS = (
    "two_theta_deg",
    "q",
    "position_sigma",
    "intensity",
    "intensity_sigma",
    "width",
    "width_sigma",
    "order",
    "saturated",
)
"""Columns of a scan, in JSON, in a table and in an archive alike."""


class ScanIn(Strict):
    """Lines of a scan in symmetric reflection, one a row: where they lie, how strong and how wide they are."""

    two_theta_deg: NumberColumn | None = Field(None, description="positions, degrees; or")
    q: NumberColumn | None = Field(None, description="positions, Å⁻¹")
    position_sigma: NumberColumn | None = Field(None, description="standard uncertainties, unit of the positions")
    intensity: NumberColumn | None = Field(None, description="integrated; may be negative by noise")
    intensity_sigma: NumberColumn | None = None
    width: NumberColumn | None = Field(None, description="full widths at half maximum, unit of the positions")
    width_sigma: NumberColumn | None = None
    order: PhaseColumn | None = Field(None, description="l of each line; null or 0 where unknown")
    saturated: NumberColumn | None = Field(None, description="1 where the detector could not count")
    wavelength: Length | None = Field(None, description="Å; needed for 2θ and for corrections")
    radiation: Literal["xray", "neutron"] = "xray"
    period: Length | None = Field(None, description="known beforehand, Å: helps to number lines, is not fitted")


class SpacingIn(Strict):
    """How the period is found and fitted."""

    period_range: Annotated[list[Length], Field(min_length=2, max_length=2)] | None = Field(
        None, description="where the period is looked for, Å"
    )
    zero_shift: bool = Field(False, description="fit a shift common to all positions")
    displacement: bool = Field(False, description="fit a displacement of the sample")
    radius_mm: Length | None = Field(None, description="of the goniometer: displacement in mm instead of relative")
    critical_q: Length | None = Field(None, description="for refraction, q′² = q² − q_c², Å⁻¹; or")
    mean_density: Density | None = Field(None, description="the mean density it follows from")


class FlatIn(Strict):
    """A part of the period that is known to be uniform, Å from the mirror at the origin."""

    start: Coordinate = Field(alias="from")
    end: Coordinate = Field(alias="to")
    sigma: Spread = Field(0.0, description="unevenness that is allowed, in the density's unit")
    weight: Positive = 1.0


class KnownIn(Strict):
    """A number that is known: a mean density in an interval or at a point, or a total density × Å."""

    start: Coordinate = Field(alias="from")
    end: Coordinate | None = Field(None, alias="to", description="left out: at the point `from`")
    value: Density
    sigma: Positive
    weight: Positive = 1.0


class WeightIn(Strict):
    """A criterion's weight: 1 takes it as seriously as the errors say."""

    weight: Positive = 1.0


class FloorIn(Strict):
    """The density is nowhere below a floor."""

    floor: Density = 0.0
    weight: Positive = 1.0


class CriteriaIn(Strict):
    """What the signs of a mirror-symmetric stack are judged by."""

    non_negative: FloorIn | None = Field(None, description="needs an absolute scale")
    flat: list[FlatIn] = Field([], max_length=20)
    densities: list[KnownIn] = Field([], max_length=20)
    totals: list[KnownIn] = Field([], max_length=20)
    least_structure: WeightIn | None = None


class OrientationIn(Strict):
    """What fixes the sign common to all orders.

    excess: the layer scatters more (or less) than what it displaces. total: ∫ of the difference. known_order: one sign.
    never_negative: in a solvent of known density, absolute amplitudes."""

    kind: Literal["undecided", "excess", "total", "known_order", "never_negative"]
    sign: Literal["positive", "negative"] | None = None
    value: Density | None = Field(None, description="total, or the density of the solvent")
    sigma: Positive | None = None
    number: Annotated[int, Field(ge=1)] | None = Field(None, description="known_order: of the set, from 1")
    order: Annotated[int, Field(ge=1)] | None = None


class PhasesIn(Strict):
    """Phases given, or signs found."""

    phase_deg: dict[str, Annotated[float, Field(ge=-1e6, le=1e6)]] | None = Field(
        None, max_length=1000, description='by order, such as {"1": 0, "2": 180}; or'
    )
    criteria: CriteriaIn | None = Field(None, description="what signs are judged by; or")
    swelling: OrientationIn | None = Field(
        None,
        description="of a run: signs from the continuity of the layer's transform, and what fixes their common sign",
    )
    known_signs: dict[str, Literal[-1, 1]] = Field({}, max_length=1000, description="by order")
    use: Annotated[int, Field(ge=1, le=10)] = Field(1, description="which of the sign sets ranked is used")
    decisive: float = Field(DECISIVE, gt=0, description="margin from which on the best sign set counts as decided")


class FactIn(Strict):
    """One thing known of the film, of those that make its scale absolute.

    density: mean between `from` and `to`. total: density × Å there. mean: of the whole period. composition: the mean
    by what a repeat unit of `area` holds. factor: of the amplitudes. amplitude: |F| of one order."""

    kind: Literal["density", "total", "mean", "composition", "factor", "amplitude"]
    start: Coordinate | None = Field(None, alias="from")
    end: Coordinate | None = Field(None, alias="to")
    value: Density | None = None
    sigma: Spread = 0.0
    formula: str | None = Field(None, max_length=1000, description="composition: of a formula unit")
    units: float = Field(1.0, gt=0, le=1e6, description="composition: formula units in a repeat unit")
    area: Length | None = Field(None, description="composition: Å² of the plane per repeat unit")
    area_sigma: Spread = 0.0
    order: Annotated[int, Field(ge=1)] | None = Field(None, description="amplitude: which")


class FilmRegionIn(Strict):
    """A named part of the period to be integrated."""

    name: str = Field(min_length=1, max_length=80)
    start: Coordinate = Field(alias="from")
    end: Coordinate = Field(alias="to")


class FilmRequestIn(Strict):
    """What all requests about films have in common."""

    remark: str | None = Field(None, max_length=2000, description="for people; the service does not read it")


class FilmTaskIn(FilmRequestIn):
    """What is made of a scan, once it is there."""

    spacing: SpacingIn = SpacingIn()
    corrections: list[CorrectionIn] = Field([], max_length=10)
    amplitudes: Literal["bayesian", "root"] = Field(
        "bayesian", description="bayesian: the estimate of French & Wilson (1978); root: square roots"
    )
    negative: Literal["exclude", "refuse"] = Field("exclude", description="root: negative intensities")
    keep_saturated: bool = False
    phases: PhasesIn
    facts: list[FactIn] = Field([], max_length=20, description="what makes the scale absolute")
    unit: str = Field("arbitrary", min_length=1, max_length=40, description="of the density")
    samples: Annotated[int, Field(ge=16, le=100_000)] = 513
    window: WindowIn = WindowIn()
    baseline: Literal["minima", "higher_minimum", "zero"] | Density = "minima"
    least_significance: Spread = Field(3.0, description="of a layer, σ of its prominence")
    regions: list[FilmRegionIn] = Field([], max_length=50)
    area: Length | None = Field(None, description="Å² of the plane per repeat unit: numbers per unit are told too")
    unmeasured: UnmeasuredIn | None = Field(None, description="by a bound: `amplitude` and `b`")
    instrument_width: float | None = Field(
        None, ge=0, le=180, description="full width at half maximum, unit of the positions"
    )
    instrument_rule: Literal["gaussian", "lorentzian"] = "gaussian"
    picture: PictureIn | None = None
    table: Literal["layers", "profile", "orders", "signs"] = Field(
        "layers", description="which table is answered as CSV"
    )


class FilmIn(FilmTaskIn):
    """A film from its order table to its layer profile and layer table."""

    product: Literal["film"] | None = None
    scan: ScanIn


class RunMemberIn(Strict):
    """One film of a run."""

    value: float = Field(description="of the run's variable")
    scan: ScanIn = Field(
        description="its columns; what else it shares with the scan of the request is taken from there"
    )


class FilmRunIn(FilmTaskIn):
    """Films along a run (humidity, time): each analysed alike, in one table and one stack of profiles."""

    product: Literal["film_run"] | None = None
    scan: ScanIn = Field(ScanIn(), description="what the scans have in common")
    variable: str = Field("number", min_length=1, max_length=80)
    variable_unit: str = Field("", max_length=40)
    members: list[RunMemberIn] = Field(min_length=1, max_length=500)

    @model_validator(mode="before")
    @classmethod
    def _completed(cls, data: Any) -> Any:  # noqa: ANN401
        """Members with what their scans share."""
        if not isinstance(data, dict) or not isinstance(data.get("members"), list):
            return data
        shared = data.get("scan", {})
        if not isinstance(shared, dict):
            return data
        whole = [
            {**one, "scan": {**shared, **one["scan"]}}
            if isinstance(one, dict) and isinstance(one.get("scan"), dict)
            else one
            for one in data["members"]
        ]
        return {**data, "members": whole}


SCANS: dict[str, type[FilmTaskIn]] = {"film": FilmIn, "film_run": FilmRunIn}

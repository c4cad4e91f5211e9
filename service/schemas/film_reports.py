"""Reports of films, for the OpenAPI document; they are written without building these objects."""

from __future__ import annotations

from pydantic import BaseModel, Field

from service.schemas.answers import UnmeasuredOut, VariableOut
from service.schemas.reports import LayerOut, ReportOut, SpacingOut


class PeriodOut(BaseModel):
    """The period and what was fitted with it."""

    period: float
    period_sigma: float | None
    unit: str
    zero_shift_deg: float | None
    zero_shift_sigma_deg: float | None
    displacement: float | None
    displacement_sigma: float | None
    displacement_unit: str
    critical_square: float = Field(description="q_c² taken for refraction, Å⁻²")
    chi_squared: float | None
    degrees: int
    probability: float | None
    sigma_source: str


class NumberingOut(BaseModel):
    """One way to number the lines, the one used first."""

    period: float
    period_sigma: float | None
    weight: float = Field(description="share of the evidence of all periods tried")
    chi_squared: float
    degrees: int
    indexed: int
    stray: int
    missing: list[int]
    relation: str


class OrderOut(BaseModel):
    """One line of the scan."""

    order: int = Field(description="0: a stray line")
    two_theta_deg: float | None
    q: float
    d: float
    residual: float | None
    residual_in_sigma: float | None
    intensity: float
    intensity_sigma: float | None
    factor: float | None = Field(description="of the corrections")
    amplitude: float | None = Field(description="|F|, on the absolute scale where there is one")
    amplitude_sigma: float | None
    phase_deg: float | None
    flags: str


class FilmScaleOut(BaseModel):
    """The absolute scale."""

    factor: float
    factor_sigma: float
    mean: float | None
    mean_sigma: float | None
    unit: str
    chi_squared: float
    degrees: int
    words: str
    assumptions: list[str]


class SignSetOut(BaseModel):
    """One sign set."""

    rank: int
    signs: list[int]
    score: float
    parts: list[float] = Field(description="of the score, in the order of the criteria")
    margin: float | None = Field(description="to the next")
    support: float = Field(description="exp(−score/2) relative to all looked at; no probability of being true")
    profile: list[float] | None


class SignsOut(BaseModel):
    """Sign sets ranked, and whether the criteria decide."""

    decided: bool
    verdict: str
    in_doubt: list[int]
    used: int
    exhaustive: bool
    looked_at: int
    criteria: list[str]
    orders: list[int]
    order_margin: list[float | None]
    order_support: list[float | None]
    sets: list[SignSetOut]
    profile_distance: list[float] = Field(description="of the sets' profiles, Å from the mirror")
    words: list[str]


class FilmProfileOut(BaseModel):
    """One period."""

    distance_angstrom: list[float]
    value: list[float]
    uncertainty: list[float] | None
    unmeasured: list[float] | None


class FilmPointOut(BaseModel):
    """What the series makes of a plane of no thickness."""

    width: float | None
    ripple: float
    unit: str


class FilmRegionOut(BaseModel):
    """The integral over a named region."""

    name: str
    from_: float = Field(alias="from")
    to: float
    integral: float
    sigma: float | None
    unit: str
    mean: float
    mean_sigma: float | None
    per_repeat_unit: float | None
    per_repeat_unit_sigma: float | None


class WidthFitOut(BaseModel):
    """One model fitted to the widths of the lines."""

    model: str
    thickness: float | None = Field(description="Å")
    thickness_sigma: float | None
    thickness_least: float | None
    layers: float | None
    layers_sigma: float | None
    disorder: float | None = Field(description="σ of the spacing over the spacing, or the strain")
    disorder_sigma: float | None
    disorder_most: float | None
    chi_squared: float
    degrees: int
    assumptions: list[str]
    notes: list[str]


class WidthsOut(BaseModel):
    """Models of the widths compared."""

    preferred: str
    words: str
    notes: list[str]
    models: list[WidthFitOut]


class DampingOut(BaseModel):
    """How fast intensities fall off with order: displacement, or disorder that adds up from layer to layer."""

    u_squared: float = Field(description="mean square displacement along the normal, Å²")
    u_squared_sigma: float
    u: float | None
    u_sigma: float | None
    b: float = Field(description="8π² u², Å²")
    b_sigma: float
    cumulative: float | None = Field(description="σ of the spacing over the spacing that would alone damp as much")
    orders: list[int]
    expected: list[float] = Field(description="|F| that the fall lets expect")
    assumptions: list[str]
    notes: list[str]


class FilmReport(ReportOut):
    """A film from its order table."""

    spacing: PeriodOut
    numberings: list[NumberingOut]
    orders: list[OrderOut]
    scale: FilmScaleOut | None
    signs: SignsOut | None
    profile: FilmProfileOut
    point: FilmPointOut | None
    area_unit: str
    length: float
    periodic: bool
    merged: int
    layers: list[LayerOut]
    spacings: list[SpacingOut]
    position_covariance: list[list[float]] | None
    area_covariance: list[list[float]] | None
    regions: list[FilmRegionOut]
    unmeasured: UnmeasuredOut | None
    widths: WidthsOut | None
    damping: DampingOut | None
    sources: dict[str, str] = Field(description="published methods used")


class SwellingOrderOut(BaseModel):
    """One order of one set."""

    set: int
    period: float
    order: int
    amplitude: float
    sign: int
    decided: bool
    margin: float | None = Field(description="rise of χ² with the sign reversed; null: endless")
    merit: float
    fitted: float
    residual: float


class SetScaleOut(BaseModel):
    """Amplitudes of a set over those of the first."""

    set: int
    period: float
    scale: float
    sigma: float


class TransformOut(BaseModel):
    """The layer's continuous transform with its band."""

    thickness: float
    q: list[float]
    value: list[float]
    sigma: list[float]


class LayerContrastOut(BaseModel):
    """The layer's own profile less what surrounds it."""

    distance_angstrom: list[float]
    contrast: list[float]
    sigma: list[float]


class ReversedOut(BaseModel):
    """An order whose sign differs from the best solution's."""

    set: int
    order: int


class SolutionOut(BaseModel):
    """One choice of signs."""

    behind: float = Field(description="misfit above the best, χ²")
    signs: list[list[int]]
    reversed: list[ReversedOut]


class JointSignsOut(BaseModel):
    """Signs of one layer from several periods."""

    settled: bool
    oriented: bool
    verdict: str
    chi_squared: float
    degrees: float
    orders: list[SwellingOrderOut]
    scales: list[SetScaleOut]
    transform: TransformOut
    layer: LayerContrastOut
    solutions: list[SolutionOut]
    notes: list[str]
    sources: dict[str, str]


class SwellingReport(JointSignsOut):
    """Signs of one layer from several periods."""

    product: str


class ContrastOrderOut(BaseModel):
    """One order at one contrast."""

    set: int
    contrast: float
    order: int
    amplitude: float
    sign: int = Field(description="of the best line; where not `decided` at least its common sign is open")
    decided: bool
    margin: float = Field(description="rise of χ² with the sign reversed")
    fitted: float
    residual: float


class ContrastLineOut(BaseModel):
    """F = constant + slope x of one order."""

    order: int
    constant: float
    constant_sigma: float
    slope: float
    slope_sigma: float
    correlation: float = Field(description="of constant and slope")
    chi_squared: float
    degrees: int
    relative_margin: float = Field(description="rise of χ² with another place for the change of sign")
    relative_decided: bool


class ContrastReport(BaseModel):
    """Signs of one stack from several contrasts."""

    product: str
    period: float
    settled: bool
    verdict: str
    orders: list[ContrastOrderOut]
    lines: list[ContrastLineOut]
    unused: list[int] = Field(description="orders that fewer than three contrasts hold")
    notes: list[str]
    sources: dict[str, str]


class FilmRunReport(BaseModel):
    """Films along a run."""

    product: str
    variable: VariableOut
    unit: str
    table: list[dict[str, float | int | bool | None]] = Field(description="one row a film")
    swelling: JointSignsOut | None = Field(description="what the run's swelling says of the signs")
    members: list[FilmReport]
    notes: list[str]


class RefinedOut(BaseModel):
    """How the refinement went."""

    r_factor: float
    chi_squared: float
    degrees: int
    weights: str
    converged: bool
    covariance: list[list[float | None]]
    correlation: list[list[float | None]]
    undetermined: list[list[str]]


class ParameterOut(BaseModel):
    """One refined number."""

    parameter: str
    value: float
    sigma: float | None
    at_bound: bool


class TrialOrderOut(BaseModel):
    """Measured and calculated amplitude of one order."""

    order: int
    measured: float
    measured_sigma: float | None
    calculated: float
    phase_deg: float
    difference: float
    merit: float | None


class TrialProfileOut(BaseModel):
    """Observed amplitudes with the model's phases, and what the model lacks."""

    distance_angstrom: list[float]
    observed: list[float]
    uncertainty: list[float] | None
    residual: list[float]


class TrialReport(BaseModel):
    """A trial stack against measured amplitudes."""

    product: str
    unit: str
    period: float
    refined: RefinedOut | None
    parameters: list[ParameterOut]
    orders: list[TrialOrderOut]
    profile: TrialProfileOut
    applied: list[str]
    notes: list[str]
    sources: dict[str, str]


FILM_REPORTS: dict[str, type[BaseModel]] = {
    "film": FilmReport,
    "film_run": FilmRunReport,
    "film_swelling": SwellingReport,
    "film_contrast": ContrastReport,
    "film_trial": TrialReport,
}

"""Reports of analyses, for the OpenAPI document; the analyses write them without building these objects."""

from __future__ import annotations

from pydantic import BaseModel, Field

from service.schemas.answers import ErrorsOut, LimitsOut


class ReportOut(BaseModel):
    """What every report has."""

    product: str
    unit: str = Field(description="of the density")
    resolution: LimitsOut | None
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


class ExtremumOut(BaseModel):
    """One maximum, minimum or saddle point."""

    number: int
    kind: str
    fractional: list[float]
    cartesian: list[float] = Field(description="Å")
    value: float
    sigma: float | None
    significance: float | None = Field(description="value over σ; null where σ is 0")
    position_sigma: list[float] | None = Field(description="along the Cartesian axes, Å; 0 where symmetry fixes it")
    largest_position_sigma: float | None = Field(description="Å, in the direction where it is largest")
    curvatures: list[float] = Field(description="eigenvalues of the Hessian, unit per Å²")
    directions: list[list[float]] = Field(description="their Cartesian unit vectors, as rows")
    multiplicity: int = Field(description="equivalents in the cell")
    site_symmetry: list[str] = Field(description="operations that leave the position in its place")


class CellCountsOut(BaseModel):
    """Critical points of a whole cell by their number of negative curvatures; their alternating sum is 0 (Morse)."""

    negative_curvatures: list[int]
    counts: list[int]


class DistanceOut(BaseModel):
    """A distance between two extrema, or to an equivalent of one."""

    first: int
    second: int
    operation: str = Field(description="takes the second to where the distance ends")
    distance: float = Field(description="Å")
    sigma: float | None
    vector: list[float] = Field(description="Cartesian, Å")


class AngleOut(BaseModel):
    """An angle at the second of three extrema."""

    first: int
    vertex: int
    last: int
    angle_deg: float
    sigma_deg: float | None


class ExtremaReport(ReportOut):
    """Extrema of a density."""

    found: int = Field(description="how many there are of what was asked for; those beyond `most` are not listed")
    extrema: list[ExtremumOut]
    cell: CellCountsOut | None = Field(description="where all kinds were asked for in the whole cell")
    distances: list[DistanceOut]
    angles: list[AngleOut]


class LayerOut(BaseModel):
    """One layer; places in Å along the line, null what is not defined."""

    layer: int
    position: float = Field(description="of the maximum")
    position_sigma: float | None
    centroid: float | None
    centroid_sigma: float | None
    height: float
    height_sigma: float | None
    prominence: float | None = Field(description="height above the higher neighbouring minimum")
    prominence_sigma: float | None
    width: float | None = Field(description="full width at half of the height above the baseline, Å")
    width_sigma: float | None
    area: float = Field(description="integral between the bounds")
    area_sigma: float | None
    area_above: float = Field(description="the same above the baseline")
    area_above_sigma: float | None
    lower: float
    lower_sigma: float | None
    upper: float
    upper_sigma: float | None
    half_lower: float | None
    half_upper: float | None
    lower_density: float
    lower_density_sigma: float | None
    upper_density: float
    upper_density_sigma: float | None
    base: float
    open: bool = Field(description="a bound is an end of the line")
    overlapping: bool = Field(description="a neighbouring minimum lies above half of the maximum")


class SpacingOut(BaseModel):
    """Distance from a layer to the next; the second is moved on by so many periods."""

    first: int
    second: int
    periods: int
    distance: float
    sigma: float | None


class LayersReport(ReportOut):
    """Layers of a profile."""

    area_unit: str
    length: float = Field(description="Å of the line")
    periodic: bool
    merged: int = Field(description="maxima merged with a neighbour")
    layers: list[LayerOut]
    spacings: list[SpacingOut]
    position_covariance: list[list[float]] | None
    area_covariance: list[list[float]] | None


class HistogramOut(BaseModel):
    """Values between successive edges."""

    edges: list[float]
    counts: list[int]


class StatisticsReport(ReportOut):
    """Distribution of the values of a field."""

    samples: int
    shape: list[int]
    mean: float
    rms: float
    standard_deviation: float
    skewness: float | None
    excess_kurtosis: float | None = Field(description="0 for a normal distribution")
    minimum: float
    maximum: float
    fraction_negative: float
    exact_moments: int = Field(description="moments up to this one are those of the series, not of the samples")
    histogram: HistogramOut


class FeaturesReport(ReportOut):
    """Extrema, layers and moments of one density, each as its own address answers it."""

    extrema: ExtremaReport
    layers: LayersReport | None = Field(description="of a layer stack, over one period")
    statistics: StatisticsReport


class WindowOut(BaseModel):
    """What one window does."""

    kind: str
    b: float | None
    peak: float = Field(description="height of a point, relative to the same terms without a window")
    widths: list[float | None] = Field(description="full widths at half maximum, Å, sharpest first; null: endless")
    directions: list[list[float]]
    ripple: float = Field(description="most negative value of a point of height 1")
    ripple_at: float | None = Field(description="Å from the point")
    overshoot: float = Field(description="of a plane step, as a fraction of its jump")
    step_normal: list[int]
    step_orders: int


class WindowsReport(ReportOut):
    """Windows side by side."""

    windows: list[WindowOut]


class ShellOut(BaseModel):
    """Agreement in a shell of resolution."""

    d_max: float
    d_min: float
    both: int
    first_only: int
    second_only: int
    correlation: float | None
    mean_cosine: float | None


class CompareReport(ReportOut):
    """Agreement of two densities n₁ and n₂ on one cell."""

    matched: int
    first_only: int
    second_only: int
    correlation: float | None
    scale: float | None = Field(description="k of the least ∫(n₁ − k n₂ − c)²")
    scale_sigma: float | None
    offset: float | None = Field(description="c")
    rms_difference: float
    rms_residual: float | None
    r_value: float | None = Field(description="Σ|n₁ − k n₂|/Σ|n₁|, complex")
    amplitude_scale: float | None
    amplitude_r_value: float | None
    mean_cosine: float | None = Field(description="of phase differences, weighted by amplitudes")
    mean_phase_difference: float | None = Field(description="degrees")
    shells: list[ShellOut]


REPORTS: dict[str, type[ReportOut]] = {
    "extrema": ExtremaReport,
    "integrals": IntegralsReport,
    "layers": LayersReport,
    "statistics": StatisticsReport,
    "features": FeaturesReport,
    "windows": WindowsReport,
    "compare": CompareReport,
}

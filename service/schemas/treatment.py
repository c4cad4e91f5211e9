"""A set and what is made of it before it is summed: common to products and analyses."""

from __future__ import annotations

from typing import Any, Literal

from pydantic import ConfigDict, Field, model_validator

from service.schemas.base import Coordinates, IndexVector, Length, Strict, Vector
from service.schemas.coefficient_set import STORED_ID, CoefficientSetIn
from service.schemas.combination import CombinationIn


class WindowIn(Strict):
    """Termination window w(|G|/G_max)."""

    kind: Literal["none", "lanczos", "raised_cosine", "gaussian"] = "none"
    b: float | None = Field(None, gt=0, description="B of exp(−B s²), s = |G|/4π, Å²; gaussian only")


class ResolutionIn(Strict):
    """Only coefficients with d_min ≤ d ≤ d_max are summed."""

    d_min: float | None = Field(None, gt=0, description="Å")
    d_max: float | None = Field(None, gt=0, description="Å")


class TrustIn(Strict):
    """Which phases are trusted; the others are taken as unknown, and counted so."""

    least_merit: float | None = Field(None, ge=0, le=1, description="figure of merit from which on")
    largest_sigma_deg: float | None = Field(None, gt=0, description="standard uncertainty up to which, degrees")


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


def _with_short_form(schema: dict[str, Any]) -> None:
    schema["anyOf"] = [*schema["anyOf"], {"const": "lateral", "type": "string"}]


def _set_or_id(schema: dict[str, Any]) -> None:
    """The set itself, or the id of one of the store: resolved before the request is checked."""
    schema["properties"]["set_id"] = STORED_ID
    schema["required"] = [name for name in schema["required"] if name != "set"]
    schema["oneOf"] = [{"required": ["set"]}, {"required": ["set_id"]}]


class SetRequestIn(Strict):
    """What all requests about a coefficient set have in common."""

    model_config = ConfigDict(json_schema_extra=_set_or_id)

    remark: str | None = Field(None, max_length=2000, description="for people; the service does not read it")
    set: CoefficientSetIn
    combination: CombinationIn | None = Field(None, description="combines the set with a second one")
    resolution: ResolutionIn = ResolutionIn()
    trust: TrustIn = Field(TrustIn(), description="which phases are believed")
    missing_phase: Literal["omit", "refuse"] = Field(
        "omit", description="coefficients without phase: leave out and count, or refuse the request"
    )


class TreatedIn(SetRequestIn):
    """A set with its treatment."""

    coordinates: Coordinates = Field(
        "fractional", description="of every position and vector but indices; Cartesian in Å"
    )
    field: Literal["density", "gradient", "gradient_magnitude", "laplacian", "autocorrelation", "response"] = "density"
    window: WindowIn = WindowIn()
    sharpen: float = Field(0.0, description="B of a factor exp(+B s²), Å²; negative smooths")
    average: AverageIn | None = Field(None, json_schema_extra=_with_short_form)
    apply_merit: bool = Field(False, description="multiply each coefficient by its figure of merit")
    self_term: float = Field(
        0.0,
        description="autocorrelation only: subtracted from every squared amplitude, in the square of its unit",
    )

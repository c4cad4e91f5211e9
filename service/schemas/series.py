"""A series of sets along a variable of the run."""

from __future__ import annotations

from typing import Annotated, Any, Literal

from pydantic import Field, model_validator

from service.schemas.base import Strict
from service.schemas.coefficient_set import CoefficientSetIn
from service.schemas.combination import RelativeScaleIn
from service.schemas.sampling import PlaneIn, SampledLineIn
from service.schemas.treatment import TreatedIn


class MemberIn(Strict):
    """One set of a series."""

    value: float = Field(description="of the variable")
    set: CoefficientSetIn = Field(description="what differs from the set of the request")


class SeriesIn(TreatedIn):
    """Sets of one sample along a variable (time, temperature, dose), as a stack of profiles or slices.

    Each member's set is the set of the request with its own members in place of those of the same name."""

    product: Literal["series"] | None = None
    variable: str = Field("number", min_length=1, max_length=80, description="name of what the series runs along")
    variable_unit: str = Field("", max_length=40)
    members: list[MemberIn] = Field(min_length=1, max_length=1000)
    profile: SampledLineIn | None = Field(None, description="the line of the profiles; or")
    slice: PlaneIn | None = Field(None, description="the plane of the slices")
    scale: RelativeScaleIn = Field(description="how members are brought to the scale of the reference")
    reference: Annotated[int, Field(ge=1)] = Field(1, description="number of the member that others are brought to")
    common: Literal["intersection", "each"] = Field(
        "intersection", description="the terms that all members have; or each member's own, whose terminations differ"
    )
    phases: Literal["own", "reference"] = "own"
    difference: bool = Field(False, description="each member less the reference")
    uncertainty: bool = False
    precision: Literal["double", "single"] = "double"
    tolerance: float = Field(1e-9, ge=1e-12, le=1e-2)

    @model_validator(mode="before")
    @classmethod
    def _completed(cls, data: Any) -> Any:  # noqa: ANN401
        """Members with what they share."""
        if not isinstance(data, dict) or not isinstance(data.get("members"), list):
            return data
        members, shared = data["members"], data.get("set")
        if isinstance(shared, CoefficientSetIn):
            # A set of the store: checked already, and no text any more.
            shared = {name: getattr(shared, name) for name in shared.model_fields_set}
        if not isinstance(shared, dict):
            return data
        whole = [
            {**one, "set": {**shared, **one["set"]}}
            if isinstance(one, dict) and isinstance(one.get("set"), dict)
            else one
            for one in members
        ]
        return {**data, "members": whole}

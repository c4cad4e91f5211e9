"""Two sets made one: differences and averages."""

from __future__ import annotations

from typing import Literal

from pydantic import Field

from service.schemas.base import Strict
from service.schemas.coefficient_set import CoefficientSetIn, or_stored


class RelativeScaleIn(Strict):
    """How the second set is brought to the scale of the first.

    as_given: it is on it. given: multiplied by ``k exp(−b s²)``, s = |G|/4π. fitted: k, and with `displacement` b
    too, by least squares on the common amplitudes."""

    kind: Literal["as_given", "given", "fitted"]
    k: float | None = Field(None, gt=0, le=1e30)
    k_sigma: float | None = Field(None, ge=0, description="standard uncertainty of k, at most k")
    b: float | None = Field(None, description="Å²")
    displacement: bool = False
    robust: bool = Field(False, description="bound the pull of outliers on the fit")


class CombinationIn(Strict):
    """The set of the request combined with a second one on the same cell.

    difference: first − k·second. average: the mean of both, k·second taken."""

    kind: Literal["difference", "average"]
    other: CoefficientSetIn = Field(alias="with", description="the second set", json_schema_extra=or_stored)
    scale: RelativeScaleIn = Field(
        description="never guessed: say as_given where the second is on the scale of the first"
    )
    phases: Literal["own", "first", "second", "third"] = Field(
        "own",
        description="own: complex coefficients are combined; else amplitudes, all with the phases of one set",
    )
    third: CoefficientSetIn | None = Field(
        None, description="the set whose phases are taken, with phases third", json_schema_extra=or_stored
    )
    missing: Literal["omit", "zero_first", "zero_second", "zero_both"] = Field(
        "omit", description="difference: terms that one set lacks are left out, or taken as zero in the set named"
    )
    weights: Literal["sigma", "equal"] = Field("sigma", description="average: by 1/σ², or all alike")

"""Every kind of request a worker takes."""

from __future__ import annotations

from typing import Literal

from pydantic import Field

from service.schemas.analyses import ANALYSES
from service.schemas.base import Strict
from service.schemas.coefficient_set import ReflectionSetIn
from service.schemas.film_models import MODELS
from service.schemas.films import SCANS, FilmRequestIn
from service.schemas.products import PRODUCTS
from service.schemas.series import SeriesIn
from service.schemas.store import KeepIn
from service.schemas.treatment import SetRequestIn

INSPECT = "inspect"
KEEP = "keep"


class InspectIn(Strict):
    """A file of reflections to be summarised, without a density."""

    product: Literal["inspect"] | None = None
    remark: str | None = Field(None, max_length=2000, description="for people; the service does not read it")
    set: ReflectionSetIn = ReflectionSetIn()


SERIES = "series"
FILMS: dict[str, type[FilmRequestIn]] = {**SCANS, **MODELS}
Request = SetRequestIn | FilmRequestIn | InspectIn | KeepIn
REQUESTS: dict[str, type[SetRequestIn] | type[FilmRequestIn] | type[InspectIn] | type[KeepIn]] = {
    **PRODUCTS,
    SERIES: SeriesIn,
    **ANALYSES,
    **FILMS,
    INSPECT: InspectIn,
    KEEP: KeepIn,
}

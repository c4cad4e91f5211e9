"""From a request's picture to the options of a drawing."""

from __future__ import annotations

from dataclasses import replace

from engine.coefficients import CoefficientSet
from engine.features.layers import layers
from engine.fields import Treatment
from engine.sampling import Sampling
from service.pictures.options import MOST_MARKERS, PictureOptions
from service.problems import at, located
from service.schemas.picture import PictureIn
from service.schemas.products import ProductIn


def options(request: ProductIn, asked: PictureIn | None) -> PictureOptions:
    """The options of a product's picture.

    Raises
    ------
    Problem
        Pointing to the place in the body.
    """
    if asked is not None and asked.level_sigmas is not None and not request.uncertainty:
        raise at(("picture", "level_sigmas"), "needs the uncertainty", 'ask for it with "uncertainty": true')
    return picture_options(asked)


def picture_options(asked: PictureIn | None) -> PictureOptions:
    """The options of any picture; raises as `options`."""
    asked = asked or PictureIn()
    taken = set(PictureIn.model_fields) - {"markers", "mark_layers", "levels"}
    with located("picture"):
        return PictureOptions(
            **{name: getattr(asked, name) for name in taken},
            levels=tuple(asked.levels),
            markers=tuple((one.position, one.label) for one in asked.markers),
        )


def with_layers(
    drawn: PictureOptions, coefficients: CoefficientSet, sampling: Sampling, treatment: Treatment
) -> PictureOptions:
    """The same with the layers of a profile marked, as far as there is room for marks.

    Raises
    ------
    Problem
        The profile has no layers that could be found.
    """
    with located("picture", "mark_layers", renamed={"field": ("field",)}):
        found = layers(coefficients, sampling, treatment)
    places = [(float(position), f"{position:.4g} Å") for position in found.position]
    return replace(drawn, markers=(*drawn.markers, *places)[:MOST_MARKERS])

"""Layers of a profile."""

from __future__ import annotations

from dataclasses import fields
from typing import Any

import numpy as np

from engine.coefficients import CoefficientSet
from engine.features.layer_distances import LayerDistances, layer_spacings
from engine.features.layers import Layers
from engine.features.layers import layers as find_layers
from engine.sampling import AffineGrid
from service import interpret
from service.analyses.common import OF_SET, heading, rows, table_of, told
from service.analyses.report import Limits, Report
from service.problems import at, located
from service.schemas.analyses import LayersIn

PLACES = ("position", "centroid", "height", "prominence", "width", "area", "area_above", "lower", "upper")
"""Numbers that come with a standard uncertainty."""
COVARIANCES = 8
"""Tables of any two layers held at a time, roughly."""


def layers(request: LayersIn, coefficients: CoefficientSet, limits: Limits) -> Report:
    """Find and measure the layers along the line of the request.

    Raises
    ------
    Problem
        Pointing to the place in the body.
    """
    lattice = coefficients.lattice
    treatment = interpret.treatment(request, lattice)
    where = interpret.line(request, lattice, request.coordinates, 2)
    place = ("to",) if request.end is not None else ("along",) if request.along is not None else ("normal_to",)
    _require_memory(where, coefficients, limits, place)
    with located(renamed={**OF_SET, "samples": place}):
        made = find_layers(
            coefficients,
            where,
            treatment,
            baseline=request.baseline,
            least_prominence=request.least_prominence,
            least_significance=request.least_significance,
        )
        spacings = layer_spacings(made)
    document = heading(
        "layers",
        coefficients,
        unit=made.unit,
        contains=made.contains,
        omits=made.omits,
        applied=(*made.applied, *made.assumptions),
        notes=made.notes,
    )
    columns = layer_columns(made)
    document |= layers_members(made, spacings)
    between = table_of(
        {
            "first": spacings.first + 1,
            "second": spacings.second + 1,
            "distance": spacings.distance,
            "sigma": spacings.sigma,
        }
    )
    return Report(
        document=document,
        table=table_of(columns),
        told=told(document),
        further=(("distances from layer to layer, Å", between),) if spacings.first.size else (),
    )


def _require_memory(where: AffineGrid, coefficients: CoefficientSet, limits: Limits, place: tuple[str, ...]) -> None:
    """A line has about as many layers as shortest waves at the most, and a covariance for any two of them."""
    span = where.steps[0] * (where.shape[0] - 1)
    waves = float(np.abs(coefficients.indices @ span).max(initial=0.0))
    if COVARIANCES * 8 * waves**2 > limits.max_bytes or 2 * waves**2 > limits.max_values:
        raise at(
            place,
            f"makes a line of {waves:,.0f} of the shortest waves, whose layers would take more than the limits",
            "give a shorter line, or have the limits raised",
            kind="too-costly",
        )


def layers_members(made: Layers, spacings: LayerDistances) -> dict[str, Any]:
    """Layers and their distances as members of a document."""
    return {
        "area_unit": made.area_unit,
        "length": made.length,
        "periodic": made.periodic,
        "merged": made.merged,
        "layers": rows(layer_columns(made)),
        "spacings": rows(
            {
                "first": spacings.first + 1,
                "second": spacings.second + 1,
                "periods": spacings.periods,
                "distance": spacings.distance,
                "sigma": spacings.sigma,
            }
        ),
        "position_covariance": made.position_covariance,
        "area_covariance": made.area_covariance,
    }


def layer_columns(made: Layers) -> dict[str, Any]:
    """One row a layer."""
    found: dict[str, Any] = {"layer": list(range(1, made.count + 1))}
    every = {field.name: getattr(made, field.name) for field in fields(made)}
    for name in PLACES:
        found |= {name: every[name], f"{name}_sigma": every[f"{name}_sigma"]}
    return found | {
        "half_lower": made.half_lower,
        "half_upper": made.half_upper,
        "lower_density": made.lower_density,
        "lower_density_sigma": made.lower_density_sigma,
        "upper_density": made.upper_density,
        "upper_density_sigma": made.upper_density_sigma,
        "base": made.base,
        "open": made.open,
        "overlapping": made.overlapping,
    }

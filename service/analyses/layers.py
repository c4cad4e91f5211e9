"""Layers of a profile."""

from __future__ import annotations

from dataclasses import fields
from typing import Any

from engine.coefficients import CoefficientSet
from engine.features.layer_distances import layer_spacings
from engine.features.layers import Layers
from engine.features.layers import layers as find_layers
from service import interpret
from service.analyses.common import heading, rows, table_of, told
from service.analyses.report import Limits, Report
from service.problems import located
from service.schemas.analyses import LayersIn

PLACES = ("position", "centroid", "height", "prominence", "width", "area", "area_above", "lower", "upper")
"""Numbers that come with a standard uncertainty."""


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
    with located():
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
    columns = _columns(made)
    document |= {
        "area_unit": made.area_unit,
        "length": made.length,
        "periodic": made.periodic,
        "merged": made.merged,
        "layers": rows(columns),
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
    return Report(document=document, table=table_of(columns), told=told(document))


def _columns(made: Layers) -> dict[str, Any]:
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

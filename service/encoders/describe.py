"""What travels with the values: the answer's members without the values themselves."""

from __future__ import annotations

from typing import Any

import numpy as np

from engine.arrays import AnyArray
from engine.coefficients import CoefficientSet
from engine.evaluate import Field
from engine.fields import FieldKind
from engine.quantities import Quantity, contour_levels
from engine.sampling import AffineGrid
from engine.statistics import Statistics

SIGN_CONVENTION = "n(r) = sum over G of n_G exp(+i G·r); F(hkl) = integral over one cell of rho(r) exp(+2 pi i h·x) dV"

FRACTIONAL_NAMES = {1: ("x_3",), 2: ("x_1", "x_2"), 3: ("x_1", "x_2", "x_3")}
"""Columns of fractional coordinates, by the dimension of the lattice; a stack's is that of its third axis."""


def describe(
    product: str, field: FieldKind, coefficients: CoefficientSet, made: Field, quantity: Quantity = "value"
) -> dict[str, Any]:
    """Everything but the values and their uncertainties, as plain data."""
    tally = coefficients.tally
    resolution = made.resolution
    return {
        "product": product,
        "field": field,
        "quantity": quantity,
        "unit": made.unit,
        "shape": list(made.values.shape),
        "components": list(made.components),
        "axes": [
            {
                "label": axis.label,
                "unit": "Å",
                "start": axis.start,
                "step": axis.step,
                "count": axis.count,
                "direction": axis.direction.tolist(),
            }
            for axis in made.axes
        ],
        "origin": _origin(coefficients, made),
        "summary": {
            **_numbers(made.statistics),
            "coefficients": {
                "rows": tally.rows,
                "summed": made.summed,
                "without_phase": made.unphased,
                "beyond_resolution": tally.beyond_resolution,
                "friedel_pairs_averaged": tally.mates_joined,
                "repeats_joined": tally.repeats_joined,
                "zero_term": tally.zero_term,
            },
            "resolution": None if resolution is None else {"d_min": resolution[0], "d_max": resolution[1], "unit": "Å"},
            "uncertainty": _uncertainty(made, quantity),
            "method": "+".join(made.methods),
            "accuracy": made.accuracy,
            "sign_convention": SIGN_CONVENTION,
        },
        "applied": list(made.applied),
        "notes": list(made.notes),
    }


def columns(coefficients: CoefficientSet, made: Field, quantity: Quantity = "value") -> list[tuple[str, AnyArray]]:
    """Profiles and points as named columns: coordinates, then values, each with its uncertainty."""
    if made.axes:
        axis = made.axes[0]
        found: list[tuple[str, AnyArray]] = [(f"{axis.label}_angstrom", axis.coordinates())]
    else:
        positions = made.sampling.positions()
        names = FRACTIONAL_NAMES[coefficients.lattice.dimension]
        found = [(name, column) for name, column in zip(names, positions.T, strict=True)]
    parts = [("", made.values)]
    if made.components:
        parts = [(f"_{name}", made.values[..., place]) for place, name in enumerate(made.components)]
    for place, (suffix, values) in enumerate(parts):
        if values.dtype.kind == "c":
            found += [(f"value{suffix}_real", values.real), (f"value{suffix}_imag", values.imag)]
        else:
            found.append((f"value{suffix}", values))
        if made.sigma is not None and quantity == "value":
            sigma = made.sigma.values
            found.append((f"uncertainty{suffix}", sigma[..., place] if made.components else sigma))
    return found


def _uncertainty(made: Field, quantity: Quantity) -> dict[str, Any] | None:
    """What the uncertainties contain, and how large they are; None where none were asked for."""
    sigma = made.sigma
    if sigma is None:
        return None
    multiples, values = contour_levels(made) if quantity == "value" else (np.zeros(0), np.zeros(0))
    return {
        "contains": list(sigma.contains),
        "omits": list(sigma.omits),
        "minimum": sigma.minimum,
        "maximum": sigma.maximum,
        "rms": sigma.rms,
        "accuracy": sigma.accuracy,
        "contour_levels": [
            {"sigmas": multiple, "value": value}
            for multiple, value in zip(multiples.tolist(), values.tolist(), strict=True)
        ],
    }


def _origin(coefficients: CoefficientSet, made: Field) -> dict[str, list[float]] | None:
    if not isinstance(made.sampling, AffineGrid):
        return None
    origin = made.sampling.origin
    return {"fractional": origin.tolist(), "cartesian": coefficients.lattice.to_cartesian(origin).tolist()}


def _numbers(statistics: Statistics) -> dict[str, Any]:
    mean: Any = statistics.mean
    if isinstance(mean, complex):
        mean = {"real": mean.real, "imag": mean.imag}
    return {
        "minimum": statistics.minimum,
        "maximum": statistics.maximum,
        "mean": mean,
        "rms": statistics.rms,
    }

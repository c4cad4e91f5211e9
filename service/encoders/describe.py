"""What travels with the values: the answer's members without the values themselves."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

import numpy as np

from engine.arrays import AnyArray
from engine.coefficients import CoefficientSet
from engine.evaluate import Field
from engine.fields import FieldKind
from engine.quantities import Quantity, contour_levels
from engine.resolution.change import Change
from engine.resolution.coverage import Coverage
from engine.resolution.response import PointResponse
from engine.sampling import AffineGrid, Axis
from engine.statistics import Statistics
from engine.uncertainty.sigma import Sigma

SIGN_CONVENTION = "n(r) = sum over G of n_G exp(+i G·r); F(hkl) = integral over one cell of rho(r) exp(+2 pi i h·x) dV"

FRACTIONAL_NAMES = {1: ("x_3",), 2: ("x_1", "x_2"), 3: ("x_1", "x_2", "x_3")}
"""Columns of fractional coordinates, by the dimension of the lattice; a stack's is that of its third axis."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Shown:
    """What an answer shows.

    Attributes
    ----------
    product : str
    kind : FieldKind
    quantity : Quantity
    coefficients : CoefficientSet
    field : Field
        With the quantity as its values.
    change : Change or None
        By terms that were not measured.
    response : PointResponse or None
        Of the coefficients summed; None where there is none or the answer does not tell it.
    coverage : Coverage or None
        How many of the possible terms were measured.
    advice : tuple of str
        Where request and data do not fit each other.
    """

    product: str
    kind: FieldKind
    quantity: Quantity
    coefficients: CoefficientSet
    field: Field
    change: Change | None = None
    response: PointResponse | None = None
    coverage: Coverage | None = None
    advice: tuple[str, ...] = ()

    @property
    def sigma(self) -> Sigma | None:
        """The uncertainty that goes beside the values."""
        return self.field.sigma if self.quantity == "value" else None


def describe(shown: Shown) -> dict[str, Any]:
    """Everything but the arrays, as plain data."""
    coefficients, field = shown.coefficients, shown.field
    tally = coefficients.tally
    resolution = field.resolution
    return {
        "product": shown.product,
        "field": shown.kind,
        "quantity": shown.quantity,
        "unit": field.unit,
        "shape": list(field.values.shape),
        "components": list(field.components),
        "axes": [described_axis(axis) for axis in field.axes],
        "origin": _origin(coefficients, field),
        "summary": {
            **_numbers(field.statistics),
            "coefficients": {
                "rows": tally.rows,
                "summed": field.summed,
                "without_phase": field.unphased,
                "beyond_resolution": tally.beyond_resolution,
                "friedel_pairs_averaged": tally.mates_joined,
                "repeats_joined": tally.repeats_joined,
                "zero_term": tally.zero_term,
            },
            "coverage": None if shown.coverage is None else described_coverage(shown.coverage),
            "resolution": None if resolution is None else _resolution(resolution, shown.response),
            "uncertainty": _uncertainty(field, shown.quantity),
            "unmeasured": None if shown.change is None else _change(shown.change),
            "method": "+".join(field.methods),
            "accuracy": field.accuracy,
            "sign_convention": SIGN_CONVENTION,
        },
        "applied": list(field.applied),
        "notes": [*field.notes, *shown.advice],
    }


def described_coverage(found: Coverage) -> dict[str, Any]:
    """Terms possible and present, one of each Friedel pair, and the lowest orders that are not there."""
    return {
        "d_min": found.d_min,
        "possible": found.possible,
        "present": found.present,
        "without_phase": found.without_phase,
        "missing": found.missing,
        "fraction": found.fraction,
        "estimated": found.estimated,
        "region": found.region,
        "lowest_absent": [
            {"indices": row, "d": spacing}
            for row, spacing in zip(found.gaps.tolist(), found.gap_spacings.tolist(), strict=True)
        ],
    }


def point_words(response: PointResponse) -> str:
    """Widths and ripple of a point in a line."""
    widths = " × ".join(f"{width:.3g}" for width in response.widths)
    return f"a point is {widths} Å wide at half height, ripples to {100 * response.ripple:.2g} %"


def _resolution(limits: tuple[float, float], response: PointResponse | None) -> dict[str, Any]:
    """Spacings summed, and what the series makes of a point."""
    told: dict[str, Any] = {"d_min": limits[0], "d_max": limits[1], "unit": "Å", "point": None}
    if response is not None:
        told["point"] = {
            "directions": response.directions.tolist(),
            "widths": [width if math.isfinite(width) else None for width in response.widths.tolist()],
            "ripple": response.ripple,
            "ripple_at": response.ripple_at,
            "searched": response.searched,
        }
    return told


def _change(change: Change) -> dict[str, Any]:
    return {
        "rms": change.rms,
        "largest_inside": change.largest_inside,
        "largest_beyond": change.largest_beyond,
        "assumed": list(change.words),
    }


def described_axis(axis: Axis) -> dict[str, Any]:
    """One axis as plain data."""
    return {
        "label": axis.label,
        "unit": "Å",
        "start": axis.start,
        "step": axis.step,
        "count": axis.count,
        "direction": axis.direction.tolist(),
    }


def columns(shown: Shown) -> list[tuple[str, AnyArray]]:
    """Profiles and points as named columns: coordinates, then values, each with its uncertainty."""
    coefficients, made = shown.coefficients, shown.field
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
        if shown.sigma is not None:
            sigma = shown.sigma.values
            found.append((f"uncertainty{suffix}", sigma[..., place] if made.components else sigma))
    if shown.change is not None:
        found.append(("unmeasured", shown.change.values))
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

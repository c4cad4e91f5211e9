"""Stacks of fields as bytes."""

from __future__ import annotations

import io
from typing import Any

import numpy as np
import orjson

from engine.arrays import AnyArray
from engine.combination import StackedField
from service.encoders.describe import described_axis
from service.encoders.write import csv_bytes
from service.problems import Problem
from service.schemas.series import SeriesIn
from service.settings import Settings

PROFILES_ONLY = "Only profiles of a real scalar field come as CSV; ask for application/x-npz."


def require_form(form: str | None, request: SeriesIn, samples: int, settings: Settings) -> None:
    """Refuse, before any work, a form that cannot hold what is asked for.

    Raises
    ------
    Problem
        As `write_stack`.
    """
    if form == "npy" and request.uncertainty:
        raise Problem("not-acceptable", "A .npy holds one array: ask for application/x-npz, or no uncertainty.")
    if form == "csv" and request.slice is not None:
        raise Problem("not-acceptable", PROFILES_ONLY)
    _require_text(form, samples * (1 + request.uncertainty), settings)


def _require_text(form: str | None, numbers: int, settings: Settings) -> None:
    if form in ("json", "csv") and numbers > settings.max_json_values:
        raise Problem(
            "too-costly",
            f"The answer has {numbers:,} numbers, more than the {settings.max_json_values:,} that are written as "
            f"{form.upper()}. Ask for application/x-npz.",
        )


def write_stack(made: StackedField, form: str, request: SeriesIn, settings: Settings) -> bytes:
    """The stack as JSON, .npy, .npz or, of profiles, CSV.

    Raises
    ------
    Problem
        More numbers than are written as text, uncertainties in a .npy, or CSV of slices.
    """
    parts = (2 if made.values.dtype.kind == "c" else 1) + (made.sigma is not None)
    _require_text(form, made.values.size * parts, settings)
    if form == "npy":
        if made.sigma is not None:
            raise Problem("not-acceptable", "A .npy holds one array: ask for application/x-npz, or no uncertainty.")
        buffer = io.BytesIO()
        np.save(buffer, made.values)
        return buffer.getvalue()
    told = describe_stack(made, request)
    if form == "json":
        arrays = {"values": _plain(made.values), "uncertainty": made.sigma}
        return orjson.dumps({**arrays, **told}, option=orjson.OPT_SERIALIZE_NUMPY)
    if form == "npz":
        return _npz(made, told)
    return _csv(made, told)


def describe_stack(made: StackedField, request: SeriesIn) -> dict[str, Any]:
    """Everything but the arrays, as plain data."""
    return {
        "product": "series",
        "field": request.field,
        "unit": made.unit,
        "shape": list(made.values.shape),
        "components": list(made.components),
        "variable": {
            "name": made.variable.name,
            "unit": made.variable.unit,
            "values": made.variable.values.tolist(),
        },
        "reference": made.reference + 1,
        "difference": made.difference,
        "axes": [described_axis(axis) for axis in made.axes],
        "members": [
            {
                "value": float(value),
                "applied": list(applied),
                "notes": list(notes),
                "uncertainty": {"contains": list(contains), "omits": list(omits)} if contains else None,
            }
            for value, applied, notes, contains, omits in zip(
                made.variable.values, made.applied, made.notes, made.contains, made.omits, strict=True
            )
        ],
    }


def _plain(values: AnyArray) -> Any:  # noqa: ANN401
    if values.dtype.kind == "c":
        return {"real": np.ascontiguousarray(values.real), "imag": np.ascontiguousarray(values.imag)}
    return values


def _npz(made: StackedField, told: dict[str, Any]) -> bytes:
    arrays: dict[str, Any] = {"values": made.values, "variable": made.variable.values}
    if made.sigma is not None:
        arrays["uncertainty"] = made.sigma
    arrays |= {f"axis_{number}": axis.coordinates() for number, axis in enumerate(made.axes, start=1)}
    arrays["metadata"] = np.array(orjson.dumps(told).decode())
    buffer = io.BytesIO()
    np.savez(buffer, **arrays)
    return buffer.getvalue()


def _csv(made: StackedField, told: dict[str, Any]) -> bytes:
    """One row a sample, one column a member (and one for its uncertainty)."""
    if made.values.ndim != 2 or made.values.dtype.kind == "c":
        raise Problem("not-acceptable", PROFILES_ONLY)
    columns = [made.axes[0].coordinates()]
    names = ["distance_angstrom"]
    for number, row in enumerate(made.values):
        columns.append(row)
        names.append(f"value_{number + 1}")
        if made.sigma is not None:
            columns.append(made.sigma[number])
            names.append(f"uncertainty_{number + 1}")
    variable = told["variable"]
    listed = ", ".join(f"{number}: {value:g}" for number, value in enumerate(variable["values"], start=1))
    lines = [
        f"series along {variable['name']} ({variable['unit'] or 'no unit'}): {listed}",
        f"field: {told['field']}; unit: {told['unit']}; reference: {told['reference']}",
        *dict.fromkeys(note for member in told["members"] for note in (*member["applied"], *member["notes"])),
    ]
    return csv_bytes(lines, list(zip(names, columns, strict=True)))

"""The summary of a file of reflections as plain data."""

from __future__ import annotations

from dataclasses import asdict
from typing import Any

from engine.preparation import Summary
from engine.readers import ReadTable
from engine.readers.table import LeftOut


def summary_document(table: ReadTable, left: tuple[LeftOut, ...], summary: Summary) -> dict[str, Any]:
    """What was read, what was left out and why, and what the reflections say about themselves."""
    made = asdict(summary)
    crystal = table.crystal
    shells = made.pop("completeness_shells")
    return {
        "file": {
            "kind": table.kind,
            "block": table.block,
            "category": table.category,
            "columns": {quantity: table.names[quantity] for quantity in table.columns},
            "rows_read": table.rows_read,
            "left_out": [{"reason": one.reason, "rows": one.count} for one in (*table.rejected, *left)],
            "remarks": [{"kind": one.kind, "items": list(one.items), "words": one.words} for one in table.remarks],
            "cell": None if crystal.cell is None else crystal.cell.tolist(),
            "cell_sigma": _numbers(crystal.cell_sigma),
            "wavelengths": list(crystal.wavelengths),
            "radiation": crystal.radiation,
        },
        **made,
        "agreement": _finite(made["agreement"]),
        "agreement_shells": [_finite(shell) for shell in made["agreement_shells"]],
        "completeness_shells": [{**shell, "completeness": shell["observed"] / shell["possible"]} for shell in shells],
    }


def _finite(agreement: dict[str, Any]) -> dict[str, Any]:
    """JSON has no infinity: a shell that takes in the zero term has no upper limit."""
    return {name: None if value == float("inf") else value for name, value in agreement.items()}


def _numbers(values: Any) -> list[float | None] | None:  # noqa: ANN401
    return None if values is None else [None if value != value else float(value) for value in values]

"""The report of an analysis in a terminal: its table and what is to be known of it."""

from __future__ import annotations

from typing import Any

import numpy as np

from service.analyses.report import Column, Report

LISTED = 40
WIDEST = 28


def render_report(report: Report) -> str:
    """The table in columns, at most so many rows, a number beside its σ; and the remarks."""
    count = len(report.table[0][1]) if report.table else 0
    columns = [_cells(column, min(count, LISTED)) for column in _joined(report.table)]
    lines = ["  " + "  ".join(cells) for cells in zip(*columns, strict=True)]
    if count > LISTED:
        lines.append(f"  … and {count - LISTED} more rows")
    if not count:
        lines.append("  nothing was found")
    return "\n".join([*lines, "", *(f"  · {text}" for text in report.told)])


def _joined(table: tuple[Column, ...]) -> list[Column]:
    """Numbers and their standard uncertainties in one column, as text."""
    made: list[Column] = []
    for name, values in table:
        partner = made[-1][0] if made else ""
        if made and name in ("sigma", f"{partner}_sigma"):
            pairs = zip(_listed(made[-1][1]), _listed(values), strict=True)
            made[-1] = (partner, [f"{_cell(value)} ± {_cell(sigma, 2)}" for value, sigma in pairs])
        else:
            made.append((name, values))
    return made


def _listed(values: Any) -> list[Any]:  # noqa: ANN401
    return values.tolist() if isinstance(values, np.ndarray) else list(values)


def _cells(column: Column, count: int) -> list[str]:
    name, values = column
    listed = _listed(values)[:count]
    cells = [name, *(_cell(value) for value in listed)]
    width = max(len(cell) for cell in cells)
    text = any(isinstance(value, str) and "±" not in value for value in listed)
    return [cell.ljust(width) if text else cell.rjust(width) for cell in cells]


def _cell(value: object, digits: int = 5) -> str:
    if value is None or (isinstance(value, float) and np.isnan(value)):
        return "–"
    if isinstance(value, bool):
        return "yes" if value else "no"
    if isinstance(value, float):
        return f"{value:.{digits}g}"
    text = str(value)
    return text if len(text) <= WIDEST else text[: WIDEST - 1] + "…"

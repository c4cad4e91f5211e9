"""The report of an analysis in a terminal: its tables, its figures and what is to be known of them."""

from __future__ import annotations

import textwrap
from collections.abc import Sequence
from typing import Any

import numpy as np

from service.analyses.report import Column, Report

LISTED = 40
WIDEST = 60
LINE = 150
"""Characters of a line; a wider table is broken into several, each with the first column."""


def render_report(report: Report) -> str:
    """The table in columns, at most so many rows, a number beside its σ; other tables, figures and remarks."""
    lines = _table(report.table) or ["  nothing was found"]
    for title, table in report.further:
        lines += ["", f"  {title}", *_table(table)]
    if report.figures:
        lines += ["", *_figures(report.figures)]
    remarks = (f"· {' '.join(text.split())}" for text in report.told)
    wrapped = [
        textwrap.fill(text, LINE, initial_indent="  ", subsequent_indent="    ", break_long_words=False)
        for text in remarks
    ]
    return "\n".join([*lines, "", *wrapped])


def _table(table: Sequence[Column]) -> list[str]:
    count = len(table[0][1]) if table else 0
    if not count:
        return []
    columns = [_cells(column, min(count, LISTED)) for column in _joined(table)]
    lines: list[str] = []
    for block in _blocks(columns):
        lines += [""] if lines else []
        lines += [("  " + "  ".join(cells)).rstrip() for cells in zip(*block, strict=True)]
    if count > LISTED:
        lines.append(f"  … and {count - LISTED} more rows")
    return lines


def _blocks(columns: list[list[str]]) -> list[list[list[str]]]:
    """Columns side by side as far as a line holds them; the first leads each block."""
    lead, *others = columns
    blocks: list[list[list[str]]] = [[lead]]
    width = used = 2 + len(lead[0])
    for column in others:
        if used + 2 + len(column[0]) > LINE and len(blocks[-1]) > 1:
            blocks.append([lead])
            used = width
        blocks[-1].append(column)
        used += 2 + len(column[0])
    return blocks


def _figures(figures: dict[str, Any]) -> list[str]:
    pairs: dict[str, str] = {}
    for name, value in figures.items():
        if name.removesuffix("_sigma") in pairs:
            if value is not None:
                pairs[name.removesuffix("_sigma")] += f" ± {_cell(value, 2)}"
        else:
            pairs[name] = " × ".join(map(str, value)) if isinstance(value, tuple | list) else _cell(value)
    width = max(map(len, pairs))
    return [f"  {name.replace('_', ' '):{width}}  {text}" for name, text in pairs.items()]


def _joined(table: Sequence[Column]) -> list[Column]:
    """Numbers and their standard uncertainties in one column, as text."""
    made: list[Column] = []
    for name, values in table:
        partner = made[-1][0] if made else ""
        if made and name in ("sigma", "sigma_deg", f"{partner}_sigma", f"{partner.removesuffix('_angstrom')}_sigma"):
            pairs = zip(_listed(made[-1][1]), _listed(values), strict=True)
            made[-1] = (
                partner,
                [_cell(value) if sigma is None else f"{_cell(value)} ± {_cell(sigma, 2)}" for value, sigma in pairs],
            )
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
    text = " ".join(str(value).split())
    return text if len(text) <= WIDEST else text[: WIDEST - 1] + "…"

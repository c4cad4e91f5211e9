"""Reports of analyses as JSON and CSV."""

from __future__ import annotations

import csv
import io
import math

import numpy as np
import orjson

from service.analyses.report import Report


def report_json(report: Report) -> bytes:
    """The document; what is not a finite number becomes null."""
    return orjson.dumps(report.document, option=orjson.OPT_SERIALIZE_NUMPY, default=_plain)


def _plain(value: object) -> object:
    """Arrays that do not lie in memory as they are written."""
    if isinstance(value, np.ndarray):
        return value.tolist()
    raise TypeError(f"{type(value).__name__} is not plain data")


def report_value(value: object) -> str:
    """One figure as JSON: null where it does not exist."""
    return orjson.dumps(value, option=orjson.OPT_SERIALIZE_NUMPY, default=_plain).decode()


def report_csv(report: Report) -> bytes:
    """The table, under comment lines that tell what it holds; an empty place is a value that does not exist."""
    buffer = io.StringIO()
    for line in report.told:
        buffer.write(f"# {' '.join(line.split())}\n")
    for name, value in report.figures.items():
        buffer.write(f"# {name}: {value if isinstance(value, str) else report_value(value)}\n")
    rows = csv.writer(buffer, lineterminator="\n")
    rows.writerow(name for name, _ in report.table)
    columns = [values.tolist() if isinstance(values, np.ndarray) else values for _, values in report.table]
    rows.writerows([_cell(value) for value in row] for row in zip(*columns, strict=True))
    return buffer.getvalue().encode()


def _cell(value: object) -> object:
    if value is None or (isinstance(value, float) and not math.isfinite(value)):
        return ""
    if isinstance(value, str):
        # A cell must not start a formula where somebody opens the table in a spreadsheet.
        return f"'{value}" if value[:1] in "=+-@" else " ".join(value.split())
    return repr(value) if isinstance(value, float) else value

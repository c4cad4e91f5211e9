"""What an analysis answers: a document, and its main table for those who want rows."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any

from numpy.typing import NDArray

from engine.synthesis import Progress

Column = tuple[str, NDArray[Any] | list[Any]]


@dataclass(frozen=True, slots=True, kw_only=True)
class Limits:
    """What an analysis may use.

    Attributes
    ----------
    max_bytes : int
    max_rows : int
        Coefficients of a further set.
    max_values : int
        Numbers of a report.
    threads : int
    progress : callable or None
    """

    max_bytes: int
    max_rows: int
    max_values: int
    threads: int = 1
    progress: Progress | None = None


@dataclass(frozen=True, slots=True, kw_only=True)
class Report:
    """The result of an analysis.

    Attributes
    ----------
    document : dict
        Plain data and arrays of numbers: the JSON answer.
    table : tuple of columns
        Name and values of each, all of one length: the CSV answer.
    told : tuple of str
        What a reader of the table must know: units, treatment, what an uncertainty contains.
    figures : dict
        Single numbers by their names, beside the table.
    further : tuple of (str, tuple of columns)
        Other tables of the document, each with what it is of; for the terminal.
    """

    document: dict[str, Any]
    table: tuple[Column, ...]
    told: tuple[str, ...]
    figures: dict[str, Any] = field(default_factory=dict)
    further: tuple[tuple[str, tuple[Column, ...]], ...] = ()

"""Faults the engine can report.

EngineError
    InputError      the caller's data or arguments cannot be used; says where, why and how to mend it
        TooLargeError   the work asked for would exceed a limit the caller set
    TransformError  a numerical library failed although its input had been checked
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

ROWS_NAMED = 10
"""At most this many rows are named in a message; the count of all is always given."""


class EngineError(Exception):
    """Base of every fault raised by the engine."""


class InputError(EngineError):
    """The caller's data or arguments cannot be used.

    Attributes
    ----------
    path : tuple of str or int
        Where the fault sits, from the outside in, such as ``("sigma", 17)``.
    reason : str
        What is wrong.
    cure : str
        How to mend it.
    rows : tuple of int
        The first offending rows, zero-based, where the fault concerns rows of a table.
    """

    def __init__(
        self,
        path: str | Sequence[str | int],
        reason: str,
        cure: str,
        rows: Sequence[int] = (),
    ) -> None:
        self.path: tuple[str | int, ...] = (path,) if isinstance(path, str) else tuple(path)
        self.reason = reason
        self.cure = cure
        self.rows = tuple(int(row) for row in rows)
        where = ".".join(str(part) for part in self.path)
        super().__init__(f"{where}: {reason}. {cure}." if where else f"{reason}. {cure}.")

    def __reduce__(self) -> tuple[type[InputError], tuple[object, ...]]:
        return type(self), (self.path, self.reason, self.cure, self.rows)

    @classmethod
    def for_rows(cls, path: str | Sequence[str | int], rows: NDArray[np.intp], reason: str, cure: str) -> InputError:
        """A fault of several rows: the first few are named, all are counted."""
        named = ", ".join(str(int(row)) for row in rows[:ROWS_NAMED].tolist())
        more = f" and {rows.size - ROWS_NAMED} more" if rows.size > ROWS_NAMED else ""
        noun = "row" if rows.size == 1 else "rows"
        return cls(
            path,
            f"{reason} ({noun} {named}{more}, counted from 0)",
            cure,
            rows[:ROWS_NAMED].tolist(),
        )


class TooLargeError(InputError):
    """The work asked for would exceed a limit that the caller set."""


class TransformError(EngineError):
    """A numerical library failed although its input had been checked."""

"""ReadTable: what every reader of reflections makes, whatever the form of the file."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from types import MappingProxyType
from typing import Literal

import numpy as np

from engine.arrays import MAX_INDEX, BoolArray, FloatArray, IntArray
from engine.errors import ROWS_NAMED, InputError
from engine.lattice import Lattice
from engine.readers.mapping import Status

INDICES = ("h", "k", "l")


@dataclass(frozen=True, slots=True)
class Remark:
    """Something about a file that a reader of the result must know.

    Attributes
    ----------
    kind : str
        ``absent`` (an item that is not there), ``default`` (a dictionary's default was used),
        ``contradictory`` (items that cannot both hold), ``unread`` (items or rows passed over),
        ``text`` (something about the text itself).
    items : tuple of str
        Names of the items concerned, as the file has them.
    words : str
        The remark in plain words.
    """

    kind: Literal["absent", "default", "contradictory", "unread", "text"]
    items: tuple[str, ...]
    words: str

    def __str__(self) -> str:
        return self.words


@dataclass(frozen=True, slots=True)
class LeftOut:
    """Rows that were not carried on, and why.

    Attributes
    ----------
    reason : str
    rows : int64, shape (n,)
        Rows of the source, counted from 0.
    """

    reason: str
    rows: IntArray

    @property
    def count(self) -> int:
        """How many."""
        return int(self.rows.size)


@dataclass(frozen=True, slots=True, kw_only=True)
class Symmetry:
    """Symmetry as a file gives it; nothing is derived from it.

    Attributes
    ----------
    operations : tuple of str
        Like ``x,y,z``, in the order given.
    hall, hermann_mauguin : str or None
        Symbols.
    number : int or None
        Number of the space-group type in International Tables A.
    """

    operations: tuple[str, ...] = ()
    hall: str | None = None
    hermann_mauguin: str | None = None
    number: int | None = None


@dataclass(frozen=True, slots=True, kw_only=True)
class Crystal:
    """Cell, symmetry and radiation as a file gives them.

    Attributes
    ----------
    lattice : Lattice or None
    cell : float64, shape (6,), or None
        a, b, c (Å), α, β, γ (degrees).
    cell_sigma : float64, shape (6,), or None
        Standard uncertainties of ``cell``; NaN where not given.
    symmetry : Symmetry
    wavelengths : tuple of float
        Å, in the order given; several where the radiation had several.
    radiation : str or None
        The radiation's type or, where only that is given, its probe.
    """

    lattice: Lattice | None = None
    cell: FloatArray | None = None
    cell_sigma: FloatArray | None = None
    symmetry: Symmetry = field(default_factory=Symmetry)
    wavelengths: tuple[float, ...] = ()
    radiation: str | None = None

    @property
    def wavelength(self) -> float | None:
        """The wavelength (Å) where there is exactly one."""
        return self.wavelengths[0] if len(self.wavelengths) == 1 else None


@dataclass(frozen=True, slots=True, kw_only=True)
class ReadTable:
    """A table of reflections as it was read.

    Attributes
    ----------
    source : str
        File name, or empty.
    kind : {"cif", "delimited", "npz"}
    block : str or None
        Name of the CIF data block.
    category : str or None
        CIF category the rows are of, ``refln`` or ``diffrn_refln``.
    columns : mapping of str to float64 array, each of shape (N,)
        By quantity (``engine.readers.mapping.QUANTITIES``); NaN is unknown. Indices are whole
        and known.
    names : mapping of str to str
        Quantity to the name of its column in the file.
    status : uint8, shape (N,), or None
        ``Status`` of each row.
    row : int64, shape (N,)
        Row of the source each came from, counted from 0.
    lines : int64, shape (N,), or None
        Line of the file each stands on, counted from 1, where known.
    crystal : Crystal
    rows_read : int
        Rows of the source, those rejected included.
    rejected : tuple of LeftOut
    remarks : tuple of Remark
    """

    source: str
    kind: Literal["cif", "delimited", "npz"]
    block: str | None
    category: str | None
    columns: Mapping[str, FloatArray]
    names: Mapping[str, str]
    status: np.ndarray[tuple[int], np.dtype[np.uint8]] | None
    row: IntArray
    lines: IntArray | None
    crystal: Crystal
    rows_read: int
    rejected: tuple[LeftOut, ...]
    remarks: tuple[Remark, ...]

    @property
    def count(self) -> int:
        """Rows."""
        return int(self.row.size)

    @property
    def lattice(self) -> Lattice | None:
        """The lattice, where the file gives a cell."""
        return self.crystal.lattice

    @property
    def index_names(self) -> tuple[str, ...]:
        """Those of h, k, l that are present."""
        return tuple(name for name in INDICES if name in self.columns)

    def refuse(self, bad: BoolArray, quantity: str, reason: str, cure: str) -> None:
        """Raise InputError for the rows where `bad` (bool, shape (N,)) is true, if any."""
        _refuse(bad, quantity, reason, cure, self.source, self.names.get(quantity, quantity), self.row, self.lines)


def make_table(
    columns: Mapping[str, FloatArray],
    names: Mapping[str, str],
    *,
    kind: Literal["cif", "delimited", "npz"],
    source: str = "",
    block: str | None = None,
    category: str | None = None,
    lines: IntArray | None = None,
    crystal: Crystal | None = None,
    remarks: Sequence[Remark] = (),
) -> ReadTable:
    """Check columns once and make a table of them.

    A row with an unknown index names no reflection: it is rejected and counted.

    Parameters
    ----------
    columns : mapping of str to float64 array, each of shape (N,)
        By quantity; NaN is unknown. ``status`` holds the numbers of ``Status``.
    names : mapping of str to str
        Quantity to column name in the file.
    lines : int64, shape (N,), optional
        Lines of the file, counted from 1.

    Raises
    ------
    InputError
        No columns or no rows, columns of unequal length, infinite numbers, indices that are not
        whole or too large, negative uncertainties or amplitudes, figures of merit outside 0…1, a
        number that is not a status. Rows are named by their lines where these are known.
    """
    where = (source,) if source else ()
    sizes = {name: column.size for name, column in columns.items()}
    if not sizes or not any(sizes.values()):
        raise InputError(where, "there are no rows of reflections", "give a table with at least one row")
    if len(set(sizes.values())) > 1:
        told = ", ".join(f"{names[name]} {size}" for name, size in sizes.items())
        raise InputError(where, f"the columns differ in length ({told})", "give columns of equal length")
    size = next(iter(sizes.values()))
    row = np.arange(size, dtype=np.int64)
    for name, column in columns.items():
        for bad, reason, cure in _faults(name, column):
            _refuse(bad, name, reason, cure, source, names[name], row, lines)
    unknown = np.zeros(size, dtype=np.bool_)
    for name in INDICES:
        if name in columns:
            unknown |= np.isnan(columns[name])
    rejected: tuple[LeftOut, ...] = ()
    if unknown.any():
        if unknown.all():
            raise InputError(where, "no row has all its indices", "give the indices of the reflections")
        rejected = (LeftOut("an index is unknown", row[unknown]),)
        columns = {name: column[~unknown] for name, column in columns.items()}
        row = row[~unknown]
        lines = None if lines is None else lines[~unknown]
    kept = dict(columns)
    status = kept.pop("status", None)
    for column in kept.values():
        column.setflags(write=False)
    return ReadTable(
        source=source,
        kind=kind,
        block=block,
        category=category,
        columns=MappingProxyType(kept),
        names=MappingProxyType(dict(names)),
        status=None if status is None else np.where(np.isnan(status), 0, status).astype(np.uint8),
        row=row,
        lines=lines,
        crystal=Crystal() if crystal is None else crystal,
        rows_read=size,
        rejected=rejected,
        remarks=tuple(remarks),
    )


def _faults(name: str, column: FloatArray) -> list[tuple[BoolArray, str, str]]:
    """What makes a value of the quantity impossible; NaN never does."""
    faults = [(np.isinf(column), "is infinite", "give finite numbers, and leave unknown ones empty")]
    if name in INDICES:
        broken = (np.rint(column) != column) & ~np.isnan(column)
        beyond = np.abs(column) > MAX_INDEX
        faults.append((broken, "is not a whole number", "give integer indices"))
        faults.append((beyond, f"lies beyond ±{MAX_INDEX}", "check the indices and the cell"))
    elif name.endswith(("_sigma", "_sigma_deg")):
        faults.append((column < 0, "is negative", "give standard uncertainties of 0 or more"))
    elif name in ("amplitude", "f_calc"):
        faults.append((column < 0, "is negative", "give the magnitude and add 180 to the phase"))
    elif name == "merit":
        faults.append(((column < 0) | (column > 1), "lies outside 0…1", "give figures of merit from 0 to 1"))
    elif name == "status":
        known = np.isin(column, [float(status) for status in Status]) | np.isnan(column)
        faults.append((~known, "is not a status", f"give 0 to {max(Status)}"))
    return faults


def _refuse(
    bad: BoolArray,
    quantity: str,
    reason: str,
    cure: str,
    source: str,
    name: str,
    row: IntArray,
    lines: IntArray | None,
) -> None:
    at = np.flatnonzero(bad)
    if not at.size:
        return
    path = (source, name) if source else (name,)
    told = name if name == quantity else f"{name} ({quantity})"
    if lines is None:
        raise InputError.for_rows(path, row[at], f"{told} {reason}", cure)
    shown = ", ".join(str(line) for line in lines[at[:ROWS_NAMED]].tolist())
    more = f" and {at.size - ROWS_NAMED} more" if at.size > ROWS_NAMED else ""
    noun = "line" if at.size == 1 else "lines"
    raise InputError(path, f"{told} {reason} ({noun} {shown}{more})", cure, row[at[:ROWS_NAMED]].tolist())

"""One door to all readers: a file or its bytes to a table."""

from __future__ import annotations

import io
import os
import zipfile
from collections.abc import Mapping
from pathlib import Path
from typing import Literal, get_args

from engine.arrays import FloatArray, as_choice
from engine.errors import InputError, TooLargeError
from engine.readers.cif_items import read_cif
from engine.readers.mapping import resolve
from engine.readers.npz import read_npz
from engine.readers.table import ReadTable, make_table
from engine.readers.tabular import Progress, read_tabular

Kind = Literal["cif", "delimited", "npz"]

ENDINGS: dict[str, Kind] = {
    ".cif": "cif",
    ".mmcif": "cif",
    ".csv": "delimited",
    ".tsv": "delimited",
    ".npz": "npz",
}
"""Endings that decide; of any other file the content does."""
MAX_BYTES = 2**32
_LOOKED_AT = 2**16


def read(
    source: str | os.PathLike[str] | bytes,
    kind: Kind | None = None,
    *,
    name: str | None = None,
    block: str | None = None,
    category: str | None = None,
    delimiter: str | None = None,
    mapping: Mapping[str, str] | None = None,
    progress: Progress | None = None,
    max_bytes: int = MAX_BYTES,
) -> ReadTable:
    """Reflections of a file, whatever its form.

    Parameters
    ----------
    source : path or bytes
    kind : {"cif", "delimited", "npz"}, optional
        Left out, the file name's ending decides (``ENDINGS``), else the content: an archive
        begins as one, a CIF begins with a data block, anything else is delimited text.
    name : str, optional
        File name, where `source` is bytes or messages are to show another.
    block, category : str, optional
        As of `engine.readers.cif_items.read_cif`; of a CIF only.
    delimiter, progress : optional
        As of `engine.readers.tabular.read_tabular`; of delimited text only.
    mapping : mapping of str to str, optional
        As of `engine.readers.mapping.resolve`; of delimited text and archives.
    max_bytes : int
        Bound of the size of the file and of what an archive unpacks to.

    Raises
    ------
    InputError
        The file cannot be opened or read, or an argument is of another kind of file. Nothing is
        returned of a file that has a fault.
    TooLargeError
        The file, or what it unpacks to, exceeds `max_bytes`.
    """
    shown = name or ("" if isinstance(source, bytes) else Path(source).name)
    where = (shown,) if shown else ()
    if kind is not None:
        as_choice(kind, get_args(Kind), "kind")
    try:
        with io.BytesIO(source) if isinstance(source, bytes) else Path(source).open("rb") as stream:
            total = stream.seek(0, io.SEEK_END)
            stream.seek(0)
            if total > max_bytes:
                reason = f"the file has {total:,} bytes, more than the limit of {max_bytes:,}"
                raise TooLargeError(where, reason, "give a smaller file, or raise the limit")
            kind = kind or ENDINGS.get(Path(shown).suffix.lower()) or _kind_of(stream.read(_LOOKED_AT))
            stream.seek(0)
            _check_arguments(kind, block=block, category=category, delimiter=delimiter, mapping=mapping)
            if kind == "cif":
                return read_cif(stream.read(), block=block, category=category, source=shown)
            if kind == "npz":
                return _read_archive(stream.read(), mapping, shown, max_bytes)
            return read_tabular(stream, total, delimiter=delimiter, mapping=mapping, source=shown, progress=progress)
    except OSError as fault:
        raise InputError(where, f"the file cannot be read ({fault.strerror})", "check its name") from fault


def _kind_of(beginning: bytes) -> Kind:
    """What the first bytes of a file say it is."""
    if beginning.startswith(b"PK"):
        return "npz"
    for line in beginning.removeprefix(b"\xef\xbb\xbf").splitlines():
        content = line.strip().lower()
        if content and not content.startswith(b"#"):
            return "cif" if content.startswith(b"data_") else "delimited"
    return "delimited"


_ONLY_OF: dict[str, tuple[Kind, ...]] = {
    "block": ("cif",),
    "category": ("cif",),
    "delimiter": ("delimited",),
    "mapping": ("delimited", "npz"),
}


def _check_arguments(kind: Kind, **given: object) -> None:
    for argument, value in given.items():
        if value is not None and kind not in _ONLY_OF[argument]:
            raise InputError(argument, f"has no meaning for a file of the kind {kind}", "leave it out")


def _read_archive(data: bytes, mapping: Mapping[str, str] | None, source: str, max_bytes: int) -> ReadTable:
    where = (source,) if source else ()
    try:
        with zipfile.ZipFile(io.BytesIO(data)) as archive:
            members = [member.removesuffix(".npy") for member in archive.namelist()]
    except (zipfile.BadZipFile, OSError, ValueError, NotImplementedError) as fault:
        raise InputError(where, "the data is not a readable .npz archive", "write it with numpy.savez") from fault
    targets = dict(zip(members, resolve(members, mapping, where=where), strict=True))
    ignored = [member for member, quantity in targets.items() if quantity is None]
    try:
        arrays = read_npz(data, members, max_bytes=max_bytes, ignored=ignored)
    except InputError as fault:
        # The reader of archives does not know the file's name.
        raise type(fault)((*where, *fault.path), fault.reason, fault.cure, fault.rows) from fault
    columns: dict[str, FloatArray] = {}
    names: dict[str, str] = {}
    for member, array in arrays.items():
        quantity = str(targets[member])
        columns[quantity], names[quantity] = array, member
    return make_table(columns, names, kind="npz", source=source)

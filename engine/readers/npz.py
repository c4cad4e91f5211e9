"""NumPy archives of named columns, read without trusting what they declare."""

from __future__ import annotations

import io
import math
import tokenize
import zipfile
import zlib
from collections.abc import Collection

import numpy as np
from numpy.lib import format as npy

from engine.arrays import FloatArray
from engine.errors import InputError, TooLargeError

_CURE = "write it with numpy.savez from plain one-dimensional arrays of numbers"
_PACKINGS = (zipfile.ZIP_STORED, zipfile.ZIP_DEFLATED)
_SPOILT_ARCHIVE = (zipfile.BadZipFile, zlib.error, EOFError, NotImplementedError, RuntimeError, OSError, ValueError)
_SPOILT_HEADER = (ValueError, TypeError, SyntaxError, RecursionError, MemoryError, tokenize.TokenError)
"""A header is a Python expression; whoever wrote it chooses what its parser stumbles over."""


def read_npz(
    data: bytes, names: Collection[str], *, max_bytes: int, ignored: Collection[str] = ()
) -> dict[str, FloatArray]:
    """Columns of a .npz archive.

    Nothing is unpickled, and no more is unpacked than `max_bytes`, whatever the archive says of
    itself.

    Parameters
    ----------
    data : bytes
    names : collection of str
        Array names that are understood; others are refused.
    max_bytes : int
        Bound of the unpacked size of all arrays together.
    ignored : collection of str
        Of the names, arrays that are passed over, whatever they hold.

    Returns
    -------
    dict of str to float64 array, each of shape (rows,)

    Raises
    ------
    InputError
        Not an archive of plain columns.
    TooLargeError
        Unpacked it would exceed `max_bytes`.
    """
    try:
        with zipfile.ZipFile(io.BytesIO(data)) as archive:
            members = archive.infolist()
            if not members:
                raise InputError((), "the archive holds no arrays", _CURE)
            _check_members(members, names, max_bytes)
            wanted = [member for member in members if _name(member) not in ignored]
            return {_name(member): _column(archive, member) for member in wanted}
    except _SPOILT_ARCHIVE as fault:
        raise InputError((), "the data is not a readable .npz archive", _CURE) from fault


def _name(member: zipfile.ZipInfo) -> str:
    return member.filename.removesuffix(".npy")


def _check_members(members: list[zipfile.ZipInfo], names: Collection[str], max_bytes: int) -> None:
    found = set()
    for member in members:
        name = _name(member)
        if name not in names:
            shown = name[:40]
            raise InputError((), f"the archive holds the array {shown!r}", f"use the names {', '.join(sorted(names))}")
        if name in found:
            raise InputError((), f"the archive holds the array {name!r} twice", "give it once")
        found.add(name)
        if member.compress_type not in _PACKINGS:
            raise InputError((), f"the array {name!r} is packed in an unusual way", _CURE)
    total = sum(member.file_size for member in members)
    if total > max_bytes:
        raise TooLargeError(
            (),
            f"the archive unpacks to {total:,} bytes, more than the limit of {max_bytes:,}",
            "send fewer rows, or raise the limit",
        )


def _column(archive: zipfile.ZipFile, member: zipfile.ZipInfo) -> FloatArray:
    name = _name(member)
    with archive.open(member) as stream:
        # The declared size has been bounded; one byte more shows an archive that lied.
        content = stream.read(member.file_size + 1)
    buffer = io.BytesIO(content)
    try:
        version = npy.read_magic(buffer)
        if version == (1, 0):
            shape, _, dtype = npy.read_array_header_1_0(buffer)
        elif version == (2, 0):
            shape, _, dtype = npy.read_array_header_2_0(buffer)
        else:
            raise InputError((), f"the array {name!r} has an unknown format version", _CURE)
    except _SPOILT_HEADER as fault:
        raise InputError((), f"the array {name!r} has no readable header", _CURE) from fault
    if dtype.hasobject or dtype.kind not in "iuf":
        raise InputError((), f"the array {name!r} does not hold real numbers", _CURE)
    if len(shape) != 1:
        raise InputError((), f"the array {name!r} has {len(shape)} dimensions", "give columns of one dimension")
    offset = buffer.tell()
    if math.prod(shape) * dtype.itemsize != len(content) - offset:
        raise InputError((), f"the array {name!r} is cut short or too long", _CURE)
    return np.frombuffer(content, dtype=dtype, offset=offset).astype(np.float64)

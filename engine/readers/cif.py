"""CIF documents to data blocks of text values, and their numbers.

Syntax: Hall, Allen & Brown, Acta Cryst. A47 (1991) 655 (CIF 1); Bernstein et al., J. Appl. Cryst.
49 (2016) 277 (CIF 2).
"""

from __future__ import annotations

import importlib
import io
import re
import threading
import warnings
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from types import ModuleType

import numpy as np

from engine.arrays import FloatArray, IntArray
from engine.errors import InputError
from engine.readers.cif_fault import find_fault
from engine.readers.table import Remark

_LIBRARY = "CifFile"
_CONTROL = re.compile(rb"[\x00-\x08\x0b-\x1f\x7f]")
_BEYOND_ASCII = bytes(range(128)) + b"~" * 128
_HEADING = re.compile(r"^[ \t]*data_\S", re.IGNORECASE | re.MULTILINE)
_NAMELESS_LOOP = re.compile(r"(?:^|\s)loop_\s+[^_\s]", re.IGNORECASE)
_CHARPOS = re.compile(r"@char(\d+)")
_NUMBER = re.compile(
    r"^(?:([+-]?(?:\d+(?:\.(\d*))?|\.(\d+)))(?:[eE]([+-]?\d+))?(?:\((\d+)\))?|(\?|\.))$", re.ASCII | re.MULTILINE
)
# The library's fast scanner keeps the text it works on in a global of its own.
_one_at_a_time = threading.Lock()


@dataclass(frozen=True, slots=True)
class CifBlock:
    """One data block.

    Attributes
    ----------
    name : str
        In lower case; case has no meaning in CIF.
    items : mapping of str to sequence of str
        Data name in lower case to its values; one value where it is not looped.
    loops : tuple of tuple of str
        Data names that are looped together.
    """

    name: str
    items: Mapping[str, Sequence[str]]
    loops: tuple[tuple[str, ...], ...]

    def value(self, *names: str) -> tuple[str, str] | None:
        """Name and value of the first of the items that is present with one known value."""
        for name in names:
            values = self.items.get(name, ())
            if len(values) == 1 and values[0] not in ("?", "."):
                return name, values[0]
        return None


def read_document(data: bytes, source: str = "") -> tuple[tuple[CifBlock, ...], tuple[Remark, ...]]:
    """All data blocks of a CIF document, version 1 or 2; save frames are passed over.

    Parameters
    ----------
    data : bytes
        ASCII for CIF 1; UTF-8 for CIF 2, which its first line declares.
    source : str
        File name for messages.

    Returns
    -------
    tuple of CifBlock
    tuple of Remark
        On characters that CIF 1 does not have. They can only stand in words, and are read as ~.

    Raises
    ------
    InputError
        The reading library is not installed, or the text is not CIF; with its line where known.
    """
    where = (source,) if source else ()
    library = _library()
    data = data.removeprefix(b"\xef\xbb\xbf").replace(b"\r\n", b"\n").replace(b"\r", b"\n")
    control = _CONTROL.search(data)
    if control:
        line = data.count(b"\n", 0, control.start()) + 1
        raise InputError((*where, f"line {line}"), "there is a control character", "give plain text")
    remarks: tuple[Remark, ...] = ()
    second_version = data.startswith(b"#\\#CIF_2.0")
    if second_version:
        try:
            text = data.decode("utf-8")
        except UnicodeDecodeError as fault:
            line = data.count(b"\n", 0, fault.start) + 1
            raise InputError((*where, f"line {line}"), "the text is not UTF-8", "write CIF 2 as UTF-8") from fault
    else:
        text = data.translate(_BEYOND_ASCII).decode("ascii")
        beyond = len(data) - len(data.translate(None, bytes(range(128, 256))))
        if beyond:
            remarks = (Remark("text", (), f"{beyond} bytes beyond ASCII, which CIF 1 has not, are read as ~"),)
    if not text.strip():
        raise InputError(where, "the file is empty", "give a CIF with a data block")
    with _one_at_a_time:
        blocks = _parse(library, text, second_version, where)
    if not blocks:
        raise InputError(where, "there is no data block", "begin the data with a line data_name")
    return blocks, remarks


def numbers(values: Sequence[str], name: str, source: str = "") -> tuple[FloatArray, FloatArray]:
    """Values of one item, and their standard uncertainties where these stand in brackets behind them.

    ``1.234(5)`` is 1.234 with standard uncertainty 0.005; ``?`` (unknown) and ``.`` (does not
    apply) are NaN.

    Parameters
    ----------
    values : sequence of str, length N
    name : str
        Data name, for messages.

    Returns
    -------
    float64, shape (N,)
    float64, shape (N,)
        NaN where none is given.

    Raises
    ------
    InputError
        A value that is not a number.
    """
    text = "\n".join(values)
    parts = _NUMBER.findall(text)
    if len(parts) != len(values) or text.count("\n") != len(values) - 1:
        bad = np.array([_NUMBER.fullmatch(value) is None or "\n" in value for value in values])
        rows = np.flatnonzero(bad)
        path = (source, name) if source else (name,)
        shown = values[int(rows[0])][:20]
        raise InputError.for_rows(path, rows, f"{shown!r} is not a number", "give numbers, or ? where unknown")
    if "(" not in text:
        plain = list(values)
        if "?" in text or any(part[5] for part in parts):
            plain = ["nan" if value in ("?", ".") else value for value in plain]
        return np.array(plain, dtype=np.float64), np.full(len(values), np.nan)
    mantissa, decimals, fraction, exponent, uncertainty, _ = (np.array(part) for part in zip(*parts, strict=True))
    power = _integers(exponent)
    value = np.char.add(np.where(mantissa == "", "nan", mantissa), np.where(exponent == "", "", _exponent(power)))
    digits = np.char.str_len(decimals) + np.char.str_len(fraction)
    given = np.where(uncertainty == "", "nan", uncertainty)
    # Through text, so that 1.234(5) has the uncertainty 0.005 and not 5·0.001.
    sigma = np.char.add(given, np.where(uncertainty == "", "", _exponent(power - digits)))
    return value.astype(np.float64), sigma.astype(np.float64)


def _integers(text: np.ndarray[tuple[int], np.dtype[np.str_]]) -> IntArray:
    return np.where(text == "", "0", text).astype(np.int64)


def _exponent(power: IntArray) -> np.ndarray[tuple[int], np.dtype[np.str_]]:
    return np.asarray(np.char.add("e", power.astype(np.str_)), dtype=np.str_)


def _library() -> ModuleType:
    try:
        with warnings.catch_warnings():
            # Importing it for the first time compiles it, and Python has remarks on its strings.
            warnings.simplefilter("ignore")
            return importlib.import_module(_LIBRARY)
    except ImportError as fault:
        raise InputError(
            (), "reading CIF needs the library PyCifRW, which is not installed", "install it: pip install PyCifRW"
        ) from fault


def _has_fast_scanner() -> bool:
    try:
        importlib.import_module(f"{_LIBRARY}.StarScan")
    except ImportError:
        return False
    return True


def _parse(library: ModuleType, text: str, second_version: bool, where: tuple[str, ...]) -> tuple[CifBlock, ...]:
    fast = not second_version and _has_fast_scanner()
    try:
        blocks = _blocks(library, text, "flex" if fast else "standard")
    except Exception:  # noqa: BLE001 - the library lets faults of every kind through
        # The fast scanner neither says where it stumbled nor knows all that CIF 1.0 allowed.
        if not second_version:
            _refuse_fault(text, where)
    else:
        # The library passes over the values of a loop without items, and takes two blocks whose names
        # differ in case for two. Texts that may have either are looked at again.
        names = {block.name for block in blocks}
        if not second_version and (len(names) < len(_HEADING.findall(text)) or _NAMELESS_LOOP.search(text)):
            _refuse_fault(text, where)
        return blocks
    try:
        return _blocks(library, text, "standard")
    except Exception as fault:
        told = _CHARPOS.search(str(fault))
        place = () if told is None else (f"line {text.count(chr(10), 0, int(told[1])) + 1}",)
        reason = f"the text is not valid CIF ({' '.join(str(fault).split())[:200]})"
        raise InputError((*where, *place), reason, "mend the file; nothing of it was read") from fault


def _refuse_fault(text: str, where: tuple[str, ...]) -> None:
    found = find_fault(text)
    if found is not None:
        line, reason = found
        raise InputError((*where, f"line {line}"), reason, "mend the file; nothing of it was read")


def _blocks(library: ModuleType, text: str, scan: str) -> tuple[CifBlock, ...]:
    # Without a standard the library does not bound the length of data names, which newer files exceed.
    document = library.ReadCif(io.StringIO(text), scantype=scan, standard=None)
    blocks = []
    for name in document.keys():  # noqa: SIM118 - iterating the library's mapping itself is not the same
        block = document[name]
        items: dict[str, Sequence[str]] = {}
        for item in block.keys():  # noqa: SIM118
            values = block[item]
            if isinstance(values, str):
                items[item.lower()] = (values,)
            elif type(values) is list and all(isinstance(value, str) for value in values):
                items[item.lower()] = values
        loops = tuple(tuple(item.lower() for item in loop) for loop in block.loops.values())
        blocks.append(CifBlock(str(name).lower(), items, loops))
    return tuple(blocks)

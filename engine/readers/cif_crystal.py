"""Cell, symmetry and radiation of a CIF data block, and what in them is absent or contradictory."""

from __future__ import annotations

import importlib
import re
import warnings
from typing import Literal

import numpy as np

from engine.arrays import FloatArray
from engine.errors import InputError
from engine.lattice import Lattice
from engine.readers.cif import CifBlock, numbers
from engine.readers.table import Crystal, Remark, Symmetry

_LENGTHS = ("length_a", "length_b", "length_c")
_ANGLES = ("angle_alpha", "angle_beta", "angle_gamma")
_RIGHT_ANGLE = 90.0
"""The core dictionary's default for a cell angle."""
_OPERATIONS = (
    "_space_group_symop_operation_xyz",
    "_space_group_symop.operation_xyz",
    "_symmetry_equiv_pos_as_xyz",
    "_symmetry_equiv.pos_as_xyz",
)
_HALL = (
    "_space_group_name_hall",
    "_space_group.name_hall",
    "_symmetry_space_group_name_hall",
    "_symmetry.space_group_name_hall",
)
_HERMANN_MAUGUIN = (
    "_space_group_name_h-m_alt",
    "_space_group.name_h-m_alt",
    "_space_group_name_h-m_full",
    "_space_group.name_h-m_full",
    "_symmetry_space_group_name_h-m",
    "_symmetry.space_group_name_h-m",
)
_NUMBER = (
    "_space_group_it_number",
    "_space_group.it_number",
    "_symmetry_int_tables_number",
    "_symmetry.int_tables_number",
)
_WAVELENGTH = (
    "_diffrn_radiation_wavelength",
    "_diffrn_radiation_wavelength.value",
    "_diffrn_radiation_wavelength.wavelength",
    "_diffrn_radiation.wavelength",
)
_RADIATION = (
    "_diffrn_radiation_type",
    "_diffrn_radiation.type",
    "_diffrn_radiation_probe",
    "_diffrn_radiation.probe",
)
VOLUME_AGREEMENT = 1e-3
"""Relative difference of the stated and the computed volume that rounded cells show."""


def read_crystal(block: CifBlock, source: str = "") -> tuple[Crystal, tuple[Remark, ...]]:
    """Cell, symmetry and radiation of a data block.

    Absent items are reported, not supplied; an absent angle alone is 90°, the dictionary's
    default, and is reported too.

    Parameters
    ----------
    block : CifBlock
    source : str
        File name for messages.

    Returns
    -------
    Crystal
    tuple of Remark
        Items that are absent, or contradict each other: volume and cell, symbol and number, and
        one thing said differently under two names.

    Raises
    ------
    InputError
        An item that is not the number it must be, or a cell that no lattice has.
    """
    remarks: list[Remark] = []
    cell, sigma = _cell(block, source, remarks)
    lattice = None
    if cell is not None:
        try:
            lattice = Lattice.from_parameters(*cell.tolist())
        except InputError as fault:
            path = (source, "cell") if source else ("cell",)
            raise InputError((*path, *fault.path), fault.reason, fault.cure) from fault
        _compare_volume(block, source, lattice, sigma, remarks)
    crystal = Crystal(
        lattice=lattice,
        cell=cell,
        cell_sigma=sigma,
        symmetry=_symmetry(block, source, remarks),
        wavelengths=_wavelengths(block, source),
        radiation=_said(block, _RADIATION[:2], remarks) or _said(block, _RADIATION[2:], remarks),
    )
    return crystal, tuple(remarks)


def _cell(block: CifBlock, source: str, remarks: list[Remark]) -> tuple[FloatArray | None, FloatArray | None]:
    values, sigmas = np.full(6, np.nan), np.full(6, np.nan)
    absent: list[str] = []
    by_default: list[str] = []
    for place, part in enumerate((*_LENGTHS, *_ANGLES)):
        found = block.value(f"_cell_{part}", f"_cell.{part}")
        separate = block.value(f"_cell.{part}_esd", f"_cell.{part}_su", f"_cell_{part}_su")
        if found is not None:
            value, sigma = numbers([found[1]], found[0], source)
            values[place], sigmas[place] = value[0], sigma[0]
            if separate is not None:
                sigmas[place] = numbers([separate[1]], separate[0], source)[0][0]
        elif part in _ANGLES and not any(tuple(block.items.get(f"_cell{s}{part}", ())) == ("?",) for s in "_."):
            values[place] = _RIGHT_ANGLE
            by_default.append(f"_cell_{part}")
        else:
            absent.append(f"_cell_{part}")
    if absent:
        remarks.append(Remark("absent", tuple(absent), f"{', '.join(absent)} absent or unknown: there is no lattice"))
        return None, None
    if by_default:
        words = f"{', '.join(by_default)} absent: taken as 90°, the default of the dictionary"
        remarks.append(Remark("default", tuple(by_default), words))
    values.setflags(write=False)
    sigmas.setflags(write=False)
    return values, sigmas


def _compare_volume(
    block: CifBlock, source: str, lattice: Lattice, sigma: FloatArray | None, remarks: list[Remark]
) -> None:
    stated = block.value("_cell_volume", "_cell.volume")
    if stated is None:
        return
    volume, volume_sigma = numbers([stated[1]], stated[0], source)
    spread = 0.0 if sigma is None else float(np.nansum((sigma[:3] / lattice.lengths) ** 2)) ** 0.5
    margin = 4 * np.hypot(np.nan_to_num(volume_sigma[0]), spread * lattice.volume) + VOLUME_AGREEMENT * lattice.volume
    if abs(volume[0] - lattice.volume) > margin:
        words = f"{stated[0]} is {volume[0]:g} Å³, but the cell lengths and angles give {lattice.volume:.6g} Å³"
        remarks.append(Remark("contradictory", (stated[0], "_cell_length_a", "_cell_angle_alpha"), words))


def _symmetry(block: CifBlock, source: str, remarks: list[Remark]) -> Symmetry:
    lists = {name: tuple(block.items[name]) for name in _OPERATIONS if name in block.items}
    plain = {name: tuple("".join(text.split()).casefold() for text in values) for name, values in lists.items()}
    if len(set(plain.values())) > 1:
        words = f"{' and '.join(lists)} list different symmetry operations; the first is used"
        remarks.append(Remark("contradictory", tuple(lists), words))
    operations = next(iter(lists.values()), ())
    if any(text in ("?", ".") for text in operations):
        operations = ()
    number_text = _said(block, _NUMBER, remarks)
    number = None
    if number_text is not None:
        number = int(number_text) if re.fullmatch(r"[0-9]{1,3}", number_text) else 0
        if not 1 <= number <= 230:
            name = next(name for name in _NUMBER if block.value(name) is not None)
            path = (source, name) if source else (name,)
            raise InputError(
                path, f"{number_text[:20]!r} is no space-group number", "give a whole number from 1 to 230"
            )
    symmetry = Symmetry(
        operations=operations,
        hall=_said(block, _HALL, remarks),
        hermann_mauguin=_said(block, _HERMANN_MAUGUIN[:2], remarks)
        or _said(block, _HERMANN_MAUGUIN[2:4], remarks)
        or _said(block, _HERMANN_MAUGUIN[4:], remarks),
        number=number,
    )
    if symmetry == Symmetry():
        remarks.append(Remark("absent", (_OPERATIONS[0],), "neither symmetry operations nor a space group are given"))
    _compare_symbols(symmetry, remarks)
    return symmetry


def _compare_symbols(symmetry: Symmetry, remarks: list[Remark]) -> None:
    """Symbols against each other and against the number; a symbol that is not known says nothing."""
    told: dict[str, tuple[str, int]] = {}
    try:
        if symmetry.hall is not None and (number := _type_named(symmetry.hall, "hall")) is not None:
            told["_space_group_name_Hall"] = f"the Hall symbol {symmetry.hall!r}", number
        symbol = symmetry.hermann_mauguin
        if symbol is not None and (number := _type_named(symbol, "hermann_mauguin")) is not None:
            told["_space_group_name_H-M_alt"] = f"the Hermann–Mauguin symbol {symbol!r}", number
    except ImportError:
        words = "symbols and number of the space group were not compared: the library spglib is not installed"
        remarks.append(Remark("absent", (), words))
        return
    if symmetry.number is not None:
        told["_space_group_IT_number"] = "the number", symmetry.number
    if len({number for _, number in told.values()}) > 1:
        words = ", ".join(f"{what} says {number}" for what, number in told.values())
        remarks.append(Remark("contradictory", tuple(told), f"the type of the space group is contradictory: {words}"))


def _type_named(symbol: str, notation: Literal["hall", "hermann_mauguin"]) -> int | None:
    tables = importlib.import_module("engine.symmetry.tables")
    with warnings.catch_warnings():
        # The library of space groups announces a change in how it reports errors, at every call.
        warnings.simplefilter("ignore", DeprecationWarning)
        # A choice of origin or axes behind a colon does not change the type.
        try:
            return int(tables.space_group(symbol.split(":")[0], notation=notation).number)
        except InputError:
            return None


def _plain(symbol: str) -> str:
    # Blanks, underscores and letter case do not change what a symbol says.
    return re.sub(r"[\s_]", "", symbol).casefold()


def _wavelengths(block: CifBlock, source: str) -> tuple[float, ...]:
    for name in _WAVELENGTH:
        if name in block.items:
            values, _ = numbers(block.items[name], name, source)
            known = values[~np.isnan(values)]
            if known.size:
                if not (known > 0).all():
                    path = (source, name) if source else (name,)
                    raise InputError(path, "a wavelength is not above zero", "give wavelengths in Å")
                return tuple(known.tolist())
    return ()


def _said(block: CifBlock, names: tuple[str, ...], remarks: list[Remark]) -> str | None:
    """The value that several names may carry; the first, with a remark where they differ."""
    found = [entry for name in names if (entry := block.value(name)) is not None]
    if not found:
        return None
    if len({_plain(value) for _, value in found}) > 1:
        told = ", ".join(f"{name} {value!r}" for name, value in found)
        words = f"one thing is said differently under several names ({told}); the first is used"
        remarks.append(Remark("contradictory", tuple(name for name, _ in found), words))
    return found[0][1].strip()

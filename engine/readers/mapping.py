"""Names of columns, and the quantities they stand for."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from enum import IntEnum

from engine.errors import InputError

QUANTITIES: dict[str, str] = {
    "h": "first index",
    "k": "second index",
    "l": "third index, or the order of a stack",
    "amplitude": "|F|",
    "amplitude_sigma": "standard uncertainty of amplitude",
    "f_squared": "|F|² on the scale of amplitude; may be negative by noise",
    "f_squared_sigma": "standard uncertainty of f_squared",
    "intensity": "|F|² up to a scale; may be negative by noise",
    "intensity_sigma": "standard uncertainty of intensity",
    "intensity_net": "peak less background of one measurement, before corrections",
    "intensity_net_sigma": "standard uncertainty of intensity_net",
    "real": "real part of the coefficient",
    "imag": "imaginary part of the coefficient",
    "phase_deg": "phase, degrees",
    "phase_sigma_deg": "standard uncertainty of phase_deg, degrees",
    "merit": "figure of merit, mean resultant length of the phase's distribution, 0…1",
    "hl_a": "Hendrickson–Lattman coefficient A of cos φ",
    "hl_b": "Hendrickson–Lattman coefficient B of sin φ",
    "hl_c": "Hendrickson–Lattman coefficient C of cos 2φ",
    "hl_d": "Hendrickson–Lattman coefficient D of sin 2φ",
    "f_calc": "calculated |F|",
    "f_squared_calc": "calculated |F|²",
    "intensity_calc": "calculated intensity",
    "real_calc": "real part of the calculated F",
    "imag_calc": "imaginary part of the calculated F",
    "phase_calc_deg": "calculated phase, degrees",
    "two_theta_deg": "scattering angle 2θ, degrees",
    "q": "|G| = 4π sin θ/λ, Å⁻¹",
    "sin_theta_over_lambda": "sin θ/λ, Å⁻¹",
    "d_spacing": "d, Å",
    "multiplicity": "number of reflections that the row stands for",
    "status": "status of the reflection: a letter of STATUS_LETTERS in text, its number in arrays",
}
"""Every quantity of a table of reflections, its meaning and unit; the quantity's name is its column's name."""

ALIASES: dict[str, str] = {"order": "l"}
"""Other names of columns."""

IGNORE = "ignore"
"""In an explicit mapping: the column is passed over."""
ALL_OTHERS = "*"
"""In an explicit mapping: all columns that nothing else names; it can only be ignored."""


class Status(IntEnum):
    """Status of a reflection, after the core and macromolecular CIF dictionaries."""

    UNSTATED = 0
    INCLUDED = 1
    BELOW_CUTOFF = 2
    ABSENT_BY_SYMMETRY = 3
    UNRELIABLE = 4
    BEYOND_HIGH_RESOLUTION = 5
    BEYOND_LOW_RESOLUTION = 6
    SET_ASIDE = 7


STATUS_LETTERS: dict[str, Status] = {
    "o": Status.INCLUDED,
    "<": Status.BELOW_CUTOFF,
    "-": Status.ABSENT_BY_SYMMETRY,
    "x": Status.UNRELIABLE,
    "h": Status.BEYOND_HIGH_RESOLUTION,
    "l": Status.BEYOND_LOW_RESOLUTION,
    "f": Status.SET_ASIDE,
}
"""The dictionaries' letters. ``f`` is set aside for cross-validation."""

REFLN: dict[str, str] = {
    "index_h": "h",
    "index_k": "k",
    "index_l": "l",
    "f_meas": "amplitude",
    "f_meas_au": "amplitude",
    "f_sigma": "amplitude_sigma",
    "f_meas_sigma": "amplitude_sigma",
    "f_meas_su": "amplitude_sigma",
    "f_meas_sigma_au": "amplitude_sigma",
    "f_squared_meas": "f_squared",
    "f_squared_sigma": "f_squared_sigma",
    "f_squared_meas_su": "f_squared_sigma",
    "intensity_meas": "intensity",
    "intensity_sigma": "intensity_sigma",
    "intensity_meas_su": "intensity_sigma",
    "a_meas": "real",
    "a_meas_au": "real",
    "b_meas": "imag",
    "b_meas_au": "imag",
    "phase_meas": "phase_deg",
    "phase_meas_su": "phase_sigma_deg",
    "fom": "merit",
    "pdbx_hl_a_iso": "hl_a",
    "pdbx_hl_b_iso": "hl_b",
    "pdbx_hl_c_iso": "hl_c",
    "pdbx_hl_d_iso": "hl_d",
    "f_calc": "f_calc",
    "f_calc_au": "f_calc",
    "f_squared_calc": "f_squared_calc",
    "intensity_calc": "intensity_calc",
    "a_calc": "real_calc",
    "a_calc_au": "real_calc",
    "b_calc": "imag_calc",
    "b_calc_au": "imag_calc",
    "phase_calc": "phase_calc_deg",
    "sint/lambda": "sin_theta_over_lambda",
    "sin_theta_over_lambda": "sin_theta_over_lambda",
    "d_spacing": "d_spacing",
    "symmetry_multiplicity": "multiplicity",
    "observed_status": "status",
    "include_status": "status",
    "status": "status",
}
"""Items of the category REFLN in the core dictionaries (both spellings) and the macromolecular one."""

DIFFRN_REFLN: dict[str, str] = {
    "index_h": "h",
    "index_k": "k",
    "index_l": "l",
    "intensity_net": "intensity_net",
    "intensity_sigma": "intensity_net_sigma",
    "intensity_u": "intensity_net_sigma",
    "intensity_net_su": "intensity_net_sigma",
    "sint/lambda": "sin_theta_over_lambda",
    "sin_theta_over_lambda": "sin_theta_over_lambda",
}
"""Items of the category DIFFRN_REFLN: single measurements before corrections and merging."""

CATEGORIES: dict[str, dict[str, str]] = {"refln": REFLN, "diffrn_refln": DIFFRN_REFLN}


def dictionary_item(name: str) -> tuple[str, str] | None:
    """Category and quantity of a CIF data name, in either spelling, or None where it is not of a reflection."""
    folded = name.casefold()
    for category, items in CATEGORIES.items():
        for separator in "_.":
            prefix = f"_{category}{separator}"
            if folded.startswith(prefix) and folded[len(prefix) :] in items:
                return category, items[folded[len(prefix) :]]
    return None


def resolve(
    names: Sequence[str], mapping: Mapping[str, str] | None = None, *, where: tuple[str, ...] = ()
) -> tuple[str | None, ...]:
    """The quantity of each column of a file, None where the mapping has it ignored.

    A column named in the mapping is what that says. Any other must bear the name of a quantity
    (``QUANTITIES``), ``order``, or a CIF data name; letter case does not matter. A column ``sigma``
    belongs to the one measured quantity that is present.

    Parameters
    ----------
    names : sequence of str
        Column names as they stand in the file.
    mapping : mapping of str to str, optional
        Column in the file to quantity, or to ``"ignore"``; ``{"*": "ignore"}`` passes over all
        columns that nothing else names.
    where : tuple of str
        File name and place in it, for messages.

    Raises
    ------
    InputError
        A column that nothing names, two columns for one quantity, a mapping to no known quantity
        or of a column that is not there, a ``sigma`` that could belong to several.
    """
    mapping = {} if mapping is None else mapping
    _check_mapping(names, mapping, where)
    resolved: list[str | None] = []
    unknown: list[str] = []
    for name in names:
        target = mapping.get(name) or _own_name(name)
        if target is None:
            target = mapping.get(ALL_OTHERS)
        if target is None:
            unknown.append(name)
        resolved.append(None if target == IGNORE else target)
    if unknown:
        raise InputError(
            where,
            f"nothing says what the columns {_listed(unknown)} are",
            'map each to a quantity or to "ignore", or rename it to one of ' + ", ".join(QUANTITIES),
        )
    if "sigma" in resolved:
        resolved[resolved.index("sigma")] = _owner_of_sigma(resolved, where)
    for quantity in QUANTITIES:
        double = [name for name, target in zip(names, resolved, strict=True) if target == quantity]
        if len(double) > 1:
            raise InputError(
                where, f"the columns {_listed(double)} are both {quantity}", 'map all but one of them to "ignore"'
            )
    return tuple(resolved)


def _own_name(name: str) -> str | None:
    folded = name.casefold()
    if folded in QUANTITIES or folded == "sigma":
        return folded
    item = dictionary_item(folded)
    return ALIASES.get(folded) if item is None else item[1]


def _check_mapping(names: Sequence[str], mapping: Mapping[str, str], where: tuple[str, ...]) -> None:
    for column, target in mapping.items():
        if column == ALL_OTHERS:
            if target != IGNORE:
                raise InputError(where, f"the mapping takes all other columns to {target!r}", 'use {"*": "ignore"}')
        elif column not in names:
            raise InputError(
                where, f"the mapping names the column {column[:40]!r}, which the file has not", f"use {_listed(names)}"
            )
        if target not in QUANTITIES and target != IGNORE:
            raise InputError(
                where,
                f"the mapping takes {column[:40]!r} to {target[:40]!r}, which is not a quantity",
                'use "ignore" or one of ' + ", ".join(QUANTITIES),
            )


def _owner_of_sigma(resolved: Sequence[str | None], where: tuple[str, ...]) -> str:
    owners = [name for name in ("amplitude", "f_squared", "intensity", "intensity_net") if name in resolved]
    if not owners and "real" in resolved:
        owners = ["amplitude"]
    if len(owners) != 1:
        raise InputError(
            where,
            "the column 'sigma' could belong to " + (", ".join(owners) or "no measured quantity of the file"),
            "name it after its quantity, such as intensity_sigma",
        )
    return f"{owners[0]}_sigma"


def _listed(names: Sequence[str], most: int = 20) -> str:
    shown = ", ".join(repr(name[:40]) for name in names[:most])
    return shown + (f" and {len(names) - most} more" if len(names) > most else "")

"""From a table as it was read to Reflections, or to the columns of a coefficient set."""

from __future__ import annotations

from collections.abc import Collection, Sequence
from typing import Literal, get_args

import numpy as np

from engine.arrays import BoolArray, FloatArray, as_choice
from engine.assembly import INDEX_COLUMNS, Columns
from engine.errors import InputError
from engine.lattice import Lattice
from engine.readers.mapping import Status
from engine.readers.table import LeftOut, ReadTable
from engine.reflections import Quantity, Reflections

MissingSigma = Literal["refuse", "omit_rows", "without"]

_NONE = "none"
_MEASURED: dict[str, tuple[Quantity, str]] = {
    "amplitude": ("amplitude", "amplitude_sigma"),
    "f_squared": ("intensity", "f_squared_sigma"),
    "intensity": ("intensity", "intensity_sigma"),
    "intensity_net": ("intensity", "intensity_net_sigma"),
    "real": ("amplitude", "amplitude_sigma"),
}
_CALCULATED: dict[str, tuple[Quantity, str | None]] = {
    "f_calc": ("amplitude", None),
    "f_squared_calc": ("intensity", None),
    "intensity_calc": ("intensity", None),
    "real_calc": ("amplitude", None),
}
_IMAGINARY = {"real": "imag", "real_calc": "imag_calc"}
_PHASES = ("phase_deg", "phase_calc_deg")
UNIFORM_PHASE_SIGMA = 180 / np.sqrt(3)
"""Standard deviation of a phase of which nothing is known (uniform over a turn), degrees."""


def to_reflections(
    table: ReadTable,
    *,
    observed: str | None = None,
    phase: str | None = None,
    lattice: Lattice | None = None,
    scale: Literal["absolute", "arbitrary"] = "arbitrary",
    missing_sigma: MissingSigma = "refuse",
    omit: Collection[Status] = (),
) -> tuple[Reflections, tuple[LeftOut, ...]]:
    """Reflections of a table, and the rows that have none.

    Parameters
    ----------
    table : ReadTable
        In the trade's convention F(h) = ∫ρ exp(+2πi h·x) dV.
    observed : str, optional
        The quantity to take: ``amplitude``, ``f_squared``, ``intensity``, ``intensity_net``,
        ``real`` (with ``imag``), or a calculated one (``f_calc``, ``f_squared_calc``,
        ``intensity_calc``, ``real_calc``). Left out, it is the measured one where just one is
        present.
    phase : str, optional
        ``phase_deg``, ``phase_calc_deg`` or ``none``. Left out, it is the one that is present.
        With ``real`` or ``real_calc`` the phase comes from these.
    lattice : Lattice, optional
        Instead of the file's.
    scale : {"absolute", "arbitrary"}
        What the caller knows of the scale; a file does not say it.
    missing_sigma : {"refuse", "omit_rows", "without"}
        What to do where some rows have a standard uncertainty and others none: refuse, omit these
        rows, or take none at all.
    omit : collection of Status
        Rows of these statuses are left out.

    Returns
    -------
    Reflections
        ``row`` counts rows of the source.
    tuple of LeftOut
        Rows not taken, by reason: without value, without uncertainty, of an omitted status.

    Raises
    ------
    InputError
        Several quantities or phases and no choice, a choice that is not there, no lattice or one
        of another dimension, missing uncertainties where refused, no row left.
    """
    as_choice(scale, ("absolute", "arbitrary"), "scale")
    as_choice(missing_sigma, get_args(MissingSigma), "missing_sigma")
    basis = _lattice(table, lattice)
    chosen = _chosen_strength(table, observed, {**_MEASURED, **_CALCULATED})
    angle = _chosen_phase(table, chosen, phase)
    quantity, sigma_name = {**_MEASURED, **_CALCULATED}[chosen]
    values, degrees = _values(table, chosen, angle)
    kept, sigma, left = _sift(table, chosen, values, sigma_name, missing_sigma, omit)
    indices = np.stack([table.columns[name][kept] for name in table.index_names], axis=1).astype(np.int64)
    spread = table.columns.get("phase_sigma_deg") if angle == "phase_deg" else None
    merit = table.columns.get("merit") if degrees is not None else None
    reflections = Reflections(
        lattice=basis,
        indices=np.asfortranarray(indices),
        quantity=quantity,
        observed=values[kept],
        sigma=None if sigma is None else sigma[kept],
        phase=None if degrees is None else np.deg2rad(degrees[kept]),
        phase_sigma=None if spread is None else np.deg2rad(spread[kept]),
        merit=None if merit is None else merit[kept],
        row=table.row[kept],
        scale=scale,
    )
    return reflections, left


def to_columns(
    table: ReadTable,
    *,
    strength: str | None = None,
    phase: str | None = None,
    missing_sigma: MissingSigma = "refuse",
    omit: Collection[Status] = (),
) -> tuple[Columns, tuple[LeftOut, ...]]:
    """Columns for ``engine.assembly.assemble``, of a table that has phases.

    Which convention the strengths are in is said to ``assemble``. In a row of unknown phase an
    unknown figure of merit becomes 0 and an unknown uncertainty of the phase 180°/√3, those of a
    uniform distribution; neither weighs anything there.

    Parameters
    ----------
    table : ReadTable
    strength : str, optional
        ``amplitude``, ``real`` (with ``imag``), ``f_calc`` or ``real_calc``. Left out, it is the
        measured one where just one is present.
    phase, missing_sigma, omit
        As of `to_reflections`.

    Returns
    -------
    Columns
    tuple of LeftOut
        Rows not taken, by reason.

    Raises
    ------
    InputError
        As `to_reflections`; and a table without phases, or a row that has a phase but lacks the
        figure of merit or the uncertainty of the phase that other rows have.
    """
    as_choice(missing_sigma, get_args(MissingSigma), "missing_sigma")
    usable = {name: entry for name, entry in {**_MEASURED, **_CALCULATED}.items() if entry[0] == "amplitude"}
    chosen = _chosen_strength(table, strength, usable)
    angle = _chosen_phase(table, chosen, phase)
    if angle == _NONE or (angle is None and chosen not in _IMAGINARY):
        raise InputError(_where(table), "there are no phases to go with the strengths", "give or choose phases")
    values, degrees = _values(table, chosen, angle)
    kept, sigma, left = _sift(table, chosen, values, usable[chosen][1], missing_sigma, omit)
    spread = table.columns.get("phase_sigma_deg") if angle == "phase_deg" else None
    merit = table.columns.get("merit")
    known = np.ones(table.count, dtype=np.bool_) if degrees is None else ~np.isnan(degrees)
    imaginary = _IMAGINARY.get(chosen)

    def complete(name: str, column: FloatArray | None, otherwise: float) -> FloatArray | None:
        if column is None:
            return None
        reason, cure = "is unknown in a row that has a phase", "give it in every such row, or leave the column out"
        table.refuse(np.isnan(column) & known & kept, name, reason, cure)
        return np.where(np.isnan(column), otherwise, column)[kept]

    columns = Columns(
        indices=[table.columns[name][kept] for name in table.index_names],
        amplitude=values[kept] if imaginary is None else None,
        phase_deg=degrees[kept] if imaginary is None and degrees is not None else None,
        real=None if imaginary is None else table.columns[chosen][kept],
        imag=None if imaginary is None else table.columns[imaginary][kept],
        sigma=None if sigma is None else sigma[kept],
        phase_sigma_deg=complete("phase_sigma_deg", spread, UNIFORM_PHASE_SIGMA),
        merit=complete("merit", merit, 0.0),
    )
    return columns, left


def _where(table: ReadTable) -> tuple[str, ...]:
    return (table.source,) if table.source else ()


def _lattice(table: ReadTable, given: Lattice | None) -> Lattice:
    lattice = table.lattice if given is None else given
    if lattice is None:
        raise InputError("lattice", "is absent: the file gives no complete cell", "give the lattice")
    wanted = INDEX_COLUMNS[lattice.dimension]
    if table.index_names != wanted:
        raise InputError(
            _where(table),
            f"the table has the indices {', '.join(table.index_names) or 'none'}, "
            f"where a lattice of dimension {lattice.dimension} has {', '.join(wanted)}",
            'give a table with these index columns, or map the others to "ignore"',
        )
    return lattice


def _chosen_strength(table: ReadTable, asked: str | None, usable: Collection[str]) -> str:
    def present(names: Collection[str]) -> list[str]:
        return [name for name in names if name in table.columns and name in usable]

    measured = present(_MEASURED)
    choices = measured + present(_CALCULATED)
    if asked is None:
        if len(measured) == 1:
            return _complete(table, measured[0])
        if not choices:
            raise InputError(_where(table), "the table has no measured strengths", f"give one of {', '.join(usable)}")
        found = "several measured quantities" if measured else "calculated quantities only"
        raise InputError(_where(table), f"the table has {found}", f"choose one of {', '.join(choices)}")
    if asked not in choices:
        raise InputError(
            _where(table),
            f"the quantity {asked[:40]!r} is not among the strengths of the table",
            f"choose one of {', '.join(choices)}" if choices else f"give one of {', '.join(usable)}",
        )
    return _complete(table, asked)


def _complete(table: ReadTable, chosen: str) -> str:
    imaginary = _IMAGINARY.get(chosen)
    if imaginary is not None and imaginary not in table.columns:
        raise InputError(_where(table), f"{chosen} stands without {imaginary}", f"give both {chosen} and {imaginary}")
    return chosen


def _chosen_phase(table: ReadTable, strength: str, asked: str | None) -> str | None:
    present = [name for name in _PHASES if name in table.columns]
    if strength in _IMAGINARY:
        if asked is not None and asked != _NONE:
            raise InputError("phase", f"is given by {strength} already", "leave the choice of a phase out")
        return _NONE if asked == _NONE else None
    if asked is None:
        if len(present) > 1:
            raise InputError("phase", "is there more than once", f"choose one of {', '.join(present)}, {_NONE}")
        return present[0] if present else None
    if asked == _NONE:
        return None
    if asked not in present:
        raise InputError(
            "phase", f"{asked[:40]!r} is not among those of the table", f"choose one of {', '.join([*present, _NONE])}"
        )
    return asked


def _values(table: ReadTable, chosen: str, angle: str | None) -> tuple[FloatArray, FloatArray | None]:
    """Strengths, and phases in degrees, of all rows."""
    imaginary = _IMAGINARY.get(chosen)
    if imaginary is None:
        return table.columns[chosen], None if angle is None else table.columns[angle]
    real, imag = table.columns[chosen], table.columns[imaginary]
    degrees = None if angle == _NONE else np.rad2deg(np.arctan2(imag, real))
    return np.hypot(real, imag), degrees


def _sift(
    table: ReadTable,
    chosen: str,
    values: FloatArray,
    sigma_name: str | None,
    missing_sigma: MissingSigma,
    omit: Collection[Status],
) -> tuple[BoolArray, FloatArray | None, tuple[LeftOut, ...]]:
    """Rows to keep, the uncertainty of all rows, and what was left out."""
    left: list[LeftOut] = []
    kept = np.ones(table.count, dtype=np.bool_)

    def leave(bad: BoolArray, reason: str) -> None:
        if np.any(bad & kept):
            left.append(LeftOut(reason, table.row[bad & kept]))
            kept[bad] = False

    if omit:
        if table.status is None:
            raise InputError("omit", "names statuses, and the table has none", "leave it out")
        for status in sorted(set(omit)):
            leave(table.status == status, f"status {Status(status).name.lower()}")
    leave(np.isnan(values), f"{chosen} is unknown")
    sigma = None if sigma_name is None else table.columns.get(sigma_name)
    if sigma is not None:
        missing = np.isnan(sigma)
        if missing_sigma == "without" or missing[kept].all():
            sigma = None if missing[kept].any() else sigma
        elif missing_sigma == "omit_rows":
            leave(missing, f"{sigma_name} is unknown")
        else:
            table.refuse(
                missing & kept,
                str(sigma_name),
                "is unknown in some rows and known in others",
                'ask for missing_sigma "omit_rows" or "without"',
            )
    if not kept.any():
        raise InputError(_where(table), _all_left(left), "choose another quantity, or omit less")
    return kept, sigma, tuple(left)


def _all_left(left: Sequence[LeftOut]) -> str:
    return "no row is left (" + ", ".join(f"{part.reason}: {part.count}" for part in left) + ")"

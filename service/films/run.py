"""Requests about films, from a checked request to a report or a picture."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from typing import Any, Literal

from engine.errors import InputError
from engine.films.amplitudes import OrderTable
from engine.films.analysis import FilmAnalysis, analyse_film, measured
from engine.films.swelling import JointSigns, joint_signs
from service.analyses.common import finite, rows, table_of
from service.analyses.report import Limits, Report
from service.encoders.picture import require_drawing
from service.films import interpret
from service.films.report import film_report
from service.films.swelling import orientation_of, swelling_document
from service.interpret_picture import picture_options
from service.problems import at, located
from service.schemas.films import FilmIn, FilmRunIn, FilmTaskIn, ScanIn

RENAMED: dict[str, tuple[str | int, ...]] = {
    **{name: ("scan", name) for name in ScanIn.model_fields},
    "position": ("scan",),
    "order": ("scan", "order"),
    "observed": ("scan", "intensity"),
    "sigma": ("scan", "width_sigma"),
    "fixed": ("phases", "known_signs"),
    "period_range": ("spacing", "period_range"),
    "criteria": ("phases", "criteria"),
    "phases_deg": ("phases", "phase_deg"),
    "rank": ("phases", "use"),
    "amplitude": ("scan", "intensity"),
    "orders": ("scan", "order"),
    "critical_q": ("spacing", "critical_q"),
    "mean_density": ("spacing", "mean_density"),
    "radius": ("spacing", "radius_mm"),
}
"""Where in a request the engine's arguments stand."""
OWN_COLUMNS = ("value", "period", "period_sigma", "decided", "mean", "layers")
"""Of the table of a run, beside those of its regions."""
MEMBERS = {
    "start": "from",
    "stop": "to",
    "end": "to",
    "density": "value",
    "total": "value",
    "mean": "value",
    "factor": "value",
    "amplitude": "value",
}
"""What the engine's members of facts, criteria and regions are called in a request."""


def film(request: FilmIn, limits: Limits) -> Report:
    """One film analysed and reported.

    Raises
    ------
    Problem
        Pointing to the place in the body.
    """
    return film_report(_analysed(request, request.scan, ("scan",), limits), request.table)


def film_picture(request: FilmIn, limits: Limits, form: Literal["png", "svg"]) -> bytes:
    """One film on a page.

    Raises
    ------
    Problem
        501 where pictures cannot be drawn; else pointing to the place in the body.
    """
    require_drawing()
    from service.pictures.films import draw_film

    options = picture_options(request.picture)
    made = _analysed(request, request.scan, ("scan",), limits)
    with located("picture"):
        return draw_film(made, options, form)


def film_run(request: FilmRunIn, limits: Limits) -> Report:
    """Films along a run, each analysed alike, in one table.

    Raises
    ------
    Problem
        Pointing to the place in the body.
    """
    _check_names(request)
    made, joint = _along(request, limits)
    values = [member.value for member in request.members]
    columns: dict[str, Any] = {"value": values, **_figures(made, joint)}
    documents = [film_report(one, request.table).document for one in made]
    verdict = () if joint is None else (joint.verdict, *joint.notes)
    notes = [*verdict, *_notes([one["notes"] for one in documents], values, request.variable_unit)]
    document = {
        "product": "film_run",
        "variable": {"name": request.variable, "unit": request.variable_unit, "values": values},
        "unit": request.unit,
        "table": rows(columns),
        "swelling": None if joint is None else swelling_document(joint),
        "members": documents,
        "notes": notes,
    }
    return Report(
        document=document,
        table=table_of(columns),
        told=(f"value: {request.variable} ({request.variable_unit or 'no unit'})", *notes),
    )


def _check_names(request: FilmRunIn) -> None:
    """Refuse regions whose columns in the table would stand on those of something else."""
    taken = set(OWN_COLUMNS)
    for number, region in enumerate(request.regions):
        columns = {region.name, f"{region.name}_sigma"}
        if columns & taken:
            raise at(("regions", number, "name"), "is the name of another column of the table", "choose another name")
        taken |= columns


def film_run_picture(request: FilmRunIn, limits: Limits, form: Literal["png", "svg"]) -> bytes:
    """The profiles of a run as a map against its variable.

    Raises
    ------
    Problem
        As `film_picture`.
    """
    require_drawing()
    from service.pictures.films import draw_run

    options = picture_options(request.picture)
    made, _ = _along(request, limits)
    values = [member.value for member in request.members]
    with located("picture"):
        return draw_run(made, values, request.variable, request.variable_unit, options, form)


def _along(request: FilmRunIn, limits: Limits) -> tuple[list[FilmAnalysis], JointSigns | None]:
    """Every film of a run; where its swelling gives the signs, also what all of them gave together."""
    count = len(request.members)
    places = [("members", number, "scan") for number in range(count)]
    scans = [member.scan for member in request.members]
    phases: list[dict[int, float] | None] = [None] * count
    joint = None
    if request.phases.swelling is not None:
        orientation = orientation_of(request.phases.swelling, ("phases", "swelling"))
        orders = [_measured(request, scan, place).film() for scan, place in zip(scans, places, strict=True)]
        with located(
            renamed={"orders": ("members",), "sigma": ("members",), "entry": ("phases", "swelling", "number")}
        ):
            joint = joint_signs(orders, orientation=orientation)
        # A sign that the series does not decide is no phase.
        phases = [
            {
                int(order): 0.0 if sign > 0 else 180.0
                for order, sign, sure in zip(one.order, signs, decided, strict=True)
                if sure
            }
            for one, signs, decided in zip(orders, joint.signs, joint.decided, strict=True)
        ]
    made = []
    for number in range(count):
        made.append(_analysed(request, scans[number], places[number], limits, phases[number]))
        if limits.progress is not None:
            limits.progress(number + 1, count)
    return made, joint


def _measured(request: FilmTaskIn, scan: ScanIn, place: tuple[str | int, ...]) -> OrderTable:
    """Amplitudes of one film of a run, before phases are known."""
    task = interpret.task(request, interpret.scan_of(scan, place), {})
    with located(renamed=_renamed(place)), _worded(request, scan, place):
        return measured(task)[2]


def _renamed(place: tuple[str | int, ...]) -> dict[str, tuple[str | int, ...]]:
    return {name: (*place, *where[1:]) if where[0] == "scan" else where for name, where in RENAMED.items()}


def _analysed(
    request: FilmTaskIn,
    scan: ScanIn,
    place: tuple[str | int, ...],
    limits: Limits,
    joint: Mapping[int, float] | None = None,
) -> FilmAnalysis:
    """One film; `joint` are phases that a run gave together."""
    given = interpret.scan_of(scan, place)
    task = interpret.task(request, given, joint)
    with located(renamed=_renamed(place)), _worded(request, scan, place):
        return analyse_film(task, threads=limits.threads, max_bytes=limits.max_bytes)


@contextmanager
def _worded(request: FilmTaskIn, scan: ScanIn, place: tuple[str | int, ...]) -> Iterator[None]:
    """Give faults of the engine the members' names in a request, and of a run say in which member they are."""
    try:
        yield
    except InputError as fault:
        first, *rest = fault.path or ("scan",)
        path: tuple[str | int, ...] = (first, *(MEMBERS.get(str(one), one) for one in rest))
        rows = fault.rows
        reason, cure = fault.reason, fault.cure
        if first in ("order", "orders") and scan.order is None:
            path = ("position", *rest)
        if first in ("critical_q", "mean_density"):
            rows = ()
        if fault.path == ("criteria", "mean"):
            path, cure = ("facts",), "give facts that fix scale and mean, or judge by flat and least_structure alone"
            reason = "fix no mean density, and without it criteria other than these two say nothing of signs"
        if place[0] == "members" and RENAMED.get(str(path[0]), path)[0] != "scan":
            reason += f" (in member {place[1]}, counted from 0)"
        raise type(fault)(path, reason, cure, rows) from fault


def _notes(every: list[list[str]], values: list[float], unit: str) -> list[str]:
    """Notes of all films once, those of some with the film that they are of."""
    shared = [note for note in every[0] if all(note in notes for notes in every)]
    own = [
        f"at {value:g} {unit}".rstrip() + f": {note}"
        for notes, value in zip(every, values, strict=True)
        for note in notes
        if note not in shared
    ]
    return [*shared, *own]


def _figures(made: list[FilmAnalysis], joint: JointSigns | None) -> dict[str, Any]:
    """One row a film: period, mean, the highest layers, regions; not a number where there is none."""
    columns: dict[str, Any] = {
        "period": [one.spacing.period for one in made],
        "period_sigma": [finite(one.spacing.period_sigma) for one in made],
        "decided": [
            bool(joint.decided[number].all())
            if joint is not None
            else None
            if one.ranked is None
            else one.ranked.decided
            for number, one in enumerate(made)
        ],
        "mean": [finite(None if one.scale is None else one.scale.mean) for one in made],
        "layers": [one.layers.count for one in made],
    }
    for number, region in enumerate(made[0].task.regions):
        found = [one.integrals for one in made]
        columns[region.name] = [finite(None if one is None else float(one.values[number])) for one in found]
        columns[f"{region.name}_sigma"] = [
            finite(None if one is None or one.sigma is None else float(one.sigma[number])) for one in found
        ]
    return columns

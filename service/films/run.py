"""Requests about films, from a checked request to a report or a picture."""

from __future__ import annotations

from typing import Any, Literal

import numpy as np

from engine.films.analysis import FilmAnalysis, analyse_film
from service.analyses.common import rows, table_of
from service.analyses.report import Limits, Report
from service.encoders.picture import require_drawing
from service.films import interpret
from service.films.report import film_report
from service.interpret_picture import picture_options
from service.problems import located
from service.schemas.films import FilmIn, FilmRunIn, FilmTaskIn, ScanIn

RENAMED: dict[str, tuple[str | int, ...]] = {
    **{name: ("scan", name) for name in ScanIn.model_fields},
    "position": ("scan",),
    "period_range": ("spacing", "period_range"),
    "criteria": ("phases", "criteria"),
    "phases_deg": ("phases", "phase_deg"),
    "rank": ("phases", "use"),
    "amplitude": ("scan", "intensity"),
    "orders": ("scan",),
    "critical_q": ("spacing", "critical_q"),
    "mean_density": ("spacing", "mean_density"),
    "radius": ("spacing", "radius_mm"),
}
"""Where in a request the engine's arguments stand."""


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
    made = []
    for number, member in enumerate(request.members):
        made.append(_analysed(request, member.scan, ("members", number, "scan"), limits))
        if limits.progress is not None:
            limits.progress(number + 1, len(request.members))
    values = [member.value for member in request.members]
    columns: dict[str, Any] = {"value": values, **_figures(made)}
    documents = [film_report(one, request.table).document for one in made]
    notes = list(dict.fromkeys(note for one in documents for note in one["notes"]))
    document = {
        "product": "film_run",
        "variable": {"name": request.variable, "unit": request.variable_unit, "values": values},
        "unit": request.unit,
        "table": rows(columns),
        "members": documents,
        "notes": notes,
    }
    return Report(
        document=document,
        table=table_of(columns),
        told=(f"value: {request.variable} ({request.variable_unit or 'no unit'})", *notes),
    )


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
    made = [
        _analysed(request, member.scan, ("members", number, "scan"), limits)
        for number, member in enumerate(request.members)
    ]
    values = [member.value for member in request.members]
    with located("picture"):
        return draw_run(made, values, request.variable, request.variable_unit, options, form)


def _analysed(request: FilmTaskIn, scan: ScanIn, place: tuple[str | int, ...], limits: Limits) -> FilmAnalysis:
    given = interpret.scan_of(scan, place)
    task = interpret.task(request, given)
    renamed = {name: (*place, *where[1:]) if where[0] == "scan" else where for name, where in RENAMED.items()}
    with located(renamed=renamed):
        return analyse_film(task, threads=limits.threads, max_bytes=limits.max_bytes)


def _figures(made: list[FilmAnalysis]) -> dict[str, Any]:
    """One row a film: period, mean, the highest layers, regions; not a number where there is none."""
    columns: dict[str, Any] = {
        "period": [one.spacing.period for one in made],
        "period_sigma": [_number(one.spacing.period_sigma) for one in made],
        "decided": [None if one.ranked is None else one.ranked.decided for one in made],
        "mean": [_number(None if one.scale is None else one.scale.mean) for one in made],
        "layers": [one.layers.count for one in made],
    }
    for number, region in enumerate(made[0].task.regions):
        found = [one.integrals for one in made]
        columns[region.name] = [_number(None if one is None else float(one.values[number])) for one in found]
        columns[f"{region.name}_sigma"] = [
            _number(None if one is None or one.sigma is None else float(one.sigma[number])) for one in found
        ]
    return columns


def _number(value: float | None) -> float | None:
    return None if value is None or not np.isfinite(value) else value

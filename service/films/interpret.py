"""From a film's request to the engine's task."""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import replace

import numpy as np

from engine.arrays import refuse_rows
from engine.films.facts import (
    Fact,
    KnownAmplitude,
    KnownDensity,
    KnownFactor,
    KnownMean,
    KnownTotal,
)
from engine.films.scans import HIGHEST_ORDER, Scan
from engine.films.signs import Criteria, Flat, LeastStructure, NonNegative
from engine.films.signs import KnownDensity as DensityCriterion
from engine.films.signs import KnownTotal as TotalCriterion
from engine.films.task import Content, FilmTask, Region
from engine.resolution.envelope import Envelope
from engine.scattering import composition
from engine.windows import Window
from service.interpret_file import correction
from service.problems import at, located
from service.schemas.films import CriteriaIn, FactIn, FilmTaskIn, ScanIn

NEEDED = {
    "density": ("start", "end", "value"),
    "total": ("start", "end", "value"),
    "mean": ("value",),
    "composition": ("formula", "area"),
    "factor": ("value",),
    "amplitude": ("order", "value"),
}
"""Of each kind of fact: what it needs."""
OPTIONAL = {"composition": ("units", "area_sigma")}
ALIAS = {"start": "from", "end": "to"}
ORDER = re.compile("[1-9][0-9]{0,9}")
WIDEST = 180.0
"""Degrees, or Å⁻¹: no line is wider."""


def scan_of(given: ScanIn, place: tuple[str | int, ...] = ("scan",)) -> Scan:
    """The scan of a request.

    Raises
    ------
    Problem
        Pointing to the place in the body.
    """
    columns = {name: getattr(given, name) for name in ScanIn.model_fields}
    with located(*place, renamed={"position": ("two_theta_deg",)}):
        if given.saturated is not None:
            refuse_rows(~np.isin(given.saturated, (0, 1)), "saturated", "is neither 0 nor 1", "give 1 where it is so")
            columns["saturated"] = given.saturated == 1
        for name in ("position_sigma", "width", "width_sigma"):
            if columns[name] is not None:
                refuse_rows(columns[name] > WIDEST, name, f"is above {WIDEST:g}", "give it in the positions' unit")
        return Scan.of(**columns)


def task(request: FilmTaskIn, scan: Scan, joint: Mapping[int, float] | None = None) -> FilmTask:
    """What is to be made of a scan.

    Parameters
    ----------
    joint : mapping of int to float, optional
        Phases (degrees) by order that all scans of a run gave together; empty before they are known.

    Raises
    ------
    Problem
        Pointing to the place in the body.
    """
    spacing, phases = request.spacing, request.phases
    _check_meaning(request, scan)
    given = [name for name in ("phase_deg", "criteria", "swelling") if getattr(phases, name) is not None]
    if len(given) != 1:
        raise at(("phases",), f"have {' and '.join(given) or 'nothing'}", "give one of phase_deg, criteria, swelling")
    if phases.swelling is not None and joint is None:
        raise at(("phases", "swelling"), "needs several periods", "ask for a run, or give phase_deg or criteria")
    for name in ("known_signs", "use", "decisive"):
        if phases.criteria is None and name in phases.model_fields_set:
            raise at(("phases", name), "belongs to criteria", "leave it out")
    envelope = None
    if request.unmeasured is not None:
        bound = request.unmeasured
        for name in sorted(bound.model_fields_set - {"amplitude", "b"}):
            raise at(("unmeasured", name), "has no meaning for a film", "leave it out; give amplitude and b")
        if bound.amplitude is None:
            raise at(("unmeasured", "amplitude"), "is absent", "give the bound: amplitude and b")
        with located("unmeasured"):
            envelope = Envelope.from_bound(bound.amplitude, bound.b)
    with located("window"):
        window = Window(request.window.kind, request.window.b)
    facts, content = _facts(request.facts)
    made = FilmTask(
        scan=scan,
        period_range=None if spacing.period_range is None else (spacing.period_range[0], spacing.period_range[1]),
        zero_shift=spacing.zero_shift,
        displacement=spacing.displacement,
        radius=spacing.radius_mm,
        critical_q=spacing.critical_q,
        refraction_density=spacing.mean_density,
        corrections=tuple(correction(one, ("corrections", number)) for number, one in enumerate(request.corrections)),
        rule=request.amplitudes,
        negative=request.negative,
        keep_saturated=request.keep_saturated,
        phases_deg=joint if phases.phase_deg is None else _by_order(phases.phase_deg, ("phases", "phase_deg")),
        criteria=None if phases.criteria is None else _criteria(phases.criteria),
        fixed={},
        rank=phases.use - 1,
        decisive=phases.decisive,
        facts=facts,
        content=content,
        unit=request.unit,
        samples=request.samples,
        window=window,
        baseline=request.baseline,
        least_significance=request.least_significance,
        regions=tuple(Region(name=one.name, start=one.start, end=one.end) for one in request.regions),
        area=request.area,
        envelope=envelope,
        instrument_width=request.instrument_width,
        instrument_rule=request.instrument_rule,
    )
    fixed = _by_order({key: float(sign) for key, sign in phases.known_signs.items()}, ("phases", "known_signs"))
    return replace(made, fixed={order: int(sign) for order, sign in fixed.items()})


def _check_meaning(request: FilmTaskIn, scan: Scan) -> None:
    """Refuse what contradicts the rest of the request or would do nothing."""
    criteria = request.phases.criteria
    if criteria is not None and not request.facts:
        for name in ("non_negative", "densities", "totals"):
            if getattr(criteria, name):
                raise at(
                    ("facts",),
                    f"are absent, and without them {name} says nothing of signs",
                    "give facts that fix scale and mean, or judge by flat and least_structure alone",
                )
    if request.table == "signs" and criteria is None:
        raise at(("table",), "is of signs found by criteria, of which none are given", "choose another table")
    if request.spacing.radius_mm is not None and not request.spacing.displacement:
        raise at(("spacing", "radius_mm"), "has no meaning without displacement", "leave it out, or fit a displacement")
    if scan.radiation == "neutron":
        for number, one in enumerate(request.corrections):
            if one.kind == "polarisation":
                raise at(("corrections", number, "kind"), "is of X-rays", "leave it out for neutrons")
    names: set[str] = set()
    for number, region in enumerate(request.regions):
        if region.name in names:
            raise at(("regions", number, "name"), "comes twice", "give each region a name of its own")
        names.add(region.name)


def _facts(given: list[FactIn]) -> tuple[tuple[Fact, ...], Content | None]:
    """What is known of the film, and what its repeat unit holds."""
    found: list[Fact] = []
    content = None
    for number, one in enumerate(given):
        place = ("facts", number)
        _check_fact(one, place)
        if one.kind != "composition":
            found.append(_fact(one))
            continue
        if content is not None:
            raise at(place, "is a second composition", "give one")
        with located(*place):
            content = Content(
                content=composition(one.formula or ""),
                area=one.area or 0.0,
                area_sigma=one.area_sigma,
                units=one.units,
            )
    return tuple(found), content


def _check_fact(given: FactIn, place: tuple[str | int, ...]) -> None:
    needed = NEEDED[given.kind]
    for name in needed:
        if getattr(given, name) is None:
            raise at((*place, ALIAS.get(name, name)), "is absent", f"a fact of the kind {given.kind} needs it")
    allowed = {"kind", *needed, *OPTIONAL.get(given.kind, ("sigma",))}
    for name in sorted(given.model_fields_set - allowed):
        raise at((*place, ALIAS.get(name, name)), f"has no meaning for the kind {given.kind}", "leave it out")


def _fact(given: FactIn) -> Fact:
    start, end, value = given.start or 0.0, given.end or 0.0, given.value or 0.0
    if given.kind == "density":
        return KnownDensity(start=start, end=end, density=value, sigma=given.sigma)
    if given.kind == "total":
        return KnownTotal(start=start, end=end, total=value, sigma=given.sigma)
    if given.kind == "mean":
        return KnownMean(mean=value, sigma=given.sigma)
    if given.kind == "factor":
        return KnownFactor(factor=value, sigma=given.sigma)
    return KnownAmplitude(order=given.order or 0, amplitude=value, sigma=given.sigma)


def _criteria(given: CriteriaIn) -> Criteria:
    return Criteria(
        non_negative=None
        if given.non_negative is None
        else NonNegative(floor=given.non_negative.floor, weight=given.non_negative.weight),
        flat=tuple(Flat(start=one.start, stop=one.end, sigma=one.sigma, weight=one.weight) for one in given.flat),
        densities=tuple(
            DensityCriterion(value=one.value, sigma=one.sigma, start=one.start, stop=one.end, weight=one.weight)
            for one in given.densities
        ),
        totals=tuple(
            TotalCriterion(
                value=one.value,
                sigma=one.sigma,
                start=one.start,
                stop=one.start if one.end is None else one.end,
                weight=one.weight,
            )
            for one in given.totals
        ),
        least_structure=None if given.least_structure is None else LeastStructure(weight=given.least_structure.weight),
    )


def _by_order(given: dict[str, float], place: tuple[str | int, ...]) -> dict[int, float]:
    made = {}
    for key, value in given.items():
        # An order has one name, so that none is given twice.
        if not ORDER.fullmatch(key) or int(key) > HIGHEST_ORDER:
            raise at((*place, key), "is not an order", f'name orders by whole numbers, "1" to "{HIGHEST_ORDER}"')
        made[int(key)] = value
    return made

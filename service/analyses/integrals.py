"""Integrals of a density over regions."""

from __future__ import annotations

from collections.abc import Sequence

from engine.coefficients import CoefficientSet
from engine.features import integrals as engine_integrals
from engine.features.integrals import IntegralRegion
from engine.lattice import Lattice
from service import interpret
from service.analyses.common import OF_SET, heading, rows, table_of, told
from service.analyses.report import Limits, Report
from service.problems import at, located
from service.schemas.analyses import IntegralIn, IntegralsIn
from service.schemas.base import Coordinates

MEMBERS = {
    "slab": (("start", "end"), ("normal", "per")),
    "line": (("start", "end"), ()),
    "box": (("edges",), ("origin", "centre")),
    "ball": (("centre", "radius"), ()),
}
"""Of each kind of region: what it needs, and what else it may say."""


def integrals(request: IntegralsIn, coefficients: CoefficientSet, limits: Limits) -> Report:
    """Integrate.

    Raises
    ------
    Problem
        Pointing to the place in the body.
    """
    lattice = coefficients.lattice
    regions = [region(one, lattice, number, request.coordinates) for number, one in enumerate(request.regions)]
    treatment = interpret.treatment(request, lattice)
    with located(renamed=OF_SET):
        made = engine_integrals.integrals(coefficients, regions, treatment)
    document = heading(
        "integrals",
        coefficients,
        unit=made.unit,
        contains=made.contains,
        omits=made.omits,
        applied=made.applied,
        notes=made.notes,
    )
    labels = [one.label or f"region {number}" for number, one in enumerate(request.regions, start=1)]
    columns = {
        "label": labels,
        "region": list(made.regions),
        "integral": made.values,
        "sigma": made.sigma,
        "unit": list(made.units),
        "measure": made.measures,
        "measure_unit": list(made.measure_units),
        "mean": made.means,
        "mean_sigma": made.mean_sigma,
        "scattering_length": made.scattering_length,
        "scattering_length_sigma": made.scattering_sigma,
        "scattering_length_unit": list(made.scattering_units) or None,
    }
    document["integrals"] = rows(columns)
    document["covariance"] = made.covariance
    return Report(document=document, table=table_of(columns), told=told(document))


def region(given: IntegralIn, lattice: Lattice, number: int, coordinates: Coordinates) -> IntegralRegion:
    """One region of a request.

    Raises
    ------
    Problem
        Pointing to the place in the body.
    """
    place = ("regions", number)
    needed, others = MEMBERS[given.kind]
    alias = {"start": "from", "end": "to"}
    for name in needed:
        if getattr(given, name) is None:
            raise at((*place, alias.get(name, name)), "is absent", f"a region of the kind {given.kind} needs it")
    for name in sorted(given.model_fields_set - {"kind", "label", *needed, *others}):
        raise at((*place, alias.get(name, name)), f"has no meaning for the kind {given.kind}", "leave it out")
    with located(*place, renamed={"start": ("from",), "end": ("to",)}):
        if given.kind == "slab":
            normal = given.normal or ([1] if lattice.dimension == 1 else None)
            if normal is None:
                raise at((*place, "normal"), "is absent", "give the indices of the planes")
            start, end = _height(given.start, place, "from"), _height(given.end, place, "to")
            return engine_integrals.slab(lattice, normal, start, end, per=given.per)
        if given.kind == "line":
            first, last = _point(given.start, place, "from"), _point(given.end, place, "to")
            return engine_integrals.segment(lattice, first, last, coordinates=coordinates)
        if given.kind == "box":
            return engine_integrals.parallelepiped(
                lattice, given.edges or [], origin=given.origin, centre=given.centre, coordinates=coordinates
            )
        return engine_integrals.ball(lattice, given.centre or [], given.radius or 0.0, coordinates=coordinates)


def _height(value: float | Sequence[float] | None, place: tuple[str | int, ...], name: str) -> float:
    if isinstance(value, float | int):
        return float(value)
    raise at((*place, name), "is a point", "give Å along the normal")


def _point(value: float | Sequence[float] | None, place: tuple[str | int, ...], name: str) -> Sequence[float]:
    if value is None or isinstance(value, float | int):
        raise at((*place, name), "is a number", "give a point")
    return value

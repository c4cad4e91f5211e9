"""Extrema of a density, distances and angles between them."""

from __future__ import annotations

import math
from typing import Any

import numpy as np

from engine.coefficients import CoefficientSet
from engine.features.extrema import Extrema, find_extrema
from engine.features.geometry import angles, distances
from engine.features.neighbours import neighbours
from engine.features.regions import Region, ball_region, box_region
from engine.lattice import Lattice
from service import interpret
from service.analyses.common import OF_SET, heading, rows, table_of, told
from service.analyses.report import Column, Limits, Report
from service.encoders.describe import FRACTIONAL_NAMES
from service.problems import at, located
from service.schemas.analyses import RegionIn, SoughtIn
from service.schemas.base import Coordinates

AXES = ("x", "y", "z")


def extrema(request: SoughtIn, coefficients: CoefficientSet, limits: Limits) -> Report:
    """Find extrema and what lies between them.

    Raises
    ------
    Problem
        Pointing to the place in the body.
    """
    lattice = coefficients.lattice
    treatment = interpret.treatment(request, lattice)
    region = None if request.region is None else _region(request.region, lattice, request.coordinates)
    if request.within is not None and region is not None:
        raise at(
            ("within",),
            "is asked for of extrema in a region",
            "leave one of the two out, or name pairs under distances",
        )
    if request.spacing is not None:
        _require_memory(request.spacing, lattice, limits)
    with located(renamed=OF_SET):
        made = find_extrema(
            coefficients,
            treatment,
            kinds=tuple(request.kinds),
            region=region,
            spacing=request.spacing,
            most=request.most,
            least_value=request.least_value,
            greatest_value=request.greatest_value,
            least_significance=request.least_significance,
            max_bytes=limits.max_bytes,
            progress=limits.progress,
        )
    d = lattice.dimension
    _require_values(made.count * (14 + 4 * d + d * d), "most", limits)
    document = heading(
        "extrema",
        coefficients,
        unit=made.unit,
        contains=made.contains,
        omits=made.omits,
        applied=made.applied,
        notes=made.notes,
    )
    document |= {
        "found": made.found,
        "extrema": _records(made),
        "cell": None
        if made.cell is None
        else {"negative_curvatures": list(range(lattice.dimension + 1)), "counts": list(made.cell.counts)},
        "distances": _distances(request, made, limits),
        "angles": _angles(request, made),
    }
    further = [("distances, Å", _flat(document["distances"], ("vector",))), ("angles, °", _flat(document["angles"]))]
    return Report(
        document=document,
        table=_table(made),
        told=told(document),
        figures={"found": made.found, "listed": made.count},
        further=tuple((title, table) for title, table in further if table),
    )


def _require_memory(spacing: float, lattice: Lattice, limits: Limits) -> None:
    """Refuse at once what no search could hold: an eighth of the planes, with value, slopes and curvatures."""
    samples = math.prod(float(length) / spacing for length in lattice.lengths)
    if 8 * samples > limits.max_bytes:
        raise at(
            ("spacing",),
            f"makes a grid of about {samples:.2g} samples, whose search would take more than the limit of "
            f"{limits.max_bytes / 2**20:,.0f} MiB",
            "search with a coarser spacing, or have the limit raised",
            kind="too-costly",
        )


def _require_values(numbers: int, place: str, limits: Limits) -> None:
    if numbers > limits.max_values:
        raise at(
            (place,),
            f"makes a report of {numbers:,} numbers, more than the limit of {limits.max_values:,}",
            "ask for fewer, or have the limit raised",
            kind="too-costly",
        )


def _ball(radius: float, dimension: int) -> float:
    """Å, Å² or Å³."""
    return {1: 2 * radius, 2: math.pi * radius**2, 3: 4 / 3 * math.pi * radius**3}[dimension]


def _flat(records: list[dict[str, Any]], without: tuple[str, ...] = ()) -> tuple[Column, ...]:
    names = [name for name in (records[0] if records else ()) if name not in without]
    columns = {name: [record[name] for record in records] for name in names}
    return tuple((name, values) for name, values in columns.items() if any(value is not None for value in values))


def _region(given: RegionIn, lattice: Lattice, coordinates: Coordinates) -> Region:
    present = {name for name in type(given).model_fields if getattr(given, name) is not None}
    box, ball = {"origin", "edges"} & present, {"centre", "radius"} & present
    if bool(box) == bool(ball):
        raise at(("region",), "is neither a parallelepiped nor a ball", "give origin and edges, or centre and radius")
    for name in sorted({"origin", "edges"} - box) if box else sorted({"centre", "radius"} - ball):
        raise at(("region", name), "is absent", "give origin and edges, or centre and radius")
    with located("region"):
        if box:
            return box_region(lattice, given.origin or [], given.edges or [], coordinates=coordinates)
        return ball_region(lattice, given.centre or [], given.radius or 0.0, coordinates=coordinates)


def _records(made: Extrema) -> list[dict[str, Any]]:
    return rows(
        {
            "number": list(range(1, made.count + 1)),
            "kind": list(made.kind),
            "fractional": made.fractional,
            "cartesian": made.cartesian,
            "value": made.value,
            "sigma": made.sigma,
            "significance": made.significance,
            "position_sigma": made.position_sigma,
            "largest_position_sigma": made.largest_position_sigma,
            "curvatures": made.curvatures,
            "directions": made.directions,
            "multiplicity": made.multiplicity,
            "site_symmetry": [list(operations) for operations in made.site_symmetry],
        }
    )


def _table(made: Extrema) -> tuple[tuple[str, Any], ...]:
    d = made.fractional.shape[1]
    columns: dict[str, Any] = {"number": list(range(1, made.count + 1)), "kind": list(made.kind)}
    columns |= dict(zip(FRACTIONAL_NAMES[d], made.fractional.T, strict=True))
    for axis in range(d):
        columns[f"{AXES[axis]}_angstrom"] = made.cartesian[:, axis]
        if made.position_sigma is not None:
            columns[f"{AXES[axis]}_sigma"] = made.position_sigma[:, axis]
    columns |= {"value": made.value, "sigma": made.sigma, "significance": made.significance}
    columns |= {f"curvature_{axis + 1}": made.curvatures[:, axis] for axis in range(d)}
    return table_of(columns | {"multiplicity": made.multiplicity, "site_order": made.site_order})


def _distances(request: SoughtIn, made: Extrema, limits: Limits) -> list[dict[str, Any]]:
    found: list[dict[str, Any]] = []
    if request.distances:
        numbers = _numbers(request.distances, made.count, "distances")
        with located(renamed={"pairs": ("distances",)}):
            found += _listed(distances(made, numbers - 1))
    if request.within is not None:
        # Refused before they are looked for: about as many as the cell holds, times the cells in a ball.
        per_volume = made.multiplicity.sum() / made.coefficients.lattice.volume
        expected = made.count * per_volume * _ball(request.within, made.fractional.shape[1])
        _require_values(int(min(expected / 2, 1e18)), "within", limits)
        with located(renamed={"cutoff": ("within",)}):
            near = neighbours(made, request.within)
        _require_values(near.value.size * (5 + near.vector.shape[1]), "within", limits)
        found += _listed(near)
    return found


def _listed(made: Any) -> list[dict[str, Any]]:  # noqa: ANN401
    return rows(
        {
            "first": made.first + 1,
            "second": made.second + 1,
            "operation": list(made.operation),
            "distance": made.value,
            "sigma": made.sigma,
            "vector": made.vector,
        }
    )


def _angles(request: SoughtIn, made: Extrema) -> list[dict[str, Any]]:
    if not request.angles:
        return []
    numbers = _numbers(request.angles, made.count, "angles")
    with located(renamed={"triples": ("angles",)}):
        found = angles(made, numbers - 1)
    return rows(
        {
            "first": found.rows[:, 0] + 1,
            "vertex": found.rows[:, 1] + 1,
            "last": found.rows[:, 2] + 1,
            "angle_deg": found.value,
            "sigma_deg": found.sigma,
        }
    )


def _numbers(given: list[list[int]], count: int, name: str) -> np.ndarray[tuple[int, int], np.dtype[np.int64]]:
    for row, numbers in enumerate(given):
        if max(numbers) > count:
            raise at((name, row), f"names number {max(numbers)} of {count} extrema listed", "give numbers of the list")
    return np.array(given, dtype=np.int64)

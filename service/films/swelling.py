"""One layer at several periods: its signs and its continuous transform."""

from __future__ import annotations

from typing import Any, Literal

import numpy as np

from engine.films.swelling import (
    UNDECIDED,
    JointSigns,
    Orientation,
    excess,
    joint_signs,
    known_order,
    never_negative,
    total,
)
from service.analyses.common import finite, rows, table_of
from service.analyses.report import Limits, Report
from service.films.orders import orders_of
from service.problems import at, located
from service.schemas.film_models import SwellingIn
from service.schemas.films import OrientationIn

NEEDED = {
    "undecided": (),
    "excess": ("sign",),
    "total": ("value", "sigma"),
    "known_order": ("number", "order", "sign"),
    "never_negative": ("value",),
}
SOURCES = {
    "sampling theorem": "Shannon, Proc. IRE 37 (1949) 10; Sayre, Acta Cryst. 5 (1952) 843",
}


def swelling(request: SwellingIn, limits: Limits) -> Report:
    """Fit the layer's transform to all sets, and rank its signs.

    Raises
    ------
    Problem
        Pointing to the place in the body.
    """
    sets = [orders_of(one, ("sets", number)) for number, one in enumerate(request.sets)]
    orientation = orientation_of(request.orientation)
    with located(renamed={"orders": ("sets",), "entry": ("orientation", "number"), "sigma": ("sets",)}):
        found = joint_signs(
            sets,
            orientation=orientation,
            thickness=request.thickness,
            scales=request.scales,
            relative_sigma=request.relative_sigma,
        )
    document = {"product": "film_swelling", **swelling_document(found, request.samples)}
    return Report(document=document, table=table_of(_columns(found)), told=(found.verdict, *found.notes))


def swelling_document(found: JointSigns, samples: int = 256) -> dict[str, Any]:
    """What a joint fit says, as plain data."""
    columns = _columns(found)
    q = np.linspace(0.0, found.transform.largest, samples)
    value, sigma = found.transform.at(q)
    z = np.linspace(-found.transform.thickness / 2, found.transform.thickness / 2, samples)
    contrast, contrast_sigma = found.transform.contrast(z)
    return {
        "settled": found.settled,
        "oriented": found.oriented,
        "verdict": found.verdict,
        "chi_squared": found.chi_square,
        "degrees": found.freedom,
        "orders": rows(columns),
        "scales": rows(
            {
                "set": list(range(1, len(found.orders) + 1)),
                "period": [one.period for one in found.orders],
                "scale": found.scales,
                "sigma": found.scale_sigma,
            }
        ),
        "transform": {"thickness": found.transform.thickness, "q": q, "value": value, "sigma": sigma},
        "layer": {"distance_angstrom": z, "contrast": contrast, "sigma": contrast_sigma},
        "solutions": [
            {
                "behind": one.behind,
                "signs": [signs.tolist() for signs in one.signs],
                "reversed": [{"set": entry + 1, "order": order} for entry, order in one.reversed_orders],
            }
            for one in found.solutions
        ],
        "notes": list(found.notes),
        "sources": SOURCES,
    }


def _columns(found: JointSigns) -> dict[str, Any]:
    count = [one.count for one in found.orders]
    return {
        "set": [number for number, size in enumerate(count, start=1) for _ in range(size)],
        "period": [one.period for one in found.orders for _ in range(one.count)],
        "order": np.concatenate([one.order for one in found.orders]),
        "amplitude": np.concatenate([one.amplitude for one in found.orders]),
        "sign": np.concatenate(found.signs),
        "decided": np.concatenate(found.decided),
        "margin": [finite(value) for value in np.concatenate(found.margin).tolist()],
        "merit": np.concatenate(found.merit),
        "fitted": np.concatenate(found.fitted),
        "residual": np.concatenate(found.residual),
    }


def orientation_of(given: OrientationIn, place: tuple[str | int, ...] = ("orientation",)) -> Orientation:
    """What fixes the common sign.

    Raises
    ------
    Problem
        Pointing below the place.
    """
    needed = NEEDED[given.kind]
    for name in needed:
        if getattr(given, name) is None:
            raise at((*place, name), "is absent", f"the kind {given.kind} needs it")
    for name in sorted(given.model_fields_set - {"kind", *needed}):
        raise at((*place, name), f"has no meaning for the kind {given.kind}", "leave it out")
    sign: Literal["positive", "negative"] = given.sign or "positive"
    with located(*place):
        if given.kind == "excess":
            return excess(sign)
        if given.kind == "total":
            return total(given.value or 0.0, given.sigma or 0.0)
        if given.kind == "known_order":
            return known_order((given.number or 1) - 1, given.order or 0, sign)
        if given.kind == "never_negative":
            return never_negative(given.value or 0.0)
    return UNDECIDED

"""Requests about invented films of swelling sheets, and ways to ask them in this process."""

from __future__ import annotations

import copy
import json
from collections.abc import Mapping
from typing import Any

import numpy as np
import pytest

from service import intake, pipeline
from service.problems import Problem
from service.settings import Settings

WAVELENGTH = 1.5406
PERIOD = 19.2
ORDERS = np.arange(1, 6)


def amplitudes(period: float) -> np.ndarray:
    """F_l of a sheet at d/2 in water of 0.334 e/Å³: a slab, two dense planes and one in the middle."""
    q = 2 * np.pi * ORDERS / period
    slab = 1.1 * np.sin(3.2 * q) / q * np.exp(-((0.45 * q) ** 2) / 2)
    planes = 2.6 * np.cos(2.15 * q) * np.exp(-((0.4 * q) ** 2) / 2)
    middle = 1.8 * np.exp(-((0.45 * q) ** 2) / 2)
    return (-1.0) ** ORDERS * (slab + planes + middle)


def mean(period: float) -> float:
    return 0.334 + (3.52 + 2.6 + 1.8) / period


def scan(period: float = PERIOD) -> dict[str, Any]:
    """Lines as measured without noise, with a fixed part of the arc received."""
    theta = np.arcsin(WAVELENGTH * ORDERS / (2 * period))
    factor = (1 + np.cos(2 * theta) ** 2) / 2 / (np.sin(theta) * np.sin(2 * theta))
    intensity = 50 * amplitudes(period) ** 2 * factor
    return {
        "wavelength": WAVELENGTH,
        "two_theta_deg": np.degrees(2 * theta).round(4).tolist(),
        "position_sigma": [0.006] * ORDERS.size,
        "intensity": intensity.round(2).tolist(),
        "intensity_sigma": (0.03 * intensity + 3).round(2).tolist(),
        "width": (0.12 + 0.0015 * ORDERS**2).round(4).tolist(),
        "width_sigma": [0.003] * ORDERS.size,
    }


TASK: dict[str, Any] = {
    "corrections": [{"kind": "lorentz", "geometry": "film_part_of_arc"}, {"kind": "polarisation"}],
    "phases": {
        "criteria": {
            "non_negative": {"floor": 0.1},
            "flat": [{"from": -4, "to": 4, "sigma": 0.05}],
            "least_structure": {"weight": 0.5},
        }
    },
    "facts": [
        {"kind": "mean", "value": round(mean(PERIOD), 4), "sigma": 0.01},
        {"kind": "density", "from": -3, "to": 3, "value": 0.334, "sigma": 0.01},
    ],
    "unit": "e/Å³",
    "samples": 97,
    "regions": [{"name": "sheet", "from": 5, "to": 14.2}, {"name": "gallery", "from": -4.5, "to": 4.5}],
    "area": 24.0,
    "unmeasured": {"amplitude": 0.3, "b": 5},
    "instrument_width": 0.1,
}
FILM: dict[str, Any] = {"product": "film", "remark": "Invented.", "scan": scan(), **TASK}
SIMPLE: dict[str, Any] = {"scan": scan(), "phases": {"criteria": {"least_structure": {}}}, "samples": 33}
GIVEN: dict[str, Any] = {
    "scan": scan(),
    "corrections": TASK["corrections"],
    "phases": {"phase_deg": {"1": 180, "2": 0, "3": 180, "4": 180, "5": 0}},
    "samples": 33,
}
"""Phases given, on no scale."""


def members(*periods: float) -> list[dict[str, Any]]:
    """Films of a run; the wavelength is theirs in common."""
    found = []
    for number, period in enumerate(periods):
        columns = scan(period)
        del columns["wavelength"]
        found.append({"value": 10 + 30 * number, "scan": columns})
    return found


RUN: dict[str, Any] = {
    "product": "film_run",
    "scan": {"wavelength": WAVELENGTH},
    "variable": "relative humidity",
    "variable_unit": "%",
    "members": members(19.2, 19.5),
    **TASK,
    "facts": [{"kind": "factor", "value": 0.14, "sigma": 0.005}],
    "phases": {"criteria": {"least_structure": {}}},
}


def changed(body: Mapping[str, Any], **changes: Any) -> dict[str, Any]:
    """A copy with other values at places such as ``scan__wavelength``; ... takes a member out."""
    made = copy.deepcopy(dict(body))
    for place, value in changes.items():
        *outer, last = [int(part) if part.isdigit() else part for part in place.split("__")]
        inner: Any = made
        for part in outer:
            inner = inner[part] if isinstance(part, int) else inner.setdefault(part, {})
        if value is ...:
            del inner[last]
        else:
            inner[last] = value
    return made


def asked(product: str, body: Mapping[str, Any]) -> Any:
    """The checked model of a request."""
    return intake.check(product, json.loads(json.dumps(body)), {}, max_body_bytes=2**20)[1]


def answered(product: str, body: Mapping[str, Any], form: str = "json") -> Any:
    """The answer: a document, or the bytes of another form."""
    found = pipeline.film_answer(asked(product, body), form, Settings(), threads=1)
    return json.loads(found) if form == "json" else found


def refused(product: str, body: Mapping[str, Any], form: str = "json") -> tuple[str, str, str]:
    """Pointer, reason and cure of a request that is refused."""
    with pytest.raises(Problem) as caught:
        answered(product, body, form)
    problem = caught.value
    assert problem.status == 422
    place = problem.places[0]
    assert place.pointer in problem.detail
    assert "\n" not in place.reason
    assert place.reason
    assert place.cure
    return place.pointer, place.reason, place.cure

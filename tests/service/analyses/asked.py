"""Good requests for analyses, small and invented; and ways to ask them in this process."""

from __future__ import annotations

import csv
import io
import json
from collections.abc import Mapping
from typing import Any

import numpy as np
import pytest

from service import intake, interpret_combination, pipeline
from service.analyses.report import Limits, Report
from service.analyses.run import analyse
from service.problems import Problem
from service.settings import Settings
from service.spool import Spool
from tests.service import bodies

SIGMA = [0.4, 0.5, 0.3, 0.6]
FILM: dict[str, Any] = {**bodies.FILM, "sigma": SIGMA, "mean": 30.0}
LATER: dict[str, Any] = {**FILM, "amplitude": [11.0, 40.0, 9.9, 21.0]}
CRYSTAL: dict[str, Any] = {**bodies.CRYSTAL, "sigma": np.linspace(0.1, 1, 40).round(3).tolist()}
FEW: dict[str, Any] = {
    "cell": bodies.TRICLINIC,
    "values": "structure_factor",
    "h": [1, 0, 0, 1, -1],
    "k": [0, 1, 0, 1, 0],
    "l": [0, 0, 1, 0, 1],
    "amplitude": [20.0, 17.0, 14.0, 6.0, 5.0],
    "phase_deg": [0.0, 40.0, -75.0, 20.0, 110.0],
    "sigma": [0.3, 0.2, 0.4, 0.1, 0.2],
    "mean": 90.0,
    "unit": "e/Å³",
}
"""A crystal with a handful of extrema."""
REGIONS: list[dict[str, Any]] = [
    {"kind": "slab", "label": "lower half", "normal": [0, 0, 1], "from": 0, "to": 2.5},
    {"kind": "slab", "normal": [1, 1, 0], "from": -1.5, "to": 0.5, "per": "cell"},
    {"kind": "line", "from": [0, 0, 0], "to": [0.5, 0.25, 0]},
    {"kind": "box", "origin": [0.1, 0, 0], "edges": [[0.5, 0, 0], [0, 0.5, 0], [0, 0.1, 0.5]]},
    {"kind": "box", "centre": [0.1, 0, 0], "edges": [[0.5, 0, 0], [0, 0.5, 0]]},
    {"kind": "ball", "centre": [0.5, 0.5, 0.5], "radius": 1.2},
]
GOOD: dict[str, dict[str, Any]] = {
    "extrema": {
        "set": FEW,
        "kinds": ["maximum", "minimum", "saddle"],
        "within": 6.0,
        "distances": [[1, 2]],
        "angles": [[1, 2, 3]],
    },
    "integrals": {"set": CRYSTAL, "regions": REGIONS},
    "layers": {"set": FILM, "along": [1]},
    "statistics": {"set": CRYSTAL, "bins": 12},
    "features": {"set": FILM, "kinds": ["maximum", "minimum"], "within": 9.0},
    "windows": {"set": CRYSTAL},
    "compare": {"set": FILM, "with": LATER},
}
LIMITS = Limits(max_bytes=2**30, max_rows=1000, max_values=100_000)


def request(product: str, body: Mapping[str, Any]) -> Any:
    """The checked model of a request, with models in it for those that stand for JSON."""
    return intake.check(product, json.loads(json.dumps(body)), {}, max_body_bytes=2**20)[1]


def report(product: str, body: Mapping[str, Any], limits: Limits = LIMITS) -> Report:
    """The report of a request."""
    asked = request(product, body)
    return analyse(product, asked, interpret_combination.coefficient_set(asked, max_coefficients=1000), limits)


def refusal(product: str, body: Mapping[str, Any], limits: Limits = LIMITS) -> Problem:
    """The problem of a request that is refused."""
    with pytest.raises(Problem) as caught:
        report(product, body, limits)
    assert all("\n" not in place.reason and place.cure for place in caught.value.places)
    return caught.value


def pointer(product: str, body: Mapping[str, Any], limits: Limits = LIMITS) -> str:
    """Where a refused request is at fault."""
    problem = refusal(product, body, limits)
    assert problem.status == 422
    assert problem.detail.startswith(problem.places[0].pointer)
    return problem.places[0].pointer


def answered(product: str, body: Mapping[str, Any], form: str = "json", **limits: Any) -> bytes:
    """The bytes of an answer."""
    with Spool.unnamed() as spool:
        pipeline.answer(product, request(product, body), form, spool, Settings(**limits), threads=1)
        return bytes(spool.view())


def table(content: bytes | str) -> tuple[list[str], dict[str, list[str]]]:
    """Comment lines and columns of a CSV."""
    text = content.decode() if isinstance(content, bytes) else content
    lines = text.splitlines()
    head = [line.removeprefix("# ") for line in lines if line.startswith("#")]
    names, *rows = csv.reader(io.StringIO("\n".join(lines[len(head) :])))
    columns = list(zip(*rows, strict=True)) or [()] * len(names)
    return head, {name: list(column) for name, column in zip(names, columns, strict=True)}


def numbers(column: list[str]) -> list[float | None]:
    """Cells as numbers; None where they are empty."""
    return [float(cell) if cell else None for cell in column]

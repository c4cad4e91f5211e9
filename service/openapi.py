"""The OpenAPI document: bodies that are parsed by hand are described by hand, from the same models."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any, Literal

from fastapi import FastAPI
from fastapi.openapi.utils import get_openapi
from pydantic import BaseModel
from pydantic.json_schema import models_json_schema

from service.access.scopes import is_open, scope_needed
from service.encoders.negotiation import MEDIA_TYPES, formats_of
from service.intake import CSV, FILE_TYPES, FILES, JSON, MULTIPART, NPZ
from service.parts import Part
from service.problems import MEDIA_TYPE as PROBLEM
from service.problems import TITLES
from service.schemas.answers import Answer, ProblemDocument, StackAnswer
from service.schemas.film_models import MODELS
from service.schemas.film_reports import FILM_REPORTS
from service.schemas.films import SCANS
from service.schemas.reports import REPORTS
from service.schemas.requests import INSPECT, KEEP, REQUESTS, SERIES
from service.schemas.store import KeptOut, ListOut
from service.schemas.summary import SummaryAnswer
from service.schemas.treatment import SetRequestIn

SCHEMAS = "#/components/schemas/"

SUMMARIES = {
    "profile": "Values along a line",
    "slice": "Values on a plane",
    "grid": "Values in the whole cell or a box",
    "points": "Values at free points",
    "series": "A stack of profiles or slices along a variable of the run",
    "extrema": "Maxima, minima and saddle points, distances and angles between them",
    "integrals": "Integrals over slabs, lines, boxes and balls",
    "layers": "Layers of a profile: position, height, width, area",
    "statistics": "Moments and histogram of a field",
    "features": "What stands out: extrema, moments, layers of a stack",
    "windows": "What termination windows do to a point and to a step",
    "compare": "Agreement of two densities on one cell",
    "film": "A film from a scan's order table to its layer profile and layer table",
    "film_run": "Films along a run, each analysed alike",
    "film_swelling": "Signs of one layer from several periods, with its continuous transform",
    "film_contrast": "Signs of one stack from several contrasts at one period",
    "film_trial": "A trial stack against measured amplitudes",
    INSPECT: "Summary of a file of reflections",
    KEEP: "Keep a set",
}

DESCRIPTION = """Send Fourier coefficients, get the density they stand for, n(r) = Σ n_G exp(iG·r), on a line, a
plane, the whole cell, a box or at free points.

* Answers are JSON, NumPy `.npy` or `.npz`, CSV for profiles and points, pictures (`png`, `svg`), bare samples for a
  browser (`f32`, `u16`, `u8`), and for a surface a mesh (`glb`): by `Accept` or `?format=`.
* Sets can be kept (`POST /v1/sets`): then every product and analysis of one can be had by GET, with the members of a
  request as parameters, and cached; in bodies `set_id` stands for `set`.
* Bodies are JSON; or a form (`multipart/form-data`) with the parts `request` (JSON without columns) and
  `columns` (CSV or `.npz` with the columns of the set) or `reflections` (a laboratory's CIF, delimited text or
  `.npz`, prepared as `set.preparation` says).
* Errors are problem documents (RFC 9457) that name the place by JSON pointer and say how to mend it.
* A density is only as good as its phases: wrong ones give a wrong map that looks as sharp.
"""

_FILM = {
    "cell": {"period": 17.4},
    "values": "structure_factor",
    "l": [1, 2, 3, 4],
    "amplitude": [12.1, 41.3, 8.7, 22.8],
    "phase_deg": [0, 180, 0, 0],
    "unit": "e/Å³",
}
_CRYSTAL = {
    "cell": {"a": 3.02, "b": 3.02, "c": 17.4, "alpha": 90, "beta": 90, "gamma": 120},
    "values": "structure_factor",
    "h": [0, 0, 1],
    "k": [0, 0, 0],
    "l": [3, 6, 2],
    "amplitude": [41.3, 22.8, 15.2],
    "phase_deg": [180, 0, 35],
}
_MEASURED_FILM = {**_FILM, "sigma": [0.2, 0.4, 0.3, 0.5]}
_MEASURED_CRYSTAL = {
    "cell": {"a": 5.1, "b": 6.2, "c": 7.3, "alpha": 82, "beta": 97, "gamma": 105},
    "symmetry": {"space_group": "P-1"},
    "values": "structure_factor",
    "h": [1, 0, 0, 1, 0, 1],
    "k": [0, 1, 0, 1, 1, 0],
    "l": [0, 0, 1, 0, 1, 1],
    "amplitude": [31.2, 24.0, 18.3, 9.5, 12.1, 7.7],
    "phase_deg": [0, 180, 0, 0, 180, 0],
    "sigma": [0.5, 0.4, 0.4, 0.6, 0.5, 0.5],
    "unit": "e/Å³",
}
_PREPARATION = {
    "set": {
        "cell": {"a": 5.1, "b": 6.2, "c": 7.3, "alpha": 82, "beta": 97, "gamma": 105},
        "symmetry": {"space_group": "P-1"},
        "preparation": {
            "wavelength": 0.7107,
            "corrections": [{"kind": "lorentz", "geometry": "rotation"}, {"kind": "polarisation"}],
        },
    }
}
_SCAN = {
    "wavelength": 1.5406,
    "two_theta_deg": [5.89, 11.79, 17.73, 23.72],
    "position_sigma": [0.01, 0.01, 0.01, 0.02],
    "intensity": [9120, 410, 233, 61],
    "intensity_sigma": [95, 21, 16, 8],
}
_FILM_TASK = {
    "corrections": [{"kind": "lorentz", "geometry": "film_part_of_arc"}, {"kind": "polarisation"}],
    "phases": {"criteria": {"least_structure": {}}},
}
_TRIAL = {
    "orders": {
        "period": 15.0,
        "order": [1, 2, 3, 4, 5],
        "amplitude": [4.1, 3.3, 0.6, 1.7, 1.1],
        "sigma": [0.1, 0.1, 0.1, 0.1, 0.1],
        "absolute": True,
        "unit": "e/Å³",
    },
    "parts": [
        {"kind": "plane", "name": "metal", "position": 0.0, "strength": 3.0, "width": 0.3},
        {"kind": "plane", "name": "oxygen", "position": 2.2, "strength": 1.6, "width": 0.4},
    ],
    "background": 0.2,
    "refine": ["metal.strength", "oxygen.position"],
}
_SWELLING = {
    "sets": [
        {"period": 16.0, "order": [1, 2, 3, 4], "amplitude": [5.2, 2.1, 0.7, 1.6], "sigma": [0.1, 0.1, 0.1, 0.1]},
        {"period": 18.5, "order": [1, 2, 3, 4], "amplitude": [5.6, 3.1, 0.5, 0.9], "sigma": [0.1, 0.1, 0.1, 0.1]},
        {"period": 21.0, "order": [1, 2, 3, 4], "amplitude": [5.9, 3.8, 1.5, 0.3], "sigma": [0.1, 0.1, 0.1, 0.1]},
    ],
    "orientation": {"kind": "excess", "sign": "positive"},
}
_CONTRAST = {
    "sets": [
        {
            "contrast": share,
            "period": 16.2,
            "order": [1, 2, 3],
            "amplitude": amplitude,
            "sigma": [0.2, 0.2, 0.1],
        }
        for share, amplitude in ((0.0, [21.1, 11.0, 1.8]), (0.4, [16.2, 15.2, 1.4]), (1.0, [8.7, 21.2, 6.4]))
    ],
    "exchange": "edge",
}
EXAMPLES: dict[str, dict[str, Any]] = {
    "profile": {"set": _FILM, "from": [0], "to": [1], "samples": 128},
    "slice": {"set": _CRYSTAL, "plane": [0, 0, 1], "offset": 4.35, "width": 12, "height": 12, "spacing": 0.1},
    "grid": {"set": _CRYSTAL, "spacing": 0.3},
    "points": {"set": _CRYSTAL, "positions": [[0, 0, 0.25], [0.333, 0.667, 0.25]]},
    "series": {
        "set": _MEASURED_FILM,
        "variable": "humidity",
        "variable_unit": "%",
        "members": [
            {"value": 10, "set": {}},
            {"value": 40, "set": {"amplitude": [12.9, 40.2, 9.1, 21.7]}},
            {"value": 80, "set": {"amplitude": [14.6, 38.8, 9.9, 19.2]}},
        ],
        "profile": {"from": [0], "to": [1], "samples": 64},
        "scale": {"kind": "as_given"},
    },
    "extrema": {"set": _MEASURED_CRYSTAL, "kinds": ["maximum", "minimum"], "within": 4.0},
    "integrals": {
        "set": _MEASURED_FILM,
        "regions": [
            {"kind": "slab", "from": 0, "to": 4.2, "label": "gallery"},
            {"kind": "ball", "centre": [0.5], "radius": 2},
        ],
    },
    "layers": {"set": _MEASURED_FILM, "from": [0], "to": [1]},
    "statistics": {"set": _CRYSTAL, "bins": 32},
    "features": {"set": _MEASURED_FILM},
    "windows": {"set": _FILM},
    "compare": {"set": _FILM, "with": {**_FILM, "amplitude": [12.4, 40.8, 8.1, 23.3]}},
    "film": {"scan": _SCAN, **_FILM_TASK},
    "film_run": {
        "scan": {"wavelength": 1.5406},
        "variable": "relative humidity",
        "variable_unit": "%",
        "members": [
            {"value": 10, "scan": _SCAN},
            {"value": 60, "scan": {**_SCAN, "two_theta_deg": [5.52, 11.05, 16.62, 22.22]}},
        ],
        **_FILM_TASK,
    },
    "film_swelling": _SWELLING,
    "film_contrast": _CONTRAST,
    "film_trial": _TRIAL,
    KEEP: {"set": _MEASURED_FILM, "name": "film KL-2, 40 % humidity", "tags": ["invented", "film"]},
}


def operation(product: str) -> dict[str, Any]:
    """What FastAPI is told of the endpoint of a product."""
    schema = {"$ref": SCHEMAS + REQUESTS[product].__name__}
    return {
        "operation_id": product,
        "summary": SUMMARIES[product],
        "description": f"{REQUESTS[product].__doc__} The answer's form is chosen by `Accept` or `?format=`.",
        "responses": {
            200: {"description": "The answer", "content": answers(product)},
            **problems(_problems_of(product)),
        },
        "openapi_extra": {
            "parameters": [
                {
                    "name": "format",
                    "in": "query",
                    "required": False,
                    "description": "form of the answer; goes before Accept",
                    "schema": {"type": "string", "enum": list(formats_of(product))},
                }
            ],
            "requestBody": {"required": True, "content": bodies(product, schema)},
        },
    }


def bodies(product: str, schema: dict[str, str]) -> dict[str, Any]:
    """The request body in each media type."""
    binary = {"type": "string", "format": "binary"}
    request = {"type": "object", "description": "the request without columns in its set"}
    of_one = ("reflections", "reference")
    named = of_one if product in (INSPECT, KEEP) else [one for one in FILES if not one.endswith("columns")]
    properties: dict[str, Any] = {"request": request, **dict.fromkeys(named, binary)}
    encoding: dict[str, Any] = {
        "request": {"contentType": JSON},
        **{name: {"contentType": ", ".join(FILE_TYPES)} for name in named},
    }
    if product == KEEP:
        form = {"type": "object", "properties": {**properties, "columns": binary}}
        encoding["columns"] = {"contentType": f"{CSV}, {NPZ}"}
        whole = {media_type: {"schema": binary} for media_type in FILE_TYPES}
        examples = {"small": {"summary": "A small film", "value": EXAMPLES[KEEP]}}
        return {
            JSON: {"schema": schema, "examples": examples},
            MULTIPART: {"schema": form, "encoding": encoding},
            **whole,
        }
    if product in MODELS:
        return {
            JSON: {"schema": schema, "examples": {"small": {"summary": "A small film", "value": EXAMPLES[product]}}}
        }
    if product in SCANS:
        form = {"type": "object", "required": ["request"], "properties": {"request": request, "columns": binary}}
        return {
            JSON: {"schema": schema, "examples": {"small": {"summary": "A small film", "value": EXAMPLES[product]}}},
            MULTIPART: {"schema": form, "encoding": {"columns": {"contentType": f"{CSV}, {NPZ}"}}},
        }
    if product == INSPECT:
        form = {"type": "object", "required": ["reflections"], "properties": {**properties, "request": schema}}
        example = {
            "request": _PREPARATION,
            "reflections": "h,k,l,intensity,intensity_sigma\n0,0,1,812.4,6.1\n0,0,-1,820.3,6.2\n0,1,0,77.0,2.9\n",
        }
        whole = {media_type: {"schema": binary} for media_type in FILE_TYPES}
        examples = {"small": {"summary": "A table and how to prepare it", "value": example}}
        return {MULTIPART: {"schema": form, "encoding": encoding, "examples": examples}, **whole}
    for name in ("columns", "with_columns"):
        properties[name] = binary
        encoding[name] = {"contentType": f"{CSV}, {NPZ}"}
    example = {"summary": f"A small {product}", "value": EXAMPLES[product]}
    return {
        JSON: {"schema": schema, "examples": {"small": example}},
        MULTIPART: {
            "schema": {"type": "object", "required": ["request"], "properties": properties},
            "encoding": encoding,
        },
    }


def answers(product: str) -> dict[str, Any]:
    """The answer of a product in each media type."""
    content: dict[str, Any] = {}
    for name in formats_of(product):
        schema: dict[str, Any] = {"type": "string", "format": "binary"}
        if name == "json":
            reports: dict[str, type[BaseModel]] = {
                INSPECT: SummaryAnswer,
                SERIES: StackAnswer,
                **REPORTS,
                **FILM_REPORTS,
            }
            answer = reports.get(product, Answer)
            schema = {"$ref": SCHEMAS + answer.__name__}
        elif name in ("csv", "svg"):
            schema = {"type": "string"}
        content[MEDIA_TYPES[name].split(";")[0]] = {"schema": schema}
    return content


POST_PROBLEMS = (
    "malformed-body",
    "not-acceptable",
    "body-too-large",
    "unsupported-media-type",
    "invalid-request",
    "internal",
    "busy",
    "timeout",
    "not-installed",
)


GUARD_PROBLEMS = (
    "unauthorized",
    "forbidden",
    "misdirected",
    "rate-limited",
    "overloaded",
    "internal",
)
"""What any address may answer before its own work begins."""
BODY_PROBLEMS = ("body-too-slow",)


def _problems_of(product: str) -> tuple[str, ...]:
    """Kinds of problem of the endpoint of a product."""
    if issubclass(REQUESTS[product], SetRequestIn):
        # A body may name a set of the store.
        return (*POST_PROBLEMS, "not-found")
    return POST_PROBLEMS


def problems(kinds: Sequence[str]) -> dict[int | str, dict[str, Any]]:
    """Answers that are problems of these kinds."""
    content = {PROBLEM: {"schema": {"$ref": SCHEMAS + ProblemDocument.__name__}}}
    found: dict[int | str, dict[str, Any]] = {}
    for kind in kinds:
        status, title = TITLES[kind]
        found[status] = {"description": title, "content": content}
    return found


def install(app: FastAPI, *, keys: bool) -> None:
    """Make the app answer /openapi.json with our models among the components; `keys`: whether it asks for keys."""

    def document() -> dict[str, Any]:
        if app.openapi_schema is None:
            made = get_openapi(
                title=app.title,
                version=app.version,
                description=app.description,
                routes=app.routes,
                openapi_version="3.1.0",
            )
            models: list[tuple[type[BaseModel], Literal["validation", "serialization"]]] = [
                *((model, "validation") for model in REQUESTS.values()),
                (Answer, "serialization"),
                (StackAnswer, "serialization"),
                (SummaryAnswer, "serialization"),
                (KeptOut, "serialization"),
                (ListOut, "serialization"),
                *((model, "serialization") for model in (*REPORTS.values(), *FILM_REPORTS.values())),
                (ProblemDocument, "serialization"),
            ]
            _, schemas = models_json_schema(models, ref_template=SCHEMAS + "{model}")
            # A file is a part of a form, never JSON.
            schemas["$defs"].pop(Part.__name__, None)
            made.setdefault("components", {}).setdefault("schemas", {}).update(schemas["$defs"])
            _secure(made, keys=keys)
            app.openapi_schema = made
        return app.openapi_schema

    app.openapi = document  # type: ignore[method-assign]


def _secure(document: dict[str, Any], *, keys: bool) -> None:
    """Say of every address which key it asks for, and what the guard may answer."""
    document["components"]["securitySchemes"] = {
        "key": {"type": "http", "scheme": "bearer", "description": "an API key; `densityloom keys create` makes one"}
    }
    for path, operations in document["paths"].items():
        if is_open(path):
            continue
        for method, operation in operations.items():
            needed = scope_needed(method.upper(), path)
            # Roles of a scheme are allowed by OpenAPI 3.1; {} says that none is needed.
            operation["security"] = [{"key": [needed] if needed else []}, *([] if keys else [{}])]
            kinds = (*GUARD_PROBLEMS, *(BODY_PROBLEMS if "requestBody" in operation else ()))
            for status, answer in problems(kinds).items():
                operation["responses"].setdefault(str(status), answer)

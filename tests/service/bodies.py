"""Good requests, small and invented, and what the engine makes of their sets when called directly."""

from __future__ import annotations

import copy
import io
import json
from collections.abc import Mapping
from pathlib import Path
from typing import Any

import numpy as np

from engine import CoefficientSet, Columns, Lattice, assemble

JSON = {"Content-Type": "application/json"}
TRICLINIC = {"a": 5.1, "b": 6.2, "c": 7.3, "alpha": 82, "beta": 97, "gamma": 105}
PLANAR = {"a": 31.0, "b": 27.0, "gamma": 100}
PERIOD = 17.4


def _columns(dimension: int, rows: int, seed: int) -> dict[str, list[float]]:
    """Distinct rows without a zero term or Friedel mates."""
    rng = np.random.default_rng(seed)
    drawn = np.unique(rng.integers(-4, 5, (8 * rows, dimension)), axis=0)
    drawn = drawn[drawn[:, -1] > 0]
    drawn = drawn[rng.permutation(len(drawn))[:rows]]
    names = {1: "l", 2: "hk", 3: "hkl"}[dimension]
    return {
        **{name: column.tolist() for name, column in zip(names, drawn.T, strict=True)},
        "amplitude": rng.uniform(1, 40, len(drawn)).round(3).tolist(),
        "phase_deg": rng.uniform(-180, 180, len(drawn)).round(2).tolist(),
    }


FILM: dict[str, Any] = {
    "cell": {"period": PERIOD},
    "values": "structure_factor",
    "l": [1, 2, 3, 4],
    "amplitude": [12.1, 41.3, 8.7, 22.8],
    "phase_deg": [0, 180, 0, 0],
    "unit": "e/Å³",
}
CRYSTAL: dict[str, Any] = {
    "cell": TRICLINIC,
    "values": "structure_factor",
    **_columns(3, 40, 1),
    "mean": 61.5,
    "unit": "e/Å³",
}
SHEET: dict[str, Any] = {"cell": PLANAR, "values": "density_coefficient", **_columns(2, 12, 2)}
ABSORBING: dict[str, Any] = {
    **{name: CRYSTAL[name] for name in ("cell", "values", "h", "k", "l")},
    "density": "complex",
    "real": np.random.default_rng(3).normal(size=40).round(4).tolist(),
    "imag": np.random.default_rng(4).normal(size=40).round(4).tolist(),
    "mean": 3.0,
    "mean_imag": -0.25,
}

PROFILE: dict[str, Any] = {"set": FILM, "from": [0], "to": [1], "samples": 17}
SLICE: dict[str, Any] = {
    "set": CRYSTAL,
    "origin": [0, 0, 0.25],
    "edge_1": [1, 0, 0],
    "edge_2": [0, 1, 0],
    "shape": [6, 7],
}
PLANE: dict[str, Any] = {"set": CRYSTAL, "plane": [1, 1, 0], "width": 6.0, "height": 4.0, "spacing": 0.9}
GRID: dict[str, Any] = {"set": CRYSTAL, "shape": [5, 6, 8]}
BOX: dict[str, Any] = {
    "set": CRYSTAL,
    "origin": [0.1, 0.2, 0.3],
    "edges": [[0.31, 0, 0], [0, 0.27, 0.05], [0, 0, 0.7]],
    "shape": [3, 4, 5],
}
POINTS: dict[str, Any] = {"set": CRYSTAL, "positions": [[0, 0, 0], [0.1, 0.2, 0.3], [-0.7, 1.4, 0.05]]}
GOOD = {"profile": PROFILE, "slice": SLICE, "grid": GRID, "points": POINTS}


def coefficients(given: Mapping[str, Any]) -> CoefficientSet:
    """A request's set by the engine alone."""
    cell = given["cell"]
    if "period" in cell:
        lattice = Lattice.from_period(cell["period"])
    elif "c" in cell:
        lattice = Lattice.from_parameters(*(cell[name] for name in ("a", "b", "c", "alpha", "beta", "gamma")))
    else:
        lattice = Lattice.from_planar_parameters(cell["a"], cell["b"], cell["gamma"])
    names = {1: ("l",), 2: ("h", "k"), 3: ("h", "k", "l")}[lattice.dimension]
    strengths = ("amplitude", "phase_deg", "real", "imag", "sigma", "phase_sigma_deg", "merit")
    phases = given.get("phase_deg")
    mean = given.get("mean")
    return assemble(
        lattice,
        Columns(
            indices=[given[name] for name in names],
            **{
                **{name: given[name] for name in strengths if name in given},
                **({} if phases is None else {"phase_deg": np.array(phases, dtype=float)}),
            },
        ),
        values=given["values"],
        density=given.get("density", "real"),
        mean=complex(mean, given["mean_imag"]) if "mean_imag" in given else mean,
        unit=given.get("unit", "arbitrary"),
    )


def changed(body: Mapping[str, Any], path: str, value: object) -> dict[str, Any]:
    """A copy of a body with the member at a slash-separated path replaced or added."""
    made = copy.deepcopy(dict(body))
    *outer, last = path.split("/")
    place: Any = made
    for name in outer:
        place = place[int(name) if isinstance(place, list) else name]
    place[int(last) if isinstance(place, list) else last] = value
    return made


def without(body: Mapping[str, Any], path: str) -> dict[str, Any]:
    """A copy of a body without the member at a slash-separated path."""
    made = copy.deepcopy(dict(body))
    *outer, last = path.split("/")
    place: Any = made
    for name in outer:
        place = place[name]
    del place[last]
    return made


def bare(body: Mapping[str, Any]) -> dict[str, Any]:
    """A body whose set has no columns."""
    return {**body, "set": {name: value for name, value in body["set"].items() if not isinstance(value, list)}}


def table_of(given: Mapping[str, Any]) -> dict[str, list[float]]:
    """The columns of a set."""
    return {name: value for name, value in given.items() if isinstance(value, list)}


def as_csv(columns: Mapping[str, list[Any]]) -> bytes:
    """Columns as CSV; None becomes an empty field."""
    rows = zip(*columns.values(), strict=True)
    lines = [",".join("" if field is None else repr(field) for field in row) for row in rows]
    return "\n".join([",".join(columns), *lines, ""]).encode()


def as_npz(columns: Mapping[str, Any]) -> bytes:
    """Columns as a NumPy archive; None becomes NaN."""
    packed = io.BytesIO()
    np.savez_compressed(packed, **{name: np.array(column, dtype=float) for name, column in columns.items()})
    return packed.getvalue()


def form(*parts: tuple[str, str, bytes], boundary: str = "frontier", closed: bool = True) -> bytes:
    """A multipart body of (name, media type, data), spelt out so that it can also be spelt wrong."""
    made = bytearray()
    for name, media_type, data in parts:
        head = f'--{boundary}\r\nContent-Disposition: form-data; name="{name}"; filename="{name}"\r\n'
        made += f"{head}Content-Type: {media_type}\r\n\r\n".encode() + data + b"\r\n"
    return bytes(made) + (f"--{boundary}--\r\n".encode() if closed else b"")


FORM = "multipart/form-data; boundary=frontier"


def film_form(*columns: tuple[str, bytes], request: Mapping[str, Any] | None = None) -> bytes:
    """A profile of the film whose columns come as (media type, data)."""
    asked = json.dumps(bare(PROFILE) if request is None else request).encode()
    return form(("request", "application/json", asked), *(("columns", kind, data) for kind, data in columns))


def heavy_grid() -> dict[str, Any]:
    """Seconds of work in little memory: where no transform fits, it has to be summed directly."""
    rng = np.random.default_rng(5)
    indices = np.unique(rng.integers(-60, 61, (60_000, 3)), axis=0)
    indices = indices[indices[:, 2] > 0]
    cell = {"a": 50.0, "b": 60.0, "c": 70.0, "alpha": 80, "beta": 95, "gamma": 100}
    strengths = rng.normal(size=(2, len(indices))).round(3).tolist()
    return {
        "product": "grid",
        "set": {
            "cell": cell,
            "values": "density_coefficient",
            **{name: column.tolist() for name, column in zip("hkl", indices.T, strict=True)},
            "real": strengths[0],
            "imag": strengths[1],
        },
        "origin": [0.1, 0.2, 0.3],
        "edges": [[0.917, 0.1, 0], [0, 0.913, 0.11], [0.12, 0, 0.77]],
        "shape": [200, 150, 150],
    }


HEAVY_LIMITS = {"compute_workers": 1, "compute_threads": 1, "max_memory_bytes": 200 * 2**20}
"""Settings under which `heavy_grid` takes long."""


def film_profile(positions: np.ndarray) -> np.ndarray:
    """The film's density in closed form: centric orders of a stack are cosines."""
    strengths = np.array(FILM["amplitude"]) * np.cos(np.deg2rad(FILM["phase_deg"])) / PERIOD
    return 2 * strengths @ np.cos(2 * np.pi * np.outer(FILM["l"], positions))


SAMPLES = Path(__file__).parents[2] / "sample_requests"
CRYSTAL_FILE = (SAMPLES / "crystal_OR4.cif").read_bytes()
"""Raw intensities of an invented orthorhombic crystal, with equivalents, absences and the phases of its model."""
SCALED = {"scale": {"kind": "wilson", "formula": "SClONC2", "units": 4}}
SCAN_FILE = (SAMPLES / "film_scan.csv").read_bytes()
ORTHORHOMBIC = {"a": 10.0, "b": 12.0, "c": 14.0, "alpha": 90, "beta": 90, "gamma": 90}
AMPLITUDES_FILE = (
    b"h,k,l,amplitude,amplitude_sigma,phase_deg\n1,1,0,10,0.1,30\n2,0,1,20,0.2,180\n0,2,3,5,0.1,\n-1,2,2,7,0.3,-77\n"
)
"""Four rows without symmetry, one of them without a phase."""
AMPLITUDES_SET: dict[str, Any] = {
    "cell": ORTHORHOMBIC,
    "values": "structure_factor",
    "h": [1, 2, 0, -1],
    "k": [1, 0, 2, 2],
    "l": [0, 1, 3, 2],
    "amplitude": [10, 20, 5, 7],
    "sigma": [0.1, 0.2, 0.1, 0.3],
    "phase_deg": [30, 180, None, -77],
}


def reflections_form(request: Mapping[str, Any], file: bytes, media_type: str = "text/csv") -> bytes:
    """A request and a laboratory's file."""
    return form(("request", "application/json", json.dumps(request).encode()), ("reflections", media_type, file))

"""The sample requests, made from invented structures; run as a module to write them anew.

The scenario is our own: a coatings laboratory with a lamellar film, a layered hexagonal crystal,
a molecular crystal without symmetry and a planar ordered phase. None of these substances exists.
Silicon alone is measured; see tests/external/silicon.py for its sources.
"""

from __future__ import annotations

import csv
import io
import json
import math
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy import special

from engine.lattice import Lattice
from engine.series import faces_backward
from tests import samples_films, samples_raw, samples_trust
from tests.external.silicon import deformation_set

FOLDER = Path(__file__).parent.parent / "sample_requests"
INVENTED = "Invented data. "

HEXAGONAL = {"a": 3.02, "b": 3.02, "c": 17.4, "alpha": 90, "beta": 90, "gamma": 120}
TRICLINIC = {"a": 6.1, "b": 7.4, "c": 9.3, "alpha": 82, "beta": 97, "gamma": 105}
PLANAR = {"a": 31.0, "b": 31.0, "gamma": 120}


def build() -> dict[str, dict[str, Any]]:
    """Every sample request by its file's name."""
    hexagonal = crystal_set(HEXAGONAL, HEXAGONAL_ATOMS, d_min=0.8, unit="e/Å³")
    triclinic = crystal_set(TRICLINIC, TRICLINIC_ATOMS, d_min=1.1, unit="e/Å³")
    silicon = deformation_set(forbidden_adds=True)
    film = film_set()
    silicon_set = {
        "cell": dict(zip(("a", "b", "c", "alpha", "beta", "gamma"), silicon.cell, strict=True)),
        "values": "structure_factor",
        "h": silicon.h,
        "k": silicon.k,
        "l": silicon.l,
        "amplitude": [round(value, 5) for value in silicon.amplitude],
        "phase_deg": [round(value, 4) for value in silicon.phase_deg],
        "sigma": [round(value, 5) for value in silicon.sigma],
        "symmetry": {"space_group": "Fd-3m:1", "columns": "full"},
        "mean": 0,
        "unit": "e/Å³",
    }
    return {
        **samples_raw.requests(INVENTED),
        **samples_films.requests(INVENTED),
        **samples_trust.requests(film, triclinic, silicon_set, INVENTED),
        "film_profile.json": {
            "product": "profile",
            "remark": INVENTED + "Lamellar film FG-7: twelve orders of a mirror-symmetric stack, e/Å³.",
            "set": film,
            "from": [0],
            "to": [1],
            "samples": 521,
        },
        "film_from_table.json": {
            "product": "profile",
            "remark": INVENTED + "The same film; its columns are in film_orders.csv.",
            "set": {key: value for key, value in film.items() if not isinstance(value, list)},
            "along": [1],
            "samples": 521,
            "window": {"kind": "lanczos"},
        },
        "hexagonal_slice.json": {
            "product": "slice",
            "remark": INVENTED + "Layered hexagonal crystal HX-3: the metal layer, parallel to (001).",
            "set": hexagonal,
            "plane": [0, 0, 1],
            "offset": 4.35,
            "width": 12.0,
            "height": 9.0,
            "spacing": 0.1,
        },
        "hexagonal_stacking.json": {
            "product": "profile",
            "remark": INVENTED + "The same crystal: its density along the normal of the layers, laterally averaged.",
            "set": hexagonal,
            "normal_to": [0, 0, 1],
            "average": "lateral",
            "samples": 349,
        },
        "oblique_slice.json": {
            "product": "slice",
            "remark": INVENTED + "Molecular crystal TM-1: the plane through its three heaviest atoms.",
            "set": triclinic,
            "coordinates": "cartesian",
            **_through_three_atoms(),
            "shape": [120, 100],
        },
        "triclinic_grid.json": {
            "product": "grid",
            "remark": INVENTED + "The same crystal: its whole cell, samples at most 0.3 Å apart.",
            "set": triclinic,
            "spacing": 0.3,
            "window": {"kind": "gaussian", "b": 2.0},
        },
        "points.json": {
            "product": "points",
            "remark": INVENTED + "The same crystal: the density at its atoms and halfway between two of them.",
            "set": triclinic,
            "positions": [
                *(list(position) for _, position in TRICLINIC_ATOMS),
                np.mean([TRICLINIC_ATOMS[0][1], TRICLINIC_ATOMS[1][1]], axis=0).round(4).tolist(),
            ],
        },
        "planar_phase.json": {
            "product": "grid",
            "remark": INVENTED + "Planar ordered phase PL-2: one cell of a hexagonal array of rods.",
            "set": planar_set(),
            "shape": [64, 64],
        },
        "silicon_bond.json": {
            "product": "slice",
            "remark": "Measured. Static deformation density of silicon in the plane (1 -1 0) through a chain of bonds.",
            "set": {name: value for name, value in silicon_set.items() if name not in ("sigma", "symmetry")},
            "plane": [1, -1, 0],
            "width": 8.0,
            "height": 6.0,
            "spacing": 0.05,
            "centre": [0.125, 0.125, 0.125],
        },
    }


HEXAGONAL_ATOMS = [
    (24.0, (0.0, 0.0, 0.25)),
    (24.0, (1 / 3, 2 / 3, 0.75)),
    (16.0, (2 / 3, 1 / 3, 0.159)),
    (16.0, (2 / 3, 1 / 3, 0.341)),
    (16.0, (0.0, 0.0, 0.659)),
    (16.0, (0.0, 0.0, 0.841)),
]
"""Electrons and fractional position."""

TRICLINIC_ATOMS = [
    (17.0, (0.112, 0.205, 0.331)),
    (16.0, (0.402, 0.518, 0.247)),
    (15.0, (0.655, 0.281, 0.603)),
    (8.0, (0.253, 0.377, 0.152)),
    (7.0, (0.871, 0.734, 0.418)),
    (6.0, (0.540, 0.802, 0.873)),
]


def crystal_set(
    cell: dict[str, float], atoms: list[tuple[float, tuple[float, ...]]], *, d_min: float, unit: str
) -> dict[str, Any]:
    """Structure factors of point atoms with B = 3 Å² at their electrons' number, one of each pair."""
    lattice = Lattice.from_parameters(**cell)
    indices = half_within(lattice, d_min)
    electrons = np.array([z for z, _ in atoms])
    positions = np.array([x for _, x in atoms])
    falloff = np.exp(-3.0 * lattice.sine_over_wavelength(indices) ** 2)
    factors = falloff * (np.exp(2j * np.pi * indices @ positions.T) @ electrons)
    seen = np.abs(factors) > 0.05
    indices, factors = indices[seen], factors[seen]
    return {
        "cell": cell,
        "values": "structure_factor",
        **dict(zip("hkl", indices.T.tolist(), strict=True)),
        "amplitude": np.abs(factors).round(3).tolist(),
        "phase_deg": _degrees(factors),
        "sigma": np.hypot(0.04, 0.01 * np.abs(factors)).round(3).tolist(),
        "mean": float(electrons.sum()),
        "unit": unit,
    }


def film_set() -> dict[str, Any]:
    """Twelve orders of a stack of sheets that mirror each other about the middle of the period."""
    orders, factors = samples_raw.film_factors()
    return {
        "cell": {"period": samples_raw.FILM_PERIOD},
        "values": "structure_factor",
        "l": orders.tolist(),
        "amplitude": np.abs(factors).round(4).tolist(),
        "phase_deg": np.where(factors < 0, 180, 0).tolist(),
        "sigma": np.hypot(0.008, 0.02 * np.abs(factors)).round(4).tolist(),
        "mean": round(0.36 * samples_raw.FILM_PERIOD, 3),
        "unit": "e/Å³",
    }


def texts() -> dict[str, str]:
    """Every sample file that is not a request, by its name."""
    return {
        "film_orders.csv": film_table(),
        "film_scan.csv": samples_raw.film_scan(),
        "crystal_OR4.cif": samples_raw.crystal_cif(),
        "coating_scan.csv": samples_films.table(),
    }


def film_table() -> str:
    """The film's orders as CSV."""
    film = film_set()
    names = ["l", "amplitude", "phase_deg", "sigma"]
    text = io.StringIO()
    text.write("# Invented data: film FG-7, structure factors in electrons per Å² of the layer\n")
    writer = csv.writer(text, lineterminator="\n")
    writer.writerow(names)
    writer.writerows(zip(*(film[name] for name in names), strict=True))
    return text.getvalue()


def planar_set() -> dict[str, Any]:
    """Rods of radius 9 Å on a hexagonal lattice, their edges softened."""
    lattice = Lattice.from_planar_parameters(**PLANAR)
    indices = half_within(lattice, 6.0)
    x = lattice.magnitudes(indices) * 9.0
    values = 0.35 * 2 * special.j1(x) / x * np.pi * 81 / lattice.volume * np.exp(-((x / 9) ** 2) * 2)
    return {
        "cell": PLANAR,
        "values": "density_coefficient",
        **dict(zip("hk", indices.T.tolist(), strict=True)),
        "real": values.round(7).tolist(),
        "imag": np.zeros(values.size).tolist(),
        "mean": 0.33,
        "unit": "e/Å³",
    }


def half_within(lattice: Lattice, d_min: float) -> NDArray[np.int64]:
    """One of each pair ±m, the zero term left out, with d ≥ d_min."""
    # |m_i| ≤ |a_i|/d_min, since m_i = G·a_i / 2π.
    bounds = [math.floor(length / d_min) for length in lattice.lengths]
    mesh = np.meshgrid(*(np.arange(-bound, bound + 1) for bound in bounds), indexing="ij")
    indices = np.stack([axis.ravel() for axis in mesh], axis=1)
    wanted = indices.any(axis=1) & ~faces_backward(indices) & (lattice.spacings(indices) >= d_min)
    return indices[wanted]


def _degrees(factors: NDArray[np.complex128]) -> list[float]:
    return (np.degrees(np.angle(factors)).round(2) + 0.0).tolist()


def _through_three_atoms() -> dict[str, list[float]]:
    """Origin and edges (Cartesian, Å) of a rectangle through the three heaviest atoms."""
    lattice = Lattice.from_parameters(**TRICLINIC)
    first, second, third = (lattice.to_cartesian(np.array(x)) for _, x in TRICLINIC_ATOMS[:3])
    across = (second - first) / np.linalg.norm(second - first)
    up = third - first
    up = up - (up @ across) * across
    up = up / np.linalg.norm(up)
    corner = (first + second + third) / 3 - 6.0 * across - 5.0 * up
    return {
        "origin": corner.round(4).tolist(),
        "edge_1": (12.0 * across).round(4).tolist(),
        "edge_2": (10.0 * up).round(4).tolist(),
    }


def main() -> None:
    """Write all files."""
    for name, request in build().items():
        (FOLDER / name).write_text(json.dumps(request, ensure_ascii=False, separators=(", ", ": ")) + "\n")
    for name, text in texts().items():
        (FOLDER / name).write_text(text)


if __name__ == "__main__":
    main()

"""Sample requests about trust: uncertainties, resolution, features, differences, series. Invented but for silicon."""

from __future__ import annotations

from typing import Any

import numpy as np

HUMIDITY = (5.0, 35.0, 65.0, 95.0)
"""Per cent; of an invented run."""


def requests(film: dict[str, Any], triclinic: dict[str, Any], silicon: dict[str, Any], invented: str) -> dict[str, Any]:
    """Sample requests by their files' names."""
    measured = {**triclinic, "sigma": (0.03 * np.array(triclinic["amplitude"]) + 0.4).round(4).tolist()}
    later = {**film, "amplitude": aged(film["amplitude"], film["l"])}
    return {
        "film_uncertainty.json": {
            "product": "profile",
            "remark": invented + "The film FG-7 with error bars; orders beyond the last as strong as a bound allows.",
            "set": {**film, "scale_sigma": 0.02},
            "from": [0],
            "to": [1],
            "samples": 521,
            "uncertainty": True,
            "unmeasured": {"amplitude": 0.12, "b": 60.0},
            "picture": {"title": "FG-7, an invented film", "mark_layers": True},
        },
        "silicon_uncertainty.json": {
            "product": "slice",
            "remark": "Silicon's deformation density with the uncertainty that the measured factors give it.",
            "set": silicon,
            "coordinates": "fractional",
            "origin": [-0.1, -0.1, -0.2],
            "edge_1": [0.75, 0.75, 0.0],
            "edge_2": [0.0, 0.0, 0.8],
            "shape": [161, 121],
            "uncertainty": True,
            "picture": {"title": "Silicon, deformation density", "level_step": 0.05},
        },
        "triclinic_significance.json": {
            "product": "slice",
            "remark": invented + "TM-1 in units of its standard uncertainty, on the plane (001) at 4.5 Å.",
            "set": measured,
            "plane": [0, 0, 1],
            "offset": 4.5,
            "width": 10.0,
            "height": 8.0,
            "spacing": 0.1,
            "quantity": "significance",
        },
        "film_kept.json": {
            "product": "keep",
            "remark": invented + "The film FG-7 with error bars, for the store.",
            "set": film,
            "name": "Film FG-7, invented",
            "tags": ["invented", "film"],
        },
        "triclinic_surface.json": {
            "product": "grid",
            "remark": invented + "A closed surface of the density of TM-1, as a mesh.",
            "set": measured,
            "spacing": 0.1,
            "surface": {"level_rms": 2.0, "closed": True},
        },
        "triclinic_extrema.json": {
            "product": "extrema",
            "remark": invented + "The atoms of TM-1 as maxima, with distances up to 2.5 Å.",
            "set": measured,
            "kinds": ["maximum"],
            "least_value": 5.0,
            "within": 2.5,
        },
        "triclinic_statistics.json": {
            "product": "statistics",
            "remark": invented + "How the values of TM-1 are distributed over the cell.",
            "set": triclinic,
            "bins": 24,
        },
        "film_layers.json": {
            "product": "layers",
            "remark": invented + "The layers of FG-7, each with its uncertainties.",
            "set": {**film, "scale_sigma": 0.02},
            "along": [1],
            "least_significance": 3.0,
        },
        "film_integrals.json": {
            "product": "integrals",
            "remark": invented + "Electrons per Å² in a sheet of FG-7 and in the gallery beside it.",
            "set": {**film, "scale_sigma": 0.02},
            "regions": [
                {"kind": "slab", "label": "sheet", "from": -6.0, "to": 6.0},
                {"kind": "slab", "label": "gallery", "from": 6.0, "to": 20.0},
            ],
        },
        "film_windows.json": {
            "product": "windows",
            "remark": invented + "What each termination window would do to FG-7.",
            "set": film,
        },
        "film_compare.json": {
            "product": "compare",
            "remark": invented + "FG-7 before and after a week at high humidity.",
            "set": film,
            "with": later,
        },
        "film_difference.json": {
            "product": "profile",
            "remark": invented + "FG-7 after the week less before it, each with its own phases.",
            "set": later,
            "combination": {"kind": "difference", "with": film, "scale": {"kind": "as_given"}},
            "from": [0],
            "to": [1],
            "samples": 261,
            "uncertainty": True,
        },
        "film_humidity.json": {
            "product": "series",
            "remark": invented + "FG-7 along a humidity run.",
            "set": film,
            "variable": "relative humidity",
            "variable_unit": "%",
            "members": [
                {"value": value, "set": {"amplitude": aged(film["amplitude"], film["l"], value / 100)}}
                for value in HUMIDITY
            ],
            "profile": {"from": [0], "to": [1], "samples": 131},
            "scale": {"kind": "fitted"},
            "uncertainty": True,
        },
    }


def aged(amplitude: list[float], orders: list[int], share: float = 1.0) -> list[float]:
    """Amplitudes of the film with wider sheets: high orders lose a part that grows with the share."""
    order = np.array(orders)
    return (np.array(amplitude) * np.exp(-0.004 * share * order**2)).round(4).tolist()

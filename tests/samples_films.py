"""Sample requests about films: an invented coating of swelling layered sheets, followed through a humidity run.

The scenario is ours: a workshop that makes moisture-barrier coatings from the sheet silicate SB-2, which does not
exist. One mirror-symmetric sheet, 6.4 Å thick, stands in water; the gallery widens with humidity.
"""

from __future__ import annotations

import io
from typing import Any

import numpy as np
from numpy.typing import NDArray

WAVELENGTH = 1.5406
WATER = 0.334
"""e/Å³."""
RUN = {10.0: 16.2, 35.0: 17.4, 60.0: 18.8, 85.0: 20.6}
"""Relative humidity, %, and period, Å."""
ORDERS = 7
SHARES = (0.08, 0.35, 0.7, 1.0)
"""Of heavy water."""
CORRECTIONS = [{"kind": "lorentz", "geometry": "film_part_of_arc"}, {"kind": "polarisation"}]


def transform(q: NDArray[np.float64]) -> NDArray[np.float64]:
    """Of the sheet less the water that it displaces, e/Å²: a slab, a plane in its middle and two beside it."""
    slab = 2 * 0.55 * np.sin(3.2 * q) / q * np.exp(-((0.45 * q) ** 2) / 2)
    planes = 2.6 * np.cos(2.15 * q) * np.exp(-((0.4 * q) ** 2) / 2) + 1.8 * np.exp(-((0.45 * q) ** 2) / 2)
    return np.asarray(slab + planes)


def mean_density(period: float) -> float:
    """e/Å³ of a period: water, and the excess of one sheet."""
    return WATER + (2 * 0.55 * 3.2 + 2.6 + 1.8) / period


def scan(period: float, seed: int) -> dict[str, list[float]]:
    """Lines of a scan in symmetric reflection, with noise."""
    rng = np.random.default_rng(seed)
    order = np.arange(1, ORDERS + 1)
    theta = np.arcsin(WAVELENGTH * order / (2 * period))
    geometry = (1 + np.cos(2 * theta) ** 2) / 2 / (np.sin(theta) * np.sin(2 * theta))
    true = 50 * transform(2 * np.pi * order / period) ** 2 * geometry
    sigma = 0.03 * true + 3
    width = np.hypot(0.1, 0.012 * order) + 0.04
    return {
        "two_theta_deg": (np.degrees(2 * theta) + 0.01 + 0.005 * rng.normal(size=ORDERS)).round(4).tolist(),
        "position_sigma": [0.005] * ORDERS,
        "intensity": (true + sigma * rng.normal(size=ORDERS)).round(1).tolist(),
        "intensity_sigma": sigma.round(1).tolist(),
        "width": (width + 0.003 * rng.normal(size=ORDERS)).round(4).tolist(),
        "width_sigma": [0.004] * ORDERS,
    }


def table() -> str:
    """The scan at 60 % relative humidity as a table."""
    columns = scan(RUN[60.0], 3)
    text = io.StringIO()
    text.write(",".join(columns) + "\n")
    for row in zip(*columns.values(), strict=True):
        text.write(",".join(f"{value:g}" for value in row) + "\n")
    return text.getvalue()


def requests(invented: str) -> dict[str, Any]:
    """Sample requests by their files' names."""
    period = RUN[60.0]
    task = {
        "spacing": {"zero_shift": True},
        "corrections": CORRECTIONS,
        "unit": "e/Å³",
        "regions": [{"name": "sheet", "from": -4.5, "to": 4.5}],
        "instrument_width": 0.1,
    }
    return {
        "coating_film.json": {
            "product": "film",
            "remark": invented + "Coating of SB-2 at 60 % humidity: from the order table coating_scan.csv to a report.",
            "scan": {"wavelength": WAVELENGTH},
            **task,
            "phases": {
                "criteria": {
                    "non_negative": {"floor": 0.2},
                    "flat": [{"from": period / 2 - 3.5, "to": period / 2 + 3.5, "sigma": 0.02}],
                    "least_structure": {"weight": 0.5},
                }
            },
            "facts": [
                {"kind": "mean", "value": round(mean_density(period), 3), "sigma": 0.01},
                {"kind": "density", "from": period / 2 - 3, "to": period / 2 + 3, "value": WATER, "sigma": 0.01},
            ],
            "area": 24.0,
        },
        "coating_run.json": {
            "product": "film_run",
            "remark": invented + "The coating along a humidity run; its swelling gives the signs.",
            "scan": {"wavelength": WAVELENGTH},
            **task,
            "facts": [
                {"kind": "density", "from": 5.2, "to": 8.0, "value": WATER, "sigma": 0.01},
                {"kind": "total", "from": -4.5, "to": 4.5, "value": 10.93, "sigma": 0.2},
            ],
            "variable": "relative humidity",
            "variable_unit": "%",
            "phases": {"swelling": {"kind": "excess", "sign": "positive"}},
            "members": [
                {"value": humidity, "scan": scan(length, 1 + number)}
                for number, (humidity, length) in enumerate(RUN.items())
            ],
        },
        "coating_swelling.json": {
            "product": "film_swelling",
            "remark": invented + "Signs of the coating's orders from the continuity of one sheet's transform.",
            "sets": [_amplitudes(length, 10 + number) for number, length in enumerate(RUN.values())],
            "orientation": {"kind": "excess", "sign": "positive"},
        },
        "coating_contrast.json": {
            "product": "film_contrast",
            "remark": invented + "Neutrons at 10 % humidity in mixtures of light and heavy water: signs by contrast.",
            "sets": [_contrast(share, 20 + number) for number, share in enumerate(SHARES)],
            "exchange": "edge",
        },
        "coating_trial.json": {
            "product": "film_trial",
            "remark": invented + "A trial sheet against the amplitudes at 60 % humidity, refined.",
            "orders": {**_amplitudes(period, 12), "absolute": True, "unit": "e/Å³"},
            "parts": [
                {"kind": "slab", "name": "sheet", "lower": -3.0, "upper": 3.0, "density": 0.8, "roughness": 0.4},
                {"kind": "plane", "name": "middle", "position": 0.0, "strength": 1.5, "width": 0.4},
                {"kind": "plane", "name": "oxygen", "position": 2.0, "strength": 1.2, "width": 0.4},
            ],
            "background": WATER,
            "refine": ["middle.strength", "oxygen.strength", "oxygen.position", "sheet.density"],
        },
    }


def neutron(order: NDArray[np.float64], share: float) -> NDArray[np.float64]:
    """F of the coating at 10 % humidity, a slab with rough edges and a sheet of water about z = d/2; 1e-6 / Å."""
    q = 2 * np.pi * order / RUN[10.0]
    sheet = 8.8 * np.sin(3.2 * q) / q * np.exp(-((0.4 * q) ** 2) / 2)
    return np.asarray(sheet + share * 13.0 * np.exp(-((0.8 * q) ** 2) / 2) * (-1.0) ** order)


def _contrast(share: float, seed: int) -> dict[str, Any]:
    rng = np.random.default_rng(seed)
    order = np.arange(1, ORDERS + 1)
    true = np.abs(neutron(order.astype(float), share))
    sigma = 0.01 * true + 0.05
    return {
        "contrast": share,
        "period": RUN[10.0],
        "order": order.tolist(),
        "amplitude": np.abs(true + sigma * rng.normal(size=ORDERS)).round(4).tolist(),
        "sigma": sigma.round(4).tolist(),
        "unit": "10⁻⁶ Å⁻²",
    }


def _amplitudes(period: float, seed: int) -> dict[str, Any]:
    rng = np.random.default_rng(seed)
    order = np.arange(1, ORDERS + 1)
    true = np.abs(transform(2 * np.pi * order / period))
    sigma = 0.015 * true + 0.02
    return {
        "period": period,
        "order": order.tolist(),
        "amplitude": np.abs(true + sigma * rng.normal(size=ORDERS)).round(4).tolist(),
        "sigma": sigma.round(4).tolist(),
    }

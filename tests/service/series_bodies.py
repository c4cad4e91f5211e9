"""Good requests for series, small and invented."""

from __future__ import annotations

from typing import Any

from tests.service.analyses.asked import FEW, FILM, LATER

LAST: dict[str, Any] = {
    **FILM,
    "amplitude": [13.5, 39.0, 8.0, 24.0],
    "phase_deg": [0, 180, 180, 0],
    "sigma": [0.9, 0.2, 0.5, 0.1],
}
SERIES: dict[str, Any] = {
    "set": FILM,
    "variable": "temperature",
    "variable_unit": "K",
    "members": [
        {"value": 290.0, "set": {}},
        {"value": 310.0, "set": {"amplitude": LATER["amplitude"]}},
        {"value": 330.0, "set": {name: LAST[name] for name in ("amplitude", "phase_deg", "sigma")}},
    ],
    "profile": {"from": [0], "to": [1], "samples": 17},
    "scale": {"kind": "as_given"},
}
MEMBERS: list[dict[str, Any]] = [FILM, LATER, LAST]
"""The sets of the members, each whole."""
SLICES: dict[str, Any] = {
    "set": FEW,
    "members": [{"value": 1.0, "set": {}}, {"value": 2.0, "set": {"amplitude": [21.0, 16.0, 15.0, 6.5, 4.0]}}],
    "slice": {"plane": [0, 0, 1], "width": 5.0, "height": 4.0, "spacing": 1.0},
    "scale": {"kind": "fitted"},
}

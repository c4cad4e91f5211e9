"""What a measured set resolves, what its end does to a density, and what is not in it.

response.py    width and ripple of a point in the series that is summed (widths.py, ripple.py)
windows.py     termination windows side by side, on the same coefficients
region.py      the lattice points among which a set's coefficients lie
coverage.py    how many of them were measured, and the lowest orders that were not
envelope.py    how strong a term is to be expected
unmeasured.py  what the terms that were not measured could do to the density
advice.py      plain words where a request and the data do not fit each other
"""

from engine.resolution.advice import advice
from engine.resolution.coverage import Coverage, coverage
from engine.resolution.envelope import Envelope
from engine.resolution.response import PointResponse, point_response
from engine.resolution.unmeasured import Unmeasured, largest, missing_beyond, missing_inside, unmeasured
from engine.resolution.windows import WindowEffect, compare_windows, usual_windows

__all__ = [
    "Coverage",
    "Envelope",
    "PointResponse",
    "Unmeasured",
    "WindowEffect",
    "advice",
    "compare_windows",
    "coverage",
    "largest",
    "missing_beyond",
    "missing_inside",
    "point_response",
    "unmeasured",
    "usual_windows",
]

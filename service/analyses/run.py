"""Which analysis answers which request."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

from engine.coefficients import CoefficientSet
from service.analyses.compare import compare
from service.analyses.extrema import extrema
from service.analyses.features import features
from service.analyses.integrals import integrals
from service.analyses.layers import layers
from service.analyses.report import Limits, Report
from service.analyses.statistics import statistics
from service.analyses.windows import windows
from service.schemas.treatment import SetRequestIn

_ANALYSERS: dict[str, Callable[[Any, CoefficientSet, Limits], Report]] = {
    "extrema": extrema,
    "integrals": integrals,
    "layers": layers,
    "statistics": statistics,
    "features": features,
    "windows": windows,
    "compare": compare,
}
"""Each takes the model that `service.schemas.analyses.ANALYSES` has under the same name."""


def analyse(product: str, request: SetRequestIn, coefficients: CoefficientSet, limits: Limits) -> Report:
    """Answer a checked request for an analysis.

    Raises
    ------
    Problem
        The request cannot be carried out, or would exceed a limit.
    """
    return _ANALYSERS[product](request, coefficients, limits)

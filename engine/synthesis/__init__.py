"""The sum itself: n(r) = Σ n_G exp(iG·r) at the samples of a line, plane, box, cell or points."""

from engine.synthesis.blocks import Progress, fill, stream
from engine.synthesis.estimate import (
    DEFAULT_TOLERANCE,
    Demand,
    Estimate,
    Method,
    Precision,
    Source,
    result_dtype,
)
from engine.synthesis.plan import Plan, plan

__all__ = [
    "DEFAULT_TOLERANCE",
    "Demand",
    "Estimate",
    "Method",
    "Plan",
    "Precision",
    "Progress",
    "Source",
    "fill",
    "plan",
    "result_dtype",
    "stream",
]

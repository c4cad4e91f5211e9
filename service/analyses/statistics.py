"""Moments and histogram of a field."""

from __future__ import annotations

from dataclasses import asdict

from engine.coefficients import CoefficientSet
from engine.features.distribution import distribution
from engine.synthesis import Demand
from service import interpret
from service.analyses.common import OF_SET, heading, told
from service.analyses.report import Column, Limits, Report
from service.problems import located
from service.schemas.analyses import StatisticsIn

NUMBERS = (
    "samples",
    "shape",
    "mean",
    "rms",
    "standard_deviation",
    "skewness",
    "excess_kurtosis",
    "minimum",
    "maximum",
    "fraction_negative",
    "exact_moments",
)


def statistics(request: StatisticsIn, coefficients: CoefficientSet, limits: Limits) -> Report:
    """Distribution of the values over the whole cell.

    Raises
    ------
    Problem
        Pointing to the place in the body.
    """
    treatment = interpret.treatment(request, coefficients.lattice)
    with located(renamed={**OF_SET, "samples": ("spacing",)}):
        made = distribution(
            coefficients,
            treatment,
            spacing=request.spacing,
            bins=request.bins,
            demand=Demand(threads=limits.threads),
            max_bytes=limits.max_bytes,
        )
    document = heading(
        "statistics", coefficients, unit=made.unit, contains=(), omits=(), applied=made.applied, notes=made.notes
    )
    every = asdict(made)
    document |= {name: every[name] for name in NUMBERS}
    document["histogram"] = {"edges": made.edges, "counts": made.counts}
    table: tuple[Column, ...] = (("lower", made.edges[:-1]), ("upper", made.edges[1:]), ("count", made.counts))
    return Report(
        document=document, table=table, told=told(document), figures={name: document[name] for name in NUMBERS}
    )

"""Agreement of two densities."""

from __future__ import annotations

from dataclasses import asdict

from engine.coefficients import CoefficientSet
from engine.features.comparison import compare as compare_densities
from service import interpret_combination
from service.analyses.common import heading, rows, table_of, told
from service.analyses.report import Limits, Report
from service.problems import at, located
from service.schemas.analyses import CompareIn

NUMBERS = (
    "matched",
    "first_only",
    "second_only",
    "correlation",
    "scale",
    "scale_sigma",
    "offset",
    "rms_difference",
    "rms_residual",
    "r_value",
    "amplitude_scale",
    "amplitude_r_value",
    "mean_cosine",
    "mean_phase_difference",
)


def compare(request: CompareIn, coefficients: CoefficientSet, limits: Limits) -> Report:
    """Compare the set with the second one of the request.

    Raises
    ------
    Problem
        Pointing to the place in the body.
    """
    other = interpret_combination.other_set(request, request.other, ("with",), max_coefficients=limits.max_rows)
    for name, one in (("set", coefficients), ("with", other)):
        if not one.phase_known.any():
            raise at((name, "phase_deg"), "is known of no coefficient", "give phases")
    with located(renamed={"set": ("set",), "with": ("with",), "lattice": ("with", "cell")}):
        made = compare_densities(coefficients, other, terms=request.terms, shells=request.shells, names=("set", "with"))
    document = heading(
        "compare",
        coefficients,
        unit=coefficients.unit,
        contains=made.contains,
        omits=made.omits,
        applied=(*coefficients.history, *made.assumptions),
        notes=made.notes,
    )
    every = {name: getattr(made, name) for name in NUMBERS}
    document |= every
    shells = asdict(made.shells)
    document["shells"] = rows(shells)
    return Report(document=document, table=table_of(shells), told=told(document), figures=every)

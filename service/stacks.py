"""From the request of a series to its stack of fields."""

from __future__ import annotations

import math

from engine.combination import StackedField, Variable, aligned, evaluate_stack
from engine.synthesis import Demand, Progress
from service import interpret, interpret_combination
from service.problems import at, located
from service.schemas.series import SeriesIn
from service.settings import Settings


def stack(request: SeriesIn, settings: Settings, *, threads: int, progress: Progress | None = None) -> StackedField:
    """Compute the stack of a checked request.

    Raises
    ------
    Problem
        The request cannot be carried out, or would exceed a limit.
    """
    if (request.profile is None) == (request.slice is None):
        raise at(("profile",), "and slice are both given or both absent", "give one of the two")
    if request.combination is not None:
        raise at(("combination",), "has no meaning for a series", 'leave it out, or ask for "difference": true')
    if request.reference > len(request.members):
        raise at(("reference",), f"is {request.reference} of {len(request.members)} members", "name one of them")
    sets = [
        interpret_combination.other_set(
            request, member.set, ("members", number, "set"), max_coefficients=settings.max_coefficients
        )
        for number, member in enumerate(request.members)
    ]
    lattice = sets[0].lattice
    if request.profile is not None:
        with located("profile"):
            sampling = interpret.line(request.profile, lattice, request.coordinates, request.profile.samples)
    else:
        with located("slice"):
            sampling = interpret.plane(request.slice, lattice, request.coordinates)  # type: ignore[arg-type]
    samples = math.prod(sampling.shape) * len(sets)
    if samples > settings.max_samples:
        raise at(
            ("members",),
            f"ask for {samples:,} samples in all, more than the limit of {settings.max_samples:,}",
            "ask for fewer, or have the limit raised",
            kind="too-costly",
        )
    treatment = interpret.treatment(request, lattice)
    demand = Demand(precision=request.precision, tolerance=request.tolerance, threads=threads)
    with located(renamed={"sets": ("members",), "sigma": ("members",), "phase_deg": ("members",)}):
        variable = Variable.of(request.variable, [member.value for member in request.members], request.variable_unit)
        series = aligned(
            sets,
            variable,
            scale=interpret_combination.scale_choice(request.scale),
            reference=request.reference - 1,
            common=request.common,
            phases=request.phases,
        )
        return evaluate_stack(
            series,
            sampling,
            treatment,
            demand,
            difference=request.difference,
            uncertainty=request.uncertainty,
            max_bytes=settings.max_memory_bytes,
            progress=progress,
        )

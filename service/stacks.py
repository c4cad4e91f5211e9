"""From the request of a series to its stack of fields."""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from contextlib import contextmanager

import numpy as np

from engine.coefficients import CoefficientSet
from engine.combination import StackedField, Variable, aligned, evaluate_stack
from engine.combination.matching import check_alike
from engine.errors import InputError, TransformError
from engine.sampling import AffineGrid
from engine.synthesis import Demand, Progress
from service import interpret, interpret_combination
from service.encoders.stack import require_form
from service.problems import at, below, located
from service.schemas.series import SeriesIn
from service.settings import Settings


def stack(
    request: SeriesIn, settings: Settings, form: str | None = None, *, threads: int, progress: Progress | None = None
) -> StackedField:
    """Compute the stack of a checked request.

    Parameters
    ----------
    form : str or None
        What it will be written as; one that cannot hold it is refused before the work.

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
    sets = _sets(request, settings)
    sampling = _sampling(request, sets[0])
    samples = math.prod(sampling.shape) * len(sets)
    if samples > settings.max_samples:
        raise at(
            ("members",),
            f"ask for {samples:,} samples in all, more than the limit of {settings.max_samples:,}",
            "ask for fewer, or have the limit raised",
            kind="too-costly",
        )
    require_form(form, request, samples, settings)
    treatment = interpret.treatment(request, sets[0].lattice)
    demand = Demand(precision=request.precision, tolerance=request.tolerance, threads=threads)
    variable = Variable.of(request.variable, [member.value for member in request.members], request.variable_unit)
    size = ("profile" if request.slice is None else "slice",)
    with located(renamed={"sets": ("members",), "phase_deg": ("members",), "sigma": ("members",), "samples": size}):
        with _members_named(variable):
            series = aligned(
                sets,
                variable,
                scale=interpret_combination.scale_choice(request.scale, sets),
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


def _sets(request: SeriesIn, settings: Settings) -> list[CoefficientSet]:
    """The sets of all members, found to fit together."""
    sets = [
        interpret_combination.other_set(
            request, member.set, ("members", number, "set"), max_coefficients=settings.max_coefficients
        )
        for number, member in enumerate(request.members)
    ]
    reference = sets[request.reference - 1]
    for number, one in enumerate(sets):
        place = ("members", number, "set")
        with located(renamed={"member": place}):
            check_alike((reference, one), ("the reference", "member"))
        if not one.phase_known.any() and (request.phases == "own" or one is reference):
            raise at((*place, "phase_deg"), "is known of no coefficient", "give phases")
        errors = (one.sigma, one.phase_sigma, one.merit, one.plane_errors)
        if request.uncertainty and not one.scale_sigma and all(column is None for column in errors):
            raise at(
                (*place, "sigma"), "is absent, and uncertainties are asked for", "give it, or leave uncertainty out"
            )
    return sets


def _sampling(request: SeriesIn, reference: CoefficientSet) -> AffineGrid:
    if request.profile is not None:
        with below("profile"):
            return interpret.line(request.profile, reference.lattice, request.coordinates, request.profile.samples)
    with below("slice"):
        return interpret.plane(request.slice, reference.lattice, request.coordinates)  # type: ignore[arg-type]


@contextmanager
def _members_named(variable: Variable) -> Iterator[None]:
    """The engine calls a set by its value of the variable; a request, by its number."""
    try:
        yield
    except (TransformError, np.linalg.LinAlgError) as fault:
        raise InputError(*interpret_combination.NOT_FITTED) from fault
    except InputError as fault:
        labels = [variable.label(number) for number in range(variable.values.size)]
        path: Sequence[str | int] = fault.path
        if len(path) == 2 and path[0] == "scale" and path[1] in labels:
            path = path[1:]
        if path and path[0] in labels:
            path = ("members", labels.index(str(path[0])), "set", *path[1:])
        raise InputError(path, fault.reason, fault.cure) from fault

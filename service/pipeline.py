"""One request, from bytes to bytes: the code path under the service and the command line alike."""

from __future__ import annotations

import math
import time
from collections.abc import Callable
from dataclasses import dataclass

from engine.coefficients import CoefficientSet
from engine.evaluate import Field, Work, prepare
from engine.synthesis import Demand, Progress
from service import interpret
from service.encoders.write import write
from service.problems import Problem, at, located
from service.schemas.products import ProductIn
from service.settings import Settings
from service.spool import Spool

Watch = Callable[[Work], Progress | None]
"""Told of the work before it starts; answers with what wants to know of its progress."""


@dataclass(frozen=True, slots=True)
class Done:
    """A finished request: what was computed, and how long it took."""

    coefficients: CoefficientSet
    field: Field
    seconds: float


def run(
    product: str,
    request: ProductIn,
    form: str,
    spool: Spool,
    settings: Settings,
    *,
    threads: int,
    watch: Watch | None = None,
) -> Done:
    """Interpret, cost, compute and encode a checked request.

    Nothing is allocated before the estimate has passed the limits.

    Raises
    ------
    Problem
        The request cannot be carried out, or would exceed a limit.
    """
    begin = time.perf_counter()
    coefficients = interpret.coefficient_set(request, max_coefficients=settings.max_coefficients)
    sampling = interpret.samples(request, coefficients.lattice)
    wanted = math.prod(sampling.shape)
    if wanted > settings.max_samples:
        raise at(
            (_place_of_size(request),),
            f"asks for {wanted:,} samples, more than the limit of {settings.max_samples:,}",
            "ask for fewer, or have the limit raised",
            kind="too-costly",
        )
    treatment = interpret.treatment(request, coefficients.lattice)
    demand = Demand(precision=request.precision, tolerance=request.tolerance, threads=threads)
    with located(renamed={"phase_deg": ("set", "phase_deg"), "samples": (_place_of_size(request),)}):
        work = prepare(coefficients, sampling, treatment, demand, max_bytes=settings.max_memory_bytes)
    numbers = math.prod(work.shape) * (2 if work.dtype.kind == "c" else 1)
    if form in ("json", "csv") and numbers > settings.max_json_values:
        raise Problem(
            "too-costly",
            f"The answer has {numbers:,} numbers, more than the {settings.max_json_values:,} that are written as "
            f"{form.upper()}. Ask for application/x-npy or application/x-npz.",
        )
    progress = None if watch is None else watch(work)
    field = write(product, work, form, spool, progress)
    if not math.isfinite(field.statistics.rms):
        raise at(
            ("set",),
            f"gives values whose squares overflow in {request.precision} precision",
            "state the columns in a larger unit, or ask for double precision",
        )
    return Done(coefficients, field, time.perf_counter() - begin)


def _place_of_size(request: ProductIn) -> str:
    """The member that sets how many samples there are."""
    for name in ("samples", "shape", "spacing", "positions"):
        if getattr(request, name, None) is not None:
            return name
    return ""

"""One request, from bytes to bytes: the code path under the service and the command line alike."""

from __future__ import annotations

import math
import time
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any, Literal, cast

import orjson

from engine.coefficients import CoefficientSet
from engine.evaluate import Field, Work, prepare
from engine.preparation import summarize_set
from engine.preview import preview
from engine.resolution.change import ChangeWork, prepare_change
from engine.resolution.envelope import Envelope
from engine.sampling import AffineGrid, Sampling
from engine.scattering import composition
from engine.synthesis import Demand, Progress
from service import interpret, interpret_combination, interpret_file, interpret_picture, interpret_set, stacks
from service.analyses.report import Limits, Report
from service.analyses.run import analyse as analysis
from service.encoders.describe import Shown
from service.encoders.negotiation import PICTURE_FORMATS, SAMPLE_FORMATS
from service.encoders.picture import require_drawing
from service.encoders.report import report_csv, report_json
from service.encoders.samples import samples_header
from service.encoders.stack import write_stack
from service.encoders.summary import summary_document
from service.encoders.write import Wanted, write
from service.films.contrast import contrast
from service.films.run import film, film_picture, film_run, film_run_picture
from service.films.swelling import swelling
from service.films.trial import trial, trial_picture
from service.keep import parcel
from service.problems import Problem, at, located
from service.schemas.film_models import ContrastIn, SwellingIn, TrialIn
from service.schemas.films import FilmIn, FilmRequestIn, FilmRunIn
from service.schemas.products import DrawnIn, GridIn, ProductIn, UnmeasuredIn
from service.schemas.requests import InspectIn, Request
from service.schemas.series import SeriesIn
from service.schemas.store import KeepIn
from service.schemas.treatment import SetRequestIn
from service.settings import Settings
from service.spool import Spool
from service.store.parcel import pack
from service.surface import asked_surface, write_surface

Watch = Callable[[Work], Progress | None]
"""Told of the work before it starts; answers with what wants to know of its progress."""


@dataclass(frozen=True, slots=True)
class Done:
    """A finished request: what was computed, and how long it took."""

    shown: Shown
    seconds: float

    @property
    def coefficients(self) -> CoefficientSet:
        return self.shown.coefficients

    @property
    def field(self) -> Field:
        return self.shown.field


@dataclass(frozen=True, slots=True)
class Told:
    """What goes beside an answer: the seconds it took, and headers that belong to its form."""

    seconds: float
    headers: dict[str, str]


def run(
    product: str,
    request: ProductIn,
    form: str | None,
    spool: Spool,
    settings: Settings,
    *,
    threads: int,
    watch: Watch | None = None,
) -> Done:
    """Interpret, cost, compute and encode a checked request; without a form, leave the spool empty.

    Nothing is allocated before the estimate has passed the limits.

    Raises
    ------
    Problem
        The request cannot be carried out, or would exceed a limit.
    """
    if request.uncertainty and request.quantity != "value":
        raise at(("uncertainty",), f"is asked for beside the quantity {request.quantity}", "ask for one of the two")
    if (request.uncertainty or request.unmeasured is not None) and form in ("npy", *SAMPLE_FORMATS):
        raise Problem(
            "not-acceptable",
            f"The form {form} holds one array: ask for application/x-npz, which holds values and what goes beside "
            "them, or for the quantity sigma.",
        )
    surface = asked_surface(request, form)
    drawn = None
    if form in PICTURE_FORMATS:
        require_drawing()
        drawn = interpret_picture.options(request, request.picture if isinstance(request, DrawnIn) else None)
    begin = time.perf_counter()
    coefficients = interpret_combination.coefficient_set(request, max_coefficients=settings.max_coefficients)
    sampling = interpret.samples(request, coefficients.lattice)
    if isinstance(request, GridIn) and request.preview is not None:
        coefficients, sampling = _preview(request, request.preview, coefficients, sampling)
    samples = math.prod(sampling.shape)
    if samples > settings.max_samples:
        raise at(
            (_place_of_size(request),),
            f"asks for {samples:,} samples, more than the limit of {settings.max_samples:,}",
            "ask for fewer, or have the limit raised",
            kind="too-costly",
        )
    treatment = interpret.treatment(request, coefficients.lattice)
    if drawn is not None and isinstance(request, DrawnIn) and request.picture and request.picture.mark_layers:
        drawn = interpret_picture.with_layers(drawn, coefficients, sampling, treatment)
    demand = Demand(precision=request.precision, tolerance=request.tolerance, threads=threads)
    renamed: dict[str, tuple[str | int, ...]] = {
        "phase_deg": ("set", "phase_deg"),
        "amplitude": ("set",),
        "samples": (_place_of_size(request),),
        "sigma": ("set", "sigma"),
    }
    if surface is not None:
        shown = write_surface(
            request,
            surface,
            coefficients,
            sampling,
            treatment,
            demand,
            form,
            spool,
            max_bytes=settings.max_memory_bytes,
            renamed=renamed,
            watch=watch,
        )
        return Done(shown, time.perf_counter() - begin)
    with located(renamed=renamed):
        work = prepare(
            coefficients,
            sampling,
            treatment,
            demand,
            uncertainty=request.uncertainty or request.quantity != "value",
            max_bytes=settings.max_memory_bytes,
        )
    change = None if request.unmeasured is None else _change(request, request.unmeasured, work, settings)
    numbers = math.prod(work.shape) * (
        (2 if work.dtype.kind == "c" else 1) + request.uncertainty + (change is not None)
    )
    if form in ("json", "csv") and numbers > settings.max_json_values:
        raise Problem(
            "too-costly",
            f"The answer has {numbers:,} numbers, more than the {settings.max_json_values:,} that are written as "
            f"{form.upper()}. Ask for application/x-npy or application/x-npz.",
        )
    progress = None if watch is None else watch(work)
    wanted = Wanted(product=product, quantity=request.quantity, change=change, picture=drawn)
    shown = write(wanted, work, form, spool, progress)
    if not math.isfinite(shown.field.statistics.rms):
        raise at(
            ("set",),
            f"gives values whose squares overflow in {request.precision} precision",
            "state the columns in a larger unit, or ask for double precision",
        )
    return Done(shown, time.perf_counter() - begin)


def _preview(
    request: GridIn, most: int, coefficients: CoefficientSet, sampling: Sampling
) -> tuple[CoefficientSet, AffineGrid]:
    """A low-resolution first version of the whole cell."""
    if request.edges is not None or not isinstance(sampling, AffineGrid):
        raise at(("preview",), "is asked for of a box", "ask for the whole cell, or leave it out")
    with located():
        return preview(coefficients, sampling, most)


def _change(request: ProductIn, asked: UnmeasuredIn, work: Work, settings: Settings) -> ChangeWork:
    """Cost what unmeasured terms could do, within what the work leaves of the memory.

    Raises
    ------
    Problem
        Pointing to the place in the body.
    """
    if (asked.formula is None) == (asked.amplitude is None):
        raise at(("unmeasured",), "has neither or both of formula and amplitude", "give one of the two")
    place = ("unmeasured",)
    renamed: dict[str, tuple[str | int, ...]] = {
        **{name: (*place, name) for name in ("formula", "units", "amplitude", "b", "d_stop")},
        **dict.fromkeys(("unmeasured", "uncertainty", "samples"), place),
        "composition": (*place, "formula"),
        "phase_deg": ("set", "phase_deg"),
    }
    with located(renamed=renamed):
        if asked.formula is not None:
            content = composition(asked.formula)
            envelope = Envelope.from_composition(content, asked.b, units=asked.units)
        else:
            envelope = Envelope.from_bound(asked.amplitude or 0.0, asked.b)
        return prepare_change(
            work.coefficients,
            envelope,
            work.sampling,
            work.treatment,
            work.plans[0].demand,
            d_stop=asked.d_stop,
            max_bytes=settings.max_memory_bytes - work.bytes,
        )


def inspect(request: InspectIn, settings: Settings, *, progress: Progress | None = None) -> dict[str, Any]:
    """Read and prepare a file of reflections, and summarise it.

    Raises
    ------
    Problem
        The file or the preparation is at fault.
    """
    lattice = None if request.set.cell is None else interpret_set.lattice_of(request.set.cell)
    (table, left), made = interpret_file.prepared(
        request.set, lattice, max_rows=settings.max_coefficients, progress=progress
    )
    with located("set", "reflections"):
        return summary_document(table, left, summarize_set(made))


def analyse(
    product: str, request: SetRequestIn, settings: Settings, *, threads: int, progress: Progress | None = None
) -> Report:
    """Interpret a checked request for an analysis, and carry it out.

    Raises
    ------
    Problem
        The request cannot be carried out, or would exceed a limit.
    """
    limits = _limits(settings, threads, progress)
    coefficients = interpret_combination.coefficient_set(request, max_coefficients=settings.max_coefficients)
    return analysis(product, request, coefficients, limits)


def film_answer(request: FilmRequestIn, form: str, settings: Settings, *, threads: int) -> bytes:
    """A film or a run of films in the form asked for.

    Raises
    ------
    Problem
        The request cannot be carried out, or would exceed a limit.
    """
    if form in PICTURE_FORMATS:
        limits = _limits(settings, threads, None)
        kind = cast("Literal['png', 'svg']", form)
        if isinstance(request, FilmRunIn):
            return film_run_picture(request, limits, kind)
        if isinstance(request, TrialIn):
            return trial_picture(request, limits, kind)
        return film_picture(cast("FilmIn", request), limits, kind)
    report = film_report(request, settings, threads=threads)
    return report_json(report) if form == "json" else report_csv(report)


def film_report(
    request: FilmRequestIn, settings: Settings, *, threads: int, progress: Progress | None = None
) -> Report:
    """The report of a film or of a run of films; raises as `film_answer`."""
    limits = _limits(settings, threads, progress)
    if isinstance(request, FilmRunIn):
        return film_run(request, limits)
    if isinstance(request, SwellingIn):
        return swelling(request, limits)
    if isinstance(request, ContrastIn):
        return contrast(request)
    if isinstance(request, TrialIn):
        return trial(request, limits)
    return film(cast("FilmIn", request), limits)


def _limits(settings: Settings, threads: int, progress: Progress | None) -> Limits:
    return Limits(
        max_bytes=settings.max_memory_bytes,
        max_rows=settings.max_coefficients,
        max_values=settings.max_json_values,
        threads=threads,
        progress=progress,
    )


def answer(
    product: str,
    request: Request,
    form: str,
    spool: Spool,
    settings: Settings,
    *,
    threads: int,
) -> Told:
    """Answer any request into the spool."""
    begin = time.perf_counter()
    headers: dict[str, str] = {}
    if isinstance(request, KeepIn):
        pack(parcel(request, settings), spool)
    elif isinstance(request, InspectIn):
        spool.append(orjson.dumps(inspect(request, settings)))
    elif isinstance(request, ProductIn):
        done = run(product, request, form, spool, settings, threads=threads)
        if form in SAMPLE_FORMATS:
            headers = samples_header(done.shown, form)
    elif isinstance(request, SeriesIn):
        spool.append(write_stack(stacks.stack(request, settings, form, threads=threads), form, request, settings))
    elif isinstance(request, FilmRequestIn):
        spool.append(film_answer(request, form, settings, threads=threads))
    else:
        report = analyse(product, request, settings, threads=threads)
        spool.append(report_json(report) if form == "json" else report_csv(report))
    return Told(time.perf_counter() - begin, headers)


def _place_of_size(request: ProductIn) -> str:
    """The member that sets how many samples there are."""
    for name in ("samples", "shape", "spacing", "positions"):
        if getattr(request, name, None) is not None:
            return name
    return ""

"""A film from its scan to what is reported: each step by its own module, chained here.

Spacing, amplitudes, phases, scale, profile with σ, layers, integrals, unmeasured orders, line widths. What is not
asked for is not done; every step adds its words.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from engine.arrays import FloatArray, IntArray, as_count
from engine.coefficients import CoefficientSet
from engine.errors import InputError, TransformError
from engine.evaluate import Field, evaluate
from engine.features.integrals import IntegralRegion, Integrals, integrals, slab
from engine.features.layer_distances import LayerDistances, layer_spacings
from engine.features.layers import Layers, layers
from engine.fields import Treatment, summands
from engine.films.amplitudes import OrderTable, order_table
from engine.films.assignment import Assignment, assign, check_orders
from engine.films.damping import Damping, damping_by_envelope
from engine.films.facts import mean_of_composition
from engine.films.line_widths import LineWidths
from engine.films.orders import FilmOrders
from engine.films.scale import FilmScale, density_at, scale_by_facts
from engine.films.scaled_signs import rank_scaled
from engine.films.scans import Scan
from engine.films.signs import RankedSigns, rank_signs
from engine.films.spacing import Spacing, fit_spacing
from engine.films.task import FilmTask
from engine.films.widths import WidthComparison, compare_widths
from engine.resolution.change import Change, perform_change, prepare_change
from engine.resolution.response import PointResponse, point_response
from engine.sampling import lattice_line
from engine.synthesis import Progress

SCALE_ERRORS = "the scale and the mean density, by the facts given and by the very amplitudes that they scale"
STRAY_SHARE = 0.25
"""Of lines that are no orders, beyond which the numbering is to be doubted."""
LEAST_WIDTHS = 3
"""Lines with widths from which thickness and disorder are told."""


@dataclass(frozen=True, slots=True, kw_only=True)
class FilmAnalysis:
    """What a scan says of a film.

    Attributes
    ----------
    task : FilmTask
    assignments : tuple of Assignment
        Ways to number the lines, the one used first; empty where the scan carries all orders.
    spacing : Spacing
    table : OrderTable
        Every line.
    orders : FilmOrders
        Amplitudes, absolute where facts were given.
    phase_deg : float64, shape (n,)
    ranked : RankedSigns or None
    scale : FilmScale or None
    coefficients : CoefficientSet
    treatment : Treatment
    profile : Field
        One period, with σ where the amplitudes have any.
    response : PointResponse or None
    layers : Layers
    spacings : LayerDistances
    integrals : Integrals or None
    change : Change or None
        By orders that were not measured.
    widths : WidthComparison or None
    damping : Damping or None
        From the fall of the intensities; None of too few orders.
    applied, notes : tuple of str
    """

    task: FilmTask
    assignments: tuple[Assignment, ...]
    spacing: Spacing
    table: OrderTable
    orders: FilmOrders
    phase_deg: FloatArray
    ranked: RankedSigns | None
    scale: FilmScale | None
    coefficients: CoefficientSet
    treatment: Treatment
    profile: Field
    response: PointResponse | None
    layers: Layers
    spacings: LayerDistances
    integrals: Integrals | None
    change: Change | None
    widths: WidthComparison | None
    damping: Damping | None
    applied: tuple[str, ...]
    notes: tuple[str, ...]


def number_lines(
    scan: Scan, period_range: tuple[float, float] | None = None
) -> tuple[IntArray, tuple[Assignment, ...]]:
    """Order of each line, 0 for stray ones, and the ways to number them where orders had to be found.

    Raises
    ------
    InputError
        As `engine.films.assignment.assign`.
    """
    if scan.order.all():
        return check_orders(scan, scan.order), ()
    found = assign(scan, period_range=period_range)
    return found[0].order, found


def measured(task: FilmTask) -> tuple[tuple[Assignment, ...], Spacing, OrderTable]:
    """Numbering, period and amplitudes: what does not depend on phases. ``table.film()`` are the amplitudes.

    Raises
    ------
    InputError
        What these steps refuse.
    """
    scan = task.scan
    numbers, assignments = number_lines(scan, task.period_range)
    spacing = fit_spacing(
        scan,
        numbers,
        zero_shift=task.zero_shift,
        displacement=task.displacement,
        critical_q=task.critical_q,
        mean_density=task.refraction_density,
        radius=task.radius,
        scale_sigma=True,
    )
    table = order_table(
        scan,
        numbers,
        spacing,
        corrections=task.corrections,
        rule=task.rule,
        negative=task.negative,
        symmetric=_symmetric(task),
        keep_saturated=task.keep_saturated,
    )
    return assignments, spacing, table


def analyse_film(
    task: FilmTask, *, threads: int = 1, max_bytes: int | None = None, progress: Progress | None = None
) -> FilmAnalysis:
    """All steps of a task.

    Raises
    ------
    InputError
        What the steps refuse; no phases and no criteria; a rank beyond the sign sets found.
    TooLargeError
        More than `max_bytes` would be needed.
    """
    scan = task.scan
    assignments, spacing, table = measured(task)
    raw = table.film()
    task = _with_mean(task, spacing)
    phase_deg, orders, scale, ranked = _phased(raw, task, threads, max_bytes, progress)
    mean = None if scale is None else scale.mean
    coefficients = orders.coefficients(phase_deg, mean)
    treatment = Treatment(window=task.window)
    line = lattice_line(coefficients.lattice, [1], as_count(task.samples, "samples", least=2))
    uncertain = coefficients.sigma is not None or coefficients.scale_sigma > 0
    profile = _with_scale_errors(
        evaluate(coefficients, line, treatment, uncertainty=uncertain), raw, phase_deg, scale, task
    )
    profile = _with_doubt(profile, ranked)
    found = layers(
        coefficients,
        line,
        treatment,
        baseline=task.baseline,
        least_significance=task.least_significance if uncertain else 0.0,
    )
    change = None
    if task.envelope is not None:
        change = perform_change(prepare_change(coefficients, task.envelope, line, treatment))
    response = point_response(summands(coefficients, replace(treatment, field="response")).series[0])
    return FilmAnalysis(
        task=task,
        assignments=assignments,
        spacing=spacing,
        table=table,
        orders=orders,
        phase_deg=phase_deg,
        ranked=ranked,
        scale=scale,
        coefficients=coefficients,
        treatment=treatment,
        profile=profile,
        response=response,
        layers=found,
        spacings=layer_spacings(found),
        integrals=_integrals(coefficients, task, treatment),
        change=change,
        widths=_widths(scan, table, task),
        damping=_damping(orders, task),
        applied=(*table.applied, *(() if scale is None else (scale.words, *scale.assumptions))),
        notes=tuple(
            dict.fromkeys(
                (
                    *_unscaled(task, scale),
                    *scan.notes,
                    *_told(assignments, spacing, ranked, scale),
                    *_left_over(task, raw),
                    *profile.notes,
                    *_caution(scale),
                )
            )
        ),
    )


def _symmetric(task: FilmTask) -> bool:
    """Whether signs are sought, or the phases given are those of a stack with its origin on a mirror."""
    return all(phase % 180 == 0 for phase in (task.phases_deg or {}).values() if np.isfinite(phase))


def _with_scale_errors(
    profile: Field, raw: FilmOrders, phase_deg: FloatArray, scale: FilmScale | None, task: FilmTask
) -> Field:
    """The profile with σ that knows how the scale hangs together with the amplitudes it was made from."""
    if profile.sigma is None or scale is None or scale.mean is None or task.window.kind != "none":
        return profile
    place = profile.axes[0].coordinates()
    _, sigma = density_at(raw, phase_deg, scale, place)
    contains = (*(one for one in profile.sigma.contains if not one.startswith("the scale")), SCALE_ERRORS)
    omits = tuple(one for one in profile.sigma.omits if not one.startswith("the uncertainty of the zero term"))
    told = replace(
        profile.sigma,
        values=sigma,
        minimum=float(sigma.min()),
        maximum=float(sigma.max()),
        rms=float(np.sqrt(np.mean(sigma**2))),
        contains=contains,
        omits=omits,
    )
    return replace(profile, sigma=told)


def _with_doubt(profile: Field, ranked: RankedSigns | None) -> Field:
    """Say with σ that signs are open, where they are."""
    if profile.sigma is None or ranked is None or ranked.decided:
        return profile
    named = ", ".join(map(str, ranked.in_doubt)) or "none by itself"
    words = f"signs in doubt (orders {named}): the σ's hold for the signs that are shown"
    return replace(profile, sigma=replace(profile.sigma, omits=(words, *profile.sigma.omits)))


def _with_mean(task: FilmTask, spacing: Spacing) -> FilmTask:
    """The task with the mean density by composition among its facts, now that the period is known."""
    if task.content is None:
        return task
    held = task.content
    mean = mean_of_composition(
        held.content,
        area=held.area,
        period=spacing.period,
        area_sigma=held.area_sigma,
        period_sigma=spacing.period_sigma or 0.0,
        units=held.units,
        probe=task.scan.radiation,
    )
    return replace(task, facts=(*task.facts, mean), content=None)


def _phased(
    raw: FilmOrders, task: FilmTask, threads: int, max_bytes: int | None, progress: Progress | None
) -> tuple[FloatArray, FilmOrders, FilmScale | None, RankedSigns | None]:
    """Phases and scale. Signs are judged on the absolute scale, which each sign set has for itself."""
    if task.phases_deg is not None:
        phases = np.array([task.phases_deg.get(int(order), np.nan) for order in raw.order])
        if np.isnan(phases).all():
            raise InputError("phases_deg", "name none of the orders measured", "give phases by order")
        scale = scale_by_facts(raw, phases, task.facts, unit=task.unit) if task.facts else None
        return phases, _scaled(raw, scale, task), scale, None
    if task.criteria is None:
        raise InputError("phases_deg", "are not given, and no criteria to find signs by", "give one of the two")
    ranked = _rank(raw, task, threads, max_bytes, progress)
    if not 0 <= task.rank < len(ranked.scores):
        raise InputError("rank", f"is beyond the last of {len(ranked.scores)} sign sets listed", "name one of them")
    phases = ranked.phases_deg(task.rank)
    scale = scale_by_facts(raw, phases, task.facts, unit=task.unit) if task.facts else None
    return phases, _scaled(raw, scale, task), scale, ranked


def _scaled(raw: FilmOrders, scale: FilmScale | None, task: FilmTask) -> FilmOrders:
    # Without a scale the density has no unit, whatever was hoped for.
    return raw if scale is None else scale.apply(raw)


def _rank(
    raw: FilmOrders, task: FilmTask, threads: int, max_bytes: int | None, progress: Progress | None
) -> RankedSigns:
    """Sign sets by all criteria on the scale that the facts give each set, or by those that need no scale."""
    if task.criteria is None:
        raise AssertionError("criteria were made sure of")
    options = {
        "fixed": task.fixed or None,
        "decisive": task.decisive,
        "threads": threads,
        "max_bytes": max_bytes,
        "progress": progress,
    }
    if not task.facts:
        return rank_signs(raw, task.criteria, **options)  # type: ignore[arg-type]
    return rank_scaled(raw, task.criteria, task.facts, task.unit, **options)  # type: ignore[arg-type]


def _integrals(coefficients: CoefficientSet, task: FilmTask, treatment: Treatment) -> Integrals | None:
    if not task.regions:
        return None
    made: list[IntegralRegion] = []
    for number, region in enumerate(task.regions):
        if region.end - region.start > coefficients.lattice.volume * (1 + 1e-9):
            raise InputError(
                ("regions", number),
                f"is longer than the period, {coefficients.lattice.volume:g} Å",
                "give a region within one period",
            )
        try:
            made.append(slab(coefficients.lattice, [1], region.start, region.end))
        except InputError as fault:
            raise InputError(("regions", number, *fault.path), fault.reason, fault.cure) from fault
    return integrals(coefficients, made, treatment)


def _widths(scan: Scan, table: OrderTable, task: FilmTask) -> WidthComparison | None:
    used = np.flatnonzero(table.order > 0)
    # Two lines are fitted by two numbers; three begin to tell models apart.
    if scan.width is None or scan.width_sigma is None or used.size < LEAST_WIDTHS:
        return None
    instrument = task.instrument_width or 0.0
    if scan.kind == "q":
        measured = LineWidths.of(
            table.order[used],
            table.q[used],
            scan.width[used],
            scan.width_sigma[used],
            instrument=instrument,
            rule=task.instrument_rule,
        )
    else:
        measured = LineWidths.from_two_theta(
            table.order[used],
            scan.position[used],
            scan.width[used],
            scan.width_sigma[used],
            wavelength=scan.wavelength or 0.0,
            instrument=instrument,
            rule=task.instrument_rule,
        )
    try:
        return compare_widths(measured, table.period)
    except TransformError as fault:
        raise InputError(
            "width",
            "lead to no thickness: the least squares do not converge",
            "correct the widths and their σ's, or leave the widths out",
        ) from fault


def _left_over(task: FilmTask, raw: FilmOrders) -> tuple[str, ...]:
    """Phases that met no amplitude."""
    lost = sorted(set(task.phases_deg or {}) - set(raw.order.tolist()))
    return (f"phases of orders without an amplitude are not used: {', '.join(map(str, lost))}",) if lost else ()


def _unscaled(task: FilmTask, scale: FilmScale | None) -> tuple[str, ...]:
    if scale is not None or task.unit == "arbitrary":
        return ()
    return (f"The scale is arbitrary and the unit not {task.unit}: no facts were given that would make it absolute.",)


def _caution(scale: FilmScale | None) -> tuple[str, ...]:
    if scale is None:
        return ()
    return (
        "In the σ's of layers and regions the scale counts as independent of the amplitudes and the mean as exact; in "
        "that of the profile neither.",
    )


def _damping(orders: FilmOrders, task: FilmTask) -> Damping | None:
    try:
        return damping_by_envelope(orders, centric=_symmetric(task))
    except (InputError, TransformError):
        # Too few orders, or a fall that no envelope follows: the rest of the report stands.
        return None


def _told(
    assignments: tuple[Assignment, ...], spacing: Spacing, ranked: RankedSigns | None, scale: FilmScale | None
) -> tuple[str, ...]:
    told = [note for one in assignments[:1] for note in one.notes]
    if assignments and assignments[0].stray > STRAY_SHARE * (assignments[0].stray + assignments[0].indexed):
        told.append(
            f"{assignments[0].stray} of {assignments[0].stray + assignments[0].indexed} lines are no orders of the "
            "period found. Were the σ's of their positions too small, orders would be taken for strays: check them, or "
            "give the orders."
        )
    told += spacing.notes
    if ranked is not None:
        told.append(ranked.verdict)
    if scale is not None:
        told += scale.notes
    return tuple(told)

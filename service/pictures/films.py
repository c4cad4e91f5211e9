"""A film on one page: amplitudes with their signs, the profile with its band and layers, the alternatives."""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import Any

import numpy as np
from matplotlib.axes import Axes
from matplotlib.ticker import MaxNLocator

from engine.errors import InputError
from engine.features.integrals import integrated_unit
from engine.fields import PHASES_DECIDE
from engine.films.analysis import FilmAnalysis
from service.pictures.canvas import Form, Sheet, plain, set_ticks, set_value_label, settings
from service.pictures.captions import Caption, number
from service.pictures.options import PictureOptions

ALTERNATIVES = 4
"""Sign sets shown beside the one used."""
DASHES = ("-", "--")
SHARE = 0.5
"""Of the height that the profile takes."""
SMALL = 0.72
"""Size of the letters of labels, relative to the others."""
LABEL_ROWS = 2
"""Of positions of layers above a profile."""
LEAST_HEIGHT = 5.0
"""Inches of a page from which it has room for all notes."""
LEAST_PANEL = 2.5
"""Ems that each side of a panel has at least."""
STEP = 0.6
"""From one profile of a run to the next, relative to the height of the highest."""
ROUNDING = 1e-9
"""Of a period: below it a position is 0."""


def draw_film(made: FilmAnalysis, options: PictureOptions, form: Form) -> bytes:
    """The page's bytes.

    Raises
    ------
    InputError
        The picture has no room for its caption, or for its curves beside that.
    """
    with settings(options):
        sheet = Sheet(options, _caption(made, options))
        gap, left = 2.8 * sheet.em + LABEL_ROWS * SMALL * sheet.em, sheet.left + 5.2 * sheet.em
        width, height = sheet.right - left - 0.8 * sheet.em, sheet.top - sheet.bottom
        low = sheet.bottom + 3.0 * sheet.em
        tall = SHARE * (height - gap)
        rest = height - 3.0 * sheet.em - tall - gap - 2.4 * sheet.em
        _require_room(sheet, width, rest)
        _profile(sheet.axes(left, low, width, tall), made, sheet, options, (width, tall))
        above = low + tall + gap + 1.2 * sheet.em
        if made.ranked is not None and len(made.ranked.profiles) > 1:
            legend, between = 6.6 * sheet.em, 5.6 * sheet.em
            half = (width - between - legend) / 2
            _require_room(sheet, half, rest)
            _amplitudes(sheet.axes(left, above, half, rest), made, sheet, rest)
            _alternatives(sheet.axes(left + half + between, above, half, rest), made, sheet, rest)
        else:
            _amplitudes(sheet.axes(left, above, width, rest), made, sheet, rest)
        return sheet.save(form, options.title or "film")


def _require_room(sheet: Sheet, width: float, height: float) -> None:
    """Refuse a page that leaves less than this, inches, to a panel."""
    for name, room in (("width", width), ("height", height)):
        if room < LEAST_PANEL * sheet.em:
            raise InputError(name, "leaves no room for the curves beside all labels", "give a larger picture")


def _profile(axes: Axes, made: FilmAnalysis, sheet: Sheet, options: PictureOptions, size: tuple[float, float]) -> None:
    place, values, theme = made.profile.axes[0].coordinates(), made.profile.values, sheet.theme
    if made.profile.sigma is not None and options.band > 0:
        spread = options.band * made.profile.sigma.values
        axes.fill_between(place, values - spread, values + spread, color=theme.curves[0], alpha=0.3, linewidth=0)
    axes.plot(place, values, color=theme.curves[0], linewidth=1.3)
    axes.axhline(0, color=theme.ink, linewidth=0.5)
    for position in made.layers.position.tolist():
        axes.axvline(position, color=theme.ink, linewidth=0.4, alpha=0.6)
    axes.set_xlim(float(place[0]), float(place[-1]))
    low, high = axes.get_ylim()
    # Head room for the names of the regions, so that no curve runs through them.
    room = 1.6 * SMALL * sheet.em / size[1] if made.task.regions else 0.0
    axes.set_ylim(low if options.low is None else options.low, low + (high - low) / (1 - room))
    if options.high is not None:
        axes.set_ylim(top=options.high)
    _regions(axes, made, sheet, size[0])
    _label_layers(axes, made, sheet, size[0])
    set_ticks(axes, sheet, *size)
    axes.set_xlabel("distance along the normal (Å)")
    set_value_label(axes, sheet, "density", made.profile.unit, size[1])
    _plain(axes)


def _regions(axes: Axes, made: FilmAnalysis, sheet: Sheet, width: float) -> None:
    """Shades where the regions lie, in every period that is seen, and their names where there is room."""
    period = made.spacing.period
    points = SMALL * sheet.points
    for region in made.task.regions:
        first = math.floor(-region.end / period)
        for turn in range(first, first + 3):
            low, high = max(region.start + turn * period, 0.0), min(region.end + turn * period, period)
            if low >= high:
                continue
            axes.axvspan(low, high, color=sheet.theme.ink, alpha=0.06, linewidth=0)
            words = sheet.fitted(plain(region.name), (high - low) / period * width - 0.4 * sheet.em, points)
            if words in ("", "…"):
                continue
            axes.annotate(
                words,
                ((low + high) / 2 / period, 1.0),
                xycoords="axes fraction",
                xytext=(0, -2),
                textcoords="offset points",
                fontsize=points,
                ha="center",
                va="top",
            )


def _label_layers(axes: Axes, made: FilmAnalysis, sheet: Sheet, width: float) -> None:
    """Positions of layers above the frame, in rows so that none covers another; what has no room is left out."""
    period, points = made.spacing.period, SMALL * sheet.points
    ends = [-math.inf] * LABEL_ROWS
    for position, sigma in zip(made.layers.position.tolist(), _errors(made), strict=True):
        words = number(position) if abs(position) > ROUNDING * period else "0"
        for text in (words if sigma is None else f"{words} ± {sigma:.2g}", words):
            wide = sheet.text_width(text, points)
            start = min(max(position / period * width - wide / 2, 0.0), width - wide)
            row = next((row for row in range(LABEL_ROWS) if ends[row] < start), None)
            if row is None:
                continue
            ends[row] = start + wide + 0.6 * sheet.em
            axes.annotate(
                text,
                (start / width, 1.0),
                xycoords="axes fraction",
                xytext=(0, 2 + row * 1.15 * points),
                textcoords="offset points",
                fontsize=points,
            )
            break


def _errors(made: FilmAnalysis) -> list[float | None]:
    sigma = made.layers.position_sigma
    # On a mirror a position is exact but for rounding.
    return [None] * made.layers.count if sigma is None else [float(one) if one > 1e-9 else None for one in sigma]


def _amplitudes(axes: Axes, made: FilmAnalysis, sheet: Sheet, height: float) -> None:
    orders, theme = made.orders, sheet.theme
    known = np.isfinite(made.phase_deg)
    signed = orders.amplitude * np.where(known, np.cos(np.radians(np.nan_to_num(made.phase_deg))), 1.0)
    doubtful = set() if made.ranked is None or made.ranked.decided else set(made.ranked.in_doubt)
    for order, value in zip(orders.order.tolist(), signed.tolist(), strict=True):
        shade = 0.35 if order in doubtful else 1.0
        axes.plot([order, order], [0, value], color=theme.curves[0], linewidth=2.4, alpha=shade)
    if orders.sigma is not None:
        axes.errorbar(orders.order, signed, orders.sigma, fmt="none", ecolor=theme.ink, elinewidth=0.8, capsize=2)
    axes.axhline(0, color=theme.ink, linewidth=0.5)
    axes.set_xlabel("order" + (", pale: sign in doubt" if doubtful else ""))
    unit = integrated_unit(orders.unit, 1)
    _label_values(axes, sheet, "F", unit, height)
    axes.xaxis.set_major_locator(MaxNLocator(integer=True))
    _plain(axes)


def _alternatives(axes: Axes, made: FilmAnalysis, sheet: Sheet, height: float) -> None:
    ranked, theme = made.ranked, sheet.theme
    if ranked is None:
        raise AssertionError("drawn only where signs were ranked")
    for row, profile in enumerate(ranked.profiles[: ALTERNATIVES + 1]):
        style: dict[str, Any] = {
            "color": theme.curves[row % len(theme.curves)],
            "linestyle": DASHES[row // len(theme.curves)],
            "linewidth": 1.4 if row == 0 else 0.9,
        }
        axes.plot(ranked.z, profile, label=f"{row + 1}: {ranked.scores[row]:.4g}", **style)
    # Beside the curves, where it hides none.
    axes.legend(
        title="sign set: score",
        fontsize=SMALL * sheet.points,
        title_fontsize=SMALL * sheet.points,
        frameon=False,
        loc="upper left",
        bbox_to_anchor=(1.0, 1.0),
        borderaxespad=0.0,
        handlelength=1.4,
        labelspacing=0.2,
    )
    axes.set_xlim(float(ranked.z[0]), float(ranked.z[-1]))
    axes.set_xlabel("mirror to mirror (Å)")
    _label_values(axes, sheet, "density", ranked.unit, height)
    _plain(axes)


def _label_values(axes: Axes, sheet: Sheet, name: str, unit: str, height: float) -> None:
    """Ticks and a label for a low panel, in smaller letters where its unit has no room else."""
    axes.yaxis.set_major_locator(MaxNLocator(nbins=max(2, min(6, int(height / 2.2 / sheet.em)))))
    set_value_label(axes, sheet, name, unit, height)
    if axes.get_ylabel().endswith("…"):
        set_value_label(axes, sheet, name, unit, height / SMALL)
        axes.yaxis.label.set_fontsize(SMALL * sheet.points)


def _plain(axes: Axes) -> None:
    axes.spines[["top", "right"]].set_visible(False)


def _caption(made: FilmAnalysis, options: PictureOptions) -> Caption:
    spacing = made.spacing
    error = "" if spacing.period_sigma is None else f" ± {spacing.period_sigma:.2g}"
    needed = [f"Period {spacing.period:.6g}{error} Å from {spacing.order.size} orders."]
    if made.ranked is not None:
        needed.append(made.ranked.verdict)
    if made.scale is not None:
        needed.append(made.scale.words)
    needed.append("Phases decide: wrong phases give a wrong profile that looks as sharp.")
    sigma = made.profile.sigma
    if sigma is not None:
        needed.append(f"Band: ±{options.band:g} σ, of {'; '.join(sigma.contains)}.")
    told = [_sentence(one) for one in needed]
    # On a small page the curves need the room; the notes are in every other form of the answer.
    further = [_sentence(note) for note in made.notes] if options.inches[1] >= LEAST_HEIGHT else []
    return Caption(tuple(told), tuple(note for note in further if note not in (*told, PHASES_DECIDE)))


def _sentence(words: str) -> str:
    if words[:1].isascii():  # A symbol keeps its case.
        words = words[:1].upper() + words[1:]
    return words if words.endswith((".", "!", "?")) else f"{words}."


def draw_run(
    made: Sequence[FilmAnalysis],
    values: Sequence[float],
    variable: str,
    unit: str,
    options: PictureOptions,
    form: Form,
) -> bytes:
    """Profiles of a run, each above the last, against the run's variable: a waterfall over one period each.

    Raises
    ------
    InputError
        The picture has no room for its caption, or for its curves beside that.
    """
    caption = Caption(
        (
            f"{len(made)} profiles along {variable}, each over one period and raised by its place in the run.",
            "Phases decide: wrong phases give wrong profiles that look as sharp.",
        ),
        tuple(dict.fromkeys(one.ranked.verdict for one in made if one.ranked is not None)),
    )
    with settings(options):
        sheet = Sheet(options, caption)
        left, low = sheet.left + 5.2 * sheet.em, sheet.bottom + 3.0 * sheet.em
        wide, tall = sheet.right - left - 6 * sheet.em, sheet.top - low - 0.6 * sheet.em
        _require_room(sheet, wide, tall)
        axes = sheet.axes(left, low, wide, tall)
        step = STEP * (max(float(np.ptp(one.profile.values)) for one in made) or 1.0)
        longest = max(one.spacing.period for one in made)
        for row, one in enumerate(made):
            raised = one.profile.values + row * step
            axes.plot(one.profile.axes[0].coordinates(), raised, color=sheet.theme.curves[0], linewidth=1.1)
        bottom, top = axes.get_ylim()
        axes.set_ylim(bottom, top)
        points = SMALL * sheet.points
        covered: list[tuple[float, float]] = []
        for row, (one, value) in enumerate(zip(made, values, strict=True)):
            # Each label stands at its curve's end; one that would cover another is left out.
            end, height = one.spacing.period, float(one.profile.values[-1]) + row * step
            words = sheet.fitted(plain(f"{value:g} {unit}".rstrip()), 5.4 * sheet.em, points)
            place = (end / longest * wide, (height - bottom) / (top - bottom) * tall)
            if any(
                abs(place[0] - across) < 5.4 * sheet.em and abs(place[1] - up) < 1.1 * points / 72
                for across, up in covered
            ):
                continue
            covered.append(place)
            axes.annotate(words, (end, height), xytext=(4, 0), textcoords="offset points", fontsize=points, va="center")
        axes.set_xlim(0, longest)
        axes.set_xlabel("distance along the normal (Å)")
        set_value_label(axes, sheet, "density, raised", made[0].profile.unit, tall)
        _plain(axes)
        return sheet.save(form, options.title or "film run")

"""Profiles: curves with their band of σ, the mean, what lies where."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from matplotlib.axes import Axes
from matplotlib.collections import PolyCollection

from engine.arrays import AnyArray, FloatArray
from engine.sampling import Axis
from service.pictures.canvas import Form, Sheet, plain, set_ticks, set_value_label, settings
from service.pictures.captions import Caption, number
from service.pictures.options import PictureOptions
from service.pictures.parts import Part
from service.pictures.scales import limits, value_range

MOST_POINTS = 4000
"""Of a curve; a longer one is drawn by the smallest and largest value of each of half as many stretches."""
DASHES = ("-", "--", ":", "-.")
MOST_ROWS = 4
"""Rows of markers' labels above a profile; beyond, they are numbered and named in the caption."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Profile:
    """What a profile shows.

    Attributes
    ----------
    axis : Axis
        Å along the profile.
    parts : tuple of Part
        Curves, each of shape (axis.count,).
    name, unit : str
        Of the values.
    mean : float or None
        Where to draw the mean.
    """

    axis: Axis
    parts: tuple[Part, ...]
    name: str
    unit: str
    mean: float | None


def draw_profile(profile: Profile, words: Caption, options: PictureOptions, form: Form, title: str) -> bytes:
    """The picture's bytes.

    Raises
    ------
    InputError
        A limit lies beyond all values, or the picture has no room.
    """
    place = profile.axis.coordinates()
    numbered = False
    with settings(options):
        rows: list[tuple[float, float, str, int]] = []
        if options.markers:
            # The width of the axes is not known yet; a tenth of the picture goes to labels at most.
            rows, numbered = _marker_rows(Sheet(options, Caption((), ())), options, place)
        sheet = Sheet(options, _with_key(words, options) if numbered else words)
        top = sheet.top - (1.5 if _legend_needed(profile, options) else 0.4) * sheet.em
        top -= 1.15 * sheet.em * (1 + max((row for *_, row in rows), default=-1))
        axes = sheet.axes(sheet.left + 4 * sheet.em, sheet.bottom + 3 * sheet.em, 1.0, 1.0)
        _curves(axes, profile, place, options, sheet)
        left, bottom = sheet.left + 4 * sheet.em, sheet.bottom + 3 * sheet.em
        for _ in range(2):
            # Ticks depend on the size and the margins on the ticks: twice round is enough.
            width, height = sheet.right - left - 0.8 * sheet.em, top - bottom
            sheet.move(axes, left, bottom, width, height)
            set_ticks(axes, sheet, width, height)
            set_value_label(axes, sheet, profile.name, profile.unit, height)
            bounds = sheet.bounds(axes)
            left += sheet.left - bounds.x0
            bottom += sheet.bottom - bounds.y0
        width, height = sheet.right - left - 0.8 * sheet.em, top - bottom
        sheet.move(axes, left, bottom, width, height)
        _markers(axes, sheet, rows, (left, top, width), place)
        if _legend_needed(profile, options):
            lift = (1 + max((row for *_, row in rows), default=-1)) * 1.15 * sheet.em
            handles, names = axes.get_legend_handles_labels()
            order = sorted(range(len(names)), key=lambda entry: isinstance(handles[entry], PolyCollection))
            axes.legend(
                [handles[entry] for entry in order],
                [names[entry] for entry in order],
                loc="lower left",
                bbox_to_anchor=(0, 1 + (lift + 0.2 * sheet.em) / height),
                ncols=8,
                frameon=False,
                fontsize="small",
                borderaxespad=0,
                borderpad=0,
                handlelength=2.2,
                columnspacing=1.4,
            )
        return sheet.save(form, title)


def thinned(place: FloatArray, values: AnyArray) -> tuple[FloatArray, AnyArray]:
    """A curve of at most MOST_POINTS points that looks the same: each stretch by its two extremes."""
    if values.size <= MOST_POINTS:
        return place, values
    stretch = -(-2 * values.size // MOST_POINTS)
    whole = values.size // stretch * stretch
    blocks = values[:whole].reshape(-1, stretch)
    # Not a number is neither smallest nor largest.
    lowest = np.where(np.isnan(blocks), np.inf, blocks).argmin(axis=1)
    highest = np.where(np.isnan(blocks), -np.inf, blocks).argmax(axis=1)
    starts = np.arange(blocks.shape[0]) * stretch
    kept = np.unique(np.concatenate([starts + lowest, starts + highest, [0], np.arange(whole, values.size)]))
    return place[kept], values[kept]


def _curves(axes: Axes, profile: Profile, place: FloatArray, options: PictureOptions, sheet: Sheet) -> None:
    banded = [part for part in profile.parts if part.sigma is not None and options.band]
    reach = [part.values for part in profile.parts]
    for part in banded:
        if part.sigma is not None:
            reach += [part.values - options.band * part.sigma, part.values + options.band * part.sigma]
    found = value_range(reach)
    low, high = limits(found, options)
    margin = 0.05 * (high - low)
    low = low - margin if options.low is None else low
    high = high + margin if options.high is None else high
    for order, part in enumerate(profile.parts):
        colour = sheet.theme.curves[order % len(sheet.theme.curves)]
        if part in banded and part.sigma is not None:
            label = f"±{options.band:g} σ" if order == len(banded) - 1 else None
            x, above = thinned(place, part.values + options.band * part.sigma)
            below = np.interp(x, place, part.values - options.band * part.sigma)
            axes.fill_between(x, below, above, color=colour, alpha=0.28, linewidth=0, label=label, gid=f"band-{order}")
        x, y = thinned(place, part.values)
        name = part.name or profile.name
        axes.plot(
            x,
            y,
            color=colour,
            linestyle=DASHES[order % len(DASHES)],
            linewidth=0.14 * sheet.points,
            label=plain(name),
            gid=f"curve-{order}",
            zorder=3,
        )
    if low <= 0 <= high:
        axes.axhline(0, color=sheet.theme.ink, linewidth=0.6, zorder=1, gid="zero-line")
    if profile.mean is not None:
        label = f"mean density {number(profile.mean)}"
        axes.axhline(profile.mean, color=sheet.theme.ink, linewidth=0.7, dashes=(6, 3), label=label, gid="mean-line")
    axes.set_xlim(min(place[0], place[-1]), max(place[0], place[-1]))
    axes.set_ylim(low, high)
    axes.set_xlabel(f"{plain(profile.axis.label.replace('_', ' '))} (Å)")
    for side in ("top", "right"):
        axes.spines[side].set_visible(False)


def _legend_needed(profile: Profile, options: PictureOptions) -> bool:
    banded = any(part.sigma is not None for part in profile.parts) and options.band > 0
    return len(profile.parts) > 1 or banded or profile.mean is not None


def _marker_rows(
    sheet: Sheet, options: PictureOptions, place: FloatArray
) -> tuple[list[tuple[float, float, str, int]], bool]:
    """Position, half width, text and row of each label inside the profile; whether they are numbers."""
    width = sheet.right - sheet.left - 6 * sheet.em
    scale = width / float(np.ptp(place))
    inside = [
        (position, plain(label), order)
        for order, (position, label) in enumerate(options.markers)
        if place.min() <= position <= place.max()
    ]
    for numbered in (False, True):
        ends: list[float] = []
        rows = []
        for position, label, order in sorted(inside):
            text = str(order + 1) if numbered else label
            half = 0.5 * sheet.text_width(text, 0.83 * sheet.points)
            middle = min(max((position - place.min()) * scale, half), width - half)
            row = next((row for row, end in enumerate(ends) if end <= middle - half), len(ends))
            ends[row : row + 1] = [middle + half + 0.5 * sheet.em]
            rows.append((position, half, text, row))
        if len(ends) <= MOST_ROWS:
            return rows, numbered
    return [(position, half, text, min(row, MOST_ROWS - 1)) for position, half, text, row in rows], True


def _with_key(words: Caption, options: PictureOptions) -> Caption:
    key = ", ".join(f"{order} {label}" for order, (_, label) in enumerate(options.markers, start=1))
    return Caption((*words.needed, f"Markers: {key}."), words.further)


def _markers(
    axes: Axes,
    sheet: Sheet,
    rows: list[tuple[float, float, str, int]],
    room: tuple[float, float, float],
    place: FloatArray,
) -> None:
    left, top, width = room
    for order, (position, half, text, row) in enumerate(rows):
        axes.axvline(position, color=sheet.theme.faint, linewidth=0.8, zorder=0, gid=f"marker-{order}")
        middle = (position - float(place.min())) / float(np.ptp(place)) * width
        middle = min(max(middle, half), width - half)
        sheet.write(
            left + middle, top + (0.25 + 1.15 * row) * sheet.em, text, fontsize=0.83 * sheet.points, ha="center"
        )

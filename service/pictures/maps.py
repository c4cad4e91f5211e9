"""Maps: slices in true shape, one large or several beside each other on one scale of colours."""

from __future__ import annotations

import numpy as np
from matplotlib.axes import Axes

from engine.arrays import FloatArray
from engine.errors import InputError
from service.pictures.canvas import SLACK, Form, Sheet, plain, set_ticks, settings
from service.pictures.captions import Caption
from service.pictures.layers import colour_bar, draw_map, label_bar, scale_bar, window
from service.pictures.options import PictureOptions
from service.pictures.panels import Maps

BAR_WIDTH = 1.0
"""Of the colour bar, in ems."""
ROOMY, SMALLEST = 6.0, 2.5
"""Longer side of a panel, in ems: labels are brief below the first, below the second nothing is seen."""


def draw_maps(maps: Maps, words: Caption, options: PictureOptions, form: Form, title: str) -> bytes:
    """The picture's bytes.

    Raises
    ------
    InputError
        The picture has no room.
    """
    with settings(options):
        sheet = Sheet(options, words)
        if len(maps.panels) == 1:
            _one(sheet, maps, options)
        else:
            _many(sheet, maps, options)
        return sheet.save(form, title)


def _one(sheet: Sheet, maps: Maps, options: PictureOptions) -> None:
    """A large map with axes in Å."""
    panel = maps.panels[0]
    em = sheet.em
    low, high = window(panel.plane)
    extent = high - low
    left, bottom = 4 * em, 3 * em
    axes = sheet.axes(0.0, 0.0, 1.0, 1.0)
    axes.set_xlim(low[0], high[0])
    axes.set_ylim(low[1], high[1])
    bar_room = 6 * em
    bar: Axes | None = None
    for _ in range(2):
        # Ticks depend on the size and the margins on the ticks: after the first time little moves.
        free = np.array([sheet.right - sheet.left - left - bar_room, sheet.top - 1.6 * em - sheet.bottom - bottom])
        _refuse_small(float(np.min(free)), em, "a map")
        inches = float(np.min(free / extent))
        width, height = (extent * inches).tolist()
        x = sheet.left + left + 0.5 * (free[0] - width)
        y = sheet.bottom + bottom + 0.5 * (free[1] - height)
        sheet.move(axes, x, y, width, height)
        set_ticks(axes, sheet, width, height)
        axes.set_xlabel(sheet.fitted(maps.axis_labels[0], max(width, 8 * em) * SLACK))
        axes.set_ylabel(sheet.fitted(maps.axis_labels[1], max(height, 8 * em) * SLACK))
        bar_height = min(max(height, 10 * em), free[1])
        where = (x + width + em, y + 0.5 * (height - bar_height), BAR_WIDTH * em, bar_height)
        if bar is None:
            bar = colour_bar(sheet, maps, where)
        sheet.move(bar, *where)
        label_bar(sheet, bar, maps, bar_height)
        bounds, beside = sheet.bounds(axes), sheet.bounds(bar)
        left, bottom = x - bounds.x0, y - bounds.y0
        bar_room = beside.x1 - x - width
    draw_map(axes, panel, maps, sheet, inches, options)
    scale_bar(axes, sheet, width, inches, height)


def _many(sheet: Sheet, maps: Maps, options: PictureOptions) -> None:
    """Small maps without ticks, one colour bar and one scale bar for all."""
    em = sheet.em
    low, high = window(maps.panels[0].plane)
    extent = high - low
    points = 0.8 * sheet.points
    height = sheet.top - sheet.bottom - 1.6 * em
    bar_height = min(height - 1.5 * em, 24 * em)
    bar = colour_bar(sheet, maps, (sheet.left, sheet.bottom + em, BAR_WIDTH * em, bar_height))
    label_bar(sheet, bar, maps, bar_height)
    bar_room = sheet.bounds(bar).width + em
    room = (sheet.right - sheet.left - bar_room, height)
    strip, gap = 1.3 * em, 0.8 * em
    for labels in ([panel.label for panel in maps.panels], [panel.brief for panel in maps.panels]):
        widest = max(sheet.text_width(plain(label), points) for label in labels) / SLACK
        columns, inches = _arrange(len(labels), extent, room, (strip, gap, widest), maps.columns)
        size = extent * inches
        if float(size.max()) > ROOMY * em:
            break
    _refuse_small(float(size.max()), em, f"{len(maps.panels)} panels")
    # A label may be wider than its panel: then the panels move apart.
    cell = np.array([max(float(size[0]), min(widest, room[0] / columns - gap)) + gap, float(size[1]) + strip + gap])
    rows = -(-len(labels) // columns)
    left = sheet.left + 0.5 * (room[0] - columns * cell[0] + gap)
    top = sheet.top - 1.6 * em - 0.5 * (height - rows * cell[1] + gap)
    sheet.move(
        bar,
        left + columns * cell[0] - gap + em,
        top - 0.5 * (rows * cell[1] - gap + bar_height),
        BAR_WIDTH * em,
        bar_height,
    )
    for order, panel in enumerate(maps.panels):
        row, column = divmod(order, columns)
        x, y = left + column * cell[0], top - row * cell[1] - strip - float(size[1])
        axes = sheet.axes(x, y, float(size[0]), float(size[1]))
        axes.set_xlim(low[0], high[0])
        axes.set_ylim(low[1], high[1])
        axes.set_axis_off()
        label = sheet.fitted(plain(labels[order]), (cell[0] - 0.5 * gap) * SLACK, points)
        sheet.write(x, y + float(size[1]) + 0.35 * em, label, fontsize=points)
        draw_map(axes, panel, maps, sheet, inches, options)
        if order == 0:
            scale_bar(axes, sheet, float(size[0]), inches, float(size[1]), lift=strip)


def _refuse_small(inches: float, em: float, what: str) -> None:
    if inches < SMALLEST * em:
        raise InputError(
            "width", f"and height leave no room for {what}", "give a larger picture, or ask for less in it"
        )


def _arrange(
    count: int,
    extent: FloatArray,
    room: tuple[float, float],
    margins: tuple[float, float, float],
    wanted: int | None,
) -> tuple[int, float]:
    """Columns, and inches to the Å, of the largest panels that fit with their labels.

    `margins` are the height of a label, the gap between panels and the width of the widest label.
    """
    strip, gap, label = margins
    best = (1, 0.0)
    for columns in range(1, count + 1) if wanted is None else [min(wanted, count)]:
        rows = -(-count // columns)
        free = np.array([room[0] / columns - gap, room[1] / rows - strip - gap])
        inches = float(np.min(free / extent))
        if inches > best[1] and (free[0] >= label or wanted is not None or columns == 1):
            best = (columns, inches)
    return best

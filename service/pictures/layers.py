"""What a map is made of: image, contour lines, outlines of cells, colour bar, scale bar."""

from __future__ import annotations

import math

import numpy as np
from matplotlib.axes import Axes
from matplotlib.collections import LineCollection
from matplotlib.colors import ListedColormap, Normalize
from matplotlib.patches import Polygon
from matplotlib.patheffects import withStroke
from matplotlib.transforms import Affine2D

from engine.arrays import FloatArray
from service.pictures.canvas import Sheet, set_ticks, set_value_label
from service.pictures.captions import number
from service.pictures.contours import finer
from service.pictures.geometry import Plane, outlines, round_length
from service.pictures.options import PictureOptions
from service.pictures.panels import Maps, Panel
from service.pictures.scales import ColourScale

LINE, ZERO_LINE = 0.8, 0.5
"""Widths of contour lines, points."""
FINEST = 16
"""Steps between two samples at most, where a map is refined."""
DARK_BELOW = 0.6
"""Lightness of a colour on which lines are drawn light."""

Samples = tuple[FloatArray, FloatArray, FloatArray]
"""Places along both axes of a plane, counted in its samples, and the values there."""


def window(plane: Plane) -> tuple[FloatArray, FloatArray]:
    """Lower left and upper right corner of a plane, picture coordinates."""
    corners = plane.corners()
    return corners.min(axis=0), corners.max(axis=0)


def draw_map(axes: Axes, panel: Panel, maps: Maps, sheet: Sheet, inches: float, options: PictureOptions) -> None:
    """Image, contour lines, outlines and frame in axes whose limits are set."""
    plane, scale = panel.plane, maps.scale
    frame = Polygon(
        plane.corners(), closed=True, fill=False, edgecolor=sheet.theme.ink, linewidth=0.7, zorder=4, clip_on=False
    )
    frame.set_gid("frame")
    axes.add_patch(frame)
    for side, spine in axes.spines.items():
        spine.set_visible(plane.oblique and side in ("left", "bottom"))
        spine.set_color(sheet.theme.faint)
    lengths = np.linalg.norm(plane.flat_steps, axis=1) * inches * sheet.pixels_per_inch
    # Finer than two samples to the pixel nothing is told apart; coarser than one in two pixels corners show.
    strides = [max(int(0.5 / length), 1) for length in lengths]
    factors = [min(max(math.ceil(length / 2), 1), FINEST) for length in lengths]
    first, second, values = finer(panel.values[:: strides[0], :: strides[1]], (factors[0], factors[1]))
    first, second = first * strides[0], second * strides[1]
    _image(axes, plane, (first, second, values), scale)
    low, high = window(plane)
    axes.set_xlim(low[0], high[0])
    axes.set_ylim(low[1], high[1])
    if maps.levels.size and min(values.shape) > 1:
        _contours(axes, plane, (first, second, values), maps)
    if options.cells:
        _outlines(axes, plane, sheet)


def _image(axes: Axes, plane: Plane, samples: Samples, scale: ColourScale) -> None:
    """Values as colours, in true shape."""
    first, second, values = samples
    # Row 0 is at the bottom; index i of the image is sample first[i] of the plane.
    onto = Affine2D().scale(first[1] if first.size > 1 else 1.0, second[1] if second.size > 1 else 1.0)
    matrix = np.eye(3)
    matrix[:2, :2] = plane.flat_steps.T
    matrix[:2, 2] = plane.flat_origin
    # Of matplotlib's filters only these two meet the samples; the smoother ones flatten peaks.
    smooth = min(values.shape) > 1 and bool(np.isfinite(values).all())
    image = axes.imshow(
        values.T,
        origin="lower",
        extent=(-0.5, values.shape[0] - 0.5, -0.5, values.shape[1] - 0.5),
        cmap=ListedColormap(scale.colours().tolist()),
        norm=Normalize(scale.low, scale.high),
        interpolation="bilinear" if smooth else "nearest",
        interpolation_stage="data",
        aspect="auto",
        transform=onto + Affine2D(matrix) + axes.transData,
        gid="image",
    )
    image.set_clip_path(Polygon(plane.corners(), closed=True, transform=axes.transData))


def _contours(axes: Axes, plane: Plane, samples: Samples, maps: Maps) -> None:
    first, second, values = samples
    places = plane.flatten(np.stack(np.meshgrid(first, second), axis=-1))
    light = maps.scale.lightness_at(maps.levels) < DARK_BELOW
    lines = axes.contour(
        places[..., 0],
        places[..., 1],
        np.ma.masked_invalid(values.T),
        levels=maps.levels,
        colors=["#ffffff" if one else "#10131a" for one in light],
        linestyles=["dashed" if level < 0 else "solid" for level in maps.levels],
        linewidths=[ZERO_LINE if level == 0 else LINE for level in maps.levels],
        zorder=2,
    )
    lines.set_gid("contours")
    lines.set_clip_path(Polygon(plane.corners(), closed=True, transform=axes.transData))


def _outlines(axes: Axes, plane: Plane, sheet: Sheet) -> None:
    found = outlines(plane)
    if found is None:
        return
    for axis, lines in enumerate(found):
        if not lines.shape[0]:
            continue
        drawn = LineCollection(list(lines), colors=[sheet.theme.ink], linewidths=0.8, zorder=3, gid=f"cells-{axis}")
        drawn.set_path_effects([withStroke(linewidth=2.0, foreground=(*sheet.theme.paper, 0.75))])
        axes.add_collection(drawn, autolim=False)


def colour_bar(sheet: Sheet, maps: Maps, where: tuple[float, float, float, float]) -> Axes:
    """A scale of the colours used, ticks on its right, triangles where values lie beyond it."""
    scale = maps.scale
    bar = sheet.axes(*where)
    bar.set_gid("colour-bar")
    bar.imshow(
        np.linspace(scale.low, scale.high, 256)[:, None],
        origin="lower",
        extent=(0, 1, scale.low, scale.high),
        cmap=ListedColormap(scale.colours().tolist()),
        norm=Normalize(scale.low, scale.high),
        aspect="auto",
        interpolation="nearest",
    )
    bar.xaxis.set_visible(False)
    bar.yaxis.tick_right()
    bar.yaxis.set_label_position("right")
    ends = scale.colours()[[0, -1]]
    for end, (side, tip) in enumerate((("min", -0.03), ("max", 1.03))):
        if scale.beyond in (side, "both"):
            edge = float(end)
            bar.add_patch(
                Polygon(
                    [(0, edge), (1, edge), (0.5, tip)],
                    closed=True,
                    facecolor=tuple(ends[end].tolist()),
                    edgecolor=sheet.theme.ink,
                    linewidth=0.7,
                    transform=bar.transAxes,
                    clip_on=False,
                    gid=f"beyond-{side}",
                )
            )
    for level in maps.levels:
        if scale.low <= level <= scale.high:
            light = bool(scale.lightness_at(np.array([level]))[0] < DARK_BELOW)
            bar.axhline(
                level,
                color="#ffffff" if light else "#10131a",
                linewidth=ZERO_LINE if level == 0 else LINE,
                linestyle="--" if level < 0 else "-",
            )
    return bar


def label_bar(sheet: Sheet, bar: Axes, maps: Maps, height: float) -> None:
    """Ticks and label of a colour bar `height` inches high."""
    set_ticks(bar, sheet, 1.0, height)
    set_value_label(bar, sheet, maps.name, maps.unit, height)


def scale_bar(axes: Axes, sheet: Sheet, width: float, inches: float, height: float, *, lift: float = 0.0) -> None:
    """A bar of a round number of Å above the axes, flush with their left edge."""
    length = round_length(max(0.3 * width, 3 * sheet.em) / inches)
    low = axes.get_xlim()[0]
    above = 1 + (lift + 0.75 * sheet.em) / height
    axes.plot(
        [low, low + length],
        [above, above],
        transform=axes.get_xaxis_transform(),
        color=sheet.theme.ink,
        linewidth=0.22 * sheet.points,
        solid_capstyle="butt",
        clip_on=False,
        gid="scale-bar",
        scalex=False,
        scaley=False,
    )
    axes.text(
        low + length + 0.5 * sheet.em / inches,
        above,
        f"{number(length)} Å",
        transform=axes.get_xaxis_transform(),
        va="center_baseline",
        fontsize="small",
        clip_on=False,
    )

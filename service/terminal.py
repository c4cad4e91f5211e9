"""A field in a terminal: enough to see that it is the right one."""

from __future__ import annotations

import math

import numpy as np

from engine.arrays import FloatArray
from engine.resolution.response import PointResponse
from service.encoders.describe import Shown, point_words

COLUMNS = 64
ROWS = 14
LISTED = 12
EIGHTHS = " ▁▂▃▄▅▆▇█"
SHADES = " ·░▒▓█"
BINS = 64


def render(shown: Shown) -> str:
    """The field as text: a chart of a profile, shades of a plane, a list of points; then the figures."""
    made = shown.field
    values = np.asarray(np.abs(made.values) if made.values.dtype.kind == "c" else made.values, dtype=np.float64)
    if made.components:
        values = np.sqrt((values**2).sum(axis=-1))
    if not made.axes:
        picture = _points(made.sampling.positions(), values)
    elif values.ndim == 1:
        picture = _chart(values, made.axes[0].coordinates(), made.unit)
    elif values.ndim == 2:
        picture = _shades(values, [axis.step for axis in made.axes])
        picture.append(f"  {made.axes[0].label} → to the right, {made.axes[1].label} ↑ upwards")
    else:
        picture = _histogram(values)
    return "\n".join([*picture, "", *_figures(shown)])


def _chart(values: FloatArray, along: FloatArray, unit: str) -> list[str]:
    """Columns of eighths; each column is the mean of the samples that fall into it."""
    columns = _means(values, min(COLUMNS, values.size), axis=0).tolist()
    low, high = min(columns), max(columns)
    span = high - low or 1.0
    heights = [round((value - low) / span * ROWS * 8) for value in columns]
    lines = []
    for row in range(ROWS - 1, -1, -1):
        bar = "".join(EIGHTHS[min(max(height - 8 * row, 0), 8)] for height in heights)
        label = {ROWS - 1: f"{high:10.4g}", 0: f"{low:10.4g}"}.get(row, " " * 10)
        lines.append(f"{label} ┤{bar}")
    lines.append(f"{'':10} └{'─' * len(columns)}")
    end = f"{along[-1]:.4g} Å"
    start = f"{along[0]:.4g}"
    lines.append(f"{'':12}{start}{' ' * max(1, len(columns) - len(start) - len(end))}{end}")
    lines.append(f"{'':12}values in {unit}")
    return lines


def _shades(values: FloatArray, steps: list[float]) -> list[str]:
    """One character a sample or more; a character is about twice as high as it is wide."""
    width = values.shape[0] * steps[0]
    height = values.shape[1] * steps[1]
    across = min(COLUMNS, values.shape[0])
    up = max(1, min(values.shape[1], round(across * height / width / 2), 2 * ROWS))
    picked = _means(_means(values, across, axis=0), up, axis=1)
    low, high = float(picked.min()), float(picked.max())
    levels = np.rint((picked - low) / ((high - low) or 1.0) * (len(SHADES) - 1)).astype(int)
    lines = ["".join(SHADES[level] for level in row) for row in levels.T[::-1]]
    return [f"  {line}" for line in lines] + [f"  '{SHADES[0]}' {low:.4g} … '{SHADES[-1]}' {high:.4g}"]


def shade_rows(values: FloatArray) -> list[str]:
    """One line of shades for each row of (n, samples), on a common scale."""
    picked = _means(np.asarray(values, dtype=np.float64), min(COLUMNS, values.shape[1]), axis=1)
    low, high = float(picked.min()), float(picked.max())
    levels = np.rint((picked - low) / ((high - low) or 1.0) * (len(SHADES) - 1)).astype(int)
    return ["".join(SHADES[level] for level in row) for row in levels]


def _means(values: FloatArray, count: int, axis: int) -> FloatArray:
    """Means over `count` stretches of one axis, as equal as whole samples allow all along it."""
    edges = np.arange(count + 1) * values.shape[axis] // count
    sums = np.add.reduceat(values, edges[:-1], axis=axis)
    widths = np.diff(edges).reshape([-1 if place == axis else 1 for place in range(values.ndim)])
    return np.asarray(sums / widths)


def _points(positions: FloatArray, values: FloatArray) -> list[str]:
    lines = [
        f"  ({', '.join(f'{x:8.4f}' for x in position)})  {value:12.5g}"
        for position, value in zip(positions[:LISTED], values[:LISTED], strict=True)
    ]
    rest = values.size - LISTED
    return lines + ([f"  … and {rest} more"] if rest > 0 else [])


def _histogram(values: FloatArray) -> list[str]:
    counts, edges = np.histogram(values, bins=BINS)
    tops = np.log1p(counts) / math.log1p(counts.max())
    bar = "".join(EIGHTHS[round(float(top) * 8)] for top in tops)
    return ["  how the values are distributed (logarithmic)", f"  {bar}", f"  {edges[0]:.4g} … {edges[-1]:.4g}"]


def _figures(shown: Shown) -> list[str]:
    coefficients, made = shown.coefficients, shown.field
    statistics = made.statistics
    mean = statistics.mean
    mean_text = f"{mean.real:.5g}{mean.imag:+.5g}i" if isinstance(mean, complex) else f"{mean:.5g}"
    unit = "" if made.unit == "1" else f" {made.unit}"
    shape = " × ".join(str(count) for count in made.values.shape)
    lines = [
        f"  {shape} values, {statistics.minimum:.5g} … {statistics.maximum:.5g}{unit}, "
        f"mean {mean_text}, rms {statistics.rms:.5g}",
        f"  {made.summed} coefficients summed of {coefficients.tally.rows} rows "
        f"({'+'.join(made.methods)}, error ≤ {made.accuracy:.0e} of the largest value)",
    ]
    if made.resolution is not None:
        lines.append(f"  resolution {made.resolution[0]:.4g} … {made.resolution[1]:.4g} Å{_point(shown.response)}")
    if made.sigma is not None:
        sigma = made.sigma
        of_sigma = "" if shown.quantity == "significance" else unit
        lines.append(f"  standard uncertainty {sigma.minimum:.3g} … {sigma.maximum:.3g}{of_sigma}, rms {sigma.rms:.3g}")
        lines.append(f"  · the uncertainty contains: {'; '.join(sigma.contains)}")
        lines.append(f"  · and not: {'; '.join(sigma.omits)}")
    if shown.change is not None:
        change = shown.change
        lines.append(
            f"  terms that were not measured: rms change {change.rms:.3g}{unit}; at most {change.largest_inside:.3g} "
            f"by those missing down to d_min, {change.largest_beyond:.3g} by those beyond"
        )
    return lines + [f"  · {text}" for text in (*made.applied, *made.notes, *shown.advice)]


def _point(response: PointResponse | None) -> str:
    if response is None:
        return ""
    return f"; {point_words(response)}"

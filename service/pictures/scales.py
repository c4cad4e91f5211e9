"""From values to colours and contour levels: numbers alone, nothing is drawn here."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from engine.arrays import AnyArray, FloatArray
from engine.errors import InputError
from service.pictures.options import PictureOptions
from service.pictures.palettes import PaletteKind, Theme, lightness, palette

SHADES = 256
NEGATIVE_SHARE = 0.05
"""Part of the range below zero from which a field counts as signed: ripples reach less deep."""


@dataclass(frozen=True, slots=True)
class ColourScale:
    """How values become colours.

    Attributes
    ----------
    kind : "sequential" or "diverging"
    theme : "light" or "dark"
    low, high : float
        Values of the first and the last colour.
    first, last : float
        Positions of those two in the palette, 0…1: a diverging palette is used as far as the values
        reach from its centre.
    beyond : "neither", "min", "max" or "both"
        On which side values lie beyond the scale and share its end colour.
    centre : float or None
        Value at the middle of a diverging palette.
    """

    kind: PaletteKind
    theme: Theme
    low: float
    high: float
    first: float
    last: float
    beyond: str
    centre: float | None

    def colours(self) -> FloatArray:
        """The colours from low to high, sRGB, shape (SHADES, 3)."""
        return palette(self.kind, self.theme, np.linspace(self.first, self.last, SHADES))

    def lightness_at(self, values: FloatArray) -> FloatArray:
        """OKLab L of the colours of values, (N,) -> (N,)."""
        share = np.clip((values - self.low) / (self.high - self.low), 0.0, 1.0)
        return lightness(self.kind, self.theme, self.first + share * (self.last - self.first))


def value_range(arrays: Sequence[AnyArray]) -> tuple[float, float]:
    """Smallest and largest finite value; 0, 0 where there is none."""
    lows, highs = [], []
    for array in arrays:
        low, high = float(np.min(array)), float(np.max(array))
        if not (math.isfinite(low) and math.isfinite(high)):
            finite = array[np.isfinite(array)]
            if not finite.size:
                continue
            low, high = float(finite.min()), float(finite.max())
        lows.append(low)
        highs.append(high)
    return (min(lows), max(highs)) if lows else (0.0, 0.0)


def colour_scale(found: tuple[float, float], mean: float, options: PictureOptions) -> ColourScale:
    """The scale for values between `found` whose mean is `mean`.

    Raises
    ------
    InputError
        A limit leaves no value inside the scale.
    """
    low, high = limits(found, options)
    kind: PaletteKind
    if options.palette == "auto":
        kind = "diverging" if -low > NEGATIVE_SHARE * (high - low) else "sequential"
    else:
        kind = options.palette
    beyond = {(False, False): "neither", (True, False): "min", (False, True): "max", (True, True): "both"}[
        found[0] < low, found[1] > high
    ]
    if kind == "sequential":
        return ColourScale(kind, options.theme, low, high, 0.0, 1.0, beyond, None)
    centre = mean if options.centre == "mean" else 0.0
    reach = max(abs(high - centre), abs(low - centre))
    first, last = (0.5 + (end - centre) / (2 * reach) for end in (low, high))
    return ColourScale(kind, options.theme, low, high, first, last, beyond, centre)


def limits(found: tuple[float, float], options: PictureOptions) -> tuple[float, float]:
    """Ends of a scale: those asked for, else those of the values; never equal.

    Raises
    ------
    InputError
        The one limit given lies beyond all values.
    """
    low = found[0] if options.low is None else options.low
    high = found[1] if options.high is None else options.high
    if low > high or (low == high and (options.low is not None or options.high is not None)):
        name, side = ("low", "above") if options.low is not None else ("high", "below")
        raise InputError(
            name, f"lies {side} all values, which run from {found[0]:.4g} to {found[1]:.4g}", "give both limits"
        )
    # Of a constant field the digits of rounding are no structure.
    least = 1e-9 * max(abs(low), abs(high))
    if high - low <= least:
        half = 0.5 * abs(high) if high else 0.5
        return low - half, high + half
    return low, high

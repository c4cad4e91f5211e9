"""Colours of the pictures, computed along straight or bent paths of the OKLab colour space.

The space is made so that equal steps look equal. Along every palette the lightness runs evenly, and
in one direction (of a diverging palette: in each half), so that the order of values survives
printing in grey and every kind of colour vision; the diverging ends are a blue and a rust, which
none of them confuses.

Matrices and transfer: OKLab colour space, and IEC 61966-2-1 (sRGB).
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Literal

import numpy as np

from engine.arrays import FloatArray

Theme = Literal["light", "dark"]
PaletteKind = Literal["sequential", "diverging"]

_TO_ROOTS = np.array(
    [
        [1.0, 0.3963377774, 0.2158037573],
        [1.0, -0.1055613458, -0.0638541728],
        [1.0, -0.0894841775, -1.2914855480],
    ]
)
_TO_LINEAR = np.array(
    [
        [4.0767416621, -3.3077115913, 0.2309699292],
        [-1.2684380046, 2.6097574011, -0.3413193965],
        [-0.0041960863, -0.7034186147, 1.7076147010],
    ]
)


@dataclass(frozen=True, slots=True)
class Colours:
    """What a theme draws with; each an sRGB triple, 0…1.

    Attributes
    ----------
    paper, ink : tuple of float
        Background, and text and lines on it.
    faint : tuple of float
        Rules that must not compete with the data.
    curves : tuple of tuple of float
        One per component of a profile.
    """

    paper: tuple[float, float, float]
    ink: tuple[float, float, float]
    faint: tuple[float, float, float]
    curves: tuple[tuple[float, float, float], ...]


def srgb(lab: FloatArray) -> FloatArray:
    """sRGB (..., 3), not clipped, from OKLab L, a, b (..., 3)."""
    linear: FloatArray = (lab @ _TO_ROOTS.T) ** 3 @ _TO_LINEAR.T
    bent = 1.055 * np.maximum(linear, 0.0031308) ** (1 / 2.4) - 0.055
    return np.where(linear <= 0.0031308, 12.92 * linear, bent)


def lightness(kind: PaletteKind, theme: Theme, positions: FloatArray) -> FloatArray:
    """OKLab L of a palette at positions 0…1."""
    return path(kind, theme, positions)[..., 0]


def palette(kind: PaletteKind, theme: Theme, positions: FloatArray) -> FloatArray:
    """sRGB colours of a palette at positions 0…1 (of a diverging one, ½ is its centre); (N,) -> (N, 3)."""
    return np.clip(srgb(path(kind, theme, positions)), 0.0, 1.0)


def path(kind: PaletteKind, theme: Theme, positions: FloatArray) -> FloatArray:
    """A palette in OKLab; (N,) -> (N, 3)."""
    if kind == "sequential":
        # From ink by way of sea green to ivory: a parabola in a, b, while L runs evenly.
        t = positions[..., None]
        return (1 - t) ** 2 * _SEQUENTIAL[0] + 2 * t * (1 - t) * _SEQUENTIAL[1] + t**2 * _SEQUENTIAL[2]
    low, centre, high = _DIVERGING[theme]
    t = 2 * positions[..., None] - 1
    return centre + np.maximum(-t, 0) * (low - centre) + np.maximum(t, 0) * (high - centre)


def colours(theme: Theme) -> Colours:
    """The colours of a theme."""
    return _THEMES[theme]


def _lch(light: float, chroma: float, hue: float) -> FloatArray:
    """OKLab from lightness, chroma and hue (degrees)."""
    angle = math.radians(hue)
    return np.array([light, chroma * math.cos(angle), chroma * math.sin(angle)])


def _colour(light: float, chroma: float, hue: float) -> tuple[float, float, float]:
    red, green, blue = np.clip(srgb(_lch(light, chroma, hue)), 0.0, 1.0).tolist()
    return red, green, blue


_SEQUENTIAL = (_lch(0.23, 0.080, 285), _lch(0.595, 0.165, 180), _lch(0.96, 0.055, 95))
_DIVERGING = {
    "light": (_lch(0.40, 0.135, 258), _lch(0.97, 0.0, 0), _lch(0.40, 0.115, 40)),
    "dark": (_lch(0.86, 0.078, 235), _lch(0.24, 0.0, 0), _lch(0.86, 0.115, 75)),
}
_THEMES = {
    "light": Colours(
        paper=(1.0, 1.0, 1.0),
        ink=_colour(0.25, 0.02, 270),
        faint=_colour(0.72, 0.01, 270),
        curves=(_colour(0.45, 0.13, 258), _colour(0.55, 0.14, 42), _colour(0.50, 0.085, 180)),
    ),
    "dark": Colours(
        paper=_colour(0.20, 0.015, 270),
        ink=_colour(0.93, 0.01, 270),
        faint=_colour(0.48, 0.01, 270),
        curves=(_colour(0.78, 0.10, 240), _colour(0.78, 0.13, 60), _colour(0.82, 0.09, 175)),
    ),
}

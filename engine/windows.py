"""Termination windows and sharpening: real factors on the coefficients that depend on |G| alone.

A series cut at G_max ripples. A window that falls towards G_max trades ripple for width; how much
it widens a point is computed here and travels with every result made with one.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Literal, get_args

import numpy as np
from scipy import special

from engine.arrays import FloatArray, as_choice, as_positive
from engine.errors import InputError

WindowKind = Literal["none", "lanczos", "raised_cosine", "gaussian"]


@dataclass(frozen=True, slots=True)
class Window:
    """A termination window w(u), u = |G|/G_max.

    none: 1. lanczos: sin(πu)/(πu) (Lanczos, Applied Analysis, 1956, §IV.6). raised_cosine:
    ½(1 + cos πu). gaussian: exp(−B s²), s = |G|/4π, with ``b`` = B in Å².
    """

    kind: WindowKind = "none"
    b: float | None = None

    def __post_init__(self) -> None:
        as_choice(self.kind, get_args(WindowKind), "kind")
        if self.kind == "gaussian":
            if self.b is None:
                raise InputError("b", "is absent", "a gaussian window needs b, in Å²")
            as_positive(self.b, "b", "Å²")
        elif self.b is not None:
            raise InputError("b", f"has no meaning for the window {self.kind}", "leave it out")

    def factors(self, magnitudes: FloatArray, g_max: float) -> FloatArray:
        """w at |G| (Å⁻¹, shape (N,)) for a series that ends at g_max (Å⁻¹); shape (N,)."""
        if self.kind == "none":
            return np.ones_like(magnitudes)
        if self.kind == "gaussian":
            return gaussian(magnitudes, -float(self.b or 0.0))
        u = np.minimum(magnitudes / g_max, 1.0)
        return np.sinc(u) if self.kind == "lanczos" else 0.5 * (1 + np.cos(np.pi * u))

    def describe(self, dimension: int, g_max: float) -> str:
        """The window in words, with the width it gives a point."""
        if self.kind == "none":
            return "no termination window"
        detail = f" with B = {self.b:g} Å²" if self.b is not None else ""
        wide = point_width(self, dimension, g_max) / point_width(NO_WINDOW, dimension, g_max)
        return (
            f"termination window {self.kind}{detail}: a point's full width at half maximum is "
            f"{wide:.3g} times that without a window"
        )


NO_WINDOW = Window()
PANELS, NODES = 32, 16
"""Of the quadrature over 0…1: Gauss's rule in equal panels, enough for a window a hundred times
narrower than the sphere it is applied to. One rule of as many nodes takes half a second to find."""


def gaussian(magnitudes: FloatArray, b: float) -> FloatArray:
    """exp(b s²), s = |G|/4π: sharpening for b > 0, smoothing for b < 0; b in Å²."""
    return np.exp(b * (magnitudes / (4 * np.pi)) ** 2)


def point_width(window: Window, dimension: int, g_max: float) -> float:
    """Full width at half maximum (Å) of a point in a series complete out to g_max (Å⁻¹).

    The response of a complete sphere, disc or interval of coefficients,
    R(r) ∝ ∫₀¹ w(u) u^{d−1} Λ_d(u G_max r) du with Λ_1 = cos, Λ_2 = J_0, Λ_3 = sin x/x
    (James, The Optical Principles of the Diffraction of X-rays, 1948, for d = 3).
    """
    nodes, weights = np.polynomial.legendre.leggauss(NODES)
    u = ((np.arange(PANELS)[:, None] + 0.5 * (nodes + 1)) / PANELS).ravel()
    measure = np.tile(weights, PANELS) * window.factors(u * g_max, g_max) * u ** (dimension - 1)

    def response(radius: float) -> float:
        x = u * g_max * radius
        kernel = np.cos(x) if dimension == 1 else special.j0(x) if dimension == 2 else np.sinc(x / np.pi)
        return float(measure @ kernel)

    half = response(0.0) / 2
    inner, outer = 0.0, 0.25 * 2 * math.pi / g_max
    while response(outer) > half:
        inner, outer = outer, 2 * outer
    while outer - inner > 1e-9 * outer:
        middle = 0.5 * (inner + outer)
        inner, outer = (middle, outer) if response(middle) > half else (inner, middle)
    return inner + outer

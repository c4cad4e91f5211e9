"""Stacks of Gaussian layers, and an analysis of many drawn profiles at once in plain numpy."""

from __future__ import annotations

import numpy as np

from engine import Columns, Lattice, assemble

PERIOD = 60.0
LAYERS = ((5.0, 1.5, 10.0), (3.0, 2.0, 25.0), (4.0, 1.2, 48.0))
"""Area (e/Å²), standard deviation and centre (Å) of layers that hardly overlap."""
CROWDED = ((5.0, 2.0, 10.0), (3.5, 2.4, 17.5), (4.0, 1.8, 26.0), (2.0, 6.0, 44.0))
"""Layers whose minima lie well above zero and at which the density curves."""
HALF = 2 * np.sqrt(2 * np.log(2))


def gaussians(layers=LAYERS, *, orders=45, background=0.0, period=PERIOD, shift=0.0, unit="e/Å³"):
    """The coefficient set of Gaussian layers on a background; the cut is far below rounding of their widths."""
    l = np.arange(orders + 1)
    q = 2 * np.pi * l / period
    f = sum(a * np.exp(-((q * s) ** 2) / 2 - 1j * q * (z + shift)) for a, s, z in layers) / period
    f = f + np.where(l == 0, background, 0.0)
    return assemble(
        Lattice.from_period(period),
        Columns(indices=[l], real=f.real, imag=f.imag),
        values="density_coefficient",
        unit=unit,
    )


class Drawn:
    """Profiles of D draws of one-dimensional coefficients, each with its own places."""

    def __init__(self, orders, weights, values, period):
        self.kappa = 2 * np.pi * orders / period
        self.strength = values * weights

    def at(self, t, order=0):
        """Derivative at t (D,)."""
        waves = np.exp(1j * t[:, None] * self.kappa) * (1j * self.kappa) ** order
        return (self.strength * waves).real.sum(axis=1)

    def extremum(self, start):
        """Newton's method from one place for all draws."""
        t = np.full(len(self.strength), start)
        for _ in range(20):
            t = t - self.at(t, 1) / self.at(t, 2)
        return t

    def crossing(self, start, level, slope):
        """Where n = level + slope·t, level (D,) at t = 0 and slope (D,)."""
        t = np.full(len(self.strength), start)
        for _ in range(30):
            t = t - (self.at(t) - level - slope * t) / (self.at(t, 1) - slope)
        return t

    def quadrature(self, a, b, nodes=24):
        """∫ n dt and ∫ t n dt from a to b (D,), by Gauss's rule."""
        x, w = np.polynomial.legendre.leggauss(nodes)
        t = a[:, None] + 0.5 * (x + 1) * (b - a)[:, None]
        n = np.stack([self.at(column) for column in t.T], axis=1)
        w = 0.5 * w * (b - a)[:, None]
        return (w * n).sum(axis=1), (w * n * t).sum(axis=1)


def reanalysed(drawn, start, baseline):
    """Numbers of one layer for every draw.

    `start`: places of p, a, b, left, right to begin from; `baseline`: minima, higher_minimum or a level.
    """
    p, a, b = (drawn.extremum(start[name]) for name in ("p", "a", "b"))
    n_p, n_a, n_b = drawn.at(p), drawn.at(a), drawn.at(b)
    if baseline == "minima":
        at_a, at_b = n_a, n_b
    elif baseline == "higher_minimum":
        at_a = at_b = np.maximum(n_a, n_b)
    else:
        at_a = at_b = np.full(p.size, float(baseline))
    slope = (at_b - at_a) / (b - a)
    half = 0.5 * (n_p - at_a - slope * (p - a))
    level = at_a - slope * a + half
    left, right = (drawn.crossing(start[name], level, slope) for name in ("left", "right"))
    area, first = drawn.quadrature(a, b)
    under = (b - a) * (at_a + at_b) / 2
    # ∫ t B dt of a straight line, by Simpson's rule, which is exact for it.
    lever = (b - a) / 6 * (a * at_a + (a + b) * (at_a + at_b) + b * at_b)
    return {
        "position": p,
        "centroid": (first - lever) / (area - under),
        "height": n_p,
        "prominence": n_p - np.maximum(n_a, n_b),
        "width": right - left,
        "area": area,
        "area_above": area - under,
        "lower": a,
        "upper": b,
        "lower_density": n_a,
        "upper_density": n_b,
    }

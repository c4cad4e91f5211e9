"""Stacks that widths are simulated of, by sums written out."""

from __future__ import annotations

import numpy as np
from scipy import optimize


def summed(h, g, layers):
    """Intensity a layer of N layers with independent spacings: the double sum over layers, gathered by distance."""
    n = np.arange(1, layers)
    h = np.atleast_1d(h)[:, None]
    damped = np.exp(-2 * np.pi**2 * g**2 * h**2 * n) * np.cos(2 * np.pi * h * n)
    return 1 + 2 * ((1 - n / layers) * damped).sum(axis=1)


def full_width(order, g, layers):
    """Full width at half maximum of a line of the sum, in h; NaN where it never falls to a half."""
    span = min(0.5, 0.5 / layers + (np.pi * g * order) ** 2)
    top = optimize.minimize_scalar(
        lambda h: -summed(h, g, layers)[0], bounds=(order - span, order + span), method="bounded"
    )
    away = np.linspace(0, 0.5, 1001)
    ends = []
    for side in (-1, 1):
        below = np.flatnonzero(summed(top.x + side * away, g, layers) < -top.fun / 2)
        if not below.size:
            return np.nan
        a, b = away[below[0] - 1], away[below[0]]
        ends.append(
            optimize.brentq(lambda t, side=side: summed(top.x + side * t, g, layers)[0] + top.fun / 2, a, b, xtol=1e-12)
        )
    return sum(ends)

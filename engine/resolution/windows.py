"""Termination windows side by side: what each gives and what each costs, on the same coefficients."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from engine.arrays import FloatArray, IntArray
from engine.averages import along
from engine.coefficients import CoefficientSet
from engine.errors import InputError
from engine.fields import Treatment, multipliers
from engine.resolution.response import point_response
from engine.series import Series
from engine.windows import NO_WINDOW, Window

SLANT = math.cos(math.radians(10))
"""Cosine of the angle within which a row of terms counts as lying along a direction."""
PER_ORDER = 16
"""Samples of a step to the shortest period of its terms."""


@dataclass(frozen=True, slots=True, kw_only=True)
class WindowEffect:
    """What a termination window does to a point and to a step.

    Attributes
    ----------
    window : Window
    peak : float
        Height of a point at its centre, relative to the same terms without a window.
    directions : float64, shape (d, d)
    widths : float64, shape (d,)
        Principal directions and the full widths at half maximum along them, Å, sharpest first;
        see `engine.resolution.PointResponse`.
    ripple : float
    ripple_at : float or None
        Most negative value of the response, its peak being 1, and its distance, Å.
    overshoot : float
        Of a step, as a fraction of its jump.
    step_normal : tuple of int
        Indices of the lattice planes that the step is parallel to.
    step_orders : int
        Terms that build it up: those whose G is normal to the planes, mates once.
    """

    window: Window
    peak: float
    directions: FloatArray
    widths: FloatArray
    ripple: float
    ripple_at: float | None
    overshoot: float
    step_normal: tuple[int, ...]
    step_orders: int


def usual_windows(coefficients: CoefficientSet) -> tuple[Window, ...]:
    """None, lanczos, raised_cosine, and the gaussian that is exp(−2) at the last of the terms with a phase.

    Raises
    ------
    InputError
        No term with a phase but the zero term.
    """
    s_max = float(coefficients.lattice.sine_over_wavelength(_phased(coefficients).indices).max())
    return NO_WINDOW, Window("lanczos"), Window("raised_cosine"), Window("gaussian", b=2 / s_max**2)


def compare_windows(
    coefficients: CoefficientSet, treatment: Treatment | None = None, windows: Sequence[Window] | None = None
) -> tuple[WindowEffect, ...]:
    """Apply each window to exactly the same coefficients.

    Parameters
    ----------
    coefficients : CoefficientSet
        Those with a phase are taken.
    treatment : Treatment, optional
        Its sharpening and its average stay; its window, and its field, do not matter.
    windows : sequence of Window, optional
        `usual_windows` by default.

    Returns
    -------
    tuple of WindowEffect
        One to each window, in their order.

    Raises
    ------
    InputError
        No term with a phase but the zero term, no window, or a window and an average that leave
        nothing of a point.

    Notes
    -----
    The step is a plane one, parallel to the lattice planes whose row of reciprocal-lattice points
    holds the most terms within 10° of the sharpest principal direction (of the whole set where none
    lies there). Only terms of that row have a part in it: averaged over the plane, all others
    vanish. The response summed up along the normal is the staircase

        U(t) = t/P + Σ_l f_l sin(2πlt/P)/(πl),

    a step of 1 at t = 0 and at every period P, with f_l the factor of order l, 0 where it is not in
    the set; the mean is taken as known. The overshoot is the largest U − ½ for 0 < t < P/2. Without a
    window and with all orders up to a high one it is Si(π)/π − ½ = 8.949 % (Wilbraham, Camb. Dublin
    Math. J. 3 (1848) 198), with the Lanczos factor 1.187 %. Gaps among the orders are in it.
    """
    asked = usual_windows(coefficients) if windows is None else tuple(windows)
    if not asked:
        raise InputError("windows", "is an empty list", "give at least one window")
    given = treatment or Treatment()
    plain = replace(given, field="density", window=NO_WINDOW, apply_merit=False, self_term=0.0)
    used = _phased(coefficients)
    base = multipliers(used, plain).factors[0].real
    magnitudes = used.lattice.magnitudes(used.indices)
    g_max = float(magnitudes.max())
    double = np.where(magnitudes > 0, 2.0, 1.0) if used.real else np.ones(used.count)
    height = float(double @ base)
    normal: IntArray | None = None
    effects = []
    for number, window in enumerate(asked):
        factors = base * window.factors(magnitudes, g_max)
        peak = float(double @ factors)
        series = Series(used.lattice, used.indices, factors.astype(np.complex128), used.real)
        if not (abs(peak) > 0 and abs(height) > 0):
            raise InputError(("windows", number), "leaves nothing of a point", "choose another window or average")
        found = point_response(series)
        if found is None:
            raise AssertionError("a term besides the zero term was made sure of")
        if normal is None:
            normal = step_normal(used, found.directions[0])
        overshoot, orders = step_overshoot(used, factors, normal)
        effects.append(
            WindowEffect(
                window=window,
                peak=peak / height,
                directions=found.directions,
                widths=found.widths,
                ripple=found.ripple,
                ripple_at=found.ripple_at,
                overshoot=overshoot,
                step_normal=tuple(normal.tolist()),
                step_orders=orders,
            )
        )
    return tuple(effects)


def step_normal(used: CoefficientSet, direction: FloatArray) -> IntArray:
    """Indices, without a common divisor, of the row of terms along a direction; int64, shape (d,)."""
    indices = used.indices[used.indices.any(axis=1)]
    divisor = np.gcd.reduce(indices, axis=1)
    waves = used.lattice.wavevectors(indices)
    cosine = np.abs(waves @ direction) / np.linalg.norm(waves, axis=1)
    near = cosine >= SLANT
    if near.any():
        indices, divisor, cosine = indices[near], divisor[near], cosine[near]
    # The last term of a row has the row's number of orders as its divisor; among equals the nearest row.
    most = divisor == divisor.max()
    place = int(np.flatnonzero(most)[np.argmax(cosine[most])])
    return np.asarray(indices[place] // divisor[place])


def step_overshoot(used: CoefficientSet, factors: FloatArray, normal: IntArray) -> tuple[float, int]:
    """Overshoot of a step parallel to the planes `normal`, and how many orders build it; see `compare_windows`."""
    others = used.indices.any(axis=1)
    row = np.flatnonzero(along(normal, used.indices) & others)
    axis = int(np.flatnonzero(normal)[0])
    orders = np.abs(used.indices[row, axis] // normal[axis])
    # Where only each second order exists the step returns after half the period.
    orders = orders // np.gcd.reduce(orders)
    # A complex density lists both mates, each of which is half of a cosine.
    strengths = np.bincount(orders, factors[row] * (1.0 if used.real else 0.5))
    last = strengths.size - 1
    l = np.arange(1, last + 1)
    samples = PER_ORDER * max(last, 4)
    spectrum = np.zeros(samples // 2 + 1, dtype=np.complex128)
    spectrum[1 : last + 1] = -0.5j * strengths[1:] / (np.pi * l)
    half = samples // 2
    t = np.arange(half + 1) / samples
    excess = t + np.fft.irfft(spectrum, samples)[: half + 1] * samples - 0.5
    place = int(excess.argmax())
    best, x = float(excess[place]), float(t[place])
    for _ in range(4):
        # U′ = 1 + 2 Σ f cos and U″ lead from the sample to the maximum.
        angle = 2 * np.pi * l * x
        slope = 1 + 2 * float(strengths[1:] @ np.cos(angle))
        bend = -4 * np.pi * float((strengths[1:] * l) @ np.sin(angle))
        if not bend < 0:
            break
        x -= min(max(slope / bend, -1 / samples), 1 / samples)
        best = max(best, x + float((strengths[1:] / (np.pi * l)) @ np.sin(2 * np.pi * l * x)) - 0.5)
    return max(best, 0.0), int(np.unique(orders).size)


def _phased(coefficients: CoefficientSet) -> CoefficientSet:
    used = coefficients.phased()
    if not used.indices.any():
        raise InputError("phase_deg", "is known of no coefficient but the zero term", "give coefficients with phases")
    return used

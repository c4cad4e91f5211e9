"""Contour lines: at which values, and samples fine enough to draw them smoothly."""

from __future__ import annotations

import math

import numpy as np
from scipy.interpolate import RectBivariateSpline

from engine.arrays import AnyArray, FloatArray
from engine.errors import InputError
from service.pictures.options import MOST_LEVELS, PictureOptions

CUBIC = 4
"""Least samples along an axis for a cubic spline."""


def contour_levels(found: tuple[float, float], sigma_rms: float | None, options: PictureOptions) -> FloatArray:
    """Values of the contour lines inside the range found, ascending.

    Parameters
    ----------
    sigma_rms : float or None
        What one σ is, in the field's unit.

    Raises
    ------
    InputError
        Levels in σ without σ, or more levels than are told apart.
    """
    if options.levels:
        chosen = np.unique(np.array(options.levels, dtype=np.float64))
        return chosen[(chosen >= found[0]) & (chosen <= found[1])]
    name = "level_step"
    step = options.level_step
    if options.level_sigmas is not None:
        name = "level_sigmas"
        if sigma_rms is None or not sigma_rms > 0:
            raise InputError(name, "asks for levels in σ, and the field has none", "ask for its uncertainty too")
        step = options.level_sigmas * sigma_rms
    if step is None:
        return np.zeros(0)
    first, last = found[0] / step, found[1] / step
    if last - first > MOST_LEVELS:
        raise InputError(
            name,
            f"makes about {last - first:,.0f} contour levels between {found[0]:.4g} and {found[1]:.4g}",
            f"give a larger step, which makes at most {MOST_LEVELS}",
        )
    multiples = np.arange(math.ceil(first), math.floor(last) + 1)
    if not options.zero_contour:
        multiples = multiples[multiples != 0]
    return np.asarray(multiples * step, dtype=np.float64)


def finer(values: AnyArray, factors: tuple[int, int]) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Samples at `factors` as many steps along each axis, by cubic splines through those given.

    A spline meets every sample. Where one is not a number, or an axis is too short, the values come
    back as they are.

    Returns
    -------
    float64, shape (M_1,), and float64, shape (M_2,)
        Places, counted in the samples given.
    float64, shape (M_1, M_2)
    """
    places = [np.arange(count, dtype=np.float64) for count in values.shape]
    samples = values.astype(np.float64)
    if max(factors) == 1 or min(values.shape) < CUBIC or not np.isfinite(values).all():
        return places[0], places[1], samples
    first, second = (
        np.linspace(0, count - 1, factor * (count - 1) + 1) for count, factor in zip(values.shape, factors, strict=True)
    )
    spline = RectBivariateSpline(places[0], places[1], samples)
    return first, second, np.asarray(spline(first, second), dtype=np.float64)

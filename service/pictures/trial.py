"""A trial stack on one page: measured against calculated amplitudes, the observed profile, what the model lacks."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from matplotlib.axes import Axes
from matplotlib.ticker import MaxNLocator

from engine.arrays import FloatArray
from engine.evaluate import Field
from engine.fields import PHASES_DECIDE
from service.pictures.canvas import Form, Sheet, settings
from service.pictures.captions import Caption, with_unit
from service.pictures.options import PictureOptions

SHARE = 0.52
"""Of the height that the profile takes."""
WIDTH = 0.32
"""Of a bar, orders."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Trial:
    """What the page shows.

    Attributes
    ----------
    order, measured, calculated : float64, shape (n,)
    sigma : float64, shape (n,), or None
    unit : str
        Of the amplitudes.
    observed, residual : Field
        Profiles with the model's phases, and of what the model lacks.
    words : tuple of str
        R and what else is to be said.
    """

    order: FloatArray
    measured: FloatArray
    calculated: FloatArray
    sigma: FloatArray | None
    unit: str
    observed: Field
    residual: Field
    words: Sequence[str]


def draw_trial(made: Trial, options: PictureOptions, form: Form) -> bytes:
    """The page's bytes.

    Raises
    ------
    InputError
        The picture has no room for its caption.
    """
    phases = "Phases are the model's: a wrong model gives a wrong profile that looks as sharp."
    with settings(options):
        notes = tuple(note for note in made.observed.notes if note != PHASES_DECIDE)
        sheet = Sheet(options, Caption((*made.words, phases), notes))
        left, low = sheet.left + 5.2 * sheet.em, sheet.bottom + 3.0 * sheet.em
        width, height, gap = sheet.right - left - 0.8 * sheet.em, sheet.top - low, 3.6 * sheet.em
        tall = SHARE * (height - gap)
        _profiles(sheet.axes(left, low, width, tall), made, sheet, options)
        _amplitudes(sheet.axes(left, low + tall + gap, width, height - tall - gap - 0.4 * sheet.em), made, sheet)
        return sheet.save(form, options.title or "trial stack")


def _amplitudes(axes: Axes, made: Trial, sheet: Sheet) -> None:
    theme = sheet.theme
    axes.bar(made.order - WIDTH / 2, made.measured, WIDTH, color=theme.curves[0], label="measured", gid="measured")
    axes.bar(
        made.order + WIDTH / 2, made.calculated, WIDTH, color=theme.curves[1], label="calculated", gid="calculated"
    )
    if made.sigma is not None:
        place = made.order - WIDTH / 2
        axes.errorbar(place, made.measured, made.sigma, fmt="none", ecolor=theme.ink, elinewidth=0.8, capsize=2)
    axes.xaxis.set_major_locator(MaxNLocator(integer=True))
    axes.legend(frameon=False, fontsize="small")
    axes.set_xlabel("order")
    axes.set_ylabel(with_unit("|F|", made.unit))
    axes.spines[["top", "right"]].set_visible(False)


def _profiles(axes: Axes, made: Trial, sheet: Sheet, options: PictureOptions) -> None:
    theme = sheet.theme
    place, values = made.observed.axes[0].coordinates(), np.asarray(made.observed.values, dtype=np.float64)
    if made.observed.sigma is not None and options.band:
        spread = options.band * made.observed.sigma.values
        axes.fill_between(place, values - spread, values + spread, color=theme.curves[0], alpha=0.28, linewidth=0)
    axes.plot(place, values, color=theme.curves[0], label="observed, with the model's phases", gid="observed")
    axes.plot(place, made.residual.values, color=theme.curves[1], linestyle="--", label="residual", gid="residual")
    axes.axhline(0, color=theme.ink, linewidth=0.5)
    axes.set_xlim(float(place[0]), float(place[-1]))
    axes.legend(frameon=False, fontsize="small")
    axes.set_xlabel("distance along the normal (Å)")
    axes.set_ylabel(with_unit("density", made.observed.unit))
    axes.spines[["top", "right"]].set_visible(False)

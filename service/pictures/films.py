"""A film on one page: amplitudes with their signs, the profile with its band and layers, the alternatives."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np
from matplotlib.axes import Axes
from matplotlib.ticker import MaxNLocator

from engine.films.analysis import FilmAnalysis
from service.pictures.canvas import Form, Sheet, settings
from service.pictures.captions import Caption, number, with_unit
from service.pictures.options import PictureOptions

ALTERNATIVES = 4
"""Sign sets shown beside the one used."""
DASHES = ("-", "--")
SHARE = 0.46
"""Of the height that the profile takes."""


def draw_film(made: FilmAnalysis, options: PictureOptions, form: Form) -> bytes:
    """The page's bytes.

    Raises
    ------
    InputError
        The picture has no room for its caption.
    """
    with settings(options):
        sheet = Sheet(options, _caption(made, options))
        gap, left = 3.6 * sheet.em, sheet.left + 5.2 * sheet.em
        width, height = sheet.right - left - 0.8 * sheet.em, sheet.top - sheet.bottom
        low = sheet.bottom + 3.0 * sheet.em
        tall = SHARE * (height - gap)
        _profile(sheet.axes(left, low, width, tall), made, sheet, options)
        above = low + tall + gap + 1.2 * sheet.em
        rest = sheet.top - above - 1.2 * sheet.em
        if made.ranked is not None and len(made.ranked.profiles) > 1:
            half = (width - gap - 2.5 * sheet.em) / 2
            _amplitudes(sheet.axes(left, above, half, rest), made, sheet)
            _alternatives(sheet.axes(left + half + gap + 2.5 * sheet.em, above, half, rest), made, sheet)
        else:
            _amplitudes(sheet.axes(left, above, width, rest), made, sheet)
        return sheet.save(form, options.title or "film")


def _profile(axes: Axes, made: FilmAnalysis, sheet: Sheet, options: PictureOptions) -> None:
    place, values, theme = made.profile.axes[0].coordinates(), made.profile.values, sheet.theme
    if made.profile.sigma is not None and options.band > 0:
        spread = options.band * made.profile.sigma.values
        axes.fill_between(place, values - spread, values + spread, color=theme.curves[0], alpha=0.3, linewidth=0)
    axes.plot(place, values, color=theme.curves[0], linewidth=1.3)
    axes.axhline(0, color=theme.ink, linewidth=0.5)
    high = float(np.max(values))
    for position, sigma in zip(made.layers.position, _errors(made), strict=True):
        axes.axvline(position, color=theme.ink, linewidth=0.4, alpha=0.6)
        words = number(float(position)) + ("" if sigma is None else f" ± {sigma:.2g}")
        axes.annotate(
            words, (position, high), xytext=(2, 3), textcoords="offset points", fontsize="x-small", rotation=0
        )
    for region in made.task.regions:
        axes.axvspan(region.start, region.end, color=theme.ink, alpha=0.06, linewidth=0)
    axes.set_xlim(float(place[0]), float(place[-1]))
    axes.set_xlabel("distance along the normal (Å)")
    axes.set_ylabel(with_unit("density", made.profile.unit))
    _plain(axes)


def _errors(made: FilmAnalysis) -> list[float | None]:
    sigma = made.layers.position_sigma
    # On a mirror a position is exact but for rounding.
    return [None] * made.layers.count if sigma is None else [float(one) if one > 1e-9 else None for one in sigma]


def _amplitudes(axes: Axes, made: FilmAnalysis, sheet: Sheet) -> None:
    orders, theme = made.orders, sheet.theme
    known = np.isfinite(made.phase_deg)
    signed = orders.amplitude * np.where(known, np.cos(np.radians(np.nan_to_num(made.phase_deg))), 1.0)
    doubtful = set() if made.ranked is None or made.ranked.decided else set(made.ranked.in_doubt)
    for order, value in zip(orders.order.tolist(), signed.tolist(), strict=True):
        shade = 0.35 if order in doubtful else 1.0
        axes.plot([order, order], [0, value], color=theme.curves[0], linewidth=2.4, alpha=shade)
    if orders.sigma is not None:
        axes.errorbar(orders.order, signed, orders.sigma, fmt="none", ecolor=theme.ink, elinewidth=0.8, capsize=2)
    axes.axhline(0, color=theme.ink, linewidth=0.5)
    axes.set_xlabel("order" + (", pale: sign in doubt" if doubtful else ""))
    unit = "arbitrary unit" if orders.scale == "arbitrary" else f"{orders.unit} · Å"
    axes.set_ylabel(f"F ({unit})")
    axes.xaxis.set_major_locator(MaxNLocator(integer=True))
    _plain(axes)


def _alternatives(axes: Axes, made: FilmAnalysis, sheet: Sheet) -> None:
    ranked, theme = made.ranked, sheet.theme
    if ranked is None:
        raise AssertionError("drawn only where signs were ranked")
    for row, profile in enumerate(ranked.profiles[: ALTERNATIVES + 1]):
        style: dict[str, Any] = {
            "color": theme.curves[row % len(theme.curves)],
            "linestyle": DASHES[row // len(theme.curves)],
            "linewidth": 1.4 if row == 0 else 0.9,
        }
        axes.plot(ranked.z, profile, label=f"{row + 1}: score {ranked.scores[row]:.4g}", **style)
    axes.legend(fontsize="x-small", frameon=False, loc="best")
    axes.set_xlabel("distance from mirror to mirror (Å)")
    axes.set_ylabel(with_unit("density", ranked.unit))
    _plain(axes)


def _plain(axes: Axes) -> None:
    axes.spines[["top", "right"]].set_visible(False)


def _caption(made: FilmAnalysis, options: PictureOptions) -> Caption:
    spacing = made.spacing
    error = "" if spacing.period_sigma is None else f" ± {spacing.period_sigma:.2g}"
    needed = [f"Period {spacing.period:.6g}{error} Å from {spacing.order.size} orders."]
    if made.ranked is not None:
        needed.append(made.ranked.verdict)
    if made.scale is not None:
        needed.append(made.scale.words[:1].upper() + made.scale.words[1:] + ".")
    needed.append("Phases decide: wrong phases give a wrong profile that looks as sharp.")
    sigma = made.profile.sigma
    if sigma is not None:
        needed.append(f"Band: ±{options.band:g} σ, of {'; '.join(sigma.contains)}.")
    return Caption(tuple(needed), tuple(note for note in made.notes if note not in needed))


def draw_run(
    made: Sequence[FilmAnalysis],
    values: Sequence[float],
    variable: str,
    unit: str,
    options: PictureOptions,
    form: Form,
) -> bytes:
    """Profiles of a run, each above the last, against the run's variable: a waterfall over one period each.

    Raises
    ------
    InputError
        The picture has no room for its caption.
    """
    caption = Caption(
        (
            f"{len(made)} profiles along {variable}, each over one period and raised by its place in the run.",
            "Phases decide: wrong phases give wrong profiles that look as sharp.",
        ),
        tuple(dict.fromkeys(one.ranked.verdict for one in made if one.ranked is not None)),
    )
    with settings(options):
        sheet = Sheet(options, caption)
        left, low = sheet.left + 5.2 * sheet.em, sheet.bottom + 3.0 * sheet.em
        axes = sheet.axes(left, low, sheet.right - left - 6 * sheet.em, sheet.top - low - 0.6 * sheet.em)
        theme = sheet.theme
        spans = [float(np.ptp(one.profile.values)) for one in made]
        step = 0.35 * (max(spans) or 1.0)
        ends = []
        for row, (one, value) in enumerate(zip(made, values, strict=True)):
            place, raised = one.profile.axes[0].coordinates(), one.profile.values + row * step
            # The first lie in front: later ones are drawn before them and hidden where they overlap.
            depth = 2 * (len(made) - row)
            axes.fill_between(place, raised, raised.min() - step, color=theme.paper, linewidth=0, zorder=depth)
            axes.plot(place, raised, color=theme.curves[0], linewidth=1.1, zorder=depth + 1)
            ends.append((float(raised[-1]), f"{value:g} {unit}".rstrip()))
        for height, words in ends:
            axes.annotate(
                words,
                (1.0, height),
                xycoords=("axes fraction", "data"),
                xytext=(4, 0),
                textcoords="offset points",
                fontsize="x-small",
                va="center",
            )
        axes.set_xlim(0, max(one.spacing.period for one in made))
        axes.set_xlabel("distance along the normal (Å)")
        axes.set_ylabel(with_unit("density, raised", made[0].profile.unit))
        _plain(axes)
        return sheet.save(form, options.title or "film run")

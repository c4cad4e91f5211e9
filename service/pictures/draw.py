"""A computed field as a picture: what to show is decided here, how it looks in `curves` and `maps`."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Literal, get_args

import numpy as np

from engine.arrays import FloatArray, as_choice
from engine.coefficients import CoefficientSet
from engine.errors import InputError
from engine.evaluate import Field
from engine.quantities import Quantity
from engine.sampling import AffineGrid
from service.pictures import captions
from service.pictures.contours import contour_levels
from service.pictures.geometry import close
from service.pictures.options import PictureOptions
from service.pictures.panels import Maps, Panel, of_box, of_plane
from service.pictures.parts import Part, parts
from service.pictures.scales import colour_scale, value_range
from service.problems import Problem

Form = Literal["png", "svg"]
PRODUCTS = ("profile", "slice", "grid")


@dataclass(frozen=True, slots=True, kw_only=True)
class _Task:
    """What is to be drawn; `name` says in words what the values are, `mean` is the mean density if known."""

    name: str
    coefficients: CoefficientSet
    field: Field
    grid: AffineGrid
    drawn: tuple[Part, ...]
    quantity: Quantity
    mean: float | None
    options: PictureOptions
    form: Form
    title: str


def draw(
    kind: str,
    coefficients: CoefficientSet,
    field: Field,
    options: PictureOptions | None = None,
    form: Form = "png",
    *,
    product: str | None = None,
    quantity: Quantity = "value",
) -> bytes:
    """A field as a picture: along a line its profile, on a plane a map, in a box a sheet of sections.

    Parameters
    ----------
    kind : str
        What the field is, a `FieldKind` such as ``density``.
    coefficients : CoefficientSet
        What it was summed from.
    field : Field
        As `engine.quantities.shown` leaves it.
    options : PictureOptions, optional
    form : "png" or "svg"
    product : str, optional
        For the picture's title inside the file: ``profile``, ``slice`` or ``grid``.
    quantity : Quantity
        What the field's values are.

    Returns
    -------
    bytes
        Of a PNG or an SVG; the same input gives the same bytes.

    Raises
    ------
    Problem
        The optional package that draws is not installed.
    InputError
        The field cannot be drawn (free points, several components in a box), or an option does not
        fit it; the path is the option's name.
    """
    as_choice(form, get_args(Form), "form")
    require_matplotlib()
    grid = field.sampling
    if not isinstance(grid, AffineGrid):
        raise InputError("form", "is a picture, and free points have none", "ask for their values")
    options = options or PictureOptions()
    name = captions.name_of(kind, quantity)
    task = _Task(
        name=name,
        coefficients=coefficients,
        field=field,
        grid=grid,
        drawn=parts(field, quantity, options.part),
        quantity=quantity,
        mean=captions.mean_density(kind, quantity, coefficients, field),
        options=options,
        form=form,
        title=" ".join(options.title.split()) or f"{name}, {product or PRODUCTS[len(grid.shape) - 1]}",
    )
    return _profile(task) if len(grid.shape) == 1 else _maps(task)


def require_matplotlib() -> None:
    """Refuse where pictures cannot be drawn; the one place that knows whether they can.

    Raises
    ------
    Problem
        The optional package that draws is not installed.
    """
    try:
        import matplotlib  # noqa: F401
    except ImportError as fault:
        raise Problem(
            "not-installed",
            "Pictures need the optional package matplotlib, which is not installed here. Install "
            "densityloom[pictures], or ask for the values.",
        ) from fault


def _profile(task: _Task) -> bytes:
    from service.pictures import curves

    options, grid = task.options, task.grid
    drawn = tuple(
        Part(part.name, close(part.values, grid.steps), None if part.sigma is None else close(part.sigma, grid.steps))
        for part in task.drawn
    )
    axis = replace(task.field.axes[0], count=drawn[0].values.size)
    if axis.count < 2:
        raise InputError("shape", "is a single sample, which makes no profile", "ask for more samples")
    words = []
    if any(part.sigma is not None for part in drawn) and options.band:
        words.append(f"Band: ±{options.band:g} σ.")
    elif task.quantity == "value" and task.field.sigma is not None and task.field.values.dtype.kind == "c":
        rms = captions.number(task.field.sigma.rms)
        words.append(f"σ of the complex values (rms {rms}) belongs to both parts together and is not drawn.")
    beyond = [label for position, label in options.markers if not _inside(position, axis.coordinates())]
    if beyond:
        words.append(f"Beyond the profile and not marked: {', '.join(beyond)}.")
    words += _beyond(value_range([part.values for part in drawn]), options, "is cut off")
    shown = curves.Profile(axis=axis, parts=drawn, name=task.name, unit=task.field.unit, mean=task.mean)
    told = captions.caption(task.name, task.coefficients, task.field, tuple(words))
    return curves.draw_profile(shown, told, options, task.form, task.title)


def _maps(task: _Task) -> bytes:
    from service.pictures import maps

    panels, words = _panels(task)
    options, field = task.options, task.field
    found = value_range([panel.values for panel in panels])
    mean = task.mean if task.mean is not None else float(np.real(field.statistics.mean))
    scale = colour_scale(found, mean, options)
    sigma = None if field.sigma is None else 1.0 if task.quantity == "significance" else field.sigma.rms
    levels = contour_levels(found, sigma, options)
    words += _contour_words(task, levels, sigma)
    if scale.centre:
        words.append(f"The palette's centre is the mean, {captions.number(scale.centre)}.")
    if scale.beyond != "neither":
        words += _beyond(found, options, "takes the end colour")
    if any(bool(np.isnan(panel.values).any()) for panel in panels):
        words.append("No colour: no number.")
    labels = tuple(task.grid.labels[axis].replace("_", " ") for axis in (0, 1))
    oblique = panels[0].plane.oblique
    shown = Maps(
        panels=panels,
        scale=scale,
        levels=levels,
        axis_labels=(f"{labels[0]} (Å)", f"⊥ {labels[0]} (Å)" if oblique else f"{labels[1]} (Å)"),
        name=", ".join(filter(None, (task.name, panels[0].label if len(panels) == 1 else ""))),
        unit=field.unit,
        columns=options.columns,
    )
    told = captions.caption(task.name, task.coefficients, field, tuple(words))
    return maps.draw_maps(shown, told, options, task.form, task.title)


def _panels(task: _Task) -> tuple[tuple[Panel, ...], list[str]]:
    """What is drawn, and the words that say how it lies."""
    lattice, grid, options = task.coefficients.lattice, task.grid, task.options
    labels = [label.replace("_", " ") for label in grid.labels]
    if len(grid.shape) == 2:
        panels = of_plane(lattice, grid, task.drawn)
        across, up, where = labels[0], labels[1], ""
    else:
        if len(task.drawn) > 1:
            known = "real, imaginary or modulus" if not task.field.components else "one component"
            raise InputError("part", "is absent, and the field in the box has several", f"choose {known}")
        panels, (first, second), cut = of_box(lattice, grid, task.drawn[0], options)
        across, up, where = labels[first], labels[second], f"Sections along {labels[cut]}; true shape: "
    plane = panels[0].plane
    shape = f"{across} to the right, {up} at {plane.angle:.4g}° to it; interpolated between samples."
    words = [(where or "True shape: ") + shape]
    if options.cells:
        words.append(captions.cell_words([panel.plane for panel in panels]))
    return panels, [word for word in words if word]


def _contour_words(task: _Task, levels: FloatArray, sigma: float | None) -> list[str]:
    options, unit = task.options, task.field.unit
    if not (options.levels or options.level_step or options.level_sigmas):
        return []
    return [captions.contour_words(levels, unit, options, sigma)]


def _beyond(found: tuple[float, float], options: PictureOptions, fate: str) -> list[str]:
    """What became of values outside the limits asked for."""
    sides = []
    if options.low is not None and found[0] < options.low:
        sides.append(f"below {captions.number(options.low)} (down to {captions.number(found[0])})")
    if options.high is not None and found[1] > options.high:
        sides.append(f"above {captions.number(options.high)} (up to {captions.number(found[1])})")
    return [f"What lies {' and '.join(sides)} {fate}."] if sides else []


def _inside(position: float, place: FloatArray) -> bool:
    return bool(place[0] <= position <= place[-1])

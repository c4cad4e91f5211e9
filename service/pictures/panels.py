"""Fields on planes and boxes as flat panels in true shape."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from engine.arrays import AnyArray, FloatArray
from engine.errors import InputError
from engine.lattice import Lattice
from engine.sampling import AffineGrid
from service.pictures.geometry import Plane, close, lay_flat, spans_period
from service.pictures.options import PictureOptions
from service.pictures.parts import Part
from service.pictures.scales import ColourScale

USUAL_SECTIONS = 12
COORDINATES = ("x", "y", "z")
"""Names of the fractional coordinates."""


@dataclass(frozen=True, slots=True)
class Panel:
    """One map: real values (N_1, N_2) on a plane, and what is written above it, in full and in brief."""

    values: AnyArray
    plane: Plane
    label: str
    brief: str


@dataclass(frozen=True, slots=True, kw_only=True)
class Maps:
    """What a picture of maps shows.

    Attributes
    ----------
    panels : tuple of Panel
        Of one shape.
    scale : ColourScale
        Shared by all.
    levels : float64, shape (L,)
        Contour lines.
    axis_labels : (str, str)
        Of a picture of one panel.
    name, unit : str
        Of the values.
    columns : int or None
        Panels beside each other; None: as many as make them largest.
    """

    panels: tuple[Panel, ...]
    scale: ColourScale
    levels: FloatArray
    axis_labels: tuple[str, str]
    name: str
    unit: str
    columns: int | None


def of_plane(lattice: Lattice, grid: AffineGrid, drawn: tuple[Part, ...]) -> tuple[Panel, ...]:
    """One panel a part, of samples on a plane."""
    found = []
    for part in drawn:
        values = close(part.values, grid.steps)
        found.append(
            Panel(values, lay_flat(lattice, grid, (0, 1), (values.shape[0], values.shape[1])), part.name, part.name)
        )
    return tuple(found)


def of_box(
    lattice: Lattice, grid: AffineGrid, part: Part, options: PictureOptions
) -> tuple[tuple[Panel, ...], tuple[int, int], int]:
    """Sections through a box at equal steps along one of its axes.

    Returns
    -------
    tuple of Panel
    (int, int)
        The axes shown, across and up.
    int
        The axis cut along.

    Raises
    ------
    InputError
        No axis has the name asked for, or it has fewer samples than there are to be sections.
    """
    cut = _axis(grid, options.sections_along)
    count = grid.shape[cut]
    wanted = options.sections or _usual(count)
    if wanted > count:
        raise InputError("sections", f"are {wanted}, and the axis has {count} samples", "give fewer, or sample finer")
    shown = (0, 1, 2)[:cut] + (0, 1, 2)[cut + 1 :]
    first, second = shown
    length = float(np.linalg.norm(lattice.to_cartesian(grid.steps[cut])))
    panels = []
    for index in ((2 * number * count + wanted) // (2 * wanted) for number in range(wanted)):
        values = close(np.take(part.values, index, axis=cut), grid.steps[list(shown)])
        plane = lay_flat(
            lattice,
            grid,
            (first, second),
            (values.shape[0], values.shape[1]),
            grid.origin + index * grid.steps[cut],
        )
        offset = _offset(grid, cut, index)
        panels.append(Panel(values, plane, f"{offset}, {grid.starts[cut] + index * length:.2f} Å", offset))
    return tuple(panels), (first, second), cut


def _usual(count: int) -> int:
    """About twelve sections at equal steps: a divisor of the samples' number, where one is near."""
    divisors = [number for number in range(USUAL_SECTIONS // 2, USUAL_SECTIONS + 1) if count % number == 0]
    return max(divisors, default=min(USUAL_SECTIONS, count))


def _axis(grid: AffineGrid, wanted: str | None) -> int:
    if wanted is None:
        return 2
    if wanted not in grid.labels:
        raise InputError("sections_along", "is not an axis of the samples", f"give one of {', '.join(grid.labels)}")
    return grid.labels.index(wanted)


def _offset(grid: AffineGrid, cut: int, index: int) -> str:
    """Where a section lies: a fractional coordinate, or a share of the sampled edge."""
    step = grid.steps[cut]
    along = np.flatnonzero(step)
    if along.size == 1:
        axis = int(along[0])
        return f"{COORDINATES[axis]} = {grid.origin[axis] + index * step[axis]:.3f}".replace("-", "−")
    count = grid.shape[cut]
    divisions = count if spans_period(step, count) or count == 1 else count - 1
    return f"{index / divisions:.3f} of {grid.labels[cut].replace('_', ' ')}"

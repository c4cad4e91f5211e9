"""From a coefficient set to the surface at a level: costed, computed, made coarser until it fits."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from engine.coefficients import CoefficientSet
from engine.errors import InputError, TooLargeError
from engine.evaluate import Field, Work, perform, prepare
from engine.fields import Treatment
from engine.quantities import Quantity, shown
from engine.surfaces.level import Level, Scale, scale_of
from engine.surfaces.marching import BYTES_PER_TRIANGLE, Samples, march
from engine.surfaces.mesh import Mesh
from engine.surfaces.region import Region
from engine.surfaces.volume import above, signed_bytes
from engine.synthesis import Demand, Progress

FEWEST_TRIANGLES = 100
MOST_TRIANGLES = 5_000_000
TRIANGLES = 200_000
HARDLY = 1.25
"""A mesh that is expected to have up to this many times the triangles allowed is made, and counted."""
SMALL = 10_000
"""A mesh of up to so many triangles is always made, and counted."""
MOST_IN_CUBE = 12
"""Triangles in one cube of eight samples."""
SPARE = 1.03
"""A grid is made coarser by this factor more than the count of triangles asks for."""


@dataclass(frozen=True, slots=True, kw_only=True)
class SurfaceTask:
    """Which surface is wanted.

    Attributes
    ----------
    level : Level
    closed : bool
        Whether caps in the faces of the region close the mesh round what lies above the level.
    max_triangles : int
        The grid is made coarser until the mesh has no more.
    quantity : Quantity
        What the level is one of: the field's values, their standard uncertainty or the ratio of the two.

    Raises
    ------
    InputError
        `max_triangles` out of range, or a level in uncertainties of something else than values.
    """

    level: Level
    closed: bool = False
    max_triangles: int = TRIANGLES
    quantity: Quantity = "value"

    def __post_init__(self) -> None:
        if not FEWEST_TRIANGLES <= self.max_triangles <= MOST_TRIANGLES:
            raise InputError(
                "max_triangles",
                f"is {self.max_triangles:,}",
                f"give a number from {FEWEST_TRIANGLES:,} to {MOST_TRIANGLES:,}",
            )
        if self.level.kind == "level_sigmas" and self.quantity != "value":
            raise InputError("level_sigmas", f"is asked for of the quantity {self.quantity}", "give level or level_rms")

    @property
    def uncertain(self) -> bool:
        """Whether the standard uncertainty of every value is needed."""
        return self.quantity != "value" or self.level.kind == "level_sigmas"


@dataclass(frozen=True, slots=True, kw_only=True)
class SurfaceWork:
    """A surface that has been costed and not yet computed.

    Attributes
    ----------
    task : SurfaceTask
    region : Region
    field : Work
    max_bytes : int or None
    """

    task: SurfaceTask
    region: Region
    field: Work
    max_bytes: int | None

    @property
    def bytes(self) -> int:
        """At the peak: while the field is summed, or while its mesh is made."""
        sigma = 0 if self.field.sigma is None else self.field.sigma.bytes - self.field.sigma.workspace
        made = self.field.bytes_output + sigma + _mesh_bytes(self.task, self.region)
        return max(self.field.bytes, made)


@dataclass(frozen=True, slots=True, kw_only=True)
class Surface:
    """A surface at a level.

    Attributes
    ----------
    mesh : Mesh
    level : float
        In the field's unit.
    scale : Scale
        What levels of the field are counted in.
    task : SurfaceTask
    region : Region
        As it was sampled in the end.
    work : Work
        That the field was computed by in the end.
    field : Field
        With the quantity as its values.
    asked : tuple of int
        Divisions of the region that were asked for.
    fraction_above : float
        Of the region's volume, by the samples.
    """

    mesh: Mesh
    level: float
    scale: Scale
    task: SurfaceTask
    region: Region
    work: Work
    field: Field
    asked: tuple[int, ...]
    fraction_above: float

    @property
    def coarsened(self) -> bool:
        """Whether the grid was made coarser than asked for."""
        return self.region.divisions != self.asked

    @property
    def volume(self) -> float | None:
        """Above the level, Å³; None where the mesh is not closed."""
        return self.mesh.volume() if self.task.closed else None


def prepare_surface(
    coefficients: CoefficientSet,
    region: Region,
    task: SurfaceTask,
    treatment: Treatment | None = None,
    demand: Demand | None = None,
    *,
    max_bytes: int | None = None,
) -> SurfaceWork:
    """Cost a surface without computing it.

    Parameters
    ----------
    max_bytes : int, optional
        Bound of the values, the mesh and the workspace together.

    Raises
    ------
    InputError
        The field is a vector or complex, the region too far from the origin for its steps, or as
        `engine.evaluate.prepare`.
    TooLargeError
        More than `max_bytes` would be needed.
    """
    region.nearest(coefficients.lattice)
    field = prepare(coefficients, region.sampling(), treatment, demand, uncertainty=task.uncertain, max_bytes=max_bytes)
    if field.parts.components:
        raise InputError("field", "is a vector, which has no level", "ask for gradient_magnitude")
    if field.dtype.kind == "c":
        raise InputError("density", "is complex, and has no level", "give the set of a real density")
    work = SurfaceWork(task=task, region=region, field=field, max_bytes=max_bytes)
    if max_bytes is not None and work.bytes > max_bytes:
        raise TooLargeError(
            "samples",
            f"the values and the mesh would take {work.bytes / 2**20:,.0f} MiB, more than the limit of "
            f"{max_bytes / 2**20:,.0f} MiB",
            "ask for fewer samples, fewer triangles or single precision, or raise the limit",
        )
    return work


def perform_surface(work: SurfaceWork, *, progress: Progress | None = None) -> Surface:
    """Compute a costed surface.

    Parameters
    ----------
    progress : callable, optional
        Told of the planes summed on the grid asked for; a coarser one takes less than that.

    Raises
    ------
    InputError
        The level is outside the range of the samples, values are not numbers, or no grid is coarse enough for
        the triangles allowed.
    TransformError
        A numerical library failed.
    """
    asked, task = work.region.divisions, work.task
    scale: Scale | None = None
    while True:
        field = shown(perform(work.field, progress=progress), task.quantity)
        if scale is None:
            scale = scale_of(work.field, field, task.quantity)
        level, tie = scale.value(task.level), _error(field)
        _check_range(field, level, tie, task)
        found = above(field.values, level, work.region.wrapped, closed=task.closed, tie=tie)
        count = 2 * found.crossings
        if count <= max(HARDLY * task.max_triangles, SMALL):
            mesh = march(_samples(work, field), level, found)
            count = len(mesh.triangles)
            if count <= task.max_triangles:
                break
        del found
        progress = None
        work = _coarser(work, count)
    return Surface(
        mesh=mesh,
        level=level,
        scale=scale,
        task=task,
        region=work.region,
        work=work.field,
        field=field,
        asked=asked,
        fraction_above=float(np.count_nonzero(field.values >= level)) / field.values.size,
    )


def _coarser(work: SurfaceWork, count: int) -> SurfaceWork:
    """The same work on a grid that is expected to give few enough triangles: their number goes as 1/step²."""
    task = work.task
    region = work.region.coarser(SPARE * math.sqrt(count / task.max_triangles))
    if region.divisions == work.region.divisions:
        steps = " × ".join(str(count) for count in region.divisions)
        raise InputError(
            "max_triangles",
            f"is {task.max_triangles:,}, but the surface has {count:,} even on a grid of {steps} steps",
            "allow more triangles, or choose another level",
        )
    field = work.field
    return prepare_surface(
        field.coefficients, region, task, field.treatment, field.plans[0].demand, max_bytes=work.max_bytes
    )


def _samples(work: SurfaceWork, field: Field) -> Samples:
    lattice, region = work.field.coefficients.lattice, work.region
    return Samples(
        values=field.values,
        wrapped=region.wrapped,
        origin=lattice.to_cartesian(region.origin),
        steps=region.steps(lattice),
        nearest=region.nearest(lattice),
    )


def _mesh_bytes(task: SurfaceTask, region: Region) -> int:
    """Signed volume and mesh, at most."""
    most = min(max(HARDLY * task.max_triangles, SMALL), MOST_IN_CUBE * math.prod(region.planes))
    return signed_bytes(region.planes, closed=task.closed) + int(most) * BYTES_PER_TRIANGLE


def _check_range(field: Field, level: float, tie: float, task: SurfaceTask) -> None:
    low, high = field.statistics.minimum, field.statistics.maximum
    if not (np.isfinite([low, high, field.statistics.rms]).all() and np.isfinite(field.values).all()):
        raise InputError("quantity", "has values that are not numbers", "ask for a surface of the values")
    if not low + tie < level < high:
        unit = "" if field.unit == "1" else f" {field.unit}"
        what = "" if task.level.kind == "level" else f", {task.level.words(field.unit)},"
        raise InputError(
            task.level.kind,
            f"of {level:.6g}{unit}{what} is outside the values of the samples, {low:.6g} to {high:.6g}{unit}",
            "choose a level between them",
        )


def _error(field: Field) -> float:
    """Of the values, absolute."""
    largest = max(abs(field.statistics.minimum), abs(field.statistics.maximum))
    return largest * max(field.accuracy, float(np.spacing(field.values.dtype.type(1))))

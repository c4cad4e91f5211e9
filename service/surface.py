"""A grid as a surface: from the request to the engine, and to the bytes of a mesh."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import replace
from importlib.util import find_spec
from typing import Any

from engine.coefficients import CoefficientSet
from engine.evaluate import Work
from engine.fields import PHASES_DECIDE, Treatment
from engine.sampling import AffineGrid, Sampling
from engine.surfaces import Level, Region, Surface, SurfaceTask, perform_surface, prepare_surface
from engine.surfaces.level import LevelKind
from engine.synthesis import Demand, Progress
from service.encoders.describe import Shown, describe
from service.encoders.gltf import glb
from service.encoders.negotiation import MEDIA_TYPES, SURFACE_FORMAT
from service.encoders.write import Wanted, explained
from service.problems import Problem, at, located
from service.schemas.products import GridIn, ProductIn
from service.schemas.surface import SurfaceIn
from service.spool import Spool

LEVELS: tuple[LevelKind, ...] = ("level", "level_rms", "level_sigmas")
ORIENTATION = (
    "Normals point towards lower values, out of the region above the level; seen from there the corners of a "
    "triangle run anticlockwise. Those of caps are normal to their face."
)
COORDINATES = (
    "Positions are Cartesian, in Å, without a transform: glTF's own unit, the metre, and its axis that points up have "
    "no meaning here. x, y, z are those of the cell vectors under cell."
)
STRAIGHT = "Vertices lie where straight lines between neighbouring samples have the level; triangles are flat."


def asked_surface(request: ProductIn, form: str | None) -> SurfaceIn | None:
    """The surface that a request asks for; None where it asks for none.

    Raises
    ------
    Problem
        422: a surface without the form that holds one, or the form without a surface; what a mesh has no place for.
        501: the library is not installed.
    """
    asked = request.surface if isinstance(request, GridIn) else None
    if asked is None:
        if form == SURFACE_FORMAT:
            raise at(("surface",), f"is absent, and {SURFACE_FORMAT} holds nothing else", "say at which level it is")
        return None
    if form not in (None, SURFACE_FORMAT):
        raise at(
            ("surface",),
            f"has no place in the form {form}",
            f"ask for {MEDIA_TYPES[SURFACE_FORMAT]} ({SURFACE_FORMAT}), or leave it out",
        )
    if request.uncertainty:
        raise at(
            ("uncertainty",),
            "has no place in a mesh",
            "leave it out; surface.level_sigmas counts the level in it, the quantities sigma and significance show it",
        )
    if request.unmeasured is not None:
        raise at(("unmeasured",), "has no place in a mesh", "leave it out, or ask for another form")
    if find_spec("skimage") is None:
        raise Problem(
            "not-installed",
            "Surfaces need the optional package scikit-image: pip install 'densityloom[surfaces]'. Numbers come as "
            "application/json, application/x-npy and application/x-npz.",
        )
    return asked


def write_surface(
    request: ProductIn,
    asked: SurfaceIn,
    coefficients: CoefficientSet,
    sampling: Sampling,
    treatment: Treatment,
    demand: Demand,
    form: str | None,
    spool: Spool,
    *,
    max_bytes: int,
    renamed: Mapping[str, tuple[str | int, ...]],
    watch: Callable[[Work], Progress | None] | None = None,
) -> Shown:
    """Compute a surface, and write it to the spool where a form is given; returns the field that it is one of.

    Raises
    ------
    Problem
        Pointing to the place in the body.
    """
    level = _level(asked)
    if not isinstance(request, GridIn) or not isinstance(sampling, AffineGrid):
        raise TypeError("a surface is one of a grid")
    own: dict[str, tuple[str | int, ...]] = {
        **renamed,
        "cell": ("set", "cell"),
        "density": ("set", "density"),
        "uncertainty": ("surface", level.kind) if request.quantity == "value" else ("quantity",),
        **{name: ("surface", name) for name in (*LEVELS, "max_triangles")},
    }
    with located(renamed=own):
        region = Region.of(sampling, include_end=request.include_end)
        task = SurfaceTask(
            level=level, closed=asked.closed, max_triangles=asked.max_triangles, quantity=request.quantity
        )
        work = prepare_surface(coefficients, region, task, treatment, demand, max_bytes=max_bytes)
        made = perform_surface(work, progress=None if watch is None else watch(work.field))
    told = _told(made, treatment)
    if form is not None:
        for part in glb(made.mesh, document(made, told), name=f"{told.kind} {_value(made.level, told)}"):
            spool.append(part)
    return told


def document(made: Surface, told: Shown) -> dict[str, Any]:
    """What travels with a mesh, as plain data."""
    mesh, lattice = made.mesh, told.coefficients.lattice
    region = made.region
    return {
        "statement": PHASES_DECIDE if PHASES_DECIDE in told.field.notes else None,
        "level": made.level,
        "level_in": {
            "member": made.task.level.kind,
            "number": made.task.level.number,
            "words": made.task.level.words(told.field.unit),
            "mean": made.scale.mean,
            "rms_deviation": made.scale.deviation,
            "mean_of": "the whole cell, from the coefficients" if made.scale.whole_cell else "the samples",
            "rms_uncertainty": made.scale.sigma,
        },
        "triangles": len(mesh.triangles),
        "vertices": len(mesh.vertices),
        "closed": made.task.closed,
        "max_triangles": made.task.max_triangles,
        "spacing": list(region.spacing(lattice)),
        "steps": list(region.divisions),
        "steps_asked": list(made.asked),
        "coarsened": made.coarsened,
        "area": mesh.area(),
        "cap_area": mesh.cap_area(),
        "volume": made.volume,
        "fraction_above": made.fraction_above,
        "region": {
            "origin": lattice.to_cartesian(region.origin).tolist(),
            "edges": lattice.to_cartesian(region.edges).tolist(),
            "volume": region.volume(lattice),
            "repeats": list(region.wrapped),
        },
        "cell": {"vectors": lattice.vectors.tolist(), "volume": lattice.volume},
        "units": {"length": "Å", "area": "Å²", "volume": "Å³", "level": told.field.unit},
        "coordinates": COORDINATES,
        "orientation": ORIENTATION,
        **describe(told),
    }


def _told(made: Surface, treatment: Treatment) -> Shown:
    """The field as other answers tell of it, and the surface in words."""
    wanted = Wanted(product="grid", quantity=made.task.quantity)
    shown = Shown(
        product=wanted.product,
        kind=treatment.field,
        quantity=wanted.quantity,
        coefficients=made.work.coefficients,
        field=made.field,
    )
    told = explained(shown, wanted, made.work)
    return replace(told, advice=(*told.advice, *_words(made, told)))


def _words(made: Surface, told: Shown) -> tuple[str, ...]:
    mesh, region = made.mesh, made.region
    steps = " × ".join(f"{step:.3g}" for step in region.spacing(told.coefficients.lattice))
    task = made.task
    counted = "" if task.level.kind == "level" else f" ({task.level.words(told.field.unit)})"
    enclosed = "" if made.volume is None else f"; {made.volume:.5g} Å³ lie above it"
    words = [
        f"The surface is at {_value(made.level, told)}{counted}: {mesh.area():.5g} Å² in {len(mesh.triangles):,} "
        f"triangles, with {100 * made.fraction_above:.3g} % of the samples above it{enclosed}.",
        f"{STRAIGHT} Steps: {steps} Å.",
    ]
    if made.coarsened:
        asked, used = (" × ".join(str(count) for count in counts) for counts in (made.asked, region.divisions))
        words.append(
            f"The grid of {asked} steps gave more than {task.max_triangles:,} triangles; the mesh is that of a grid "
            f"of {used} steps, on which the series was summed anew."
        )
    return tuple(words)


def _value(number: float, told: Shown) -> str:
    return f"{number:.5g}" if told.field.unit == "1" else f"{number:.5g} {told.field.unit}"


def _level(asked: SurfaceIn) -> Level:
    """The one level given."""
    given = {name: number for name in LEVELS if (number := getattr(asked, name)) is not None}
    if len(given) != 1:
        raise at(
            ("surface", *list(given)[1:2]),
            "gives the level a second time" if given else "has no level",
            f"give exactly one of {', '.join(LEVELS)}",
        )
    ((kind, number),) = given.items()
    return Level(kind, number)

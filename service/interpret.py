"""From a request's model to the engine's samples and treatment; `interpret_set` makes its set."""

from __future__ import annotations

from collections.abc import Sequence

from engine import averages, sampling
from engine.averages import Average
from engine.fields import Treatment
from engine.lattice import Lattice
from engine.sampling import AffineGrid, Sampling
from engine.windows import Window
from service.problems import at, located
from service.schemas.base import Coordinates, Strict
from service.schemas.products import GridIn, PointsIn, ProductIn, ProfileIn, SliceIn
from service.schemas.sampling import LineIn, PlaneIn, VolumeIn
from service.schemas.treatment import TreatedIn


def treatment(request: TreatedIn, lattice: Lattice) -> Treatment:
    """What is made of the set before it is summed.

    Raises
    ------
    Problem
        Pointing to the place in the body.
    """
    with located("window"):
        window = Window(request.window.kind, request.window.b)
    # The caller states the self term in the square of what the columns carry.
    scale = lattice.volume**2 if request.set.values == "structure_factor" else 1.0
    return Treatment(
        field=request.field,
        window=window,
        sharpen=request.sharpen,
        average=_average(request, lattice),
        # In a combination figures of merit belong to the sets that are combined, and are used up there.
        apply_merit=request.apply_merit and request.combination is None,
        self_term=request.self_term / scale,
    )


def samples(request: ProductIn, lattice: Lattice) -> Sampling:
    """Where the request wants values.

    Raises
    ------
    Problem
        Pointing to the place in the body.
    """
    if isinstance(request, ProfileIn):
        return line(request, lattice, request.coordinates, request.samples)
    if isinstance(request, SliceIn):
        return plane(request, lattice, request.coordinates)
    if isinstance(request, GridIn):
        return volume(request, lattice, request.coordinates)
    if isinstance(request, PointsIn):
        with located():
            return sampling.points(lattice, request.positions, coordinates=request.coordinates)
    raise TypeError(f"no sampling for {type(request).__name__}")


def _average(request: TreatedIn, lattice: Lattice) -> Average | None:
    average = request.average
    if average is None:
        return None
    needed = {"lateral": (), "slab": ("thickness",), "box": ("edges",), "ball": ("radius",)}[average.kind]
    allowed = {*needed, "kind", *(("normal",) if average.kind in ("lateral", "slab") else ())}
    for name in needed:
        if getattr(average, name) is None:
            raise at(("average", name), "is absent", f"an average of the kind {average.kind} needs it")
    for name in sorted(average.model_fields_set - allowed):
        raise at(("average", name), f"has no meaning for the kind {average.kind}", "leave it out")
    with located("average"):
        if average.kind == "ball" and average.radius is not None:
            return averages.ball(average.radius)
        if average.kind == "box" and average.edges is not None:
            return averages.box(lattice, average.edges)
        normal = average.normal or _own_normal(request, lattice)
        if average.kind == "slab" and average.thickness is not None:
            return averages.slab(lattice, normal, average.thickness)
        return averages.lateral(lattice, normal)


def _own_normal(request: TreatedIn, lattice: Lattice) -> Sequence[int]:
    # The place of a series stands in a member of its own.
    for where in (request, getattr(request, "profile", None), getattr(request, "slice", None)):
        normal: Sequence[int] | None = getattr(where, "normal_to", None) or getattr(where, "plane", None)
        if normal is not None:
            return normal
    if lattice.dimension == 1:
        return [1]
    raise at(("average", "normal"), "is absent", "give the indices of the planes averaged over")


def line(request: LineIn, lattice: Lattice, coordinates: Coordinates, samples: int) -> AffineGrid:
    """Samples along a line.

    Raises
    ------
    Problem
        Pointing to the place in the request.
    """
    form = _one_of(request, {"from": ("start", "end"), "along": ("along",), "normal_to": ("normal_to",)})
    if form == "from":
        _only(request, ("start", "end"), ("origin", "length"))
        with located():
            return sampling.line(
                lattice,
                request.start or [],
                request.end or [],
                samples,
                include_end=request.include_end,
                coordinates=coordinates,
            )
    if form == "along":
        _only(request, ("along",), ("length",))
        with located():
            return sampling.lattice_line(
                lattice,
                request.along or [],
                samples,
                origin=request.origin,
                include_end=request.include_end,
                coordinates=coordinates,
            )
    with located():
        return sampling.normal_line(
            lattice,
            request.normal_to or [],
            samples,
            length=request.length,
            origin=request.origin,
            include_end=request.include_end,
            coordinates=coordinates,
        )


def plane(request: PlaneIn, lattice: Lattice, coordinates: Coordinates) -> AffineGrid:
    """Samples on a plane; raises as `line`."""
    edges = ("origin", "edge_1", "edge_2", "shape")
    if _one_of(request, {"edge_1": edges, "plane": ("plane", "width", "height", "spacing")}) == "edge_1":
        _only(request, edges, ("offset", "centre", "width", "height", "spacing"))
        with located():
            return sampling.plane(
                lattice,
                request.origin or [],
                request.edge_1 or [],
                request.edge_2 or [],
                _pair(request.shape or []),
                include_end=request.include_end,
                coordinates=coordinates,
            )
    _only(request, (), ("origin", "shape", "include_end"))
    with located():
        return sampling.lattice_plane(
            lattice,
            request.plane or [],
            offset=request.offset,
            width=request.width or 0.0,
            height=request.height or 0.0,
            spacing=request.spacing or 0.0,
            centre=request.centre,
            coordinates=coordinates,
        )


def volume(request: VolumeIn, lattice: Lattice, coordinates: Coordinates) -> AffineGrid:
    """Samples in a cell or box; raises as `line`."""
    if request.edges is not None:
        _only(request, ("origin", "edges", "shape"), ("spacing",))
        renamed: dict[str, tuple[str | int, ...]] = {f"edge_{j + 1}": ("edges", j) for j in range(3)}
        with located(renamed=renamed):
            return sampling.box(
                lattice,
                request.origin or [],
                request.edges,
                request.shape or [],
                include_end=request.include_end,
                coordinates=coordinates,
            )
    _only(request, (), ("origin", "include_end"))
    with located():
        if _one_of(request, {"shape": ("shape",), "spacing": ("spacing",)}) == "shape":
            return sampling.full_cell(lattice, request.shape or [])
        return sampling.full_cell_by_spacing(lattice, request.spacing or 0.0)


def _pair(shape: Sequence[int]) -> tuple[int, int]:
    if len(shape) != 2:
        raise at(("shape",), f"has {len(shape)} counts", "give 2, one per edge")
    return shape[0], shape[1]


def _one_of(request: Strict, forms: dict[str, tuple[str, ...]]) -> str:
    """Which form a request uses, by the field that leads it; all fields of the form must be there."""
    leads = {form: names[0] if form != "edge_1" else "edge_1" for form, names in forms.items()}
    used = [form for form, lead in leads.items() if getattr(request, lead) is not None]
    if len(used) != 1:
        listed = "; or ".join(", ".join(_alias(name) for name in names) for names in forms.values())
        raise at(
            (used[1],) if used else (_alias(next(iter(forms))),),
            "says a second time where the samples are"
            if used
            else "is absent, and nothing else says where the samples are",
            f"give one of: {listed}",
        )
    _only(request, forms[used[0]], ())
    return used[0]


def _only(request: Strict, needed: Sequence[str], barred: Sequence[str]) -> None:
    for name in needed:
        if getattr(request, name) is None:
            raise at((_alias(name),), "is absent", f"it belongs to the others: {', '.join(map(_alias, needed))}")
    for name in barred:
        if name in request.model_fields_set:
            raise at((_alias(name),), "does not belong to the form of request used", "leave it out")


def _alias(name: str) -> str:
    return {"start": "from", "end": "to"}.get(name, name)

"""From a request's set to the engine's CoefficientSet: columns, symmetry, or a file that is prepared."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from engine.assembly import INDEX_COLUMNS, Columns, MissingPhase, assemble
from engine.coefficients import CoefficientSet
from engine.errors import InputError
from engine.lattice import Lattice
from engine.phases import coefficient_set as coefficients_of
from engine.preparation import Prepared
from engine.readers import ReadTable
from engine.readers.table import LeftOut
from engine.reflections import Reflections
from engine.symmetry import Group, expand
from engine.symmetry.invariance import related
from service.interpret_file import prepared, symmetry_group
from service.problems import at, located
from service.schemas.coefficient_set import COLUMN_NAMES, INDEX_NAMES, Cell, CoefficientSetIn, StoredSetIn
from service.schemas.treatment import SetRequestIn

LARGEST = 1e70
"""Value whose fourth power, in a moment of the density, is still a number."""
CELL_PARAMETERS = ("a", "b", "c", "alpha", "beta", "gamma")


def one_set(request: SetRequestIn, given: CoefficientSetIn, *, max_coefficients: int) -> CoefficientSet:
    """A set of a request, expanded by its symmetry and cut to the resolution limits of the request.

    Raises
    ------
    Problem
        Pointing to the place in the body, as if the set were the member ``set``.
    """
    made = whole_set(given, request.missing_phase, max_coefficients=max_coefficients)
    with located("resolution"):
        made = made.within(d_min=request.resolution.d_min, d_max=request.resolution.d_max)
    with located("trust"):
        trusted = made.trusting(
            least_merit=request.trust.least_merit, largest_sigma_deg=request.trust.largest_sigma_deg
        )
    if request.missing_phase == "refuse" and trusted.unphased:
        raise at(
            ("missing_phase",),
            f"refuses, and {trusted.unphased} phases are not trusted",
            'trust more of them, or ask for "omit"',
        )
    return trusted


def whole_set(
    given: CoefficientSetIn, missing: MissingPhase, *, max_coefficients: int, file: Prepared | None = None
) -> CoefficientSet:
    """A set expanded by its symmetry, not yet cut; raises as `one_set`. A stored one is interpreted once.

    Parameters
    ----------
    file : Prepared, optional
        What `prepared_file` has made of its file of reflections, where the caller has it already.
    """
    stored = given if isinstance(given, StoredSetIn) else None
    if stored is not None and (kept := stored.kept(missing)) is not None:
        return kept
    if given.reflections is None:
        made = _of_columns(given, missing, max_coefficients)
    else:
        made = _of_file(given, missing, file or prepared_file(given, max_coefficients=max_coefficients)[1])
    largest = max(float(np.abs(column).max(initial=0.0)) for column in (made.values, made.sigma) if column is not None)
    if not largest <= LARGEST:
        raise at(
            ("set",),
            f"holds values beyond {LARGEST:g} in the unit of the density, whose powers overflow",
            "state the columns in a larger unit",
        )
    if stored is not None:
        stored.keep(missing, made)
    return made


def lattice_of(cell: Cell) -> Lattice:
    """The lattice a cell describes.

    Raises
    ------
    Problem
        Pointing to the place in the body.
    """
    given = cell.model_fields_set - {name for name in type(cell).model_fields if getattr(cell, name) is None}
    with located("set", "cell"):
        if given == {"period"} and cell.period is not None:
            return Lattice.from_period(cell.period)
        if given == {"vectors"} and cell.vectors is not None:
            return Lattice.from_vectors(cell.vectors)
        if given == {"a", "b", "gamma"}:
            return Lattice.from_planar_parameters(*(getattr(cell, name) for name in ("a", "b", "gamma")))
        if given == set(CELL_PARAMETERS):
            return Lattice.from_parameters(*(getattr(cell, name) for name in CELL_PARAMETERS))
    raise at(
        ("set", "cell"),
        f"has {', '.join(sorted(given)) or 'nothing'}, which describes no lattice",
        "give a, b, c, alpha, beta, gamma; or a, b, gamma; or vectors; or period",
    )


def prepared_file(
    given: CoefficientSetIn, *, max_coefficients: int
) -> tuple[tuple[ReadTable, tuple[LeftOut, ...]], Prepared]:
    """The file of reflections of a set, read and prepared; returns and raises as `interpret_file.prepared`."""
    for name in COLUMN_NAMES:
        if getattr(given, name) is not None:
            raise at(("set", name), "is given beside a file of reflections", "leave it out, or send no file")
    if given.values != "structure_factor":
        raise at(("set", "values"), "must be structure_factor where a file is sent", "files hold structure factors")
    if _mean(given) is not None:
        raise at(("set", "mean"), "is given beside a file of reflections", "give the zero term as a row")
    if given.scale_sigma:
        raise at(("set", "scale_sigma"), "is given beside a file of reflections", "the scale found there has its own")
    lattice = None if given.cell is None else lattice_of(given.cell)
    return prepared(given, lattice, max_rows=max_coefficients)


def _of_file(given: CoefficientSetIn, missing_phase: MissingPhase, made: Prepared) -> CoefficientSet:
    with located("set"):
        coefficients = made.coefficients(unit=given.unit)
    if missing_phase == "refuse" and coefficients.unphased:
        raise at(
            ("missing_phase",),
            f"refuses, and {coefficients.unphased} coefficients have no phase",
            'give every phase, or ask for "omit"',
        )
    return replace(coefficients, tally=replace(coefficients.tally, rows=made.given.count))


def _of_columns(given: CoefficientSetIn, missing_phase: MissingPhase, max_coefficients: int) -> CoefficientSet:
    if given.preparation is not None:
        raise at(("set", "preparation"), "is of a file, and none was sent", "leave it out, or send a file")
    if given.cell is None:
        raise at(("set", "cell"), "is absent", "give the lattice")
    lattice = lattice_of(given.cell)
    names = INDEX_COLUMNS[lattice.dimension]
    for name in INDEX_NAMES:
        present = getattr(given, name) is not None
        if present != (name in names):
            kind = {1: "layer stack", 2: "planar lattice", 3: "crystal"}[lattice.dimension]
            raise at(
                ("set", name),
                f"is {'given' if present else 'absent'}, but the cell is that of a {kind}",
                f"give the index columns {', '.join(names)}",
            )
    rows = len(getattr(given, names[0]))
    if rows > max_coefficients:
        raise at(
            ("set", names[0]),
            f"has {rows:,} rows, more than the limit of {max_coefficients:,}",
            "send fewer coefficients, or have the limit raised",
            kind="too-costly",
        )
    with located("set"):
        made = assemble(
            lattice,
            Columns(
                indices=[getattr(given, name) for name in names],
                amplitude=given.amplitude,
                phase_deg=given.phase_deg,
                real=given.real,
                imag=given.imag,
                sigma=given.sigma,
                phase_sigma_deg=given.phase_sigma_deg,
                merit=given.merit,
            ),
            values=given.values,
            density=given.density,
            mean=_mean(given),
            missing_phase=missing_phase,
            unit=given.unit,
        )
    if given.symmetry is None:
        return replace(made, scale_sigma=given.scale_sigma)
    group = symmetry_group(given.symmetry, lattice.dimension)
    if given.symmetry.columns == "full":
        with located("set", renamed={"lattice": ("cell",), "indices": (names[0],)}):
            return replace(related(made, group), scale_sigma=given.scale_sigma)
    return _expanded(made, given, lattice, group)


def _expanded(made: CoefficientSet, given: CoefficientSetIn, lattice: Lattice, group: Group) -> CoefficientSet:
    """The full set of an asymmetric one. `made` has been checked, and holds the zero term."""
    names = INDEX_COLUMNS[lattice.dimension]
    indices = np.stack([getattr(given, name) for name in names], axis=1).astype(np.int64)
    if given.real is not None and given.imag is not None:
        values = given.real + 1j * given.imag
        phase = np.angle(values)
        amplitude = np.abs(values)
    else:
        amplitude = np.zeros(len(indices)) if given.amplitude is None else given.amplitude
        phase = np.full(len(indices), np.nan) if given.phase_deg is None else np.deg2rad(given.phase_deg)
    # n_m = F(−m)/V: expansion is written for structure factors.
    coefficient = given.values == "density_coefficient"
    scale = lattice.volume if coefficient else 1.0
    reflections = Reflections(
        lattice=lattice,
        indices=np.asfortranarray(-indices if coefficient else indices),
        quantity="amplitude",
        observed=amplitude * scale,
        sigma=None if given.sigma is None else given.sigma * scale,
        phase=phase,
        phase_sigma=None if given.phase_sigma_deg is None else np.deg2rad(given.phase_sigma_deg),
        merit=given.merit,
        row=np.arange(len(indices)),
        scale="arbitrary",
    )
    renamed: dict[str, tuple[str | int, ...]] = {
        "phase": ("phase_deg",),
        "indices": (names[0],),
        "lattice": ("cell",),
    }
    with located("set", renamed=renamed):
        full = expand(reflections, group, friedel=given.density == "real")
        if not full.reflections.count:
            raise InputError("indices", f"hold no reflection that {group.name} allows", "check the group")
        zero = _mean(given)
        mean = None if zero is None else zero * scale
        expanded = coefficients_of(full.reflections, unit=given.unit, mean=mean, density=given.density)
    words = f"expanded by {group.name} from {reflections.count} to {full.reflections.count} reflections"
    left = f"; {full.absent_rows.size} systematically absent ones left out" if full.absent_rows.size else ""
    tally = replace(made.tally, zero_term=expanded.tally.zero_term)
    return replace(expanded, tally=tally, history=(words + left,), group=group, scale_sigma=given.scale_sigma)


def _mean(given: CoefficientSetIn) -> float | complex | None:
    if given.mean_imag is None:
        return given.mean
    if given.mean is None:
        raise at(("set", "mean"), "is absent where mean_imag is given", "give both parts")
    return complex(given.mean, given.mean_imag)

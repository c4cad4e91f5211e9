"""From a laboratory's file to prepared reflections, as a request says."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from dataclasses import replace
from typing import Literal

import numpy as np

from engine.amplitudes.corrections import Correction, FilmAbsorption, Footprint, Lorentz, Multiplicity, Polarisation
from engine.errors import InputError, TooLargeError
from engine.lattice import Lattice
from engine.preparation import (
    KnownDensities,
    Prepared,
    Recipe,
    ReferenceSet,
    TrialModel,
    prepare_reflections,
    with_distributions,
)
from engine.readers import ReadTable, read, to_reflections
from engine.readers.mapping import QUANTITIES, Status
from engine.readers.table import LeftOut, Symmetry
from engine.readers.tabular import Progress
from engine.reflections import Reflections
from engine.scattering import Composition, composition, sum_of_squares
from engine.symmetry import Group, classify, plane_group, space_group, stack_group
from service.problems import at, located
from service.schemas.coefficient_set import ReflectionSetIn
from service.schemas.preparation import CorrectionIn, ModelIn, PreparationIn, ScaleIn, SymmetryIn

DIMENSIONS = {"space_group": 3, "hall": 3, "plane_group": 2, "stack_group": 1}
ROW_BYTES = 8 * len(QUANTITIES)
"""Of a row that has every quantity there is."""
OF_READING: dict[str, tuple[str, ...]] = {
    name: (name,) for name in ("block", "mapping", "observed", "phase", "missing_sigma", "omit")
}
OF_THE_CHAIN: dict[str, tuple[str, ...]] = {
    **{name: (name,) for name in ("wavelength", "corrections", "amplitudes")},
    "content": ("scale", "formula"),
    "factor": ("scale", "factor"),
    "mean": ("scale", "mean"),
    "zero_term": ("scale", "kind"),
    **dict.fromkeys(("known", "profile", "density"), ("scale", "places")),
    **dict.fromkeys(("elements", "species", "positions"), ("model", "atoms")),
}
"""Members of a preparation by what the engine calls them, in either of two steps."""


def prepared(
    given: ReflectionSetIn, lattice: Lattice | None, *, max_rows: int, progress: Progress | None = None
) -> tuple[tuple[ReadTable, tuple[LeftOut, ...]], Prepared]:
    """Read the file of a request and prepare its reflections.

    Parameters
    ----------
    progress : callable, optional
        Called with the bytes read and in all while delimited text is read; may raise to end it.

    Returns
    -------
    (ReadTable, tuple of LeftOut)
        The file as it was read, and the rows that hold no reflection to use.
    Prepared

    Raises
    ------
    Problem
        Pointing to the place in the body, or to the file.
    """
    wanted = given.preparation or PreparationIn()
    if given.reflections is None:
        raise at(("set", "reflections"), "is absent", "send the file as the part reflections of a form")
    if given.symmetry is not None and given.symmetry.columns == "full":
        raise at(
            ("set", "symmetry", "columns"),
            "is full beside a file of reflections",
            "leave it out: equivalents of a file are merged, and then expanded",
        )
    table, reflections, left = _reflections("reflections", given, lattice, max_rows=max_rows, progress=progress)
    group = _group(given.symmetry, table.crystal.symmetry, reflections.lattice.dimension)
    if wanted.phase == "hendrickson_lattman":
        reflections = _with_coefficients(reflections, table, group)
    recipe = Recipe(
        group=group,
        friedel=given.density == "real",
        wavelength=wanted.wavelength or table.crystal.wavelength,
        corrections=_corrections(wanted.corrections, reflections, table, group),
        amplitudes=wanted.amplitudes,
        reject_outliers=wanted.reject_outliers,
        scale=wanted.scale.kind,
        content=None if wanted.scale.formula is None else _content(wanted.scale, wanted.scale.formula),
        units=wanted.scale.units,
        probe=wanted.scale.probe,
        factor=wanted.scale.factor,
        mean=wanted.scale.mean,
        known=_known(wanted.scale, reflections.lattice.dimension),
        model=None if wanted.model is None else _model(wanted.model, reflections.lattice.dimension),
    )
    recipe = replace(recipe, reference=_reference(given, lattice, recipe, max_rows=max_rows))
    with _of_file(OF_THE_CHAIN):
        return (table, left), prepare_reflections(reflections, recipe)


def _reflections(
    member: Literal["reflections", "reference"],
    given: ReflectionSetIn,
    lattice: Lattice | None,
    *,
    max_rows: int,
    progress: Progress | None,
) -> tuple[ReadTable, Reflections, tuple[LeftOut, ...]]:
    part, wanted = getattr(given, member), given.preparation or PreparationIn()
    with _of_file(OF_READING, member):
        table = read(
            part.data,
            name=part.name or None,
            block=wanted.block,
            mapping=wanted.mapping,
            progress=progress,
            # No more is unpacked of an archive than the rows allowed can hold.
            max_bytes=max(len(part.data), ROW_BYTES * max_rows),
        )
        if table.count > max_rows:
            raise TooLargeError((), f"the file has {table.count:,} rows, more than {max_rows:,}", "send fewer rows")
        if lattice is None and table.lattice is None:
            raise at(("set", "cell"), "is absent, and the file gives none", "give the lattice")
        reflections, left = to_reflections(
            table,
            observed=wanted.observed,
            phase=_phase_column(wanted, table),
            lattice=lattice,
            missing_sigma=wanted.missing_sigma,
            omit=[Status[name.upper()] for name in wanted.omit],
        )
    return table, reflections, left


def _reference(
    given: ReflectionSetIn, lattice: Lattice | None, recipe: Recipe, *, max_rows: int
) -> ReferenceSet | None:
    """The second file's unique amplitudes, prepared like the first but neither scaled nor phased."""
    wanted = given.preparation or PreparationIn()
    asked = wanted.scale
    if given.reference is None:
        if asked.kind == "reference":
            raise at(("set", "reference"), "is absent", "send the second file as the part reference of the form")
        return None
    if asked.kind != "reference":
        raise at(("set", "reference"), "was sent, and nothing is scaled to it", 'ask for the scale "reference"')
    table, reflections, _ = _reflections("reference", given, lattice, max_rows=max_rows, progress=None)
    plain = replace(reflections, phase=None, phase_sigma=None, merit=None)
    alone = replace(
        recipe,
        corrections=_corrections(wanted.corrections, plain, table, recipe.group),
        scale="none",
        factor=None,
        content=None,
        mean=None,
        known=None,
        model=None,
    )
    with located("set", "reference"):
        made = prepare_reflections(plain, alone)
    return ReferenceSet(reflections=made.unique, displacement=asked.displacement, robust=asked.robust)


def _known(asked: ScaleIn, dimension: int) -> KnownDensities | None:
    if asked.places is None:
        return None
    for place, one in enumerate(asked.places):
        if len(one.position) != dimension:
            where = ("set", "preparation", "scale", "places", place, "position")
            raise at(where, f"has {len(one.position)} coordinates", f"give {dimension}")
    first, second = asked.places
    return KnownDensities(
        positions=np.array([first.position, second.position], dtype=np.float64),
        densities=(first.density, second.density),
        sigmas=(first.sigma, second.sigma),
    )


@contextmanager
def _of_file(members: Mapping[str, tuple[str, ...]], file: str = "reflections") -> Iterator[None]:
    """Point a fault to the member of the preparation that asks for what cannot be had, any other to the file."""
    try:
        yield
    except InputError as fault:
        name = str(fault.path[0]) if fault.path else ""
        if name not in members:
            with located("set", file):
                raise
        # Rows are the file's, and its words name them; but those of positions are the model's atoms.
        within = {"corrections": fault.path[1:], "positions": fault.rows[:1]}.get(name, ())
        with located("set", "preparation"):
            raise type(fault)((*members[name], *within), fault.reason, fault.cure) from fault


def _phase_column(wanted: PreparationIn, table: ReadTable) -> str | None:
    """The file's phase column to take; "none" where phases come from elsewhere or there are none."""
    if wanted.model is not None:
        if wanted.phase not in (None, "none"):
            raise at(("set", "preparation", "phase"), "is named beside a model", "leave one of the two out")
        return "none"
    if wanted.phase == "hendrickson_lattman":
        return "none"
    if wanted.phase is None and not any(name in table.columns for name in ("phase_deg", "phase_calc_deg")):
        return "none"
    return wanted.phase


def _with_coefficients(reflections: Reflections, table: ReadTable, group: Group) -> Reflections:
    names = ("hl_a", "hl_b", "hl_c", "hl_d")
    absent = [name for name in names if name not in table.columns]
    if absent:
        raise at(("set", "preparation", "phase"), f"needs the column {absent[0]}", f"give {', '.join(names)}")
    rows = np.searchsorted(table.row, reflections.row)
    coefficients = np.stack([table.columns[name][rows] for name in names], axis=1)
    with located("set", "reflections"):
        return with_distributions(reflections, coefficients, group)


def _model(asked: ModelIn, dimension: int) -> TrialModel:
    for place, atom in enumerate(asked.atoms):
        if len(atom.position) != dimension:
            raise at(
                ("set", "preparation", "model", "atoms", place, "position"),
                f"has {len(atom.position)} coordinates",
                f"give {dimension}",
            )
    return TrialModel(
        elements=tuple(atom.element for atom in asked.atoms),
        positions=np.array([atom.position for atom in asked.atoms], dtype=np.float64),
        occupancy=np.array([atom.occupancy for atom in asked.atoms]),
        b_iso=np.array([atom.b_iso for atom in asked.atoms]),
        kind=asked.map,
    )


def symmetry_group(symmetry: SymmetryIn, dimension: int) -> Group:
    """The group a request names.

    Raises
    ------
    Problem
        None or several are named, it is of another dimension, or it is unknown.
    """
    forms = set(type(symmetry).model_fields) - {"columns"}
    named = [name for name in type(symmetry).model_fields if name in forms and getattr(symmetry, name) is not None]
    if len(named) != 1:
        raise at(("set", "symmetry"), f"names {len(named)} groups", f"give one of {', '.join(DIMENSIONS)}, operations")
    form = named[0]
    if DIMENSIONS.get(form, dimension) != dimension:
        raise at(("set", "symmetry", form), f"does not fit a lattice of dimension {dimension}", "name one that does")
    value = getattr(symmetry, form)
    with located("set", "symmetry", form):
        try:
            return _named(form, value, dimension)
        except InputError as fault:
            # The engine's own name of its argument says less than the member's.
            raise InputError(fault.path[1:], fault.reason, fault.cure) from fault


def _named(form: str, value: int | str | list[str], dimension: int) -> Group:
    if isinstance(value, list):
        return Group.from_operations(value, dimension)
    if form == "plane_group":
        return plane_group(value)
    if form == "stack_group":
        return stack_group(str(value))
    return space_group(value, notation="hall" if form == "hall" else "any")


def _group(asked: SymmetryIn | None, found: Symmetry, dimension: int) -> Group:
    """The symmetry asked for, else the file's, else none but the lattice's translations."""
    if asked is not None:
        if asked.columns != "asymmetric":
            raise at(("set", "symmetry", "columns"), "is of columns, and a file was sent", "leave it out")
        return symmetry_group(asked, dimension)
    with located("set", "reflections"):
        name = found.hermann_mauguin or found.hall or ""
        if found.operations:
            return Group.from_operations(found.operations, dimension, name=name, number=found.number)
        if found.hall is not None:
            return space_group(found.hall, notation="hall")
        if found.hermann_mauguin is not None:
            return space_group(found.hermann_mauguin, notation="hermann_mauguin")
        if found.number is not None:
            return space_group(found.number)
    identity = np.eye(dimension, dtype=np.int64)[None]
    name = {1: "1", 2: "p1", 3: "P1"}[dimension]
    return Group(rotations=identity, translations=np.zeros((1, dimension)), name=name)


def _corrections(
    asked: list[CorrectionIn], reflections: Reflections, table: ReadTable, group: Group
) -> tuple[Correction, ...]:
    made: list[Correction] = []
    for number, one in enumerate(asked):
        where = ("set", "preparation", "corrections", number)
        if one.kind == "multiplicity":
            _check_correction(one, where)
            with located(*where):
                made.append(_multiplicity(reflections, table, group))
        else:
            made.append(correction(one, where))
    return tuple(made)


def correction(one: CorrectionIn, where: tuple[str | int, ...]) -> Correction:
    """One correction of a request that needs nothing of the reflections.

    Raises
    ------
    Problem
        Pointing below the place `where`.
    """
    _check_correction(one, where)
    if one.kind == "multiplicity":
        raise at((*where, "kind"), "multiplicity is of powders, by file or symmetry", "leave it out")
    with located(*where):
        return _correction(one)


def _check_correction(one: CorrectionIn, where: tuple[str | int, ...]) -> None:
    own = {
        "lorentz": {"geometry"},
        "polarisation": {"degree", "monochromator_2theta_deg", "perfect"},
        "multiplicity": set[str](),
        "film_absorption": {"thickness_um", "mu_per_cm"},
        "footprint": {"length_mm", "width_mm", "profile"},
    }[one.kind]
    for name in sorted(one.model_fields_set - own - {"kind"}):
        raise at((*where, name), f"has no meaning for {one.kind}", "leave it out")
    for name in sorted(own - {"degree", "perfect", "profile", "monochromator_2theta_deg"}):
        if getattr(one, name) is None:
            raise at((*where, name), "is absent", f"{one.kind} needs it")


def _multiplicity(reflections: Reflections, table: ReadTable, group: Group) -> Multiplicity:
    """Of the file's column, else of the group; the zero term, which the chain takes out, has none."""
    if "multiplicity" in table.columns:
        values = table.columns["multiplicity"][np.searchsorted(table.row, reflections.row)]
    else:
        values = classify(reflections.indices, group).multiplicity.astype(np.float64)
    return Multiplicity(values[reflections.indices.any(axis=1)])


def _correction(one: CorrectionIn) -> Correction:
    if one.kind == "lorentz" and one.geometry is not None:
        return Lorentz(one.geometry)
    if one.kind == "film_absorption" and one.thickness_um is not None and one.mu_per_cm is not None:
        return FilmAbsorption(thickness_um=one.thickness_um, mu_per_cm=one.mu_per_cm)
    if one.kind == "footprint" and one.length_mm is not None and one.width_mm is not None:
        return Footprint(length_mm=one.length_mm, width_mm=one.width_mm, profile=one.profile)
    return Polarisation(degree=one.degree, monochromator_2theta_deg=one.monochromator_2theta_deg, perfect=one.perfect)


def _content(scale: ScaleIn, formula: str) -> Composition:
    with located("set", "preparation", "scale"):
        content = composition(formula)
        try:
            sum_of_squares(content, np.zeros(1), probe=scale.probe)
        except InputError as fault:
            raise InputError("formula", fault.reason, fault.cure) from fault
    return content

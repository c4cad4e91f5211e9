from __future__ import annotations

import numpy as np
import pytest

from service.intake import check
from service.interpret_file import prepared, symmetry_group
from service.interpret_set import lattice_of
from service.parts import Part
from service.problems import Problem
from service.schemas.preparation import SymmetryIn
from tests.service import bodies


def made(given, file, name="", limit=100_000):
    request = check("inspect", {"set": given}, {"reflections": Part("", file, name)}, max_body_bytes=2**22)[1]
    lattice = None if request.set.cell is None else lattice_of(request.set.cell)
    return prepared(request.set, lattice, max_rows=limit)


def place(given, file=bodies.AMPLITUDES_FILE, **options):
    with pytest.raises(Problem) as caught:
        made({"cell": bodies.ORTHORHOMBIC, **given}, file, **options)
    assert caught.value.status == 422
    return caught.value.places[0].pointer


def test_file_says_what_the_request_does_not():
    (table, left), result = made({}, bodies.CRYSTAL_FILE, "crystal.cif")
    assert table.kind == "cif"
    assert not left
    np.testing.assert_allclose(result.given.lattice.lengths, [7.12, 8.95, 10.43])
    assert "21 21 21" in result.recipe.group.name
    assert result.unique.count < result.given.count


def test_request_goes_before_the_file():
    cell = {"a": 7.2, "b": 9.0, "c": 10.5, "alpha": 90, "beta": 90, "gamma": 90}
    _, result = made(
        {"cell": cell, "symmetry": {"space_group": "P 2 2 2"}, "preparation": {"phase": "none"}},
        bodies.CRYSTAL_FILE,
        "crystal.cif",
    )
    np.testing.assert_allclose(result.given.lattice.lengths, [7.2, 9.0, 10.5])
    assert "21" not in result.recipe.group.name


def test_without_any_symmetry_there_are_translations_alone():
    _, result = made({"cell": bodies.ORTHORHOMBIC}, bodies.AMPLITUDES_FILE)
    assert result.recipe.group.name == "P1"
    assert result.unique.count == 4


def test_steps_are_those_asked_for():
    plain = made({}, bodies.CRYSTAL_FILE)[1]
    assert plain.plot is None
    assert plain.unique.scale == "arbitrary"
    scaled = made({"preparation": bodies.SCALED}, bodies.CRYSTAL_FILE)[1]
    # The file was made with B = 2.4 Å² and 0.0137 times the squares of electrons.
    assert scaled.plot is not None
    assert scaled.unique.scale == "absolute"
    ratio = np.median(scaled.unique.observed / plain.unique.observed)
    assert ratio == pytest.approx(0.0137**-0.5, rel=0.2)
    doubled = made({"preparation": {"scale": {"kind": "factor", "factor": 2.0}}}, bodies.CRYSTAL_FILE)[1]
    np.testing.assert_allclose(doubled.unique.observed, 2 * plain.unique.observed)
    assert "2" in " ".join(set(doubled.applied) - set(plain.applied))


def test_phases_may_come_from_a_model():
    atoms = [{"element": "S", "position": [0.112, 0.205, 0.331], "b_iso": 2.4}]
    result = made({"preparation": {**bodies.SCALED, "model": {"atoms": atoms}}}, bodies.CRYSTAL_FILE)[1]
    assert result.model is not None
    own = made({"preparation": bodies.SCALED}, bodies.CRYSTAL_FILE)[1]
    assert own.model is None
    none = made({"preparation": {"phase": "none"}}, bodies.CRYSTAL_FILE)[1]
    assert none.coefficients().unphased == none.coefficients().count > 0


@pytest.mark.parametrize(
    ("preparation", "pointer"),
    [
        ({"corrections": [{"kind": "lorentz"}]}, "/set/preparation/corrections/0/geometry"),
        ({"corrections": [{"kind": "polarisation", "geometry": "powder"}]}, "/set/preparation/corrections/0/geometry"),
        (
            {"corrections": [{"kind": "polarisation"}, {"kind": "footprint", "length_mm": 3.0}]},
            "/set/preparation/corrections/1/width_mm",
        ),
        ({"corrections": [{"kind": "film_absorption", "mu_per_cm": 3}]}, "/set/preparation/corrections/0/thickness_um"),
        ({"scale": {"kind": "wilson"}}, "/set/preparation/scale/formula"),
        ({"scale": {"kind": "wilson", "formula": "Xx"}}, "/set/preparation/scale/formula"),
        ({"scale": {"kind": "factor"}}, "/set/preparation/scale/factor"),
        ({"phase": "hendrickson_lattman"}, "/set/preparation/phase"),
        ({"phase": "phase_calc_deg"}, "/set/preparation/phase"),
        ({"block": "one"}, "/set/preparation/block"),
        ({"omit": ["unreliable"]}, "/set/preparation/omit"),
        ({"phase": "phase_deg", "model": {"atoms": [{"element": "O", "position": [0, 0, 0], "b_iso": 1}]}},
         "/set/preparation/phase"),
        ({"model": {"atoms": [{"element": "O", "position": [0, 0], "b_iso": 1}]}},
         "/set/preparation/model/atoms/0/position"),
        ({"model": {"atoms": [{"element": "Qq", "position": [0, 0, 0], "b_iso": 1}]}}, "/set/preparation/model/atoms"),
    ],
)  # fmt: skip
def test_faults_of_a_preparation_are_named(preparation, pointer):
    assert place({"preparation": preparation}) == pointer


def test_corrections_need_a_wavelength():
    intensities = bodies.AMPLITUDES_FILE.replace(b"amplitude", b"intensity")
    asked = {"corrections": [{"kind": "lorentz", "geometry": "rotation"}]}
    assert place({"preparation": asked}, intensities) == "/set/preparation/wavelength"
    assert made({"cell": bodies.ORTHORHOMBIC, "preparation": {**asked, "wavelength": 1.0}}, intensities)


@pytest.mark.parametrize(
    ("given", "file", "part"),
    [
        ({}, b"", "empty"),
        ({}, b"h,k,l\n", "no rows"),
        ({}, b"h,k,l,fobs\n1,2,3,4\n", "fobs"),
        ({}, b"h,k,l,amplitude,amplitude_sigma\n1,2,3,x,1\n", "line 2"),
        ({"cell": {"period": 9.0}}, bodies.AMPLITUDES_FILE, "dimension 1"),
    ],
)
def test_faults_of_a_file_are_named(given, file, part):
    with pytest.raises(Problem) as caught:
        made({"cell": bodies.ORTHORHOMBIC, **given}, file)
    assert caught.value.places[0].pointer.startswith("/set/reflections")
    assert part in caught.value.detail


def test_cell_must_come_from_somewhere():
    assert place({"cell": None}) == "/set/cell"


def test_rows_are_limited():
    assert place({}, limit=3).startswith("/set/reflections")
    assert made({"cell": bodies.ORTHORHOMBIC}, bodies.AMPLITUDES_FILE, limit=4)


@pytest.mark.parametrize(
    ("symmetry", "dimension", "order"),
    [
        ({"space_group": 19}, 3, 4),
        ({"space_group": "P 21 21 21"}, 3, 4),
        ({"hall": "-P 2yb"}, 3, 4),
        ({"plane_group": "p2"}, 2, 2),
        ({"stack_group": "-1"}, 1, 2),
        ({"operations": ["-x,-y,z+1/2"]}, 3, 2),
        ({"operations": ["-y,x"]}, 2, 4),
    ],
)
def test_groups(symmetry, dimension, order):
    group = symmetry_group(SymmetryIn(**symmetry), dimension)
    assert group.rotations.shape == (order, dimension, dimension)


@pytest.mark.parametrize(
    ("symmetry", "dimension", "pointer"),
    [
        ({}, 3, "/set/symmetry"),
        ({"space_group": 1, "operations": ["x,y,z"]}, 3, "/set/symmetry"),
        ({"space_group": 1}, 2, "/set/symmetry/space_group"),
        ({"stack_group": "1"}, 2, "/set/symmetry/stack_group"),
        ({"space_group": 0}, 3, "/set/symmetry/space_group"),
        ({"plane_group": "p5"}, 2, "/set/symmetry/plane_group"),
        ({"operations": ["x,y,z", "x,z"]}, 3, "/set/symmetry/operations/1"),
    ],
)
def test_groups_that_are_none(symmetry, dimension, pointer):
    with pytest.raises(Problem) as caught:
        symmetry_group(SymmetryIn(**symmetry), dimension)
    assert caught.value.places[0].pointer == pointer

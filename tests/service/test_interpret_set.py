from __future__ import annotations

import json

import numpy as np
import pytest

from engine import evaluate, sampling
from service.intake import check
from service.interpret_combination import coefficient_set
from service.interpret_set import lattice_of
from service.parts import Part
from service.problems import Problem
from service.schemas.coefficient_set import Cell
from tests.service import bodies
from tests.service.bodies import changed

LATTICE = bodies.coefficients(bodies.CRYSTAL).lattice


def coefficients(body, product="profile", limit=100, file=None):
    files = {} if file is None else {"reflections": Part("text/csv", file, "rows.csv")}
    request = check(product, body, files, max_body_bytes=2**20)[1]
    return coefficient_set(request, max_coefficients=limit)


def place(*arguments, **options):
    with pytest.raises(Problem) as caught:
        coefficients(*arguments, **options)
    return caught.value.places[0].pointer


def test_sign_convention_is_that_of_the_engine():
    """Structure factors stand at −h, scaled by the volume; coefficients as they are."""
    given = {**bodies.FILM, "density": "complex", "l": [1, -2, 3, 4], "phase_deg": [90, 180, 0, 0]}
    made = coefficients({**bodies.PROFILE, "set": given})
    found = dict(zip(made.indices[:, 0].tolist(), made.values.tolist(), strict=True))
    assert found[-1] == pytest.approx(12.1j / bodies.PERIOD)
    assert found[2] == pytest.approx(-41.3 / bodies.PERIOD)
    made = coefficients({**bodies.PROFILE, "set": {**given, "values": "density_coefficient"}})
    found = dict(zip(made.indices[:, 0].tolist(), made.values.tolist(), strict=True))
    assert found[1] == pytest.approx(12.1j)


def test_every_column_arrives():
    rows = len(bodies.CRYSTAL["h"])
    given = {
        **bodies.CRYSTAL,
        "sigma": np.linspace(0.1, 1, rows).tolist(),
        "phase_sigma_deg": np.linspace(1, 40, rows).tolist(),
        "merit": np.linspace(0, 1, rows).tolist(),
    }
    made, expected = coefficients({**bodies.GRID, "set": given}, "grid"), bodies.coefficients(given)
    for name in ("indices", "values", "phase_known", "sigma", "phase_sigma", "merit"):
        np.testing.assert_array_equal(getattr(made, name), getattr(expected, name))
    assert (made.real, made.unit, made.tally) == (expected.real, "e/Å³", expected.tally)
    assert made.sigma is not None
    assert made.phase_sigma is not None


@pytest.mark.parametrize(
    ("cell", "given", "vectors"),
    [
        ({"period": 17.4}, bodies.FILM, [[17.4]]),
        ({"vectors": [[17.4]]}, bodies.FILM, [[17.4]]),
        ({"a": 31.0, "b": 27.0, "gamma": 90}, bodies.SHEET, [[31, 0], [0, 27]]),
        ({"vectors": [[31, 0], [1, 27]]}, bodies.SHEET, [[31, 0], [1, 27]]),
        (
            dict(zip(("a", "b", "c", "alpha", "beta", "gamma"), (3, 4, 5, 90, 90, 90), strict=True)),
            bodies.CRYSTAL,
            np.diag([3, 4, 5]),
        ),
        ({"vectors": [[3, 0, 0], [0, 4, 0], [1, 0, 5]]}, bodies.CRYSTAL, [[3, 0, 0], [0, 4, 0], [1, 0, 5]]),
        ({"period": 17.4, "vectors": None, "a": None}, bodies.FILM, [[17.4]]),
    ],
)
def test_cells(cell, given, vectors):
    made = coefficients({**bodies.PROFILE, "set": {**given, "cell": cell}})
    np.testing.assert_allclose(made.lattice.vectors, vectors, atol=1e-12)


@pytest.mark.parametrize(
    "cell",
    [
        {},
        {"a": None},
        {"a": 3.0},
        {"a": 3.0, "b": 4.0},
        {"a": 3.0, "b": 4.0, "c": 5.0, "gamma": 90},
        {"period": 3.0, "vectors": [[3.0]]},
        {"period": 3.0, "gamma": 90},
    ],
)
def test_cells_that_say_too_little_or_too_much(cell):
    assert place(changed(bodies.PROFILE, "set/cell", cell)) == "/set/cell"


@pytest.mark.parametrize(
    ("given", "pointer"),
    [
        ({**bodies.FILM, "h": [0, 0, 0, 0]}, "/set/h"),
        ({**bodies.SHEET, "l": bodies.SHEET["h"]}, "/set/l"),
        ({**bodies.CRYSTAL, "cell": bodies.PLANAR}, "/set/l"),
        ({**bodies.SHEET, "cell": bodies.TRICLINIC}, "/set/l"),
    ],
)
def test_index_columns_must_be_those_of_the_cell(given, pointer):
    assert place({**bodies.PROFILE, "set": given}) == pointer


def test_mean_of_two_parts():
    assert coefficients({**bodies.POINTS, "set": bodies.ABSORBING}, "points").series().zero_term == pytest.approx(
        (3 - 0.25j) / LATTICE.volume
    )
    assert place(changed(bodies.PROFILE, "set/mean_imag", 1.0)) == "/set/mean"


def test_resolution_cuts_the_set():
    made = coefficients({**bodies.PROFILE, "resolution": {"d_min": 5.8, "d_max": 8.7}})
    assert sorted(abs(made.indices[:, 0]).tolist()) == [2, 3]
    assert made.tally.beyond_resolution == 2


def test_lattice_of_a_cell():
    np.testing.assert_allclose(lattice_of(Cell(period=17.4)).vectors, [[17.4]])
    with pytest.raises(Problem) as caught:
        lattice_of(Cell(a=3.0, b=4.0))
    assert "has a, b, which describes no lattice" in caught.value.detail


# A planar lattice with the rotations of p2 and a mirror-symmetric stack: both small enough to expand by hand.
HALF = {
    "cell": bodies.ORTHORHOMBIC,
    "h": [1, 2, 0],
    "k": [1, 0, 2],
    "l": [0, 1, 3],
    "amplitude": [10.0, 20.0, 5.0],
    "phase_deg": [30.0, 180.0, 90.0],
    "mean": 7.0,
    "unit": "e/Å³",
}
# P 21 along b: x' = -x, y' = y + 1/2, z' = -z, so F(-h, k, -l) = F(h, k, l) exp(-iπk).
IMAGES = [(-1, 1, 0, 10.0, 30.0 - 180.0), (-2, 0, -1, 20.0, 180.0), (0, 2, -3, 5.0, 90.0)]


@pytest.mark.parametrize(
    "symmetry", [{"space_group": 4}, {"space_group": "P 1 21 1"}, {"hall": "P 2yb"}, {"operations": ["-x,y+1/2,-z"]}]
)
@pytest.mark.parametrize("values", ["structure_factor", "density_coefficient"])
def test_asymmetric_set_is_expanded(symmetry, values):
    given = {**HALF, "values": values}
    whole = dict(given)
    for place_of, name in enumerate(("h", "k", "l", "amplitude", "phase_deg")):
        # A coefficient stands where its structure factor's mate does: its images have the opposite phase shift,
        # which for half turns is the same.
        whole[name] = [*given[name], *(image[place_of] for image in IMAGES)]
    expected = coefficients({**bodies.GRID, "set": whole}, "grid")
    made = coefficients({**bodies.GRID, "set": {**given, "symmetry": symmetry}}, "grid")
    order, other = np.lexsort(made.indices.T), np.lexsort(expected.indices.T)
    np.testing.assert_array_equal(made.indices[order], expected.indices[other])
    np.testing.assert_allclose(made.values[order], expected.values[other], atol=1e-12)
    assert made.tally.rows == 3
    assert made.tally.zero_term == "given"
    assert made.unit == "e/Å³"
    assert any("expanded by" in words for words in made.history)


def test_symmetry_of_a_stack():
    """A mirror leaves a stack's coefficients as they are; an inversion makes them real."""
    given = {**bodies.FILM, "symmetry": {"stack_group": "-1"}}
    made = coefficients({**bodies.PROFILE, "set": given})
    np.testing.assert_allclose(made.values.imag, 0, atol=1e-15)
    assert place({**bodies.PROFILE, "set": {**given, "phase_deg": [0, 90, 0, 0]}}) == "/set/phase_deg/1"


@pytest.mark.parametrize(
    ("symmetry", "pointer"),
    [
        ({}, "/set/symmetry"),
        ({"space_group": 4, "hall": "P 2yb"}, "/set/symmetry"),
        ({"space_group": 231}, "/set/symmetry/space_group"),
        ({"space_group": "P 7"}, "/set/symmetry/space_group"),
        ({"hall": "nothing"}, "/set/symmetry/hall"),
        ({"plane_group": 2}, "/set/symmetry/plane_group"),
        ({"stack_group": "m"}, "/set/symmetry/stack_group"),
        ({"operations": ["x,y"]}, "/set/symmetry/operations/0"),
        ({"operations": ["x,y,z", "2x,y,z"]}, "/set/symmetry/operations/1"),
    ],
)
def test_groups_that_do_not_fit(symmetry, pointer):
    given = {**HALF, "values": "structure_factor", "symmetry": symmetry}
    assert place({**bodies.GRID, "set": given}, "grid") == pointer


FILE_SET = {name: bodies.AMPLITUDES_SET[name] for name in ("cell", "values")}
ROWS = bodies.AMPLITUDES_FILE


def test_file_of_amplitudes_is_a_set():
    expected = bodies.coefficients({**bodies.AMPLITUDES_SET, "unit": "e/Å³"})
    made = coefficients({**bodies.GRID, "set": {**FILE_SET, "unit": "e/Å³"}}, "grid", file=ROWS)
    np.testing.assert_array_equal(made.indices, expected.indices)
    np.testing.assert_allclose(made.values, expected.values, rtol=1e-12)
    np.testing.assert_allclose(made.sigma, expected.sigma, rtol=1e-12)
    np.testing.assert_array_equal(made.phase_known, expected.phase_known)
    assert made.tally.rows == 4
    assert made.unit == "e/Å³"


@pytest.mark.parametrize(
    ("members", "pointer"),
    [
        ({"h": [1]}, "/set/h"),
        ({"merit": [1.0]}, "/set/merit"),
        ({"values": "density_coefficient"}, "/set/values"),
        ({"mean": 1.0}, "/set/mean"),
        ({"cell": None}, "/set/cell"),
        ({"cell": {"a": 1.0}}, "/set/cell"),
        ({"cell": {"period": 10.0}}, "/set/reflections"),
    ],
)
def test_what_a_file_does_not_go_with(members, pointer):
    body = {**bodies.GRID, "set": {**FILE_SET, **members}}
    assert place(body, "grid", file=ROWS).startswith(pointer)


def test_missing_phases_of_a_file_are_refused_on_request():
    body = {**bodies.GRID, "set": FILE_SET, "missing_phase": "refuse"}
    assert place(body, "grid", file=ROWS) == "/missing_phase"
    assert coefficients({**body, "missing_phase": "omit"}, "grid", file=ROWS).unphased == 1


def test_rows_of_a_file_are_limited():
    assert place({**bodies.GRID, "set": FILE_SET}, "grid", limit=3, file=ROWS).startswith("/set/reflections")


def test_resolution_cuts_a_file_too():
    body = {**bodies.GRID, "set": FILE_SET, "resolution": {"d_min": 5.0}}
    made = coefficients(body, "grid", file=ROWS)
    assert made.count == 1
    assert made.tally.beyond_resolution == 3


@pytest.mark.parametrize(
    ("members", "pointer"),
    [
        ({"preparation": {}}, "/set/preparation"),
        ({"cell": None}, "/set/cell"),
    ],
)
def test_what_columns_do_not_go_with(members, pointer):
    assert place({**bodies.PROFILE, "set": {**bodies.FILM, **members}}) == pointer


SILICON = json.loads((bodies.SAMPLES / "silicon_uncertainty.json").read_text())["set"]
BOND = {"positions": [[0.125, 0.125, 0.125], [0.3, 0.1, 0.2]]}


def silicon(**symmetry):
    given = {name: value for name, value in SILICON.items() if name != "symmetry"}
    if symmetry:
        given["symmetry"] = {"columns": "full", **symmetry}
    return coefficients({"set": given, **BOND}, "points", limit=200)


def test_symmetry_of_a_full_set_relates_its_errors_alone():
    """No coefficient changes; but errors of equivalents, taken as one, no longer average out at a bond."""
    related, plain = silicon(space_group="Fd-3m:1"), silicon()
    assert plain.group is None
    assert related.group.name.startswith("F")
    np.testing.assert_array_equal(related.values, plain.values)
    np.testing.assert_array_equal(related.indices, plain.indices)
    where = sampling.points(plain.lattice, BOND["positions"])
    one, other = (evaluate(made, where, uncertainty=True) for made in (related, plain))
    np.testing.assert_array_equal(one.values, other.values)
    assert one.sigma.values[0] > 1.4 * other.sigma.values[0]


@pytest.mark.parametrize(
    ("symmetry", "pointer", "words"),
    [
        ({"space_group": "Fd-3m:2"}, "/set/symmetry", "differs"),
        ({"space_group": 225}, "/set/symmetry", "differs"),
        ({"space_group": 194}, "/set/cell", "symmetry"),
        ({"plane_group": 2}, "/set/symmetry/plane_group", ""),
        ({}, "/set/symmetry", ""),
    ],
)
def test_groups_that_a_full_set_does_not_have(symmetry, pointer, words):
    given = {**SILICON, "symmetry": {"columns": "full", **symmetry}}
    with pytest.raises(Problem) as caught:
        coefficients({"set": given, **BOND}, "points", limit=200)
    assert caught.value.places[0].pointer == pointer
    assert words in caught.value.detail


def test_a_subgroup_is_a_group_of_the_density_too():
    assert silicon(space_group=195).group.order == 12


def test_full_columns_are_no_matter_of_files():
    given = {**FILE_SET, "symmetry": {"space_group": 1, "columns": "full"}}
    assert place({**bodies.GRID, "set": given}, "grid", file=ROWS) == "/set/symmetry/columns"


def test_full_columns_of_a_stack():
    """Centrosymmetric about its origin or not: the phases tell."""
    given = {**bodies.FILM, "symmetry": {"stack_group": "-1", "columns": "full"}}
    assert coefficients({**bodies.PROFILE, "set": given}).group.name == "-1"
    turned = {**given, "phase_deg": [0, 180, 5, 0]}
    assert place({**bodies.PROFILE, "set": turned}) == "/set/symmetry"


@pytest.mark.parametrize("members", [{"mean": 1e75}, {"amplitude": [1.0, 1e72, 1.0, 1.0]}, {"sigma": [1e75] * 4}])
def test_values_whose_powers_overflow(members):
    assert place({**bodies.PROFILE, "set": {**bodies.FILM, **members}}) == "/set"

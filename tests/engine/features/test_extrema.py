from dataclasses import replace

import numpy as np
import pytest

from engine import Treatment, assemble, averages, evaluate
from engine.errors import TooLargeError
from engine.features.extrema import find_extrema
from engine.features.regions import ball_region, box_region
from engine.sampling import points as free_points
from engine.symmetry import plane_group, space_group
from engine.windows import Window
from tests.engine.features.densities import EVERY, apart, plain_jet, random_set, symmetric_set
from tests.strategies import refusal_of


@pytest.mark.parametrize("dimension", [1, 2, 3])
def test_what_is_said_of_each(dimension):
    """Value, Hessian, curvatures, kind and place, against a plain sum."""
    coefficients, made = random_set(dimension, 21)
    found = find_extrema(coefficients, kinds=EVERY[dimension])
    assert found.count == found.found == sum(found.cell.counts)
    assert np.all((found.fractional >= 0) & (found.fractional < 1))
    np.testing.assert_allclose(found.cartesian, found.fractional @ made.lattice.vectors)
    for row in range(found.count):
        value, gradient, hessian = plain_jet(made, found.fractional[row])
        assert found.value[row] == pytest.approx(value, abs=1e-10)
        assert np.linalg.norm(np.linalg.solve(hessian, gradient)) < 1e-9
        np.testing.assert_allclose(found.hessian[row], hessian, atol=1e-9)
        for curvature, direction in zip(found.curvatures[row], found.directions[row], strict=True):
            np.testing.assert_allclose(hessian @ direction, curvature * direction, atol=1e-8)
        index = np.count_nonzero(found.curvatures[row] < 0)
        assert found.index[row] == index
        assert found.kind[row] == {0: "minimum", dimension: "maximum"}.get(index, "saddle")
    assert np.all(np.diff(found.curvatures, axis=1) >= 0)
    assert found.sigma is found.position_sigma is found.significance is None


def test_order_and_limits():
    coefficients, _ = random_set(2, 3)
    every = find_extrema(coefficients, kinds=("saddle", "minimum", "maximum"))
    assert list(dict.fromkeys(every.kind)) == ["saddle", "minimum", "maximum"]
    kind = np.array(every.kind)
    assert np.all(np.diff(every.value[kind == "maximum"]) <= 0)
    assert np.all(np.diff(every.value[kind == "minimum"]) >= 0)
    assert np.all(np.diff(every.value[kind == "saddle"]) >= 0)
    few = find_extrema(coefficients, kinds=("maximum", "minimum"), most=3)
    assert few.kind == ("maximum",) * 3 + ("minimum",) * 3
    np.testing.assert_allclose(few.value[:3], every.value[kind == "maximum"][:3], rtol=1e-10)
    assert few.found == np.count_nonzero(kind != "saddle")
    assert few.cell is None


def test_thresholds():
    coefficients, _ = random_set(2, 4)
    coefficients = replace(coefficients, sigma=np.full(coefficients.count, 0.4))
    every = find_extrema(coefficients)
    middle = float(np.median(every.value))
    np.testing.assert_allclose(
        find_extrema(coefficients, least_value=middle).value, every.value[every.value >= middle], rtol=1e-9
    )
    np.testing.assert_allclose(
        find_extrema(coefficients, greatest_value=middle - 1e-6).value, every.value[every.value < middle], rtol=1e-9
    )
    np.testing.assert_allclose(every.significance, every.value / every.sigma)
    limit = float(np.median(np.abs(every.significance)))
    strong = find_extrema(coefficients, least_significance=limit, most=2)
    assert strong.found == np.count_nonzero(np.abs(every.significance) >= limit)
    assert 0 < strong.found < every.found
    assert strong.count == 2


@pytest.mark.parametrize(
    "treatment",
    [
        Treatment(window=Window("raised_cosine")),
        Treatment(sharpen=3.0),
        Treatment(field="laplacian", window=Window("gaussian", 20.0)),
        Treatment(average=averages.ball(1.5)),
    ],
    ids=["window", "sharpened", "laplacian", "average"],
)
def test_treated_fields(treatment):
    """Values are those that `evaluate` gives there, and nowhere around is higher."""
    coefficients, _ = random_set(3, 5)
    coefficients = replace(coefficients, sigma=np.full(coefficients.count, 0.1))
    found = find_extrema(coefficients, treatment)
    rng = np.random.default_rng(1)
    around = rng.normal(size=(8, 3))
    around = 0.02 * around / np.linalg.norm(around, axis=1)[:, None]
    places = found.cartesian[:, None] + np.concatenate([np.zeros((1, 3)), around])
    where = free_points(coefficients.lattice, places.reshape(-1, 3), coordinates="cartesian")
    field = evaluate(coefficients, where, treatment)
    values = field.values.reshape(found.count, 9)
    np.testing.assert_allclose(found.value, values[:, 0], rtol=1e-8, atol=1e-9 * np.abs(values).max())
    assert np.all(values[:, 1:] < values[:, :1])
    assert found.unit == field.unit
    assert set(field.applied) <= set(found.applied)


@pytest.mark.parametrize("number", [2, 19, 61, 136, 198, 154])
def test_a_group_gathers_what_is_found_without_one(number):
    """The same extrema, one of each orbit; every equivalent is among those found without the group."""
    known = symmetric_set(space_group(number), 2, 2.2, 5.0)
    group, lattice = known.group, known.lattice
    plain = find_extrema(replace(known, group=None), kinds=EVERY[3])
    found = find_extrema(known, kinds=EVERY[3])
    assert plain.cell == found.cell
    assert found.group is group
    assert found.multiplicity.sum() == plain.count
    np.testing.assert_array_equal(found.multiplicity * found.site_order, group.order)
    assert all(len(one) == order for one, order in zip(found.site_symmetry, found.site_order, strict=True))
    images = np.einsum("nij,mj->mni", group.rotations, found.fractional) + group.translations
    gaps = apart(lattice, images.reshape(-1, 3), plain.fractional)
    assert gaps.min(axis=1).max() < 2e-7
    assert gaps.min(axis=0).max() < 2e-7
    nearest = gaps.argmin(axis=1).reshape(found.count, -1)
    np.testing.assert_allclose(plain.value[nearest], np.repeat(found.value[:, None], group.order, 1), atol=1e-9)
    assert {len(set(row)) for row in nearest.tolist()} <= set(found.multiplicity.tolist())
    assert found.shift.max() <= 1e-5


def test_symmetry_fixes_positions_and_adds_up_errors():
    """σ of a position is zero where it cannot move; that of the value grows with the order of the site symmetry."""
    known = symmetric_set(space_group(136), 1)
    found = find_extrema(known, kinds=EVERY[3])
    fixed = np.linalg.matrix_rank(found.freedom)
    assert {0, 3} <= set(fixed.tolist()) or {0, 2} <= set(fixed.tolist())
    np.testing.assert_array_equal(found.position_sigma[fixed == 0], 0.0)
    assert found.largest_position_sigma[fixed > 0].min() > 0
    off = np.eye(3) - found.freedom
    assert np.abs(off @ found.position_covariance @ off).max() < 1e-20
    assert np.median(found.sigma[found.site_order == 8]) > 1.3 * np.median(found.sigma[found.site_order == 1])
    np.testing.assert_allclose(found.position_sigma**2, np.einsum("mii->mi", found.position_covariance))
    largest = np.linalg.eigvalsh(found.position_covariance)[:, -1]
    np.testing.assert_allclose(found.largest_position_sigma**2, largest, atol=1e-18)


def test_a_treatment_may_break_the_symmetry():
    known = symmetric_set(plane_group("p4mm"), 1, 1.5)
    average = Treatment(average=averages.box(known.lattice, [[0.3, 0.0]]))
    found = find_extrema(known, average, kinds=EVERY[2])
    assert found.group.order == 4
    assert any("4 of the 8 operations" in note for note in found.notes)
    assert found.cell.holds
    plain = find_extrema(replace(known, group=None), average, kinds=EVERY[2])
    assert plain.cell == found.cell


@pytest.mark.parametrize("number", [1, 19, 136])
def test_within_a_region(number):
    """Each image of each extremum for itself, by its position there."""
    known = symmetric_set(space_group(number), 4, 2.2, 5.0)
    group, lattice = known.group, known.lattice
    every = find_extrema(replace(known, group=None))
    centre, radius = np.array([1.9, -0.3, 0.6]), 4.5
    inside = find_extrema(known, region=ball_region(lattice, centre, radius))
    cells = np.stack(np.meshgrid(*[np.arange(-4, 5)] * 3, indexing="ij"), axis=-1).reshape(-1, 3)
    images = (every.fractional[:, None] + cells).reshape(-1, 3)
    expected = images[np.linalg.norm((images - centre) @ lattice.vectors, axis=1) <= radius]
    assert inside.count == len(expected) > 0
    gaps = np.linalg.norm((inside.fractional[:, None] - expected) @ lattice.vectors, axis=2)
    assert gaps.min(axis=1).max() < 1e-6
    assert sorted(gaps.argmin(axis=1).tolist()) == list(range(len(expected)))
    np.testing.assert_array_equal(inside.multiplicity * inside.site_order, group.order)
    for row in range(inside.count):
        size = np.linalg.eigvalsh(inside.hessian[row])
        np.testing.assert_allclose(size, inside.curvatures[row], rtol=1e-8)
    assert inside.cell is None
    assert any(text.startswith("within 4.5 Å around") for text in inside.applied)


def test_a_box_of_a_cell_holds_as_many_as_a_cell():
    coefficients, _ = random_set(2, 9)
    every = find_extrema(coefficients)
    box = box_region(coefficients.lattice, [0.4, -0.7], [[1, 0], [1, 1]])
    inside = find_extrema(coefficients, region=box)
    assert inside.count == every.count
    np.testing.assert_allclose(inside.value, every.value, rtol=1e-9)


def test_nothing_found_is_no_fault():
    coefficients, _ = random_set(3, 2)
    coefficients = replace(coefficients, sigma=np.full(coefficients.count, 0.1))
    for options in ({"least_value": 1e9}, {"region": ball_region(coefficients.lattice, [0.5] * 3, 1e-3)}):
        none = find_extrema(coefficients, **options)
        assert none.count == none.found == 0
        assert none.position_covariance.shape == (0, 3, 3)
        assert none.site_symmetry == ()


def test_unphased_coefficients_and_an_unknown_mean_are_said():
    coefficients, made = random_set(2, 6)
    known = coefficients.phase_known.copy()
    known[::5] = False
    torn = replace(coefficients, phase_known=known)
    found = find_extrema(torn)
    assert any("have no phase" in note for note in found.notes)
    np.testing.assert_allclose(found.value, find_extrema(torn.phased()).value)
    bare = coefficients.select(coefficients.indices.any(axis=1))
    assert any("relative to the mean" in note for note in find_extrema(bare).notes)
    assert not any("relative to the mean" in note for note in find_extrema(coefficients).notes)
    assert made.real


def test_what_the_uncertainties_hold_is_said():
    coefficients, _ = random_set(2, 6)
    certain = replace(coefficients, sigma=np.full(coefficients.count, 0.1))
    found = find_extrema(certain)
    assert any("amplitudes" in text for text in found.contains)
    assert any("termination" in text for text in found.omits)
    assert find_extrema(certain, with_sigma=False).sigma is None
    assert find_extrema(certain, with_sigma=False).contains == ()


@pytest.mark.parametrize(
    ("options", "path"),
    [
        ({"kinds": ()}, ("kinds",)),
        ({"kinds": "maximum"}, ("kinds",)),
        ({"kinds": ("maximum", "peak")}, ("kinds", 1)),
        ({"most": 0}, ("most",)),
        ({"least_value": float("nan")}, ("least_value",)),
        ({"greatest_value": "x"}, ("greatest_value",)),
        ({"least_significance": 3.0}, ("least_significance",)),
        ({"least_significance": -3.0}, ("least_significance",)),
        ({"spacing": 0.0}, ("spacing",)),
        ({"treatment": Treatment(field="gradient")}, ("field",)),
        ({"treatment": Treatment(field="autocorrelation")}, ("field",)),
    ],
)
def test_refusals(options, path):
    coefficients, _ = random_set(2, 1)
    assert refusal_of(lambda: find_extrema(coefficients, **options)).path == path


def test_more_refusals():
    stack, _ = random_set(1, 1)
    assert refusal_of(lambda: find_extrema(stack, kinds=("saddle",))).path == ("kinds", 0)
    _, made = random_set(2, 1)
    complex_set = assemble(made.lattice, made.columns(), values="density_coefficient", density="complex")
    assert refusal_of(lambda: find_extrema(complex_set)).path == ("density",)
    with pytest.raises(TooLargeError):
        find_extrema(random_set(3, 1)[0], max_bytes=1000)


def test_the_same_twice():
    known = symmetric_set(space_group(19), 2, 2.2, 5.0)
    one, two = find_extrema(known), find_extrema(known)
    np.testing.assert_array_equal(one.fractional, two.fractional)
    np.testing.assert_array_equal(one.value, two.value)

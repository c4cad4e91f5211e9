"""Refinement of a trial stack, on invented films of swelling sheets."""

from __future__ import annotations

import numpy as np
import pytest

from engine import InputError
from engine.films.orders import FilmOrders
from engine.films.trial import Plane, Slab, Stack, calculated, refine

D = 19.4
TRUE = {"sheet.position": 2.3, "gallery.density": 0.41, "ion.occupancy": 0.7, "scale": 3.1}
NAMES = tuple(TRUE)


def model(**more):
    return Stack.of(
        D,
        [
            Plane.of("core", 0.0, strength=8.0, width=0.25),
            Plane.of("sheet", TRUE["sheet.position"], strength=5.0, width=0.3),
            Slab.between("gallery", 3.5, 8.0, density=TRUE["gallery.density"], roughness=0.4),
            Plane.of("ion", D / 2, strength=3.0, width=0.5, occupancy=TRUE["ion.occupancy"]),
        ],
        symmetry="m",
        scale=TRUE["scale"],
        **more,
    )


def measured(noise=0.0, orders=12, seed=0, sigma=True):
    l = np.arange(1, orders + 1)
    size = np.abs(calculated(model(), l))
    error = 0.01 * size + 0.02
    rng = np.random.default_rng(seed)
    return FilmOrders.of(D, l, np.abs(size + noise * error * rng.normal(size=l.size)), error if sigma else None)


def disturbed():
    return model().with_values(NAMES, [2.45, 0.3, 0.9, 2.8])


def test_it_finds_the_truth_without_noise():
    made = refine(disturbed(), measured(), NAMES)
    np.testing.assert_allclose(made.values, list(TRUE.values()), rtol=1e-6)
    assert made.r_factor < 1e-6
    assert made.chi_square < 1e-6
    assert made.freedom == 8
    assert made.converged
    assert not made.undetermined
    assert not made.at_bound.any()


def test_a_minimum_of_a_wrong_sign_is_left_and_told():
    """From this start alone the search ends with an order of the wrong sign."""
    alone = refine(disturbed(), measured(), NAMES, starts=1)
    assert alone.chi_square > 100
    assert not alone.rivals
    made = refine(disturbed(), measured(), NAMES)
    assert made.chi_square < 1e-6
    truth = calculated(model(), np.arange(1, 13))
    for rival in made.rivals:
        other = calculated(model().with_values(NAMES, rival.values), np.arange(1, 13))
        assert rival.sign_changes == tuple((np.flatnonzero((truth * other.conj()).real < 0) + 1).tolist())
        assert rival.chi_square > made.chi_square
    assert made.rivals


def test_uncertainties_are_those_of_repeated_measurements():
    runs = [refine(model(), measured(1.0, seed=seed), NAMES, starts=1) for seed in range(60)]
    values = np.array([run.values for run in runs])
    first = runs[0]
    np.testing.assert_allclose(values.std(axis=0, ddof=1), first.sigma, rtol=0.35)
    np.testing.assert_allclose(np.corrcoef(values.T), first.correlation, atol=0.35)
    pull = (values - list(TRUE.values())) / first.sigma
    assert np.abs(pull.mean(axis=0)).max() < 0.5
    assert np.mean([run.chi_square for run in runs]) == pytest.approx(8, rel=0.2)


def test_figures_of_the_fit_are_their_definitions():
    data = measured(1.0)
    made = refine(disturbed(), data, NAMES)
    size = np.abs(calculated(made.stack, data.order))
    assert made.r_factor == pytest.approx(np.abs(data.amplitude - size).sum() / data.amplitude.sum())
    assert made.chi_square == pytest.approx((((data.amplitude - size) / data.sigma) ** 2).sum())
    assert made.sigma_of("scale") == made.sigma[3]
    assert made.sigma_of("B") == 0.0


def test_unit_weights_take_their_uncertainty_from_the_residuals():
    data = measured(1.0, sigma=False)
    made = refine(disturbed(), data, NAMES)
    assert made.weights == "unit"
    assert any("unit weights" in note for note in made.notes)
    step = 1e-5
    slopes = []
    for row in range(len(NAMES)):
        up, down = made.values.copy(), made.values.copy()
        up[row] += step
        down[row] -= step
        sizes = [np.abs(calculated(made.stack.with_values(NAMES, v), data.order)) for v in (up, down)]
        slopes.append((sizes[0] - sizes[1]) / (2 * step))
    jacobian = np.array(slopes).T
    expected = np.linalg.inv(jacobian.T @ jacobian) * made.chi_square / made.freedom
    np.testing.assert_allclose(made.covariance, expected, rtol=1e-4)


def test_a_parameter_at_its_bound_is_flagged_and_held():
    made = refine(disturbed(), measured(), NAMES, bounds={"ion.occupancy": (0.8, 1.0)})
    np.testing.assert_array_equal(made.at_bound, [False, False, True, False])
    assert made.values[2] == pytest.approx(0.8, abs=1e-6)
    assert np.isnan(made.sigma[2])
    assert np.isfinite(made.sigma[[0, 1, 3]]).all()
    assert any("ion.occupancy" in note for note in made.notes)


def test_directions_that_change_nothing_are_named():
    """A plane of strength times occupancy: the two cannot be told apart."""
    made = refine(disturbed(), measured(), ["ion.strength", "ion.occupancy", "sheet.position"])
    assert [set(direction) for direction in made.undetermined] == [{"ion.strength", "ion.occupancy"}]
    assert np.isinf(made.sigma[:2]).all()
    assert np.isfinite(made.sigma[2])
    assert any("not determined" in note for note in made.notes)


def test_a_parameter_without_effect_is_named():
    ghost = Stack.of(D, [*model().parts, Plane.of("ghost", 4.0, strength=0.0)], symmetry="m")
    made = refine(ghost, measured(), ["ghost.position", "scale"])
    assert made.undetermined == (("ghost.position",),)


def test_a_part_refined_onto_the_mirror_does_not_lose_half_of_itself():
    l = np.arange(1, 9)
    truth = Stack.of(D, [Plane.of("pair", 0.001, strength=2.0, width=0.2)], symmetry="m")
    data = FilmOrders.of(D, l, np.abs(calculated(truth, l)), np.full(8, 0.01))
    start = Stack.of(D, [Plane.of("pair", 0.3, strength=2.0, width=0.2)], symmetry="m")
    made = refine(start, data, ["pair.position"], bounds={"pair.position": (0.0, 1.0)})
    assert made.values[0] < 0.05
    assert made.chi_square < 1.0
    onto = made.stack.with_values(["pair.position"], [0.0])
    assert calculated(onto, [0])[0] == pytest.approx(4.0)


def test_as_many_parameters_as_orders_tests_nothing():
    made = refine(disturbed(), measured(orders=4), NAMES)
    assert made.freedom == 0
    assert any("tests nothing" in note for note in made.notes)


def test_the_stack_is_put_into_the_measured_period():
    data = measured()
    near = refine(disturbed().with_period(D * 1.002), data, NAMES)
    np.testing.assert_allclose(near.values, list(TRUE.values()), rtol=1e-6)
    assert near.stack.period == D
    assert any("measured period" in note for note in near.notes)


@pytest.mark.parametrize(
    ("call", "place"),
    [
        (lambda: refine(disturbed(), measured(orders=3), NAMES), "more than the 3 orders"),
        (lambda: refine(disturbed(), measured(), []), "parameters"),
        (lambda: refine(disturbed(), measured(), ["scale"], starts=0), "starts"),
        (lambda: refine(disturbed(), measured(), ["scale", "scale"]), "twice"),
        (lambda: refine(disturbed(), measured(), ["colour"]), "names 'colour'"),
        (lambda: refine(disturbed(), measured(), ["ion.position"]), "a mirror holds"),
        (lambda: refine(disturbed(), measured(), ["scale"], bounds={"B": (0, 1)}), "no parameter"),
        (lambda: refine(disturbed(), measured(), ["scale"], bounds={"scale": (4, 1)}), "no room"),
        (lambda: refine(disturbed(), measured(), ["scale"], bounds={"scale": (-4, -1)}), "leave out all"),
        (lambda: refine(disturbed(), measured(), ["scale"], bounds={"scale": (4, 5)}), "exclude the start"),
        (lambda: refine(disturbed().with_period(D * 1.2), measured(), ["scale"]), "period"),
        (lambda: refine(disturbed(), FilmOrders.of(D, [1, 2], [1.0, 2.0], [0.1, 0.0]), ["scale"]), "infinite weight"),
        (lambda: refine(disturbed(), FilmOrders.of(D, [1, 2], [0.0, 0.0]), ["scale"]), "zero alone"),
        (
            lambda: refine(Stack.of(D, [Plane.of("a", 1.0, formula="C", area=3.0)]), measured(), ["a.strength"]),
            "occupancy",
        ),
    ],
)
def test_refusals(call, place):
    with pytest.raises(InputError, match=place):
        call()

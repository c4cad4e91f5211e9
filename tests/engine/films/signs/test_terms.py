from dataclasses import replace

import numpy as np
import pytest

from engine.films.orders import FilmOrders
from engine.films.signs import Criteria, Flat, KnownDensity, LeastStructure, NonNegative
from engine.films.signs.terms import _unlike, build_terms
from engine.films.signs.tolerance import Stack, stack_of
from tests.engine.films.signs import oracle
from tests.engine.films.signs.problems import EVERYTHING, POSITIONS, SHAPE, all_signs, problem


@pytest.mark.parametrize("missing", [(), (2, 5)])
def test_every_part_is_that_of_plain_sums(missing):
    stack, terms = problem(6, 4, EVERYTHING, missing=missing)
    signs = all_signs(6)[::7]
    expected = oracle.parts(stack, EVERYTHING, signs)
    found = terms.parts(signs)
    np.testing.assert_allclose(found[:, 3:], expected[:, 3:], rtol=1e-5)
    np.testing.assert_allclose(found[:, 0], expected[:, 0], rtol=1e-9, atol=1e-12)
    # The oracle's equal steps are good to their number, 500.
    np.testing.assert_allclose(found[:, 1:3], expected[:, 1:3], rtol=2e-3)
    assert expected[:, 0].max() > 1
    np.testing.assert_allclose(terms.scores(signs), found.sum(axis=1))


def test_a_flat_region_with_errors_as_expected_scores_its_freedom():
    """Monte Carlo: what is measured is nothing but errors of the variances that are expected."""
    generator = np.random.default_rng(8)
    order = np.arange(1, 9)
    variance = 0.3 / order**2
    criteria = Criteria(flat=(Flat(start=-6.0, stop=9.0),))
    none = np.zeros(0, dtype=np.int64)
    stack = Stack(
        period=30.0, order=order, amplitude=np.ones(8), variance=variance,
        other_order=none, other_variance=none.astype(float), top=8,
    )  # fmt: skip
    terms = build_terms(stack, criteria)
    errors = generator.normal(size=(20000, 8)) * np.sqrt(variance)
    made = terms.quadratics[0].values(errors)
    assert np.mean(made) == pytest.approx(terms.expected(), abs=4 * np.std(made) / 20000**0.5)
    # Nine of the fifteen ångström are unlike: five of eight elements of resolution, one of which is the mean.
    assert 3 < terms.expected() < 4.8


@pytest.mark.parametrize(
    ("start", "stop", "part"),
    [
        (0, 5, 5),
        (-5, 5, 5),
        (-6, 9, 9),
        (12, 18, 3),
        (10, 18, 5),
        (-2, 28, 15),
        (31, 36, 5),
        (-36, -31, 5),
        (-1, 14, 14),
    ],
)
def test_mirror_images_of_a_region_count_once(start, stop, part):
    """Elements enter with the unevenness that is allowed: 30 Å, mirrors at 0 and 15."""
    assert _unlike(Flat(start=start, stop=stop), 30.0) == pytest.approx(part / 30)


def test_the_floor_counts_elements_of_resolution():
    """A density that is everywhere one σ below the floor has lost 1 for each element of half a period."""
    order = np.arange(1, 6)
    stack = Stack(
        period=20.0, order=order, amplitude=np.full(5, 1e-9), variance=np.full(5, 1e-30),
        other_order=np.zeros(0, dtype=np.int64), other_variance=np.zeros(0), top=5,
    )  # fmt: skip
    terms = build_terms(stack, Criteria(mean=-2.0, mean_sigma=2.0, non_negative=NonNegative()))
    assert terms.scores(np.ones((1, 5), dtype=np.int64))[0] == pytest.approx(5.0, rel=1e-6)


def test_the_variation_of_one_wave_is_the_least_there_can_be():
    """∫|n′| of one cosine over half its period is twice its amplitude in density: 4A/d; the bound is πA/d."""
    stack = replace(stack_of(FilmOrders.of(20.0, [1], [3.0], [0.0]), None), top=400)
    inside = stack.other_order > 400
    stack = replace(stack, other_order=stack.other_order[inside], other_variance=0 * stack.other_variance[inside])
    terms = build_terms(stack, Criteria(least_structure=LeastStructure()))
    found = terms.scores(np.ones((1, 1), dtype=np.int64))[0]
    assert found == pytest.approx(2 * 400 * np.log(4 / np.pi), rel=1e-4)


@pytest.mark.parametrize("seed", range(4))
def test_no_part_is_below_zero(seed):
    _, terms = problem(8, seed, EVERYTHING)
    assert (terms.parts(all_signs(8)) >= 0).all()


def test_only_positions_see_a_shift_by_half_a_period():
    odd = np.array([1.0, 0, 1, 0, 1, 0])
    turned = np.where(odd > 0, -1, 1)
    signs = all_signs(6)[::5]
    for criteria, blind in ((SHAPE, True), (EVERYTHING, False), (POSITIONS, False)):
        _, terms = problem(6, 2, criteria)
        assert terms.blind_to_shift(odd) is blind
        same = np.allclose(terms.parts(signs), terms.parts(signs * turned), rtol=1e-9, atol=1e-12)
        assert same is blind


def test_a_region_half_way_between_the_mirrors_cannot_tell_them_apart():
    odd = np.array([1.0, 0, 1, 0])
    centred = Criteria(mean=0.4, flat=(Flat(start=8.5, stop=12.5),), densities=(KnownDensity(
        value=0.3, sigma=0.1, start=10.5),))  # fmt: skip
    assert problem(4, 2, centred)[1].blind_to_shift(odd)
    moved = Criteria(flat=(Flat(start=8.5, stop=12.6),))
    assert not problem(4, 2, moved)[1].blind_to_shift(odd)

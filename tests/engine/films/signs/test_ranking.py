from dataclasses import replace

import numpy as np
import pytest

from engine import evaluate, sampling
from engine.errors import InputError, TooLargeError
from engine.films.orders import FilmOrders
from engine.films.signs import (
    DECISIVE,
    Criteria,
    Flat,
    KnownDensity,
    KnownTotal,
    LeastStructure,
    NonNegative,
    rank_signs,
)
from tests.engine.films.signs import oracle
from tests.engine.films.signs.problems import EVERYTHING, SHAPE, all_signs, film, problem
from tests.engine.films.signs.stacks import InventedStack, is_true, measured, trials

# Invented: a swelling sheet around the mirror at d/2, a gallery around that at 0.
TWO_SLABS = InventedStack(18.0, ((0.0, 3.5, 0.33), (3.5, 9.0, 1.1)), (), 0.25, (-2.75, 2.75, 0.33), (4.25, 13.75, 1.1))
GALLERY = Criteria(
    mean=TWO_SLABS.mean,
    non_negative=NonNegative(),
    flat=(Flat(start=-2.75, stop=2.75), Flat(start=4.25, stop=13.75)),
    densities=(KnownDensity(value=0.33, sigma=0.03, start=-2.75, stop=2.75),),
    totals=(KnownTotal(value=0.33 * 5.5, sigma=0.15, start=-2.75, stop=2.75),),
)


def test_a_single_wave_has_either_sign_until_a_position_is_known():
    """n = 1 + cos(2πz/d): F_1 = d/2."""
    wave = FilmOrders.of(10.0, [1], [5.0], [0.1])
    shape = rank_signs(wave, Criteria(mean=1.0, non_negative=NonNegative(), least_structure=LeastStructure()))
    assert shape.signs.tolist() == [[1]]
    assert shape.equivalent.tolist() == [[-1]]
    assert shape.decided
    assert np.isnan(shape.margins[0])
    assert shape.support.tolist() == [1.0]
    np.testing.assert_allclose(shape.profiles[0], 1 + np.cos(2 * np.pi * shape.z / 10), atol=1e-12)
    for value, sign in ((2.0, 1), (0.0, -1)):
        known = Criteria(mean=1.0, densities=(KnownDensity(value=value, sigma=0.05, start=0.0),))
        ranked = rank_signs(wave, replace(known, envelope=None))
        assert ranked.equivalent is None
        assert ranked.signs.tolist() == [[sign], [-sign]]
        assert ranked.scores[1] > ranked.scores[0] == pytest.approx(0)


def test_two_slabs_are_found_and_decided():
    noisy, clean, true = measured(TWO_SLABS, np.random.default_rng(4), 4, 0.05)
    for orders in (clean, noisy):
        ranked = rank_signs(orders, GALLERY)
        assert is_true(ranked, true)
        assert ranked.decided
        assert ranked.in_doubt == ()
        assert ranked.order_margin.min() == pytest.approx(ranked.margins[0])
        assert ranked.support[0] > 0.98
        assert ranked.verdict.startswith("The criteria prefer one sign set: ")
    z = np.array([0.0, 9.0])
    at = ranked.profiles[0][[0, -1]]
    np.testing.assert_allclose(at, TWO_SLABS.density(z), atol=0.15)


def test_without_knowledge_the_same_slabs_are_not_decided():
    noisy, _, _ = measured(TWO_SLABS, np.random.default_rng(4), 4, 0.05)
    ranked = rank_signs(noisy, Criteria(mean=TWO_SLABS.mean, non_negative=NonNegative()))
    assert not ranked.decided
    assert ranked.in_doubt
    assert ranked.verdict.startswith("The data do not decide: ")
    doubtful = np.isin(ranked.order, ranked.in_doubt)
    within = ranked.scores < ranked.scores[0] + ranked.decisive
    differing = (ranked.signs[within] != ranked.signs[0]).any(axis=0)
    assert (doubtful | ~differing).all()


def test_a_wrong_scale_is_a_contradiction():
    _, clean, _ = measured(TWO_SLABS, np.random.default_rng(4), 4, 0.05)
    ranked = rank_signs(clean.scaled(4.0, unit="e/Å³", words="wrongly scaled"), GALLERY)
    assert not ranked.decided
    assert "contradicts" in ranked.verdict


def test_all_members_agree_with_plain_enumeration():
    orders = film(6, 4)
    stack, _ = problem(6, 4, EVERYTHING)
    ranked = rank_signs(orders, EVERYTHING, best=64)
    signs = all_signs(6)
    parts = oracle.parts(stack, EVERYTHING, signs)
    order = np.argsort(parts.sum(axis=1))
    top, scores = parts[order], parts[order].sum(axis=1)
    np.testing.assert_allclose(ranked.scores, scores, rtol=1e-3)
    np.testing.assert_array_equal(ranked.signs[:8], signs[order][:8])
    np.testing.assert_allclose(ranked.parts.sum(axis=1), ranked.scores)
    np.testing.assert_allclose(ranked.parts[:8], top[:8], rtol=3e-3, atol=1e-6)
    np.testing.assert_allclose(ranked.margins[:-1], np.diff(ranked.scores))
    share = np.exp(-0.5 * (ranked.scores - ranked.scores[0]))
    np.testing.assert_allclose(ranked.support, share / share.sum(), rtol=1e-5)
    for place in range(6):
        same = ranked.signs[:, place] == ranked.signs[0, place]
        turned = min(ranked.scores[~same].min() - ranked.scores[0], ranked.reach)
        assert ranked.order_margin[place] == pytest.approx(turned)
        assert ranked.order_support[place] == pytest.approx(share[same].sum() / share.sum(), rel=1e-5)
    doubt = [l for l, margin in zip(ranked.order, ranked.order_margin, strict=True) if margin < 12]
    assert ranked.in_doubt == tuple(doubt)
    assert ranked.names == EVERYTHING.names
    assert ranked.looked_at == 64
    assert ranked.exhaustive


def test_sets_half_a_period_apart_are_one():
    ranked = rank_signs(film(5, 2), SHAPE, best=32)
    assert ranked.signs.shape == (16, 5)
    np.testing.assert_array_equal(ranked.equivalent, ranked.signs * [-1, 1, -1, 1, -1])
    both = np.concatenate([ranked.signs, ranked.equivalent])
    assert len(np.unique(both, axis=0)) == 32
    strongest = max((1, 3, 5), key=lambda l: film(5, 2).amplitude[l - 1])
    assert (ranked.signs[:, strongest - 1] == 1).all()
    assert np.isnan(ranked.order_margin[strongest - 1])
    assert any("reported as one" in line and f"order {strongest} " in line for line in ranked.words)


def test_known_odd_signs_or_positions_tell_the_mirrors_apart():
    fixed = rank_signs(film(5, 2), SHAPE, best=32, fixed={3: -1})
    assert fixed.signs.shape == (16, 5)
    assert (fixed.signs[:, 2] == -1).all()
    assert fixed.equivalent is None
    even = rank_signs(film(5, 2), SHAPE, best=32, fixed={2: -1, 4: 1})
    assert even.signs.shape == (4, 5)
    assert even.equivalent is not None
    placed = rank_signs(film(5, 2), EVERYTHING, best=32)
    assert placed.signs.shape == (32, 5)
    assert placed.equivalent is None
    assert any("fixed positions" in line for line in placed.words)
    given = rank_signs(film(3, 2), SHAPE, fixed={1: 1, 2: -1, 3: 1})
    assert given.signs.tolist() == [[1, -1, 1]]
    assert given.looked_at == 1
    assert "only one sign set" in given.verdict


def test_the_other_mirror_as_origin_turns_odd_signs():
    """The same stack, its criteria moved by half a period."""
    noisy, _, true = measured(TWO_SLABS, np.random.default_rng(4), 4, 0.05)
    moved = replace(
        GALLERY,
        flat=tuple(replace(one, start=one.start + 9, stop=one.stop + 9) for one in GALLERY.flat),
        densities=(replace(GALLERY.densities[0], start=6.25, stop=11.75),),
        totals=(replace(GALLERY.totals[0], start=6.25, stop=11.75),),
    )
    here, there = rank_signs(noisy, GALLERY), rank_signs(noisy, moved)
    np.testing.assert_array_equal(there.signs[0], true * [-1, 1, -1, 1])
    np.testing.assert_allclose(there.scores, here.scores, rtol=1e-8)
    np.testing.assert_allclose(there.profiles[0], here.profiles[0][::-1], atol=1e-10)


def test_the_unit_of_density_does_not_matter():
    orders = film(6, 4)
    factor = 28.2
    bigger = FilmOrders.of(42.0, orders.order, factor * orders.amplitude, factor * orders.sigma)
    criteria = Criteria(
        mean=0.42 * factor,
        mean_sigma=0.01 * factor,
        non_negative=replace(EVERYTHING.non_negative, floor=0.1 * factor),
        flat=tuple(replace(one, sigma=factor * one.sigma) for one in EVERYTHING.flat),
        densities=tuple(
            replace(one, value=factor * one.value, sigma=factor * one.sigma) for one in EVERYTHING.densities
        ),
        totals=tuple(replace(one, value=factor * one.value, sigma=factor * one.sigma) for one in EVERYTHING.totals),
        least_structure=EVERYTHING.least_structure,
    )
    np.testing.assert_allclose(rank_signs(bigger, criteria).parts, rank_signs(orders, EVERYTHING).parts, rtol=1e-8)


def test_orders_of_amplitude_zero_have_no_sign():
    orders = FilmOrders.of(42.0, [1, 2, 3, 4], [4.0, 0.0, 2.0, 1.0], [0.1, 0.3, 0.1, 0.1])
    ranked = rank_signs(orders, EVERYTHING)
    assert ranked.signs.shape == (8, 4)
    assert (ranked.signs[:, 1] == 0).all()
    assert np.isnan(ranked.order_margin[1])
    assert any("amplitude 0 have no sign: 2." in line for line in ranked.words)
    surer = rank_signs(replace(orders, sigma=np.array([0.1, 0.0, 0.1, 0.1])), EVERYTHING)
    # A measured zero has an error like any other order.
    assert (surer.scores != ranked.scores).any()


def test_orders_with_a_common_factor_are_those_of_a_shorter_period():
    orders = film(4, 2)
    criteria = Criteria(mean=0.42, non_negative=NonNegative(), least_structure=LeastStructure())
    doubled = FilmOrders.of(84.0, 2 * orders.order, 2 * orders.amplitude, 2 * orders.sigma)
    # F of a period of twice the length is twice as much.
    short, long = rank_signs(orders, criteria), rank_signs(doubled, criteria)
    assert any("multiples of 2" in line for line in long.words)
    np.testing.assert_array_equal(long.signs, short.signs)
    np.testing.assert_array_equal(long.equivalent, short.equivalent)
    np.testing.assert_allclose(long.parts, short.parts, rtol=1e-9)
    assert long.z[-1] == pytest.approx(21.0)
    assert long.order.tolist() == [2, 4, 6, 8]


def test_profiles_are_those_of_the_coefficient_set():
    orders = film(6, 4)
    ranked = rank_signs(orders, EVERYTHING)
    assert ranked.profiles.shape == (5, ranked.z.size)
    for rank in (0, 4):
        made = orders.coefficients(ranked.phases_deg(rank), 0.42)
        whole = 2 * (ranked.z.size - 1)
        values = evaluate(made, sampling.full_cell(made.lattice, (whole,))).values
        np.testing.assert_allclose(ranked.profiles[rank], values[: ranked.z.size], atol=1e-9)
    assert ranked.z[-1] == pytest.approx(21.0)


def test_beyond_the_limit_a_beam_searches_and_says_so():
    whole = rank_signs(film(10, 4), EVERYTHING)
    some = rank_signs(film(10, 4), EVERYTHING, max_exhaustive=9, beam_width=100)
    assert not some.exhaustive
    assert some.words[0].startswith("Not exhaustive: of 2^10 sign sets a beam search, 100 wide")
    assert some.scores[0] == pytest.approx(whole.scores[0])
    assert whole.words[0] == "All 1,024 sign sets of 10 free signs were looked at."
    assert "which are not all" in some.verdict
    many = rank_signs(film(30, 4), SHAPE, beam_width=50)
    assert many.signs.shape == (10, 30)


def test_threads_change_nothing():
    one, two = (rank_signs(film(15, 9), EVERYTHING, threads=threads) for threads in (1, 2))
    np.testing.assert_array_equal(one.signs, two.signs)
    np.testing.assert_array_equal(one.scores, two.scores)


def test_the_best_alone_still_has_its_margin():
    alone, several = rank_signs(film(6, 4), EVERYTHING, best=1), rank_signs(film(6, 4), EVERYTHING)
    assert alone.scores.shape == (1,)
    assert alone.margins[0] == several.margins[0]
    assert alone.profiles.shape[0] == 1


@pytest.mark.parametrize(
    ("options", "path"),
    [
        ({"fixed": {9: 1}}, ("fixed", "9")),
        ({"fixed": {1: 0}}, ("fixed", "1")),
        ({"fixed": {1: True}}, ("fixed", "1")),
        ({"best": 0}, ("best",)),
        ({"decisive": 0.0}, ("decisive",)),
        ({"max_exhaustive": 29}, ("max_exhaustive",)),
        ({"max_exhaustive": -1}, ("max_exhaustive",)),
        ({"beam_width": 0}, ("beam_width",)),
        ({"threads": 0}, ("threads",)),
    ],
)
def test_what_cannot_be_is_refused(options, path):
    with pytest.raises(InputError) as caught:
        rank_signs(film(4, 1), EVERYTHING, **options)
    assert caught.value.path == path


def test_no_amplitude_at_all_is_refused():
    with pytest.raises(InputError, match="0 throughout"):
        rank_signs(FilmOrders.of(42.0, [1, 2], [0.0, 0.0]), EVERYTHING)


def test_criteria_are_checked():
    with pytest.raises(InputError, match="name nothing"):
        rank_signs(film(4, 1), Criteria())


@pytest.mark.parametrize("limit", [20, 2])
def test_too_little_memory_is_refused_beforehand(limit):
    with pytest.raises(TooLargeError):
        rank_signs(film(12, 1), EVERYTHING, max_bytes=10_000, max_exhaustive=limit)


def test_random_stacks_are_decided_rightly_or_not_at_all():
    """Invented stacks and knowledge; the benchmark `signs` has more of them, and other seeds."""
    made = trials(2024, 60, most=9)
    decidable = [one for one in made if one.right_without_noise and one.margin_without_noise >= DECISIVE]
    assert len(decidable) >= 3
    assert sum(one.right for one in decidable) >= 0.95 * len(decidable)
    assert all(one.right for one in made if one.decided)
    sure, wrong = sum(one.sure for one in made), sum(one.sure_wrong for one in made)
    assert sure > 100
    assert wrong <= 0.01 * sure

"""Differences and combinations against plain sums, laws and Monte Carlo."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from engine import Lattice, evaluate
from engine.combination import AS_GIVEN, combination, difference, fitted_scale, given_scale
from engine.sampling import FreePoints
from tests.engine.combination.crystals import GROUPS, measured, random_set, table
from tests.strategies import refusal_of

POINTS = np.array([[0.0, 0, 0], [0.5, 0, 0], [0.25, 0.25, 0.0], [0.13, 0.31, 0.72], [0.4, 0.9, 0.05], [0.5, 0.5, 0.5]])
seeds = st.integers(0, 2**16)
dimensions = st.sampled_from((1, 2, 3))


def sigma_at(coefficients, positions=POINTS):
    return evaluate(coefficients, FreePoints(positions), uncertainty=True).sigma.values


@given(seeds, seeds, dimensions, st.booleans(), st.floats(0.1, 10))
def test_difference_is_that_of_the_coefficients(one, two, dimension, real, k):
    first = random_set(dimension, seed=one, real=real)
    second = random_set(dimension, seed=two, real=real)
    made = difference(first, second, scale=given_scale(k))
    a, b = table(first), table(second)
    wanted = {h: a[h] - k * b[h] for h in a.keys() & b.keys()}
    found = table(made.coefficients)
    assert found.keys() == wanted.keys()
    np.testing.assert_allclose([found[h] for h in wanted], list(wanted.values()), rtol=1e-12, atol=1e-12)
    assert made.common == len(wanted)
    assert made.only_first == len(a.keys() - b.keys())
    assert made.only_second == len(b.keys() - a.keys())
    assert made.scale == k


@given(seeds, seeds, dimensions, st.booleans())
def test_difference_changes_its_sign_with_the_order(one, two, dimension, real):
    first, second = random_set(dimension, seed=one, real=real), random_set(dimension, seed=two, real=real)
    forward = difference(first, second, scale=AS_GIVEN).coefficients
    backward = difference(second, first, scale=AS_GIVEN).coefficients
    np.testing.assert_array_equal(forward.indices, backward.indices)
    np.testing.assert_allclose(forward.values, -backward.values, atol=1e-14)
    np.testing.assert_allclose(forward.sigma, backward.sigma, rtol=1e-9)
    np.testing.assert_allclose(forward.phase_sigma, backward.phase_sigma, rtol=1e-9)


@given(seeds, dimensions, st.booleans())
def test_difference_with_itself_is_zero_and_as_uncertain_as_two(seed, dimension, real):
    one = random_set(dimension, seed=seed, real=real, phase_sigma=None)
    made = difference(one, one, scale=AS_GIVEN).coefficients
    assert not made.values.any()
    np.testing.assert_allclose(made.plane_errors.along, np.sqrt(2) * one.sigma)
    np.testing.assert_allclose(made.plane_errors.across, 0, atol=1e-15)


def test_terms_of_one_set_are_zero_only_where_asked():
    first, second = random_set(seed=1, phase_sigma=1e-3), random_set(seed=2)
    a, b = table(first), table(second)
    zero = (0, 0, 0)
    wanted = {
        "zero_second": {h: a[h] - b.get(h, 0) for h in a},
        "zero_first": {h: a.get(h, 0) - b[h] for h in b},
        "zero_both": {h: a.get(h, 0) - b.get(h, 0) for h in a.keys() | b.keys()},
    }
    for missing, terms in wanted.items():
        made = difference(first, second, scale=AS_GIVEN, missing=missing)
        found = table(made.coefficients)
        assert zero in found
        assert found.keys() == terms.keys()
        np.testing.assert_allclose([found[h] for h in terms], list(terms.values()), atol=1e-14)
        assert any("taken as zero" in words for words in made.applied)
    # The error of a term in one set alone is that set's.
    made = difference(first, second, scale=AS_GIVEN, missing="zero_second").coefficients
    alone = [row for row, h in enumerate(map(tuple, made.indices.tolist())) if h not in b]
    rows = [list(a).index(tuple(made.indices[row])) for row in alone]
    np.testing.assert_allclose(made.sigma[alone], first.sigma[rows], rtol=1e-2)


@pytest.mark.parametrize("missing", ["omit", "zero_second", "zero_both"])
def test_mean_that_is_not_known_is_not_zero(missing):
    first, second = random_set(seed=1), random_set(seed=2, zero=False)
    made = difference(first, second, scale=AS_GIVEN, missing=missing)
    assert (0, 0, 0) not in table(made.coefficients)
    assert made.coefficients.tally.zero_term == "absent"
    assert any("zero term" in note for note in made.notes)


@pytest.mark.parametrize(("phases", "place"), [("first", 0), ("second", 1)])
def test_amplitudes_under_the_phases_of_one_set(phases, place):
    both = random_set(seed=1), random_set(seed=2)
    made = difference(*both, scale=given_scale(1.7), phases=phases).coefficients
    a, b = map(table, both)
    donor = (a, b)[place]
    found = table(made)
    assert any(abs(a[h]) < 1.7 * abs(b[h]) for h in found)
    for h, value in found.items():
        wanted = (abs(a[h]) - 1.7 * abs(b[h])) * donor[h] / abs(donor[h])
        if h == (0, 0, 0):
            wanted = a[h] - 1.7 * b[h]
        assert value == pytest.approx(wanted, abs=1e-12)
    sigma = [dict(zip(map(tuple, one.indices.tolist()), one.sigma, strict=True)) for one in both]
    np.testing.assert_allclose(made.sigma, [np.hypot(sigma[0][h], 1.7 * sigma[1][h]) for h in found])
    phase_sigma = dict(zip(map(tuple, both[place].indices.tolist()), both[place].phase_sigma, strict=True))
    np.testing.assert_array_equal(made.phase_sigma, [phase_sigma[h] for h in found])


def test_phases_of_a_third_set_and_terms_that_it_lacks():
    first, second, third = (random_set(seed=seed) for seed in (1, 2, 3))
    third = replace(third, phase_known=np.arange(third.count) % 3 > 0)
    made = difference(first, second, scale=AS_GIVEN, phases=third)
    a, b = table(first), table(second)
    known = table(third.phased())
    assert table(made.coefficients).keys() == a.keys() & b.keys() & known.keys()
    assert made.unphased == len((a.keys() & b.keys()) - known.keys())
    for h, value in table(made.coefficients).items():
        if h != (0, 0, 0):
            assert value == pytest.approx((abs(a[h]) - abs(b[h])) * known[h] / abs(known[h]), abs=1e-12)


def test_terms_without_phase_are_left_out_and_counted():
    first, second = random_set(seed=1), random_set(seed=2)
    first = replace(first, phase_known=np.arange(first.count) % 4 > 0)
    made = difference(first, second, scale=AS_GIVEN)
    common = table(first).keys() & table(second).keys()
    assert table(made.coefficients).keys() == table(first.phased()).keys() & common
    assert made.unphased == made.common - made.coefficients.count > 0
    # Amplitudes need no phase but that of the donor.
    assert difference(first, second, scale=AS_GIVEN, phases="second").coefficients.count == made.common


def test_combination_is_linear_in_sets_and_weights():
    sets = [random_set(seed=seed) for seed in (1, 2, 3)]
    weights = (2.0, -0.5, 1.25)
    made = combination(sets, weights, scale=AS_GIVEN)
    tables = [table(one) for one in sets]
    for h, value in table(made.coefficients).items():
        assert value == pytest.approx(sum(c * one[h] for c, one in zip(weights, tables, strict=True)), abs=1e-12)
    assert made.absent == tuple(len(set().union(*tables) - one.keys()) for one in tables)


def test_merit_is_applied_when_asked():
    first, second = random_set(seed=1, share=1), random_set(seed=2, share=1)
    merit = np.linspace(0.1, 1, first.count)
    first = replace(first, merit=merit)
    made = difference(first, second, scale=AS_GIVEN, apply_merit=True)
    np.testing.assert_allclose(made.coefficients.values, merit * first.values - second.values)
    plain = difference(first, second, scale=AS_GIVEN)
    np.testing.assert_allclose(plain.coefficients.values, first.values - second.values)
    assert any("not applied" in note for note in plain.notes)
    kept = difference(first, second, scale=AS_GIVEN, phases="first")
    zero = ~first.indices.any(axis=1)
    np.testing.assert_array_equal(kept.coefficients.merit, np.where(zero, 1, merit))
    assert refusal_of(lambda: difference(first, second, scale=AS_GIVEN, phases="first", apply_merit=True))
    assert refusal_of(lambda: difference(second, second, scale=AS_GIVEN, apply_merit=True))


def exact_variance(crystal, positions, factor=1.0):
    """Of independent errors along and across each phasor, to first order; (P,)."""
    kernels = crystal.kernels(positions)
    phasor = crystal.values / np.abs(crystal.values)
    along = factor * crystal.sigma[:, None] * (phasor[:, None] * kernels).real
    across = factor * (np.abs(crystal.values) * crystal.phase_sigma)[:, None] * (1j * phasor[:, None] * kernels).real
    return (along**2).sum(axis=0) + (across**2).sum(axis=0)


@pytest.mark.parametrize("name", GROUPS)
def test_sigma_of_a_difference_is_exact_for_small_errors(name):
    first, second = (measured(name, seed, relative=1e-4, phase=1e-4) for seed in (3, 4))
    made = difference(first.coefficients(), second.coefficients(), scale=given_scale(1.3)).coefficients
    assert made.group is not None
    assert np.abs(made.plane_errors.mixed).max() > 0 or name == "P-1"
    wanted = np.sqrt(exact_variance(first, POINTS) + exact_variance(second, POINTS, 1.3))
    np.testing.assert_allclose(sigma_at(made), wanted, rtol=1e-6, atol=1e-9 * wanted.max())


@pytest.mark.parametrize("noise", [0, 1e-15])
@pytest.mark.parametrize("name", GROUPS)
def test_sigma_stays_exact_where_the_difference_is_rounding(name, noise):
    """Axes come from the sets: the phases of what cancels say nothing of symmetry."""
    crystal = measured(name, 3, relative=1e-4, phase=1e-4)
    first = crystal.coefficients()
    rng = np.random.default_rng(0)
    turned = noise * (rng.normal(size=first.count) + 1j * rng.normal(size=first.count))
    second = replace(first, values=first.values * (1 + turned))
    certain = replace(crystal, phase_sigma=np.zeros_like(crystal.phase_sigma))
    for phases, source in (("own", crystal), ("first", certain)):
        made = difference(first, second, scale=AS_GIVEN, phases=phases).coefficients
        assert np.abs(made.values).max() < 1e-12
        wanted = np.sqrt(2 * exact_variance(source, POINTS))
        np.testing.assert_allclose(sigma_at(made), wanted, rtol=1e-6, atol=1e-7 * wanted.max())


@pytest.mark.parametrize("name", GROUPS)
def test_sigma_of_a_difference_by_monte_carlo(name):
    """Errors of the phases are large, and still their second moments are exact."""
    first, second = measured(name, 5, relative=0.15, phase=0.4), measured(name, 6, relative=0.15, phase=0.4)
    made = difference(first.coefficients(), second.coefficients(), scale=given_scale(0.8)).coefficients
    rng = np.random.default_rng(11)
    kernels = first.kernels(POINTS)
    drawn = (first.drawn(rng, 20000) @ kernels - 0.8 * second.drawn(rng, 20000) @ kernels).real
    wanted = drawn.std(axis=0)
    np.testing.assert_allclose(sigma_at(made), wanted, rtol=0.025, atol=1e-6 * wanted.max())


@pytest.mark.parametrize("name", GROUPS)
def test_sigma_of_an_amplitude_difference_by_monte_carlo(name):
    first, second = measured(name, 5, relative=0.15, phase=0.3), measured(name, 6, relative=0.15, phase=0.3)
    made = difference(first.coefficients(), second.coefficients(), scale=AS_GIVEN, phases="first").coefficients
    rng = np.random.default_rng(12)
    one, two = first.drawn(rng, 20000), second.drawn(rng, 20000)
    turned = np.exp(1j * first.phase_sigma * rng.normal(size=one.shape)) * first.values / np.abs(first.values)
    amplitude = np.abs(one) - np.abs(two)
    wanted = ((amplitude * turned) @ first.kernels(POINTS)).real.std(axis=0)
    np.testing.assert_allclose(sigma_at(made), wanted, rtol=0.025, atol=1e-6 * wanted.max())


def test_a_difference_of_differences_has_the_errors_of_all_three():
    sets = [measured("P212121", seed, relative=1e-4, phase=1e-4) for seed in (3, 4, 7)]
    one, two, three = (crystal.coefficients() for crystal in sets)
    inner = difference(one, two, scale=given_scale(2.0)).coefficients
    outer = difference(three, inner, scale=AS_GIVEN).coefficients
    at_once = combination((three, one, two), (1, -1, 2), scale=AS_GIVEN).coefficients
    np.testing.assert_allclose(outer.values, at_once.values, atol=1e-12)
    variance = exact_variance(sets[2], POINTS) + exact_variance(sets[0], POINTS) + exact_variance(sets[1], POINTS, 2.0)
    np.testing.assert_allclose(sigma_at(outer), np.sqrt(variance), rtol=1e-6, atol=1e-12)
    np.testing.assert_allclose(sigma_at(at_once), np.sqrt(variance), rtol=1e-6, atol=1e-12)


def test_errors_survive_a_cut_of_resolution():
    first, second = (measured("P212121", seed) for seed in (3, 4))
    made = difference(first.coefficients(), second.coefficients(), scale=AS_GIVEN).coefficients
    low = made.resolution()[0] * 1.3
    cut = made.within(d_min=low)
    assert 0 < cut.count < made.count
    again = difference(
        first.coefficients().within(d_min=low), second.coefficients().within(d_min=low), scale=AS_GIVEN
    ).coefficients
    np.testing.assert_allclose(sigma_at(cut), sigma_at(again), rtol=1e-9)


def test_first_order_columns_describe_amplitude_and_phase():
    first, second = random_set(seed=1, sigma=1e-4, phase_sigma=1e-4), random_set(seed=2, sigma=1e-4, phase_sigma=1e-4)
    made = difference(first, second, scale=AS_GIVEN).coefficients
    rng = np.random.default_rng(3)
    a = [list(table(first)).index(h) for h in table(made)]
    b = [list(table(second)).index(h) for h in table(made)]

    def drawn(one, rows):
        size = (4000, len(rows))
        amplitude = np.abs(one.values[rows]) + one.sigma[rows] * rng.normal(size=size)
        return amplitude * np.exp(1j * (np.angle(one.values[rows]) + one.phase_sigma[rows] * rng.normal(size=size)))

    values = drawn(first, a) - drawn(second, b)
    np.testing.assert_allclose(made.sigma, np.abs(values).std(axis=0), rtol=0.06)
    others = made.indices.any(axis=1)
    turned = np.angle(values / made.values)
    np.testing.assert_allclose(made.phase_sigma[others], turned.std(axis=0)[others], rtol=0.06)


def test_a_set_without_errors_is_exact_and_that_is_told():
    first, second = random_set(seed=1), random_set(seed=2, sigma=None, phase_sigma=None)
    made = difference(first, second, scale=AS_GIVEN).coefficients
    assert any("second" in words and "exact" in words for words in made.plane_errors.omits)
    total = made.plane_errors.along**2 + made.plane_errors.across**2
    rows = [list(table(first)).index(h) for h in table(made)]
    # The second moment of amplitude and phase errors, to first order in the small ones.
    wanted = first.sigma**2 + np.abs(first.values) ** 2 * first.phase_sigma**2
    np.testing.assert_allclose(total, wanted[rows], rtol=0.05)
    neither = difference(second, second, scale=AS_GIVEN).coefficients
    assert neither.sigma is None
    assert neither.plane_errors is None


def test_groups_are_cut_to_what_is_common():
    first, second = measured("P212121", 3), measured("P1", 4)
    made = difference(first.coefficients(), replace(second.coefficients(), lattice=first.lattice), scale=AS_GIVEN)
    assert made.coefficients.group.order == 1
    assert any("different symmetry" in note for note in made.notes)


def test_words_say_what_was_done():
    first, second = random_set(seed=1), random_set(seed=2)
    first, second = replace(first, history=("cooled",)), replace(second, history=("warmed",))
    made = difference(first, second, scale=fitted_scale())
    history = made.coefficients.history
    assert history[:2] == ("first: cooled", "second: warmed")
    assert any("fitted on" in words for words in history)
    assert "1 × first − 1 × second" in history
    assert made.coefficients.tally.rows == first.tally.rows + second.tally.rows


def test_refusals():
    first, second = random_set(seed=1), random_set(seed=2)
    assert refusal_of(lambda: difference(first, random_set(2), scale=AS_GIVEN)).path == ("second",)
    assert refusal_of(lambda: difference(first, second, scale=AS_GIVEN, missing="both")).path == ("missing",)
    assert refusal_of(lambda: difference(first, second, scale=AS_GIVEN, phases="third")).path == ("phases",)
    assert refusal_of(lambda: combination((first, second), (1, -1), scale=AS_GIVEN, phases=2)).path == ("phases",)
    assert refusal_of(lambda: combination((first, second), (1,), scale=AS_GIVEN)).path == ("weights",)
    assert refusal_of(lambda: combination((), (), scale=AS_GIVEN))
    large = replace(second, lattice=Lattice.from_parameters(9, 11.9, 16.4, 82, 97, 106))
    fault = refusal_of(lambda: difference(first, large, scale=AS_GIVEN))
    assert "7.3 × 11.9 × 16.4" in fault.reason
    assert "9 × 11.9 × 16.4" in fault.reason
    none = first.select(np.zeros(first.count, dtype=bool))
    assert refusal_of(lambda: difference(first, none, scale=AS_GIVEN)).path == ("second",)
    unphased = replace(first, phase_known=np.zeros(first.count, dtype=bool))
    assert refusal_of(lambda: difference(unphased, second, scale=AS_GIVEN)).path == ("sets",)

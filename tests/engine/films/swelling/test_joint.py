"""Signs of swelling series against the truth of invented layers."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from engine import InputError
from engine.films.orders import FilmOrders
from engine.films.swelling import excess, joint_signs, known_order, never_negative, total
from tests.engine.films.swelling.invented import Layer, read, series

FIXED = Layer(
    half=9.5,
    z=np.array([2.1, 6.4]),
    width=np.array([0.8, 0.9]),
    strength=np.array([4.0, 2.2]),
    edge=8.0,
    rough=0.3,
    step=0.0,
)
PERIODS = (19.0, 20.6, 22.4, 25.1)
"""Å, of invented swelling sheets SB-2 through a humidity run."""


def humidity(seed=0, noise=0.04, scale="arbitrary", factor=1.0):
    sets, truths = read(np.random.default_rng(seed), FIXED, PERIODS, noise=noise, least=6, most=8)
    if scale == "absolute":
        sets = [replace(entry, scale="absolute", unit="e/Å³") for entry in sets]
    return [replace(entry, amplitude=factor * entry.amplitude, sigma=factor * entry.sigma) for entry in sets], truths


def test_a_hundred_series():
    """Four periods up to 1.4 times the dry one, 5 to 10 orders, intensities to 3…5 %, every set on its own scale."""
    right = significant = decided = wrong = 0
    whole, settled, scale_errors, merits, signed = [], 0, [], [], []
    for seed in range(100):
        _, sets, truths, scales = series(seed, swelling=1.4)
        made = joint_signs(sets)
        signs, truth = np.concatenate(made.signs), np.concatenate(truths)
        amplitude = np.concatenate([entry.amplitude for entry in sets])
        strong = amplitude > 2 * np.concatenate([entry.sigma for entry in sets])
        common = np.sign(np.sum(signs * truth))
        good = common * signs == np.sign(truth)
        sure = np.concatenate(made.decided)
        right += np.count_nonzero(good & strong)
        significant += np.count_nonzero(strong)
        decided += np.count_nonzero(sure & strong)
        wrong += np.count_nonzero(sure & ~good)
        merits.append(np.concatenate(made.merit))
        signed.append(np.where(good, 1.0, -1.0))
        settled += made.settled
        if made.settled:
            whole.append(good[sure].all())
        power = np.concatenate([(entry.amplitude / k) ** 2 for entry, k in zip(sets, made.scales, strict=True)])
        assert (power[np.isinf(np.concatenate(made.margin))] > 0.5 * power.sum()).all()
        scale_errors.append(np.abs(np.log(made.scales / scales)).max())
    assert right / significant > 0.97
    assert decided / significant > 0.9
    assert wrong <= 2
    assert settled > 80
    assert np.mean(whole) >= 0.97
    assert np.median(scale_errors) < 0.03
    # A figure of merit is the mean of the sign, right ones +1, wrong ones −1; it promises no more than it keeps.
    merit, score = np.concatenate(merits), np.concatenate(signed)
    for low, high, most in ((0.0, 0.3, 0.5), (0.3, 0.8, 1.0), (0.8, 0.99, 1.0)):
        some = (merit >= low) & (merit < high)
        assert np.count_nonzero(some) > 15
        assert merit[some].mean() - 2 / np.sqrt(np.count_nonzero(some)) < score[some].mean() <= most


@pytest.mark.parametrize(("swelling", "count"), [(1.08, 4), (1.4, 2)])
def test_less_swelling_and_fewer_periods_decide_less_but_not_wrongly(swelling, count):
    wrong = decided = total_count = 0
    for seed in range(20):
        _, sets, truths, _ = series(seed, swelling=swelling, count=count)
        made = joint_signs(sets)
        signs, truth = np.concatenate(made.signs), np.concatenate(truths)
        sure = np.concatenate(made.decided)
        good = np.sign(np.sum(signs * truth)) * signs == np.sign(truth)
        wrong += np.count_nonzero(sure & ~good)
        decided += np.count_nonzero(sure)
        total_count += sure.size
    assert wrong <= 1
    assert decided > 0.5 * total_count


def test_the_layer_comes_out():
    """Transform and profile lie where their uncertainties say, also where a sign is open and wrong."""
    waves, layers = [], []
    for seed in range(12):
        sets, truths = humidity(seed)
        made = joint_signs(sets, orientation=excess("positive"))
        assert made.settled
        assert made.oriented
        for signs, sure, truth in zip(made.signs, made.decided, truths, strict=True):
            np.testing.assert_array_equal(signs[sure], np.sign(truth)[sure])
        q, z = np.linspace(0.3, made.transform.largest, 60), np.linspace(-9.5, 9.5, 39)
        value, sigma = made.transform.at(q)
        waves.append((value - FIXED.transform(q)) / sigma)
        density, error = made.transform.contrast(z)
        layers.append((density - FIXED.contrast(z)) / error)
        assert np.corrcoef(density, FIXED.contrast(z))[0, 1] > 0.95
    assert 0.5 < np.mean(np.square(waves)) < 2.0
    assert 0.2 < np.mean(np.square(layers)) < 2.0


def test_figures_are_their_definitions():
    sets, _ = humidity(3)
    made = joint_signs(sets, model_error=0.0, scales="free")
    for number, entry in enumerate(sets):
        q = 2 * np.pi * entry.order / entry.period
        np.testing.assert_allclose(made.fitted[number], made.scales[number] * made.transform.at(q)[0], rtol=1e-9)
        expected = (entry.amplitude - made.signs[number] * made.fitted[number]) / entry.sigma
        np.testing.assert_allclose(made.residual[number], expected, rtol=1e-6, atol=1e-8)
    assert made.chi_square == pytest.approx(sum((part**2).sum() for part in made.residual))
    assert 0 < made.freedom < sum(entry.count for entry in sets)
    assert made.scales[0] == 1.0
    assert made.scale_sigma[0] == 0.0
    assert (made.scale_sigma[1:] > 0).all()


def test_solutions_are_ranked_and_margins_are_theirs():
    sets, _ = humidity(1)
    made = joint_signs(sets)
    behind = [one.behind for one in made.solutions]
    assert behind[0] == 0.0
    assert behind == sorted(behind)
    assert not made.solutions[0].reversed_orders
    for one in made.solutions[1:]:
        assert one.reversed_orders
        for entry, order in one.reversed_orders:
            row = int(np.flatnonzero(sets[entry].order == order)[0])
            assert one.signs[entry][row] == -made.signs[entry][row]
            assert made.margin[entry][row] <= one.behind + 1e-9


@pytest.mark.parametrize("factor", [1.0, 250.0])
def test_the_common_sign(factor):
    """Each way of fixing it, and its opposite, which reverses everything."""
    sets, truths = humidity(2, factor=factor)
    first = int(np.argmax(np.abs(truths[1])))
    word = "positive" if truths[1][first] > 0 else "negative"
    other = "negative" if word == "positive" else "positive"
    t0 = factor * float(FIXED.transform([0.0])[0])
    ways = [
        (excess("positive"), excess("negative")),
        (total(t0, 0.1 * t0), total(-t0, 0.1 * t0)),
        (known_order(1, first + 1, word), known_order(1, first + 1, other)),
    ]
    for right, wrong in ways:
        made, turned = joint_signs(sets, orientation=right), joint_signs(sets, orientation=wrong)
        assert made.settled
        for sign, opposite, sure, truth in zip(made.signs, turned.signs, made.decided, truths, strict=True):
            np.testing.assert_array_equal(sign[sure], np.sign(truth)[sure])
            np.testing.assert_array_equal(sign, -opposite)
        np.testing.assert_allclose(made.transform.value, -turned.transform.value)


def test_a_density_that_is_never_negative_fixes_the_sign():
    sets, truths = humidity(4, scale="absolute")
    made = joint_signs(sets, orientation=never_negative(0.05))
    assert made.settled
    for sign, sure, truth in zip(made.signs, made.decided, truths, strict=True):
        np.testing.assert_array_equal(sign[sure], np.sign(truth)[sure])
    # A solvent so dense that neither sign brings anything below zero decides nothing.
    open_ = joint_signs(sets, orientation=never_negative(50.0))
    assert not open_.settled
    assert not np.concatenate(open_.decided).any()


def test_without_orientation_it_says_so():
    made = joint_signs(humidity()[0])
    assert not made.oriented
    assert "common sign" in made.verdict
    assert made.transform.value[0] > 0


def test_a_layer_that_changes_is_not_decided():
    """Each period a different layer: no choice of signs fits."""
    rng = np.random.default_rng(8)
    sets = []
    for number, d in enumerate(PERIODS):
        changed = replace(FIXED, z=FIXED.z * (1 - 0.12 * number), strength=FIXED.strength[::-1] * (1 + 0.5 * number))
        sets += read(rng, changed, [d], noise=0.01, least=7, most=7)[0]
    made = joint_signs(sets, scales="common")
    assert not made.settled
    assert not np.concatenate(made.decided).any()
    assert "no choice of signs fits" in made.verdict


def test_too_few_orders_decide_nothing():
    sets = [FilmOrders.of(d, [1, 2], [5.0, 2.0], [0.1, 0.1]) for d in (20.0, 26.0)]
    made = joint_signs(sets)
    assert not made.settled
    assert made.verdict.startswith("Undecided")


def test_absolute_sets_share_a_scale():
    made = joint_signs(humidity(0, scale="absolute")[0])
    np.testing.assert_array_equal(made.scales, np.ones(4))
    assert any("one scale" in note for note in made.notes)
    assert not np.array_equal(joint_signs(humidity(0)[0]).scales, np.ones(4))


def test_coefficients_are_those_of_the_set():
    sets, _ = humidity(0)
    made = joint_signs(sets, orientation=excess("positive"))
    mine = made.coefficients(2, mean=0.4)
    expected = made.signs[2] * sets[2].amplitude / made.scales[2] / PERIODS[2]
    np.testing.assert_allclose(mine.values[1:], expected)
    assert mine.values[0] == pytest.approx(0.4)
    np.testing.assert_allclose(mine.merit[1:], made.merit[2])
    assert mine.merit[0] == 1.0
    np.testing.assert_allclose(mine.sigma[1:], sets[2].sigma / made.scales[2] / PERIODS[2])
    assert any("swelling" in words for words in mine.history)


def test_undecided_orders_can_be_left_without_a_phase():
    sets, _ = humidity(0)
    made = joint_signs(sets)
    made = replace(made, decided=tuple(np.arange(part.size) != 1 for part in made.decided))
    known = made.coefficients(1, undecided="omit").phase_known
    np.testing.assert_array_equal(known, np.arange(sets[1].count) != 1)


def test_what_was_assumed_is_told():
    sets, _ = humidity()
    bare = [replace(entry, sigma=None, period_sigma=0.02) for entry in sets]
    notes = " ".join(joint_signs(bare, relative_sigma=0.03, thickness=18.8).notes)
    for words in ("symmetric", "18.8 Å, as given", "3 % of the amplitude assumed", "uncertainty of the periods"):
        assert words in notes


@pytest.mark.parametrize(
    ("options", "place"),
    [
        ({"thickness": 19.5}, "smallest period"),
        ({"thickness": -1.0}, "thickness"),
        ({"scales": "own"}, "scales"),
        ({"width": 1}, "width"),
        ({"model_error": -0.1}, "model_error"),
        ({"relative_sigma": 0.0}, "relative_sigma"),
        ({"orientation": never_negative(0.3)}, "absolute"),
        ({"orientation": known_order(7, 1, "positive")}, "set 7"),
        ({"orientation": known_order(0, 77, "positive")}, "order 77"),
    ],
)
def test_refusals(options, place):
    with pytest.raises(InputError, match=place):
        joint_signs(humidity()[0], **options)


def test_one_period_is_refused():
    with pytest.raises(InputError, match="one period only"):
        joint_signs(humidity()[0][:1])

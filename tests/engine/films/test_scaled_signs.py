"""Signs on the scale that the facts give each set, against all sets scaled and judged one by one."""

from __future__ import annotations

from dataclasses import replace
from itertools import product

import numpy as np
import pytest

from engine.errors import InputError
from engine.films import scaled_signs
from engine.films.facts import KnownAmplitude, KnownDensity, KnownFactor, KnownMean, KnownTotal
from engine.films.orders import FilmOrders
from engine.films.scale import scale_by_facts
from engine.films.scaled_signs import rank_scaled
from engine.films.signs import Criteria, Flat, LeastStructure, NonNegative, rank_signs
from tests.strategies import refusal_of

PERIOD = 24.0
WATER = 0.334


def factors(order):
    """F_l of an invented sheet: water, a slab of half-width 4 Å at the mirror and two dense planes in it."""
    q = 2 * np.pi * np.asarray(order) / PERIOD
    slab = 2 * 0.35 * np.sin(4.0 * q) / q
    planes = 2 * 2.4 * np.cos(2.4 * q)
    return (slab + planes) * np.exp(-(q**2) * 0.8**2 / 2)


MEAN = WATER + (2 * 4.0 * 0.35 + 2 * 2.4) / PERIOD
CRITERIA = Criteria(
    non_negative=NonNegative(floor=0.25),
    flat=(Flat(start=8.5, stop=12.0, sigma=0.02),),
    least_structure=LeastStructure(weight=0.5),
)
MEAN_FACT = KnownMean(mean=MEAN, sigma=0.005)
WATER_FACT = KnownDensity(start=8.5, end=15.5, density=WATER, sigma=0.01, name="water")
FACTS = (MEAN_FACT, WATER_FACT)
TRUE_SCALE = 0.04


def film(count=6, seed=None, scale=TRUE_SCALE, period=PERIOD):
    order = np.arange(1, count + 1)
    true = np.abs(factors(order))
    sigma = 0.02 * true + 0.01
    if seed is not None:
        true = np.abs(true + sigma * np.random.default_rng(seed).normal(size=count))
    return FilmOrders.of(period, order, true / scale, sigma / scale)


def true_signs(count=6):
    return np.where(factors(np.arange(1, count + 1)) < 0, -1, 1)


def brute(raw, criteria, facts, *, known=None):
    """Every sign set put on its own scale and judged there with all signs given; best first."""
    rows = []
    for signs in product((1, -1), repeat=raw.count):
        if any(signs[int(np.flatnonzero(raw.order == order)[0])] != sign for order, sign in (known or {}).items()):
            continue
        try:
            scale = scale_by_facts(raw, np.where(np.array(signs) < 0, 180.0, 0.0), facts, unit="e/Å³")
        except InputError:
            continue
        asked = replace(criteria, mean=scale.mean, mean_sigma=scale.mean_sigma)
        given = dict(zip(raw.order.tolist(), signs, strict=True))
        one = rank_signs(scale.apply(raw), asked, fixed=given, best=1)
        rows.append((float(one.scores[0]) + scale.chi_squared, signs, one.profiles[0]))
    return sorted(rows, key=lambda row: row[0])


def ranked(raw, criteria=CRITERIA, facts=FACTS, **options):
    return rank_scaled(raw, criteria, facts, "e/Å³", **options)


@pytest.mark.parametrize("seed", [1, 2, 3])
@pytest.mark.parametrize(
    "facts",
    [
        FACTS,
        (WATER_FACT, KnownDensity(start=-1.0, end=1.0, density=0.95, sigma=0.05, name="sheet")),
        (KnownTotal(start=-4.0, end=4.0, total=10.0, sigma=0.3), MEAN_FACT),
        (KnownFactor(factor=TRUE_SCALE, sigma=0.001), WATER_FACT),
        (*FACTS, KnownTotal(start=-5.0, end=5.0, total=10.9, sigma=0.2)),
    ],
    ids=["mean and density", "two densities", "total and mean", "factor and density", "three"],
)
def test_equals_every_set_scaled_and_judged(facts, seed):
    raw = film(5, seed)
    expected = brute(raw, CRITERIA, facts)
    found = ranked(raw, facts=facts, best=40)
    assert len(found.scores) == len(expected)
    assert np.allclose(found.scores, [row[0] for row in expected], rtol=1e-9, atol=1e-9)
    assert {tuple(row) for row in found.signs.tolist()} == {row[1] for row in expected}
    assert tuple(found.signs[0]) == expected[0][1]
    assert np.allclose(found.parts.sum(axis=1), found.scores, rtol=1e-12)
    assert found.names == (*CRITERIA.names, "facts beyond two")
    for mine, row in zip(found.profiles, expected, strict=False):
        assert np.abs(mine - row[2]).max() < 1e-9
    scores = np.array([row[0] for row in expected])
    weight = np.exp(-(scores - scores[0]) / 2)
    signs = np.array([row[1] for row in expected])
    assert np.allclose(found.support, weight / weight.sum(), rtol=1e-9)
    for place in range(raw.count):
        turned = signs[:, place] != signs[0, place]
        least = scores[turned].min() - scores[0] if turned.any() else found.reach
        assert found.order_margin[place] == pytest.approx(least, rel=1e-9, abs=1e-9)
        assert found.order_support[place] == pytest.approx(1 - weight[turned].sum() / weight.sum(), rel=1e-9)
    assert found.exhaustive


def test_finds_the_true_signs_and_its_profile_is_the_density():
    found = ranked(film(7))
    assert found.signs[0].tolist() == true_signs(7).tolist()
    order = np.arange(1, 8)
    waves = np.cos(2 * np.pi * np.outer(found.z, order) / PERIOD)
    expected = MEAN + 2 / PERIOD * waves @ factors(order)
    # The series ends at order 7, and so does not give the water its density exactly.
    assert np.abs(found.profiles[0] - expected).max() < 0.03 * expected.max()
    assert found.unit == "e/Å³"
    assert found.equivalent is None


def test_profile_equals_mean_and_scaled_sum_of_its_signs():
    raw = film(6, 5)
    found = ranked(raw)
    for signs, profile in zip(found.signs, found.profiles, strict=False):
        scale = scale_by_facts(raw, np.where(signs < 0, 180.0, 0.0), FACTS, unit="e/Å³")
        waves = np.cos(2 * np.pi * np.outer(found.z, raw.order) / PERIOD)
        assert np.abs(scale.mean + 2 / PERIOD * scale.factor * waves @ (signs * raw.amplitude) - profile).max() < 1e-9


@pytest.mark.parametrize("known", [{2: 1}, {1: 1, 3: -1}, {4: 1, 5: -1}])
def test_known_signs_are_kept(known):
    raw = film(5, 7)
    expected = brute(raw, CRITERIA, FACTS, known=known)
    found = ranked(raw, fixed=known, best=40)
    assert np.allclose(found.scores, [row[0] for row in expected], rtol=1e-9, atol=1e-9)
    for order, sign in known.items():
        assert (found.signs[:, order - 1] == sign).all()
        assert np.isnan(found.order_margin[order - 1])
        assert np.isnan(found.order_support[order - 1])
        assert order not in found.in_doubt


def test_mirrors_are_told_apart_by_facts_that_name_places():
    raw, blind = film(6), replace(CRITERIA, flat=())
    half_turn = np.where(raw.order % 2 == 1, -1, 1)
    # Signs alone know no mirror; the water's place does.
    alone = rank_signs(raw, Criteria(least_structure=LeastStructure()))
    assert alone.equivalent is not None
    here = ranked(raw, blind, best=100)
    moved = replace(WATER_FACT, start=WATER_FACT.start - PERIOD / 2, end=WATER_FACT.end - PERIOD / 2)
    there = ranked(raw, blind, (MEAN_FACT, moved), best=100)
    assert here.equivalent is None
    assert here.signs[0].tolist() == true_signs().tolist()
    assert there.signs[0].tolist() == (true_signs() * half_turn).tolist()
    assert here.scores == pytest.approx(there.scores, rel=1e-9, abs=1e-9)
    assert not any("reported as one" in one for one in here.words)


def test_the_scale_of_the_measurements_does_not_matter(monkeypatch):
    """More sets than are put on a scale, so that the first choice counts."""
    monkeypatch.setattr(scaled_signs, "CANDIDATES", 12)
    raw, other = film(6, 4, scale=10.0), film(6, 4, scale=1e-3)
    one, two = ranked(raw), ranked(other)
    assert not one.exhaustive
    assert one.signs.tolist() == two.signs.tolist()
    assert one.scores == pytest.approx(two.scores, rel=1e-6, abs=1e-6)


@pytest.mark.parametrize(("count", "complete"), [(4, True), (5, True), (6, False)])
def test_says_whether_every_set_was_put_on_a_scale(count, complete, monkeypatch):
    monkeypatch.setattr(scaled_signs, "CANDIDATES", 32)
    # The flat water tells the mirrors apart: 2^n sets.
    assert ranked(film(count)).exhaustive is complete


def test_a_factor_needs_no_search_of_its_own():
    raw = film(6, 2)
    facts = (KnownFactor(factor=TRUE_SCALE, sigma=0.001), MEAN_FACT)
    found = ranked(raw, facts=facts)
    scaled = raw.scaled(TRUE_SCALE, scale_sigma=0.001 / TRUE_SCALE, unit="e/Å³", words="")
    expected = rank_signs(scaled, replace(CRITERIA, mean=MEAN, mean_sigma=0.005))
    assert found.signs.tolist() == expected.signs.tolist()
    assert found.scores == pytest.approx(expected.scores, rel=1e-9)
    assert found.unit == "e/Å³"


def test_an_amplitude_scales_like_a_factor():
    raw = film(6, 2)
    absolute = KnownAmplitude(order=1, amplitude=TRUE_SCALE * float(raw.amplitude[0]), sigma=0.0)
    found = ranked(raw, facts=(absolute, MEAN_FACT))
    expected = rank_signs(
        scale_by_facts(raw, np.zeros(6), (absolute,), unit="e/Å³").apply(raw),
        replace(CRITERIA, mean=MEAN, mean_sigma=0.005),
    )
    assert found.scores == pytest.approx(expected.scores, rel=1e-9)


def test_a_factor_alone_leaves_the_mean_of_the_criteria():
    raw = film(5)
    asked = replace(CRITERIA, mean=MEAN)
    found = ranked(raw, asked, (KnownFactor(factor=TRUE_SCALE),))
    scaled = raw.scaled(TRUE_SCALE, unit="e/Å³", words="")
    assert found.scores == pytest.approx(rank_signs(scaled, asked).scores, rel=1e-9)
    refused = refusal_of(lambda: ranked(raw, CRITERIA, (KnownFactor(factor=TRUE_SCALE),)))
    assert refused.path == ("criteria", "mean")


def test_facts_beyond_two_add_their_chi_squared():
    raw = film(5, 3)
    third = KnownTotal(start=-5.0, end=5.0, total=10.9, sigma=0.2)
    found = ranked(raw, facts=(*FACTS, third), best=40)
    for signs, parts in zip(found.signs, found.parts, strict=True):
        scale = scale_by_facts(raw, np.where(signs < 0, 180.0, 0.0), (*FACTS, third), unit="e/Å³")
        assert scale.degrees == 1
        assert parts[-1] == pytest.approx(scale.chi_squared, rel=1e-9)
    assert found.parts[:, -1].max() > 1
    assert (ranked(raw, best=40).parts[:, -1] == 0).all()


@pytest.mark.parametrize(
    ("facts", "path", "said"),
    [
        ((MEAN_FACT,), ("facts",), "one equation"),
        ((WATER_FACT,), ("facts",), "one equation"),
        ((MEAN_FACT, replace(WATER_FACT, density=MEAN)), ("facts",), "do not differ beyond their errors"),
        ((MEAN_FACT, replace(WATER_FACT, density=MEAN, sigma=0.5)), ("facts",), "put none of 32 sign sets on a scale"),
        ((MEAN_FACT, replace(WATER_FACT, end=WATER_FACT.start)), ("facts", 1, "end"), "beyond the start"),
        ((replace(MEAN_FACT, sigma=-1.0), WATER_FACT), ("facts", 0, "sigma"), "negative"),
        ((KnownAmplitude(order=9, amplitude=1.0), WATER_FACT), ("facts",), "names order 9"),
    ],
)
def test_refused_facts_name_the_reason(facts, path, said):
    refused = refusal_of(lambda: ranked(film(5), facts=facts))
    assert refused.path == path
    assert said in refused.reason


def test_verdict_follows_the_margin_asked_for():
    raw = film(6, 1)
    found = ranked(raw)
    margin = float(found.scores[1] - found.scores[0])
    assert found.margins[0] == pytest.approx(margin)
    assert margin > 1e-6
    clear, unclear = ranked(raw, decisive=0.9 * margin), ranked(raw, decisive=1.1 * margin)
    assert clear.decided
    assert clear.verdict.startswith("The criteria decide")
    assert clear.in_doubt == ()
    assert not unclear.decided
    assert unclear.verdict.startswith("The criteria do not decide")
    turned = raw.order[found.signs[1] != found.signs[0]].tolist()
    assert set(turned) <= set(unclear.in_doubt)
    assert all(str(order) in unclear.verdict.rsplit(":", 1)[1] for order in unclear.in_doubt)


def test_nothing_is_decided_where_the_best_set_contradicts_the_criteria():
    """A floor far above the water: no sign set meets it."""
    found = ranked(film(6), replace(CRITERIA, non_negative=NonNegative(floor=1.2)), decisive=1e-6)
    assert found.margins[0] >= 1e-6
    assert not found.decided
    assert "contradicts" in found.verdict


def test_one_set_alone_is_not_called_a_decision():
    known = dict(zip(range(1, 6), true_signs(5).tolist(), strict=True))
    found = ranked(film(5), fixed=known)
    assert len(found.scores) == 1
    assert not found.decided
    assert "alone" in found.verdict


def test_orders_of_amplitude_zero_have_no_sign():
    raw = film(5)
    quiet = FilmOrders.of(PERIOD, raw.order, np.where(raw.order == 4, 0.0, raw.amplitude), raw.sigma)
    found = ranked(quiet)
    assert (found.signs[:, 3] == 0).all()
    assert (found.signs[:, [0, 1, 2, 4]] != 0).all()
    assert np.isnan(found.order_margin[3])

"""Scales of films against stacks written out, laws, and draws of errors."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import integrate

from engine.amplitudes import scaling
from engine.films.facts import KnownAmplitude, KnownDensity, KnownFactor, KnownMean, KnownTotal
from engine.films.orders import FilmOrders
from engine.films.scale import (
    density_at,
    scale_by_amplitudes,
    scale_by_density_and_mean,
    scale_by_facts,
    scale_by_total,
    scale_by_two_densities,
)
from tests.strategies import refusal_of

PERIOD = 52.0
ORDERS = np.arange(1, 9)
MEAN = 0.35
"""e/Å³; the stack below is invented."""
FACTORS = np.array([-2.6, 1.9, 0.8, -1.1, 0.5, 0.33, -0.28, 0.12])
"""F_l, e/Å²."""
TURNED = np.array([-2.6, 1.9, 0.8, -1.1, 0.5, 0.33, -0.28, 0.12]) * np.exp(1j * np.arange(8))
UNIT = "e/Å³"
WATER, CHAINS = (-4.0, 4.0), (20.0, 32.0)


def density(z, factors=FACTORS, mean=MEAN):
    waves = np.exp(-2j * np.pi * np.multiply.outer(np.asarray(z), ORDERS) / PERIOD)
    return mean + 2 / PERIOD * (waves @ factors).real


def total(start, end, factors=FACTORS):
    return integrate.quad(lambda z: density(z, factors), start, end, epsabs=1e-13)[0]


def average(start, end, factors=FACTORS):
    return total(start, end, factors) / (end - start)


def film(factors=FACTORS, scale=4.0, sigma=None):
    """Measured on a scale of its own: `scale` times too large."""
    return FilmOrders.of(PERIOD, ORDERS, scale * np.abs(factors), sigma)


def phases(factors=FACTORS):
    return np.degrees(np.angle(factors))


def known(region, sigma=0.0, factors=FACTORS):
    return KnownDensity(start=region[0], end=region[1], density=average(*region, factors), sigma=sigma)


@pytest.mark.parametrize("factors", [FACTORS, TURNED], ids=["symmetric", "any"])
def test_every_pair_of_facts_gives_back_the_stack(factors):
    orders, turns = film(factors), phases(factors)
    water, chains = known(WATER, factors=factors), known(CHAINS, factors=factors)
    content = KnownTotal(start=7.0, end=19.0, total=total(7.0, 19.0, factors))
    mean = KnownMean(mean=MEAN)
    pairs = [
        scale_by_two_densities(orders, turns, water, chains, unit=UNIT),
        scale_by_density_and_mean(orders, turns, water, mean, unit=UNIT),
        scale_by_total(orders, turns, content, mean, unit=UNIT),
        scale_by_total(orders, turns, content, chains, unit=UNIT),
        scale_by_facts(orders, turns, [KnownFactor(factor=0.25), chains], unit=UNIT),
        scale_by_facts(orders, turns, [KnownAmplitude(order=3, amplitude=abs(factors[2])), water], unit=UNIT),
        scale_by_facts(orders, turns, [KnownFactor(factor=0.25), mean], unit=UNIT),
    ]
    for found in pairs:
        assert found.factor == pytest.approx(0.25, rel=1e-9)
        assert found.mean == pytest.approx(MEAN, rel=1e-9)
        assert found.factor_sigma == 0
        assert found.degrees == 0
        scaled = found.apply(orders)
        np.testing.assert_allclose(scaled.amplitude, np.abs(factors), rtol=1e-9)
        assert scaled.scale == "absolute"
        assert scaled.unit == UNIT
        assert scaled.scale_sigma == 0
        z = np.array([0.0, 13.7, -20.0])
        values, sigma = density_at(orders, turns, found, z)
        np.testing.assert_allclose(values, density(z, factors), rtol=1e-9)
        assert (sigma == 0).all()


def test_the_coefficients_of_the_scaled_film_are_those_of_the_stack():
    found = scale_by_two_densities(film(), phases(), known(WATER), known(CHAINS), unit=UNIT)
    made = found.apply(film()).coefficients(phases(), found.mean)
    np.testing.assert_allclose(made.values, np.concatenate([[MEAN], FACTORS / PERIOD]), atol=1e-12)
    assert made.unit == UNIT


def test_regions_are_counted_modulo_the_period():
    there = KnownDensity(start=CHAINS[0] - 104, end=CHAINS[1] - 104, density=average(*CHAINS))
    found = scale_by_two_densities(film(), phases(), known(WATER), there, unit=UNIT)
    assert found.factor == pytest.approx(0.25, rel=1e-9)


def test_two_slabs():
    """A stack of two slabs in closed form, F_l = Δn sin(πl w/d)/(πl/d): a mean over a slab is that of the series.

    Of 3000 orders, what is cut off is 2/π² Σ_{l>3000} sin²/l² of the jump: below 10⁻⁴.
    """
    l, width, low, high = np.arange(1, 3001), 18.0, 0.29, 0.47
    factors = (high - low) * np.sin(np.pi * l * width / PERIOD) / (np.pi * l / PERIOD)
    orders = FilmOrders.of(PERIOD, l, np.abs(factors))
    inner = KnownDensity(start=-width / 2, end=width / 2, density=high)
    outer = KnownDensity(start=width / 2, end=PERIOD - width / 2, density=low)
    found = scale_by_two_densities(orders, np.where(factors < 0, 180.0, 0.0), inner, outer, unit=UNIT)
    assert found.factor == pytest.approx(1, abs=4e-4)
    assert found.mean == pytest.approx(low + (high - low) * width / PERIOD, abs=1e-12)


def test_independent_errors_are_those_of_the_line_through_two_points():
    """`engine.amplitudes.scaling.scale_from_two_densities` with exact amplitudes."""
    found = scale_by_two_densities(film(), phases(), known(WATER, 0.004), known(CHAINS, 0.007), unit=UNIT)
    profile = [(average(*region) - MEAN) * 4 for region in (WATER, CHAINS)]
    line = scaling.scale_from_two_densities(
        tuple(profile), (average(*WATER), average(*CHAINS)), density_sigma=(0.004, 0.007)
    )
    assert found.factor == pytest.approx(line.slope)
    assert found.mean == pytest.approx(line.offset)
    np.testing.assert_allclose(found.covariance, line.covariance, rtol=1e-8)
    assert found.factor_sigma == pytest.approx(np.sqrt(line.covariance[0, 0]))
    assert found.mean_sigma == pytest.approx(np.sqrt(line.covariance[1, 1]))
    assert found.apply(film()).scale_sigma == pytest.approx(found.factor_sigma / found.factor)


def drawn(facts, count=3000, seed=3):
    """Factors, means and densities at 0, 9 and 26 Å found from drawn amplitudes and drawn facts."""
    rng = np.random.default_rng(seed)
    signed = 4 * FACTORS
    errors = 0.02 + 0.02 * np.abs(signed)
    found = []
    z = np.array([0.0, 9.0, 26.0])
    for _ in range(count):
        measured = signed + errors * rng.standard_normal(8)
        waves = 2 / PERIOD * np.cos(2 * np.pi * np.multiply.outer(z, ORDERS) / PERIOD)
        rows, targets, weights = [], [], []
        for fact in facts:
            if isinstance(fact, KnownMean):
                rows.append([0, 1])
                targets.append(fact.mean + fact.sigma * rng.standard_normal())
            elif isinstance(fact, KnownAmplitude):
                rows.append([abs(measured[fact.order - 1]), 0])
                targets.append(fact.amplitude + fact.sigma * rng.standard_normal())
            else:
                width = fact.end - fact.start
                half, middle = width / 2, (fact.start + fact.end) / 2
                turn = 2 * np.pi * ORDERS / PERIOD
                rows.append([2 / PERIOD * measured @ (2 * np.sin(turn * half) / turn * np.cos(turn * middle)), width])
                one = isinstance(fact, KnownTotal)
                value = fact.total if one else fact.density * width
                targets.append(value + (fact.sigma if one else fact.sigma * width) * rng.standard_normal())
            weights.append(1.0)
        k, m = np.linalg.lstsq(np.array(rows), np.array(targets), rcond=None)[0]
        found.append([k, m, *(m + k * waves @ measured)])
    return errors, np.array(found), z


@pytest.mark.parametrize(
    "facts",
    [
        [known(WATER, 0.003), known(CHAINS, 0.004)],
        [known(CHAINS, 0.003), KnownMean(mean=MEAN, sigma=0.002)],
        [KnownTotal(start=7.0, end=19.0, total=total(7.0, 19.0), sigma=0.05), known(WATER, 0.003)],
        [KnownAmplitude(order=1, amplitude=2.6, sigma=0.05), known(WATER, 0.003)],
    ],
    ids=["densities", "mean", "total", "amplitude"],
)
def test_uncertainties_by_draws(facts):
    """3000 draws know a standard deviation to 1.3 %; what is beyond first order is below a further 2 %."""
    errors, found, z = drawn(facts)
    made = scale_by_facts(film(sigma=errors), phases(), facts, unit=UNIT)
    expected = np.cov(found[:, :2].T)
    assert made.factor_sigma == pytest.approx(np.sqrt(expected[0, 0]), rel=0.06)
    assert made.mean_sigma == pytest.approx(np.sqrt(expected[1, 1]), rel=0.06)
    correlation = made.covariance[0, 1] / (made.factor_sigma * made.mean_sigma)
    assert correlation == pytest.approx(np.corrcoef(found[:, :2].T)[0, 1], abs=0.06)
    _, sigma = density_at(film(sigma=errors), phases(), made, z)
    np.testing.assert_allclose(sigma, found[:, 2:].std(axis=0), rtol=0.06)


def test_more_facts_than_needed():
    """Weighed: χ² and its scatter by draws of the facts alone, against generalised least squares written out."""
    regions = [WATER, CHAINS, (8.0, 16.0)]
    sigma = np.array([0.003, 0.004, 0.01])
    off = np.array([0.002, -0.003, 0.012])
    facts = [
        replace(known(region, s), density=average(*region) + e)
        for region, s, e in zip(regions, sigma, off, strict=True)
    ]
    facts.append(KnownMean(mean=MEAN + 0.001, sigma=0.002))
    found = scale_by_facts(film(), phases(), facts, unit=UNIT)
    matrix = np.array([[4 * (average(*region) - MEAN), 1.0] for region in regions] + [[0, 1.0]])
    target = np.array([fact.density for fact in facts[:3]] + [MEAN + 0.001])
    weight = np.append(sigma, 0.002) ** -2
    covariance = np.linalg.inv(matrix.T @ (weight[:, None] * matrix))
    solved = covariance @ matrix.T @ (weight * target)
    assert found.factor == pytest.approx(solved[0])
    assert found.mean == pytest.approx(solved[1])
    np.testing.assert_allclose(found.covariance, covariance, rtol=1e-8)
    assert found.chi_squared == pytest.approx(float(weight @ (target - matrix @ solved) ** 2))
    assert found.degrees == 2
    assert not found.notes
    wrong = [*facts[:3], KnownMean(mean=MEAN + 0.02, sigma=0.002)]
    assert any("contradict" in note for note in scale_by_facts(film(), phases(), wrong, unit=UNIT).notes)
    exact = [replace(fact, sigma=0.0) for fact in facts]
    assert "exact" in refusal_of(lambda: scale_by_facts(film(), phases(), exact, unit=UNIT)).reason


def test_more_facts_with_errors_of_the_amplitudes():
    """One more fact that is worth nothing changes nothing; one that is never worsens the scale."""
    errors = 0.02 + 0.08 * np.abs(FACTORS)
    two = [known(WATER, 0.003), known(CHAINS, 0.004)]
    plain = scale_by_facts(film(sigma=errors), phases(), two, unit=UNIT)
    void = KnownMean(mean=MEAN, sigma=100.0)
    same = scale_by_facts(film(sigma=errors), phases(), [*two, void], unit=UNIT)
    np.testing.assert_allclose(same.covariance, plain.covariance, rtol=1e-4)
    better = scale_by_facts(film(sigma=errors), phases(), [*two, replace(void, sigma=0.002)], unit=UNIT)
    assert better.factor_sigma < plain.factor_sigma
    assert better.mean_sigma < plain.mean_sigma


def test_known_amplitudes():
    """Weighed mean of the ratios; no mean follows."""
    errors = 0.04 * np.abs(4 * FACTORS)
    one = scale_by_amplitudes(film(sigma=errors), [2], [1.9], [0.019], unit=UNIT)
    assert one.factor == pytest.approx(0.25)
    assert one.factor_sigma == pytest.approx(0.25 * np.hypot(0.04, 0.01))
    assert one.mean is None
    assert one.mean_sigma is None
    several = scale_by_amplitudes(film(sigma=errors), [1, 2, 3], [2.6, 1.9, 0.8], unit=UNIT)
    assert several.factor == pytest.approx(0.25)
    assert several.factor_sigma == pytest.approx(0.25 * 0.04 / np.sqrt(3))
    assert several.degrees == 2
    assert "no mean" in refusal_of(lambda: density_at(film(), phases(), one, [0.0])).reason
    alone = scale_by_facts(film(sigma=errors), phases(), [KnownFactor(factor=0.25, sigma=0.01)], unit=UNIT)
    assert (alone.factor, alone.factor_sigma) == (0.25, 0.01)


@given(st.floats(1e-3, 1e3), st.floats(-20, 20))
def test_laws(factor, shift):
    """Amplitudes times a factor: k falls by it. The origin and the regions moved together: nothing changes."""
    errors = 0.02 + 0.02 * np.abs(FACTORS)
    facts = [known(WATER, 0.003), known(CHAINS, 0.004)]
    plain = scale_by_facts(film(scale=1, sigma=errors), phases(), facts, unit=UNIT)
    moved = [replace(fact, start=fact.start + shift, end=fact.end + shift) for fact in facts]
    turned = phases() + 360 * ORDERS * shift / PERIOD
    found = scale_by_facts(film(scale=factor, sigma=errors * factor), turned, moved, unit=UNIT)
    assert found.factor * factor == pytest.approx(plain.factor, rel=1e-8)
    assert found.factor_sigma * factor == pytest.approx(plain.factor_sigma, rel=1e-7)
    assert found.mean == pytest.approx(plain.mean, rel=1e-8)
    assert found.mean_sigma == pytest.approx(plain.mean_sigma, rel=1e-7)


def test_an_error_common_to_both_regions_takes_no_contrast():
    """Order 1 as a cosine is the same at z and −z: however wrong, it leaves their difference as it is."""
    left, right = (-9.0, -3.0), (3.0, 9.0)
    sigma = np.full(8, 0.01)
    sigma[0] = 8.0
    facts = [known(left, factors=TURNED), known(right, factors=TURNED)]
    found = scale_by_facts(film(TURNED, sigma=sigma), phases(TURNED), facts, unit=UNIT)
    assert found.factor == pytest.approx(0.25, rel=1e-9)
    assert found.factor_sigma < 0.01


def test_words_and_notes():
    facts = [replace(known(WATER), name="the water"), replace(known((25.0, 26.0)), name="a slit")]
    partly = phases()
    partly[6] = np.nan
    found = scale_by_facts(replace(film(), scale_sigma=0.5), partly, facts, unit=UNIT)
    assert "the water and a slit" in found.words
    assert found.apply(film()).applied == (found.words,)
    text = " ".join(found.notes)
    assert "1 orders have no phase" in text
    assert "a slit is 1 Å wide" in text
    assert "the water" not in text
    assert any("exact" in words for words in found.assumptions)
    assert any("order 8" in words for words in found.assumptions)
    absolute = scale_by_facts(found.apply(film()), phases(), facts, unit=UNIT)
    assert any("replaced" in words for words in absolute.assumptions)
    weighed = scale_by_facts(film(sigma=0.01 * np.ones(8)), phases(), facts, unit=UNIT)
    assert any("are in its uncertainty" in words for words in weighed.assumptions)


def flat(sigma_given=0.0, sigma=None, regions=(WATER, CHAINS), **more):
    facts = [replace(known(region, sigma_given), **more) for region in regions]
    return lambda: scale_by_facts(film(sigma=sigma), phases(), facts, unit=UNIT)


@pytest.mark.parametrize(
    ("call", "path", "reason"),
    [
        (lambda: scale_by_facts(film(), phases(), [], unit=UNIT), "facts", "none"),
        (lambda: scale_by_facts(film(), phases(), [KnownMean(mean=0.3)], unit=UNIT), "facts", "one equation"),
        (flat(density=0.3), "facts", "do not differ beyond their errors"),
        (flat(sigma_given=0.2), "facts", "do not differ beyond their errors"),
        (flat(sigma=np.full(8, 8.0)), "facts", "profile does not differ"),
        # Mirror images of each other hold the same profile.
        (
            lambda: scale_by_two_densities(
                film(),
                phases(),
                KnownDensity(start=5, end=9, density=0.3),
                KnownDensity(start=-9, end=-5, density=0.4),
                unit=UNIT,
            ),
            "facts",
            "profile does not differ",
        ),
        (
            lambda: scale_by_two_densities(film(-FACTORS), phases(-FACTORS), known(WATER), known(CHAINS), unit=UNIT),
            "facts",
            "falls where it rises",
        ),
        (
            lambda: scale_by_facts(film(), phases(), [KnownFactor(factor=1, sigma=0.6), known(WATER)], unit=UNIT),
            "facts",
            "no better",
        ),
        (lambda: scale_by_amplitudes(film(), [9], [1.0], unit=UNIT), "facts", "unmeasured"),
        (lambda: scale_by_amplitudes(film(), [1.5], [1.0], unit=UNIT), "order", "whole"),
        (lambda: scale_by_amplitudes(film(), [1, 2], [1.0], unit=UNIT), "amplitude", "shape"),
        (lambda: scale_by_facts(film(), phases()[:7], [KnownFactor(factor=1)], unit=UNIT), "phase_deg", "shape"),
        (lambda: scale_by_facts(film(), [np.nan] * 8, [KnownFactor(factor=1)], unit=UNIT), "phase_deg", "no phase"),
    ],
)
def test_refusals(call, path, reason):
    refusal = refusal_of(call)
    assert refusal.path[0] == path
    assert reason in refusal.reason
    assert refusal.cure

"""E² and their statistics against integrals of Wilson's densities and simulated samples."""

from __future__ import annotations

import math

import numpy as np
import pytest
from scipy import integrate

from engine.amplitudes import normalised as module
from engine.amplitudes.normalised import (
    ACENTRIC,
    CENTRIC,
    DENSITY_AT_ONE,
    FOURTH_MOMENT,
    MEAN_AMPLITUDE,
    MEAN_DEVIATION,
    TWIN,
    intensity_statistics,
    normalise,
)
from engine.errors import InputError
from tests.engine.amplitudes.simulated import CELL, half_sphere, reflections, stack, twinned_z, wilson_z

INDICES = half_sphere(d_min=1.2)
COUNT = len(INDICES)
SQUARES = (1 / (2 * CELL.spacings(INDICES))) ** 2
FALL = 40 * np.exp(-2 * 12 * SQUARES)

DENSITIES = {
    ACENTRIC: lambda z: math.exp(-z),
    CENTRIC: lambda z: math.exp(-z / 2) / math.sqrt(2 * math.pi * z),
    TWIN: lambda z: 4 * z * math.exp(-2 * z),
}


def sample(rng, kind, size=COUNT):
    if kind == TWIN:
        return twinned_z(rng, size)
    return wilson_z(rng, np.full(size, kind == CENTRIC))


def expectation(kind, function):
    """∫ function(z) p(z) dz with z = v², by quadrature (scipy)."""
    pieces = [
        integrate.quad(lambda v: function(v * v) * DENSITIES[kind](v * v) * 2 * v, low, high, epsrel=1e-10)[0]
        for low, high in ((0, 1), (1, 4), (4, 12))
    ]
    return sum(pieces)


@pytest.mark.parametrize("kind", DENSITIES)
def test_expectations_are_integrals_of_the_densities(kind):
    assert expectation(kind, lambda z: 1) == pytest.approx(1, rel=1e-8)
    assert MEAN_DEVIATION[kind] == pytest.approx(expectation(kind, lambda z: abs(z - 1)), rel=1e-8)
    assert MEAN_AMPLITUDE[kind] == pytest.approx(expectation(kind, math.sqrt), rel=1e-8)
    assert FOURTH_MOMENT[kind] == pytest.approx(expectation(kind, lambda z: z * z), rel=1e-8)
    assert DENSITY_AT_ONE[kind] == pytest.approx(DENSITIES[kind](1.0), rel=1e-14)


@pytest.mark.parametrize("kind", DENSITIES)
def test_theoretical_distributions_are_integrals_of_the_densities(kind):
    found = intensity_statistics(normalise(stack([1.0, 2.0])))
    curve = {ACENTRIC: found.acentric, CENTRIC: found.centric, TWIN: found.twin}[kind]
    expected = [
        integrate.quad(lambda v: DENSITIES[kind](v * v) * 2 * v, 0, math.sqrt(z), epsrel=1e-10)[0] for z in found.z
    ]
    assert curve == pytest.approx(expected, rel=1e-8)


@pytest.mark.parametrize("kind", DENSITIES)
def test_samples_agree_with_their_expectations(kind):
    """60 samples of 3 557: pulls of width 1 (uncertain by 0.09; four times allowed). Their means may be off by
    0.8: a shell's own mean takes a hundredth of the variance of its hundred reflections away, half a
    standard uncertainty of these samples."""
    rng = np.random.default_rng(21)
    pulls, curves = [], []
    for _ in range(60):
        found = intensity_statistics(normalise(reflections(INDICES, FALL * sample(rng, kind))))
        pulls.append(
            [
                found.mean_amplitude.pull(MEAN_AMPLITUDE[kind]),
                found.mean_deviation.pull(MEAN_DEVIATION[kind]),
                found.fourth_moment.pull(FOURTH_MOMENT[kind]),
            ]
        )
        curves.append(found.observed)
        assert found.verdict in (kind, "undecided")
        assert found.count == COUNT
    assert np.abs(np.mean(pulls, axis=0)).max() < 0.8 + 4 / math.sqrt(60)
    assert np.std(pulls, axis=0) == pytest.approx(np.ones(3), abs=0.37)
    theory = {ACENTRIC: found.acentric, CENTRIC: found.centric, TWIN: found.twin}[kind]
    # Binomial error of 60 × 3 557: 0.001; the normalisation shifts N(z) by about as much again.
    assert np.mean(curves, axis=0) == pytest.approx(theory, abs=0.006)


@pytest.mark.parametrize("kind", [ACENTRIC, CENTRIC])
def test_verdict_of_a_good_set_is_the_truth(kind):
    found = intensity_statistics(normalise(reflections(INDICES, FALL * sample(np.random.default_rng(22), kind))))
    assert found.verdict == kind
    assert f"of {COUNT} reflections: {kind}" in found.words


def test_no_verdict_beyond_what_the_counts_allow():
    """49 reflections say nothing; of 60 acentric ones the centric lies too near to be excluded in most samples."""
    rng = np.random.default_rng(23)
    few = intensity_statistics(normalise(reflections(INDICES[:49], sample(rng, ACENTRIC, 49))))
    assert few.verdict == "undecided"
    assert "too few" in few.words
    verdicts = [
        intensity_statistics(normalise(reflections(INDICES[:60], sample(rng, ACENTRIC, 60)))).verdict
        for _ in range(100)
    ]
    assert verdicts.count(CENTRIC) + verdicts.count(TWIN) == 0
    assert verdicts.count("undecided") > 50


def test_a_mixture_fits_none():
    rng = np.random.default_rng(24)
    z = wilson_z(rng, rng.random(COUNT) < 0.5)
    found = intensity_statistics(normalise(reflections(INDICES, FALL * z)))
    assert found.verdict == "undecided"
    assert "fits none" in found.words


def test_noise_is_allowed_for_and_drowns_a_verdict():
    """σ = 0.2⟨I⟩ raises ⟨|E²−1|⟩ of acentric data by 0.04/e, 4 s.u. of 20 000 reflections, and ⟨E⁴⟩ by 0.04."""
    rng = np.random.default_rng(25)
    indices = half_sphere(d_min=0.7)[:20000]
    n = len(indices)
    noisy = reflections(indices, rng.exponential(size=n) + 0.2 * rng.normal(size=n), np.full(n, 0.2))
    found = intensity_statistics(normalise(noisy))
    assert found.verdict == ACENTRIC
    assert f"{ACENTRIC} {2 / math.e + 0.04 / math.e:.3f}" in found.words
    assert abs(found.fourth_moment.pull(2)) < 4
    assert found.negative == np.count_nonzero(noisy.observed < 0)
    assert any("negative" in note for note in found.notes)
    drowned = reflections(indices, rng.exponential(size=n) + rng.normal(size=n), np.ones(n))
    found = intensity_statistics(normalise(drowned))
    assert found.verdict == "undecided"
    assert "noise" in found.words


def test_normalisation_is_by_weight_and_resolution():
    """E² = I/ε over the mean there: known curve, known ε; the overall mean of E² is 1."""
    rng = np.random.default_rng(26)
    epsilon = rng.integers(1, 5, COUNT).astype(float)
    z = rng.exponential(size=COUNT)
    observed = epsilon * FALL * z
    found = normalise(reflections(INDICES, observed, 0.1 * observed), epsilon=epsilon)
    assert found.squared.mean() == pytest.approx(1, rel=1e-12)
    # A shell's mean of 100 is uncertain by 10 %; interpolation smooths, extrapolated ends reach three times that.
    ratio = found.squared / z
    assert ratio.mean() == pytest.approx(1, abs=0.03)
    assert np.abs(ratio - 1).max() < 0.5
    assert found.squared_sigma == pytest.approx(0.1 * found.squared, rel=1e-12)
    assert found.amplitudes() ** 2 == pytest.approx(found.squared, rel=1e-12)


def test_negative_squares_have_no_amplitude():
    found = normalise(stack([4.0, -1.0, 3.0]))
    assert found.squared == pytest.approx([2, -0.5, 1.5])
    assert np.isnan(found.amplitudes()).tolist() == [False, True, False]


def test_amplitudes_and_intensities_give_the_same():
    z = np.random.default_rng(27).exponential(size=COUNT)
    one = normalise(reflections(INDICES, z))
    other = normalise(reflections(INDICES, np.sqrt(z), quantity="amplitude"))
    assert one.squared == pytest.approx(other.squared, rel=1e-12)


def test_a_choice_is_renormalised():
    rng = np.random.default_rng(28)
    centric = rng.random(COUNT) < 0.4
    both = normalise(reflections(INDICES, FALL * wilson_z(rng, centric)), centric=centric)
    assert intensity_statistics(both, centric).verdict == CENTRIC
    assert intensity_statistics(both, ~centric).verdict == ACENTRIC
    assert intensity_statistics(both, centric).count == np.count_nonzero(centric)


def test_steps_of_the_distribution():
    assert module.Z_STEPS.tolist() == [0.1, 0.2, 0.3, 0.4, 0.5, 0.6, 0.7, 0.8, 0.9, 1.0]


@pytest.mark.parametrize(
    ("call", "path"),
    [
        (lambda: intensity_statistics(normalise(stack([1.0, 1.0]))), ("kept",)),
        (lambda: intensity_statistics(normalise(stack([1.0, 2.0])), np.array([True, False])), ("kept",)),
        (lambda: intensity_statistics(normalise(stack([1.0, 2.0])), np.array([True])), ("kept",)),
        (lambda: intensity_statistics(normalise(stack([9.0, -2.0, -1.0])), np.array([False, True, True])), ("kept",)),
        (lambda: normalise(stack([-1.0, -2.0])), ("shells",)),
        (lambda: normalise(stack([1.0, 2.0]), epsilon=[1.0]), ("epsilon",)),
    ],
)
def test_refusals(call, path):
    with pytest.raises(InputError) as fault:
        call()
    assert fault.value.path == path

"""Figures of merit of model phases against the phases that simulated structures really have."""

from __future__ import annotations

import itertools
from dataclasses import replace

import numpy as np
import pytest
from scipy.optimize import minimize_scalar
from scipy.special import i0e

from engine.phases import Model, estimated_weights, sim_weights, structure_factors, summarize
from tests.engine.phases.trial import INVERSION, SCREWS, classes, measured, sphere, triclinic
from tests.strategies import refusal_of

LATTICE = triclinic()
H = sphere(LATTICE, 1.15)
S = np.linalg.norm(H @ LATTICE.reciprocal, axis=1) / (4 * np.pi)
ACENTRIC = np.zeros(len(H), dtype=bool)
ONE = np.ones(len(H))
B = 2.0


def carbon(name, s):
    """A smooth scatterer; its value plays no part."""
    return 6 * np.exp(-8 * s**2)


def incomplete(seed, present, absent, operations=None, error=0.0):
    """(F of all atoms, F of those present, Σ f²T² of those absent), positions uniform at random."""
    rng = np.random.default_rng(seed)
    rotations, translations = operations or (np.eye(3)[None], np.zeros((1, 3)))
    x = rng.random((present + absent, 3))
    symmetry = {"rotations": rotations, "translations": translations, "on_site": 1e-6}
    b = np.full(len(x), B)
    names = ("C",) * len(x)
    true = structure_factors(Model.from_atoms(LATTICE, names, x, b_iso=b, **symmetry), H, form_factor=carbon)
    shifted = x[:present] + LATTICE.to_fractional(error * rng.normal(size=(present, 3)))
    model = Model.from_atoms(LATTICE, names[:present], shifted, b_iso=b[:present], **symmetry)
    missing = absent * len(rotations) * (carbon("C", S) * np.exp(-B * S**2)) ** 2
    return true, structure_factors(model, H, form_factor=carbon), missing


def assert_calibrated(cosine, merit, bins=5, sigmas=4.0):
    """In each class of merit, and over all, the mean cosine of the error is the mean merit.

    Bound: `sigmas` standard errors of the mean, from the spread of the differences themselves.
    """
    edges = np.quantile(merit, np.linspace(0, 1, bins + 1))
    for low, high in [*itertools.pairwise(edges), (0.0, 1.0)]:
        inside = (merit >= low) & (merit <= high)
        gap = cosine[inside] - merit[inside]
        assert abs(gap.mean()) < sigmas * gap.std() / np.sqrt(inside.sum())


def simulated(weigh, count, **options):
    """Cosines of the true phase errors and figures of merit over some structures."""
    cosines, merits = [], []
    for seed in range(count):
        true, model, missing = incomplete(seed, **options)
        weights = weigh(measured(LATTICE, H, np.abs(true)), model, missing)
        np.testing.assert_allclose(np.exp(1j * weights.phase), model / np.abs(model), atol=1e-9)
        cosines.append(np.cos(np.angle(true) - weights.phase))
        merits.append(weights.merit)
    return np.concatenate(cosines), np.concatenate(merits)


def by_sim(reflections, model, missing, centric=ACENTRIC):
    return sim_weights(reflections, model, missing, centric=centric, epsilon=ONE)


def test_sim_acentric():
    cosine, merit = simulated(by_sim, 4, present=60, absent=40)
    assert 0.3 < merit.mean() < 0.9
    assert_calibrated(cosine, merit)


def test_sim_centric():
    """P-1: a phase is right or wrong; the acentric formula would be far off."""
    cosine, merit = simulated(
        lambda r, f, m: by_sim(r, f, m, ~ACENTRIC), 4, present=30, absent=25, operations=INVERSION
    )
    np.testing.assert_allclose(np.abs(cosine), 1, atol=1e-9)
    assert_calibrated(cosine, merit)
    other = simulated(by_sim, 4, present=30, absent=25, operations=INVERSION)[1]
    assert abs(other.mean() - cosine.mean()) > 0.02


@pytest.mark.parametrize(("error", "seeds"), [(0.0, 4), (0.25, 4)])
def test_estimated_acentric(error, seeds):
    """Missing atoms, and errors in those present that Sim's weights know nothing of; the scale unknown.

    σ_A of ten shells is itself estimated from the data: its error is common to a shell, so that
    six standard errors are allowed.
    """

    def weigh(reflections, model, missing):
        return estimated_weights(reflections.scaled(0.013), model, centric=ACENTRIC, epsilon=ONE, shell_count=6)

    cosine, merit = simulated(weigh, seeds, present=60, absent=30, error=error)
    assert_calibrated(cosine, merit, sigmas=6)
    if error:
        overconfident = simulated(by_sim, seeds, present=60, absent=30, error=error)[1]
        assert overconfident.mean() - cosine.mean() > 0.1


def test_estimated_with_centric_zones():
    """P2₁2₁2₁ in a box: hk0, h0l, 0kl are centric, axes have ε = 2."""
    centric, epsilon = classes(H, *SCREWS)
    assert 50 < centric.sum() < len(H) / 4
    assert epsilon.max() == 2

    def weigh(reflections, model, missing):
        return estimated_weights(reflections, model, centric=centric, epsilon=epsilon, shell_count=6)

    # The operations act on fractional coordinates; the metric plays no part in the statistics.
    cosine, merit = simulated(weigh, 6, present=15, absent=8, operations=SCREWS)
    assert_calibrated(cosine, merit, sigmas=6)
    both = np.tile(centric, 6)
    assert_calibrated(cosine[both], merit[both], bins=2, sigmas=6)


def correlated(rng, sigma_a, centric, epsilon, power):
    """E_o = σ_A E_c + remainder, as amplitudes |F_o| and complex F_c, with their true cosines."""
    gauss = rng.normal(size=(4, len(sigma_a)))
    make = [np.where(centric, a, (a + 1j * b) / np.sqrt(2)) for a, b in (gauss[:2], gauss[2:])]
    e_true = sigma_a * make[0] + np.sqrt(1 - sigma_a**2) * make[1]
    return np.sqrt(epsilon * power) * e_true, 7.3 * np.sqrt(epsilon * power) * make[0]


def test_sigma_a_is_found():
    """Against the value put in: the mean of repeated simulations within 4 of its standard errors."""
    rng = np.random.default_rng(4)
    centric, epsilon = rng.random(len(H)) < 0.3, rng.integers(1, 4, len(H)).astype(float)
    probe = measured(LATTICE, H, np.ones(len(H)))
    member = estimated_weights(probe, ONE + 0j, centric=centric, epsilon=ONE, shell_count=4).shells.member
    put = np.array([0.95, 0.8, 0.5, 0.3])
    found = []
    for _ in range(25):
        true, model = correlated(rng, put[member], centric, epsilon, 400 * np.exp(-20 * S**2))
        given = measured(LATTICE, H, np.abs(true), scale="arbitrary")
        weights = estimated_weights(given, model, centric=centric, epsilon=epsilon, shell_count=4)
        found.append(weights.sigma_a)
    found = np.array(found)
    # A small bias of order 1/n of the shell's n ≈ 600 is in the nature of a likelihood.
    assert np.all(np.abs(found.mean(axis=0) - put) < 4 * found.std(axis=0) / np.sqrt(25) + 2 / 600)
    assert found.std(axis=0).max() < 0.1
    # D|F_c| = σ_A √(Σ_N/Σ_P)|F_c|: the scale 7.3 of the model is found too.
    share = weights.scaled_model / np.abs(model)
    np.testing.assert_allclose(share, weights.sigma_a[member] / 7.3, rtol=0.15)


def test_sigma_a_has_the_largest_likelihood():
    """Against numerical maximisation of the densities of |E_o| given |E_c| (Read 1986), written out."""
    rng = np.random.default_rng(8)
    centric = rng.random(len(H)) < 0.5
    true, model = correlated(rng, np.full(len(H), 0.6), centric, ONE, np.full(len(H), 9.0))
    weights = estimated_weights(measured(LATTICE, H, np.abs(true)), model, centric=centric, epsilon=ONE, shell_count=1)
    o, c = (np.abs(f) / np.sqrt(np.mean(np.abs(f) ** 2)) for f in (true, model))

    def surprise(sigma):
        v = 1 - sigma**2
        x = 2 * sigma * o * c / v
        acentric_log = np.log(2 * o / v) - (o**2 + sigma**2 * c**2) / v + np.log(i0e(x)) + x
        centric_log = 0.5 * np.log(2 / (np.pi * v)) - (o**2 + sigma**2 * c**2) / (2 * v) + np.log(np.cosh(x / 2))
        return -np.sum(np.where(centric, centric_log, acentric_log))

    best = minimize_scalar(surprise, bounds=(0.01, 0.99), method="bounded", options={"xatol": 1e-9})
    # A maximum is found to the root of the precision of its value.
    assert weights.sigma_a[0] == pytest.approx(best.x, abs=1e-5)


def test_nothing_in_common_has_no_merit():
    rng = np.random.default_rng(0)
    true, _ = correlated(rng, np.zeros(len(H)), ACENTRIC, ONE, ONE)
    # The larger one amplitude the smaller the other: a correlation below zero is no σ_A.
    model = 1 / (0.3 + np.abs(true)) + 0j
    weights = estimated_weights(measured(LATTICE, H, np.abs(true)), model, centric=ACENTRIC, epsilon=ONE, shell_count=3)
    assert weights.sigma_a.max() < 1e-14
    assert weights.merit.max() < 1e-13


def test_a_perfect_model_is_trusted():
    _, model, _ = incomplete(1, 30, 1)
    weights = estimated_weights(
        measured(LATTICE, H, 3 * np.abs(model)), model, centric=ACENTRIC, epsilon=ONE, shell_count=3
    )
    np.testing.assert_allclose(weights.sigma_a, 1, atol=1e-6)
    np.testing.assert_allclose(weights.scaled_model, 3 * np.abs(model), rtol=1e-6)
    assert weights.merit.min() > 0.999


def test_estimation_from_some_reflections():
    """Those not used are weighted all the same, and cannot change σ_A."""
    true, model, _ = incomplete(3, 60, 40)
    used = np.random.default_rng(5).random(len(H)) < 0.4
    options = {"centric": ACENTRIC, "epsilon": ONE, "shell_count": 3, "used": used}
    first = estimated_weights(measured(LATTICE, H, np.abs(true)), model, **options)
    spoilt = np.where(used, np.abs(true), 3.0)
    second = estimated_weights(measured(LATTICE, H, spoilt), model, **options)
    np.testing.assert_array_equal(first.sigma_a, second.sigma_a)
    assert first.merit.size == len(H)


def test_weights_as_probabilities():
    """The distribution's centroid is the merit and the phase of the model, centric or not."""
    true, model, missing = incomplete(2, 60, 40)
    centric = np.arange(len(H)) % 2 == 0
    given = measured(LATTICE, H, np.abs(true))
    weights = by_sim(given, model, missing, centric)
    assert weights.source == "given"
    found = summarize(weights.distribution())
    np.testing.assert_allclose(found.merit, weights.merit, atol=1e-14)
    np.testing.assert_allclose(np.exp(1j * found.phase), np.exp(1j * weights.phase), atol=1e-9)


GIVEN = measured(LATTICE, H, ONE)
F = ONE + 0j


def sim(reflections=GIVEN, factors=F, missing=ONE, centric=ACENTRIC, epsilon=ONE):
    return sim_weights(reflections, factors, missing, centric=centric, epsilon=epsilon)


def estimate(reflections=GIVEN, factors=F, centric=ACENTRIC, epsilon=ONE, shell_count=2, used=None):
    return estimated_weights(reflections, factors, centric=centric, epsilon=epsilon, shell_count=shell_count, used=used)


@pytest.mark.parametrize(
    ("call", "path", "rows"),
    [
        (lambda: sim(replace(GIVEN, quantity="intensity")), ("quantity",), ()),
        (lambda: sim(replace(GIVEN, scale="arbitrary")), ("scale",), ()),
        (lambda: sim(factors=F[1:]), ("calculated",), ()),
        (lambda: sim(missing=ONE * (np.arange(len(H)) != 5)), ("missing",), (5,)),
        (lambda: sim(missing=[1.0]), ("missing",), ()),
        (lambda: sim(centric=ONE), ("centric",), ()),
        (lambda: sim(centric=ACENTRIC[1:]), ("centric",), ()),
        (lambda: sim(epsilon=ONE * (np.arange(len(H)) != 2)), ("epsilon",), (2,)),
        (lambda: estimate(replace(GIVEN, quantity="intensity")), ("quantity",), ()),
        (lambda: estimate(shell_count=len(H) // 40), ("shell_count",), ()),
        (lambda: estimate(used=ACENTRIC[1:]), ("used",), ()),
        (lambda: estimate(used=ACENTRIC), ("shell_count",), ()),
        (lambda: estimate(factors=0 * F), ("calculated",), ()),
        (lambda: estimate(replace(GIVEN, observed=0 * ONE)), ("observed",), ()),
    ],
)
def test_refusals(call, path, rows):
    refusal = refusal_of(call)
    assert (refusal.path, refusal.rows) == (path, rows)

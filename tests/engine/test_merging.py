"""Merging, against plain loops over tuples and on simulated measurements."""

from __future__ import annotations

import dataclasses

import numpy as np
import pytest

from engine import Lattice
from engine.merging import merge
from engine.symmetry import classify, equivalents, orbits, plane_group, space_group, stack_group
from tests.engine.symmetry import crystals
from tests.strategies import refusal_of


def measured(group, *, repeats=5, seed=2, friedel=True, absent=False, noise=1.0, reach=None):
    """Random equivalents of random reflections with normal errors; (reflections, true strength of each row)."""
    rng = np.random.default_rng(seed)
    box = crystals.indices_within(reach or {1: (9,), 2: (5, 6), 3: (3, 4, 5)}[group.dimension])
    unique = orbits(box, group, friedel=friedel).unique
    unique = unique[~classify(unique, group).absent | absent]
    chosen = np.repeat(np.arange(len(unique)), rng.integers(1, repeats + 1, len(unique)))
    rng.shuffle(chosen)
    made, _ = equivalents(unique[chosen], group)
    h = made[rng.integers(0, group.order, chosen.size), np.arange(chosen.size)]
    if friedel:
        h = h * rng.choice([1, -1], (chosen.size, 1))
    truth = rng.exponential(100, len(unique))[chosen]
    truth = np.where(classify(h, group).absent, 0, truth)
    sigma = noise * rng.uniform(0.5, 2, chosen.size)
    return crystals.reflections_of(
        crystals.cell_of(group),
        h,
        observed=truth + sigma * rng.normal(size=chosen.size),
        sigma=sigma,
        quantity="intensity",
        row=np.arange(chosen.size) + 1000,
    ), truth


def merged(given, group, **options):
    return merge(given, group, **{"friedel": True, "generator": np.random.default_rng(0)} | options)


def gathered(given, group, friedel):
    """Rows by their orbit, tuple by tuple."""
    found = {}
    for row, h in enumerate(given.indices):
        name = max(crystals.plain_orbit(h, group, friedel), key=lambda m: m[::-1])
        found.setdefault(name, []).append(row)
    return found


GROUPS = {
    **{s: lambda s=s: space_group(s) for s in ("P21", "C2/c", "P3121", "I-43d")},
    "p4gm": lambda: plane_group("p4gm"),
    "stack -1": lambda: stack_group("-1"),
}


@pytest.mark.parametrize("friedel", [True, False])
@pytest.mark.parametrize("name", GROUPS)
def test_means_and_uncertainties_by_plain_loops(name, friedel):
    """Some σ are zero, so some orbits are merged unweighted. Formulas of textbooks on errors, row by row."""
    group = GROUPS[name]()
    given, _ = measured(group, friedel=friedel)
    sigma = given.sigma.copy()
    sigma[::17] = 0.0
    given = dataclasses.replace(given, sigma=sigma)
    result = merged(given, group, friedel=friedel)
    expected = gathered(given, group, friedel)
    indices = [tuple(h) for h in result.reflections.indices.tolist()]
    assert indices == sorted(expected, key=lambda m: m[::-1])
    for place, h in enumerate(indices):
        rows = expected[h]
        x, e, n = given.observed[rows], given.sigma[rows], len(rows)
        plain = bool(np.any(e == 0))
        w = np.ones(n) if plain else 1 / e**2
        mean = sum(w * x) / sum(w)
        assert result.reflections.observed[place] == pytest.approx(mean, rel=1e-12, abs=1e-12)
        from_weights = np.sqrt(sum(e**2)) / n if plain else 1 / np.sqrt(sum(w))
        assert result.reflections.sigma[place] == pytest.approx(from_weights, rel=1e-12)
        assert result.unweighted[place] == plain
        assert result.redundancy[place] == n
        assert result.reflections.row[place] == given.row[rows[0]]
        if n > 1:
            scatter = np.sqrt(sum(w * (x - mean) ** 2) / ((n - 1) * sum(w)))
            assert result.sigma_scatter[place] == pytest.approx(scatter, rel=1e-9, abs=1e-12)
        else:
            assert np.isnan(result.sigma_scatter[place])
    assert result.reflections.quantity == "intensity"
    assert result.overall.measurements == given.count
    assert result.overall.unique == len(expected)


def test_merged_strengths_are_true_within_their_uncertainty():
    """(Ī − truth)/σ is normal: mean 0, variance 1; 5 standard errors."""
    group = space_group("P212121")
    given, truth = measured(group, repeats=8, reach=(8, 9, 10))
    result = merged(given, group)
    found = orbits(given.indices, group, friedel=True)
    strength = np.zeros(found.count)
    strength[found.orbit] = truth
    z = (result.reflections.observed - strength) / result.reflections.sigma
    assert abs(z.mean()) < 5 / np.sqrt(z.size)
    assert z.std() == pytest.approx(1, abs=5 / np.sqrt(2 * z.size))
    assert result.overall.chi_squared == pytest.approx(1, abs=0.1)
    assert result.overall.cc_half > 0.99


def test_shells_part_the_whole():
    group = space_group("P212121")
    given, _ = measured(group, reach=(6, 6, 6))
    result = merged(given, group, shells=6)
    assert len(result.shells) == 6
    for name in ("measurements", "unique", "repeated"):
        assert sum(getattr(shell, name) for shell in result.shells) == getattr(result.overall, name)
    sizes = [shell.unique for shell in result.shells]
    assert max(sizes) - min(sizes) <= 1
    assert all(a.d_min > b.d_max for a, b in zip(result.shells, result.shells[1:], strict=False))
    assert (result.shells[0].d_max, result.shells[-1].d_min) == (result.overall.d_max, result.overall.d_min)
    assert merged(given, group, shells=6).shells == result.shells
    # Weighted by Σ I of the repeated the shells' R make up the whole's.
    assert min(s.r_meas for s in result.shells) <= result.overall.r_meas <= max(s.r_meas for s in result.shells)


def test_absences_are_reported_and_left_out():
    """P2_1: 0k0 with k odd measured at zero strength, 100 σ for the others."""
    group = space_group("P21")
    given, _ = measured(group, absent=True, reach=(3, 9, 3), repeats=9)
    absent = np.array([h[0] == h[2] == 0 and h[1] % 2 == 1 for h in given.indices.tolist()])
    result = merged(given, group)
    assert result.absences.count == np.count_nonzero(absent) > 10
    assert result.absences.row.tolist() == given.row[absent].tolist()
    np.testing.assert_array_equal(result.absences.indices, given.indices[absent])
    signal = given.observed / given.sigma
    assert result.absences.mean_signal == pytest.approx(signal[absent].mean())
    assert result.absences.mean_signal_of_others == pytest.approx(signal[~absent].mean())
    assert abs(result.absences.mean_signal) < 5 / np.sqrt(result.absences.count)
    assert result.overall.measurements == np.count_nonzero(~absent)
    assert not classify(result.reflections.indices, group).absent.any()


def test_without_absences_there_is_nothing_to_say_of_them():
    given, _ = measured(space_group("P-1"))
    absences = merged(given, space_group("P-1")).absences
    assert (absences.count, absences.mean_signal) == (0, None)
    assert absences.mean_signal_of_others > 10


def test_without_uncertainties_all_is_unweighted():
    given, _ = measured(space_group("P-1"))
    result = merged(dataclasses.replace(given, sigma=None), space_group("P-1"))
    assert result.unweighted.all()
    assert result.reflections.sigma is None
    assert result.overall.chi_squared is result.overall.mean_signal is None
    assert result.absences.mean_signal_of_others is None
    assert result.overall.r_meas > 0
    assert np.isfinite(result.sigma_scatter[result.redundancy > 1]).all()


def test_the_larger_of_two_uncertainties():
    """σ understated by ten: the scatter tells, and χ² is 100 in the mean (standard error 100 √(2/degrees))."""
    group = space_group("P21")
    given, _ = measured(group)
    given = given.select(np.arange(given.count))
    understated = dataclasses.replace(given, sigma=given.sigma / 10)
    result = merged(understated, group, sigma="larger", outlier_limit=1e9)
    weights = merged(understated, group, outlier_limit=1e9).reflections.sigma
    np.testing.assert_array_equal(result.reflections.sigma, np.fmax(weights, result.sigma_scatter))
    degrees = result.overall.measurements - result.overall.unique
    assert result.overall.chi_squared == pytest.approx(100, abs=500 * np.sqrt(2 / degrees))
    assert np.mean(result.reflections.sigma > weights) > 0.5


def test_outliers_are_listed_and_dropped_only_when_asked():
    group = space_group("P21")
    given, _ = measured(group, repeats=1)
    many = given.select(np.repeat(np.arange(given.count), 4))
    many = dataclasses.replace(many, row=np.arange(many.count))
    rng = np.random.default_rng(9)
    observed = np.repeat(given.observed, 4) + rng.normal(size=many.count) * many.sigma
    observed[40] += 40 * many.sigma[40]
    many = dataclasses.replace(many, observed=observed)
    listed = merged(many, group)
    assert 40 in listed.outliers.row
    assert not listed.outliers.rejected.any()
    assert listed.overall.measurements == many.count
    cleaned = merged(many, group, reject_outliers=True)
    assert cleaned.outliers.row.tolist() == [40]
    assert cleaned.outliers.rejected.tolist() == [True]
    assert cleaned.overall.measurements == many.count - 1
    assert cleaned.redundancy.sum() == many.count - 1


def phased(group, seed=1):
    """Every equivalent of a structure's reflections, with its phase by an explicit sum over atoms."""
    strengths, positions = crystals.atoms_of(group, seed=seed)
    h = crystals.indices_within((2, 2, 3))
    h = h[~classify(h, group).absent]
    return (
        crystals.reflections_of(
            crystals.cell_of(group),
            h,
            crystals.structure_factors(h, strengths, positions),
            sigma=np.ones(len(h)),
            phase_sigma=np.full(len(h), 0.2),
            merit=np.full(len(h), 0.8),
        ),
        strengths,
        positions,
    )


@pytest.mark.parametrize("symbol", ["P21", "P3121", "Fdd2", "P213", "Fd-3m"])
def test_phases_of_equivalents_come_together(symbol):
    """Merged F is the sum over atoms at the representative; bound as in the tests of symmetry."""
    group = space_group(symbol)
    given, strengths, positions = phased(group)
    phase = given.phase.copy()
    phase[::7] = np.nan
    result = merged(dataclasses.replace(given, phase=phase), group).reflections
    known = ~np.isnan(result.phase)
    expected = crystals.structure_factors(result.indices, strengths, positions)
    np.testing.assert_allclose(result.observed, np.abs(expected), atol=1e-9 * strengths.sum())
    np.testing.assert_allclose(crystals.complex_of(result)[known], expected[known], atol=1e-9 * strengths.sum())
    np.testing.assert_allclose(result.merit[known], 0.8)
    # A phase is no better known for being written down at several equivalents.
    np.testing.assert_allclose(result.phase_sigma[known], 0.2)


def test_phases_that_disagree_are_refused():
    group = space_group("P21")
    given, _, _ = phased(group)
    # The phases of the inverted structure: a wrong sign convention, which screw axes find out.
    refusal = refusal_of(
        lambda: merged(dataclasses.replace(given, phase=given.phase + 0.01 * given.indices[:, 0]), group)
    )
    assert refusal.path == ("phase",)
    assert refusal.rows


def test_merit_without_phases_is_kept():
    group = space_group("P-1")
    given, _ = measured(group)
    result = merged(dataclasses.replace(given, merit=np.full(given.count, 0.5)), group).reflections
    np.testing.assert_allclose(result.merit, 0.5)


@pytest.mark.parametrize(
    "options",
    [{"sigma": "both"}, {"outlier_limit": 0}, {"phase_tolerance_deg": -1}, {"shells": 10**6}, {"metric_tolerance": 0}],
)
def test_bad_options_are_refused(options):
    given, _ = measured(space_group("P21"))
    assert refusal_of(lambda: merged(given, space_group("P21"), **options)).cure


def test_what_cannot_be_merged_is_refused():
    group = space_group("P21")
    given, _ = measured(group)
    no_sigma = dataclasses.replace(given, sigma=None)
    assert refusal_of(lambda: merged(no_sigma, group, sigma="larger")).path == ("sigma",)
    only_absent = crystals.reflections_of(given.lattice, [[0, 1, 0]], observed=[1.0])
    assert refusal_of(lambda: merged(only_absent, group)).path == ("indices",)
    skew = dataclasses.replace(given, lattice=Lattice.from_parameters(5, 6, 7, 80, 95, 102))
    assert refusal_of(lambda: merged(skew, group)).path == ("lattice",)

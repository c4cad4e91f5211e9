"""R values, CC½ and χ²: against plain loops, and on simulated data whose expectation is known."""

from __future__ import annotations

import numpy as np
import pytest

from engine.agreement import agreements, orbit_sums


def sums_of(observed, sigma, orbit, seed=0):
    size = int(orbit.max()) + 1
    weighted = np.bincount(orbit, sigma <= 0, size) == 0
    weight = np.where(weighted[orbit], 1 / np.where(sigma > 0, sigma, 1) ** 2, 1.0)
    mean = np.bincount(orbit, weight * observed) / np.bincount(orbit, weight)
    signal = np.where(weighted, mean * np.sqrt(np.bincount(orbit, weight)), np.nan)
    return orbit_sums(
        observed,
        weight,
        weighted,
        orbit,
        spacing=np.linspace(9.0, 1.0, size),
        signal=signal,
        generator=np.random.default_rng(seed),
    )


def test_by_plain_loops():
    """Every formula written out orbit by orbit as in the papers that the module cites."""
    rng = np.random.default_rng(4)
    orbit = np.sort(np.concatenate([np.arange(80), rng.integers(0, 80, 200)]))
    sigma = rng.uniform(0.5, 2, orbit.size)
    sigma[::41] = 0.0
    observed = rng.uniform(2, 50, 80)[orbit] + rng.normal(size=orbit.size)
    shell = np.arange(80) // 40
    found = agreements(sums_of(observed, sigma, orbit), shell, 2)
    for s in (0, 1):
        merge = meas = pim = strength = chi = 0.0
        freedom = repeated = rows = 0
        signals = []
        for o in range(40 * s, 40 * s + 40):
            x, e = observed[orbit == o], sigma[orbit == o]
            n = len(x)
            rows += n
            usable = np.all(e > 0)
            if usable:
                w = 1 / e**2
                signals.append(np.sum(w * x) / np.sum(w) * np.sqrt(np.sum(w)))
            if n < 2:
                continue
            repeated += 1
            apart = sum(abs(v - x.mean()) for v in x)
            merge += apart
            meas += np.sqrt(n / (n - 1)) * apart
            pim += np.sqrt(1 / (n - 1)) * apart
            strength += x.sum()
            if usable:
                chi += np.sum(w * (x - np.sum(w * x) / np.sum(w)) ** 2)
                freedom += n - 1
        got = found[s]
        assert got.r_merge == pytest.approx(merge / strength, rel=1e-12)
        assert got.r_meas == pytest.approx(meas / strength, rel=1e-12)
        assert got.r_pim == pytest.approx(pim / strength, rel=1e-12)
        assert got.chi_squared == pytest.approx(chi / freedom, rel=1e-10)
        assert got.mean_signal == pytest.approx(np.mean(signals), rel=1e-12)
        assert (got.measurements, got.unique, got.repeated) == (rows, 40, repeated)
        assert got.redundancy == pytest.approx(rows / 40)
        spacing = np.linspace(9.0, 1.0, 80)[shell == s]
        assert (got.d_max, got.d_min) == (spacing.max(), spacing.min())


@pytest.mark.parametrize("redundancy", [2, 3, 8])
def test_r_values_of_normal_errors(redundancy):
    """⟨|I − ⟨I⟩|⟩ = s √((n−1)/n) √(2/π), so R_meas = √(2/π) s/⟨I⟩ whatever n (its reason to be),
    R_merge is less by √((n−1)/n) and R_pim by √n. Bound: 5 standard errors, relative 0.76/√N."""
    rng = np.random.default_rng(redundancy)
    orbit = np.repeat(np.arange(20000), redundancy)
    observed = 100 + 5 * rng.normal(size=orbit.size)
    (found,) = agreements(sums_of(observed, np.full(orbit.size, 5.0), orbit), np.zeros(20000, dtype=int), 1)
    expected = np.sqrt(2 / np.pi) * 5 / 100
    bound = 5 * 0.76 / np.sqrt(orbit.size - 20000)
    assert found.r_meas == pytest.approx(expected, rel=bound)
    assert found.r_merge == pytest.approx(expected * np.sqrt((redundancy - 1) / redundancy), rel=bound)
    assert found.r_pim == pytest.approx(expected / np.sqrt(redundancy), rel=bound)
    # χ² of right σ is 1 with standard error √(2/degrees).
    assert found.chi_squared == pytest.approx(1, abs=5 * np.sqrt(2 / (orbit.size - 20000)))


@pytest.mark.parametrize(("redundancy", "noise"), [(2, 1.0), (4, 2.0), (8, 0.5)])
def test_correlation_of_halves_follows_signal_and_noise(redundancy, noise):
    """CC½ = S²/(S² + 2s²/n) for true strengths of variance S² (Karplus & Diederichs 2012, supplement).

    Bound: 5 standard errors (1 − CC²)/√M.
    """
    rng = np.random.default_rng(5)
    size = 20000
    orbit = np.repeat(np.arange(size), redundancy)
    observed = (50 + rng.normal(size=size))[orbit] + noise * rng.normal(size=orbit.size)
    (found,) = agreements(sums_of(observed, np.full(orbit.size, noise), orbit), np.zeros(size, dtype=int), 1)
    expected = 1 / (1 + 2 * noise**2 / redundancy)
    assert found.cc_half == pytest.approx(expected, abs=5 * (1 - expected**2) / np.sqrt(size))


def test_halves_share_the_rows_evenly():
    """Of 2k rows k fall to each half, of 2k + 1 the odd one to either; every row to exactly one."""
    orbit = np.repeat(np.arange(3000), 5)
    observed = np.tile(2.0 ** np.arange(5), 3000)
    sums = sums_of(observed, np.zeros(orbit.size), orbit)
    # Unweighted means of powers of two tell which rows made them: 2 or 3 rows each, all five together.
    pairs = {
        (round(a * n, 6), round(b * (5 - n), 6))
        for a, b in zip(sums.first_half, sums.second_half, strict=True)
        for n in (2, 3)
        if abs(a * n + b * (5 - n) - 31) < 1e-9
    }
    assert len(pairs) == 2 * 10
    share = np.mean([abs(2 * a + 3 * b - 31) < 1e-9 for a, b in zip(sums.first_half, sums.second_half, strict=True)])
    assert share == pytest.approx(0.5, abs=5 * 0.5 / np.sqrt(3000))


def test_the_same_seed_gives_the_same_halves():
    orbit = np.repeat(np.arange(50), 4)
    observed = np.random.default_rng(1).random(200)
    first, again, other = (sums_of(observed, np.ones(200), orbit, seed).first_half for seed in (7, 7, 8))
    np.testing.assert_array_equal(first, again)
    assert np.any(first != other)


def test_nothing_is_said_where_nothing_is_known():
    """Single measurements, no σ, and equal strengths."""
    (single,) = agreements(sums_of(np.array([1.0, 2.0]), np.zeros(2), np.arange(2)), np.zeros(2, dtype=int), 1)
    assert single.repeated == 0
    assert single.r_merge is single.r_meas is single.r_pim is single.cc_half is None
    assert single.chi_squared is single.mean_signal is None
    orbit = np.repeat(np.arange(4), 2)
    (equal,) = agreements(sums_of(np.full(8, 3.0), np.ones(8), orbit), np.zeros(4, dtype=int), 1)
    assert (equal.r_merge, equal.cc_half, equal.chi_squared) == (0.0, None, 0.0)
    two = agreements(sums_of(np.array([1, 1.1, 2, 2.1]), np.ones(4), np.repeat([0, 1], 2)), np.zeros(2, dtype=int), 1)
    assert two[0].cc_half is None
    negative = agreements(
        sums_of(np.array([-1.0, -2.0]), np.ones(2), np.zeros(2, dtype=int)), np.zeros(1, dtype=int), 1
    )
    assert negative[0].r_merge is None

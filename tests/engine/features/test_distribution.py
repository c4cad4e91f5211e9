"""Statistics of fields against numpy and scipy on the same values, and against the series itself."""

from __future__ import annotations

import itertools

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from hypothesis.extra import numpy as arrays
from scipy import stats

from engine import Columns, Demand, Treatment, assemble
from engine import sampling as where
from engine.features import distribution as module
from engine.features.distribution import Moments, distribution
from engine.sampling import FreePoints
from tests.strategies import CRYSTAL, LATTICES, PLANAR, STACK, listing, refusal_of


def power_sums(wanted, highest=4):
    """Means of n^k over the cell: the zero term of the series multiplied by itself, spelt out."""
    rows = dict(zip(map(tuple, wanted.indices.tolist()), wanted.values, strict=True))
    product, means = {(0,) * wanted.lattice.dimension: 1.0 + 0j}, []
    for _ in range(highest):
        after = {}
        for (one, a), (two, b) in itertools.product(product.items(), rows.items()):
            key = tuple(x + y for x, y in zip(one, two, strict=True))
            after[key] = after.get(key, 0) + a * b
        product = after
        means.append(product.get((0,) * wanted.lattice.dimension, 0).real)
    return means


@pytest.mark.parametrize(("lattice", "reach"), [(STACK, (6,)), (PLANAR, (2, 1)), (CRYSTAL, (1, 1, 1))])
def test_moments_over_the_cell_are_exact(lattice, reach):
    wanted = listing(lattice, seed=21, reach=reach)
    made = distribution(wanted.coefficients(unit="e/Å³"))
    one, two, three, four = power_sums(wanted)
    variance = two - one**2
    third = three - 3 * one * two + 2 * one**3
    fourth = four - 4 * one * three + 6 * one**2 * two - 3 * one**4
    assert made.exact_moments == 4
    assert made.mean == pytest.approx(one, rel=1e-12)
    assert made.rms == pytest.approx(np.sqrt(two), rel=1e-12)
    assert made.standard_deviation == pytest.approx(np.sqrt(variance), rel=1e-12)
    assert made.skewness == pytest.approx(third / variance**1.5, rel=1e-9, abs=1e-10)
    assert made.excess_kurtosis == pytest.approx(fourth / variance**2 - 3, rel=1e-9)
    # Parseval's theorem.
    assert two == pytest.approx((np.abs(wanted.values) ** 2).sum(), rel=1e-12)


@pytest.mark.parametrize(("count", "exact"), [(6, 0), (7, 1), (12, 1), (13, 2), (18, 2), (19, 3), (24, 3), (25, 4)])
def test_how_many_moments_are_exact(count, exact):
    """Index 6 needs N > 6k samples; one fewer and the k-th moment is wrong in general."""
    wanted = listing(STACK, seed=21, reach=(6,), share=1.0)
    made = distribution(wanted.coefficients(), sampling=where.full_cell(STACK, [count]))
    assert made.exact_moments == exact
    n = wanted.at(np.arange(count)[:, None] / count)
    for k, mean in enumerate(power_sums(wanted), 1):
        assert ((n**k).mean() == pytest.approx(mean, rel=1e-9, abs=1e-9)) == (k <= exact)


@pytest.mark.parametrize("dimension", [1, 2, 3])
def test_against_plain_arrays(dimension):
    wanted = listing(LATTICES[dimension], seed=5)
    shape = (37, 12, 9)[:dimension]
    made = distribution(wanted.coefficients(), sampling=where.full_cell(wanted.lattice, shape), bins=17)
    mesh = np.meshgrid(*(np.arange(n) / n for n in shape), indexing="ij")
    n = wanted.at(np.stack(mesh, axis=-1)).ravel()
    assert made.samples == n.size
    assert made.shape == shape
    assert made.minimum == pytest.approx(n.min(), rel=1e-10)
    assert made.maximum == pytest.approx(n.max(), rel=1e-10)
    assert made.mean == pytest.approx(n.mean(), abs=1e-12 * wanted.weight)
    assert made.standard_deviation == pytest.approx(n.std(), rel=1e-11)
    assert made.skewness == pytest.approx(stats.skew(n), rel=1e-9)
    assert made.excess_kurtosis == pytest.approx(stats.kurtosis(n), rel=1e-9)
    assert made.fraction_negative == (n < 0).mean()
    counts, edges = np.histogram(n, 17)
    np.testing.assert_allclose(made.edges, edges, rtol=1e-9)
    # A value within rounding of an edge may fall on either side.
    assert np.abs(made.counts - counts).sum() <= 2
    assert made.counts.sum() == n.size
    assert (made.below, made.above) == (0, 0)


def test_free_points_and_limits():
    wanted = listing(PLANAR, seed=5)
    points = FreePoints(np.random.default_rng(1).uniform(-2, 2, (500, 2)))
    n = wanted.at(points.fractional)
    low, high = np.quantile(n, [0.1, 0.7])
    made = distribution(wanted.coefficients(), sampling=points, bins=5, limits=[low, high])
    assert made.exact_moments == 0
    assert made.below == 50
    assert made.above == (n > high).sum()
    assert made.counts.sum() + made.below + made.above == 500
    assert made.skewness == pytest.approx(stats.skew(n), rel=1e-9)
    assert any("Of the samples alone are: mean" in note for note in made.notes)


def test_a_second_sum_gives_the_same_histogram(monkeypatch):
    coefficients = listing(CRYSTAL, seed=5).coefficients()
    kept = distribution(coefficients)
    monkeypatch.setattr(module, "KEPT_BYTES", 0)
    again = distribution(coefficients)
    np.testing.assert_array_equal(kept.counts, again.counts)
    np.testing.assert_array_equal(kept.edges, again.edges)


@given(
    st.lists(
        arrays.arrays(np.float64, st.integers(1, 30), elements=st.floats(-100, 100, width=32)), min_size=1, max_size=6
    )
)
def test_blocks_join_to_the_moments_of_all(blocks):
    moments = Moments()
    for block in blocks:
        moments.add(block)
    every = np.concatenate(blocks)
    deviation = every - every.mean()
    assert moments.count == every.size
    assert moments.mean == pytest.approx(every.mean(), abs=1e-11)
    for found, power in ((moments.second, 2), (moments.third, 3), (moments.fourth, 4)):
        assert found == pytest.approx((deviation**power).sum(), abs=1e-11 * 200**power * every.size)
    assert (moments.low, moments.high) == (every.min(), every.max())
    assert moments.negative == (every < 0).sum()


def test_moments_of_small_deviations_from_a_large_mean():
    """Sums of plain powers would lose every digit."""
    values = np.random.default_rng(2).exponential(size=3000) * 1e-3 + 1e6
    moments = Moments()
    for block in np.array_split(values, 7):
        moments.add(block)
    moments.add(np.zeros((0, 3)))
    variance = moments.second / moments.count
    assert variance == pytest.approx(values.var(), rel=1e-6)
    assert moments.third / moments.count / variance**1.5 == pytest.approx(stats.skew(values), rel=1e-5)


def test_single_precision_is_gathered_in_double():
    wanted = listing(CRYSTAL, seed=5)
    double, single = (distribution(wanted.coefficients(), demand=Demand(precision=one)) for one in ("double", "single"))
    assert single.standard_deviation == pytest.approx(double.standard_deviation, rel=1e-5)
    assert single.counts.sum() == single.samples


def test_the_default_grid():
    wanted = listing(STACK, seed=1, reach=(10,))
    made = distribution(wanted.coefficients())
    assert made.shape[0] >= 41
    assert 58.4 / made.shape[0] <= 58.4 / 10 / 4
    spaced = distribution(wanted.coefficients(), spacing=4.0)
    assert spaced.shape[0] == 15
    assert spaced.exact_moments == 1


def test_other_fields():
    wanted = listing(STACK, seed=1)
    made = distribution(wanted.coefficients(unit="e/Å³"), Treatment(field="laplacian"))
    magnitudes = STACK.magnitudes(wanted.indices)
    assert made.rms == pytest.approx(np.sqrt((np.abs(wanted.values * magnitudes**2) ** 2).sum()), rel=1e-11)
    assert made.unit == "e/Å³/Å²"
    assert made.mean == pytest.approx(0, abs=1e-11)


def test_a_field_that_does_not_vary():
    flat = assemble(STACK, Columns(indices=[[0]], real=[-0.1], imag=[0.0]), values="density_coefficient")
    made = distribution(flat)
    assert made.skewness is None
    assert made.excess_kurtosis is None
    assert made.fraction_negative == 1
    assert made.counts.sum() == made.samples


def test_what_is_said():
    made = distribution(listing(STACK, zero=False).coefficients())
    assert any("exact values over the cell" in note and "kurtosis" in note for note in made.notes)
    assert any("deviation from the mean" in note for note in made.notes)
    assert made.applied


@pytest.mark.parametrize(
    ("options", "path"),
    [
        ({"bins": 0}, ("bins",)),
        ({"bins": 1 << 21}, ("bins",)),
        ({"limits": [1, 1]}, ("limits",)),
        ({"spacing": -1.0}, ("spacing",)),
        ({"spacing": 1e-12}, ("spacing",)),
        ({"spacing": 1.0, "sampling": FreePoints(np.zeros((1, 1)))}, ("spacing",)),
        ({"treatment": Treatment(field="gradient")}, ("field",)),
        ({"treatment": Treatment(field="gradient_magnitude")}, ("field",)),
        ({"max_bytes": 10}, ("samples",)),
    ],
)
def test_refusals(options, path):
    assert refusal_of(lambda: distribution(listing(STACK).coefficients(), **options)).path == path


def test_complex_densities_are_refused():
    assert refusal_of(lambda: distribution(listing(STACK, real=False).coefficients())).path == ("density",)

"""Scales by a zero term, by two densities and by another set, against truth put in."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from engine.amplitudes.scaling import relative_scale, scale_from_two_densities, scale_from_zero_term
from engine.errors import InputError
from engine.lattice import Lattice
from tests.engine.amplitudes.simulated import CELL, half_sphere, reflections, stack

INDICES = half_sphere(d_min=1.5)[::5]
SQUARES = (1 / (2 * CELL.spacings(INDICES))) ** 2


def test_zero_term_by_hand():
    """F(000) = 90 electrons measured as 30: k = 1/3 for amplitudes, 1/9 for intensities."""
    amplitudes = reflections([[0, 0, 0], [1, 0, 0]], [30, 6], [3, 0.6], quantity="amplitude")
    found, k = scale_from_zero_term(amplitudes, zero_term=90)
    assert k == pytest.approx(1 / 3, rel=1e-14)
    assert found.observed == pytest.approx([90, 18], rel=1e-14)
    assert found.sigma == pytest.approx([9, 1.8], rel=1e-14)
    assert found.scale == "absolute"
    found, k = scale_from_zero_term(reflections([[0, 0, 0], [1, 0, 0]], [900, 36]), mean=90 / CELL.volume)
    assert k == pytest.approx(1 / 9, rel=1e-13)
    assert found.observed == pytest.approx([8100, 324], rel=1e-13)


def test_two_densities_by_hand():
    """p = −2, 3 are 0.33, 0.43 e/Å³: 0.02 a unit, 0.37 at zero."""
    line = scale_from_two_densities((-2, 3), (0.33, 0.43))
    assert line.slope == pytest.approx(0.02, rel=1e-13)
    assert line.offset == pytest.approx(0.37, rel=1e-13)
    assert line.density(np.array([-2.0, 0.0, 3.0])) == pytest.approx([0.33, 0.37, 0.43], rel=1e-13)
    assert line.apply(stack([5.0], [0.5], quantity="amplitude")).observed == pytest.approx([0.1], rel=1e-13)
    squared = line.apply(stack([5.0], [0.5]))
    assert squared.observed == pytest.approx([0.002], rel=1e-13)
    assert squared.sigma == pytest.approx([0.0002], rel=1e-13)
    assert squared.scale == "absolute"
    assert not line.covariance.any()


def test_two_densities_carry_their_errors():
    """Against 200 000 draws of the four numbers, whose scatter is known to 0.16 %; ten times that for curvature."""
    rng = np.random.default_rng(12)
    p, n, dp, dn = (-2.0, 3.0), (0.33, 0.43), (0.05, 0.03), (0.001, 0.002)
    line = scale_from_two_densities(p, n, profile_sigma=dp, density_sigma=dn)
    ps = np.array(p)[:, None] + np.array(dp)[:, None] * rng.normal(size=(2, 200_000))
    ns = np.array(n)[:, None] + np.array(dn)[:, None] * rng.normal(size=(2, 200_000))
    slopes = (ns[1] - ns[0]) / (ps[1] - ps[0])
    offsets = ns[0] - slopes * ps[0]
    expected = np.cov([slopes, offsets])
    assert line.covariance == pytest.approx(expected, rel=0.016, abs=0.016 * np.sqrt(expected[0, 0] * expected[1, 1]))
    at = np.array([-4.0, 0.5, 10.0])
    spread = [float((slopes * value + offsets).std()) for value in at]
    assert line.density_sigma(at) == pytest.approx(spread, rel=0.016)


@given(st.floats(-100, 100), st.floats(0.1, 100), st.floats(-10, 10), st.floats(0.01, 10))
def test_two_densities_are_met(p, rise, n, step):
    """Law: the line passes through both places."""
    line = scale_from_two_densities((p, p + rise), (n, n + step))
    assert line.density(np.array([p, p + rise])) == pytest.approx([n, n + step], abs=1e-9)


def pair_of_sets(rng, *, k=2.5, b=3.0, outliers=0):
    """Two measurements of the same intensities; the second is to be multiplied by k exp(−2Bs²)."""
    true = 100 * rng.exponential(size=len(INDICES))
    s1, s2 = np.full(true.size, 3.0), np.full(true.size, 10.0)
    first = true + s1 * rng.normal(size=true.size)
    second = true / k * np.exp(2 * b * SQUARES) + s2 * rng.normal(size=true.size)
    second[:outliers] += 2000
    return reflections(INDICES, first, s1), reflections(INDICES, second, s2)


@pytest.mark.parametrize("robust", [False, True])
def test_relative_scale_and_b_are_recovered_within_their_uncertainties(robust):
    """Pulls of 120 pairs of sets; means uncertain by 0.09, widths by 0.065, four times allowed."""
    rng = np.random.default_rng(13)
    found = [relative_scale(*pair_of_sets(rng), displacement=True, robust=robust) for _ in range(120)]
    scales = np.array([np.log(each.scale / 2.5) * each.scale / each.scale_sigma for each in found])
    bs = np.array([(each.b - 3.0) / each.b_sigma for each in found])
    for pulls in (scales, bs):
        assert abs(pulls.mean()) < 0.36
        assert pulls.std() == pytest.approx(1, abs=0.26)
    assert np.mean([each.reduced_chi_squared for each in found]) == pytest.approx(1, abs=0.03)


def test_outliers_hardly_pull_the_robust_scale():
    """3 % of wild reflections: the robust scale stays within five of its s.u., the plain one does not."""
    one, other = pair_of_sets(np.random.default_rng(14), b=0.0, outliers=len(INDICES) * 3 // 100)
    plain, robust = relative_scale(one, other), relative_scale(one, other, robust=True)
    assert abs(robust.scale - 2.5) < 5 * robust.scale_sigma
    assert abs(plain.scale - 2.5) > 5 * plain.scale_sigma
    assert robust.down_weighted >= len(INDICES) * 3 // 100
    assert plain.down_weighted == 0


@given(st.floats(1e-3, 1e3), st.floats(-20, 20), st.sampled_from(["intensity", "amplitude"]))
def test_exact_sets_meet_exactly(k, b, quantity):
    """Law: a set multiplied by k⁻¹exp(cBs²) comes back, matched by indices in any order."""
    power = 2 if quantity == "intensity" else 1
    values = np.random.default_rng(15).uniform(1, 5, len(INDICES))
    order = np.random.default_rng(16).permutation(len(INDICES))[20:]
    reference = reflections(INDICES[10:], values[10:], quantity=quantity)
    moved = values * np.exp(power * b * SQUARES) / k
    other = reflections(INDICES[order], moved[order], quantity=quantity)
    found = relative_scale(reference, other, displacement=True)
    assert found.scale == pytest.approx(k, rel=1e-6)
    assert found.b == pytest.approx(b, abs=1e-5)
    assert found.apply(other).observed == pytest.approx(values[order], rel=1e-5)
    assert found.agreement < 1e-5
    shared = np.count_nonzero(order >= 10)
    assert (found.common, found.only_reference, found.only_other) == (
        shared,
        len(INDICES) - 10 - shared,
        order.size - shared,
    )
    assert "same" in found.notes[0]


def test_plain_scale_without_uncertainties_is_the_textbook_one():
    """Equal weights on the first set: k = Σx₁x₂/Σx₂², σ² = Σr²/(n−1)/Σx₂²."""
    rng = np.random.default_rng(17)
    x2 = rng.uniform(1, 9, 50)
    x1 = 1.7 * x2 + 0.1 * rng.normal(size=50)
    found = relative_scale(stack(x1), stack(x2))
    k = x1 @ x2 / (x2 @ x2)
    sigma = np.sqrt(((x1 - k * x2) ** 2).sum() / 49 / (x2 @ x2))
    assert found.scale == pytest.approx(k, rel=1e-9)
    assert found.scale_sigma == pytest.approx(sigma, rel=1e-6)
    assert (found.b, found.b_sigma) == (0.0, 0.0)
    assert found.agreement == pytest.approx(np.abs(x1 - k * x2).sum() / x1.sum(), rel=1e-6)


SQUARE = Lattice.from_planar_parameters(5, 5, 90)
TWO = stack([1.0, 2.0], [0.1, 0.1])


@pytest.mark.parametrize(
    ("call", "path"),
    [
        (lambda: scale_from_zero_term(TWO, zero_term=3), ("indices",)),
        (lambda: scale_from_zero_term(TWO), ("zero_term",)),
        (lambda: scale_from_zero_term(TWO, zero_term=3, mean=1), ("zero_term",)),
        (lambda: scale_from_zero_term(TWO, mean=0.0), ("mean",)),
        (lambda: scale_from_zero_term(reflections([[0, 0, 0]], [-1.0]), zero_term=3), ("observed",)),
        (lambda: scale_from_two_densities((1, 1), (1, 2)), ("profile",)),
        (lambda: scale_from_two_densities((1, 2), (1, 1)), ("density",)),
        (lambda: scale_from_two_densities((1, 2), (2, 1)), ("profile",)),
        (lambda: scale_from_two_densities((1, np.nan), (2, 1)), ("profile", 1)),
        (lambda: scale_from_two_densities((1, 2), (1, 2), density_sigma=(-1, 0)), ("profile_sigma",)),
        (
            lambda: scale_from_two_densities((1, 2), (1, 2)).apply(reflections([[0, 0, 0]], [1.0])),
            ("indices",),
        ),
        (lambda: relative_scale(TWO, stack([1.0, 2.0], quantity="amplitude")), ("other",)),
        (lambda: relative_scale(TWO, reflections([[1, 0, 0], [2, 0, 0]], [1.0, 2.0])), ("other",)),
        (lambda: relative_scale(TWO, stack([1.0])), ("other",)),
        (lambda: relative_scale(TWO, TWO.select(np.array([0, 0, 1]))), ("other",)),
        (lambda: relative_scale(TWO, stack([1.0, 2.0], [1.0, 0.0])), ("sigma",)),
        (lambda: relative_scale(TWO, stack([1.0, 2.0]), robust=True), ("robust",)),
        (lambda: relative_scale(TWO, stack([-1.0, -2.0])), ("other",)),
        (
            lambda: relative_scale(
                reflections([[1, 0], [0, 1], [-1, 0]], [1.0, 1, 1], lattice=SQUARE),
                reflections([[1, 0], [0, 1], [-1, 0]], [1.0, 1, 1], lattice=SQUARE),
                displacement=True,
            ),
            ("displacement",),
        ),
    ],
)
def test_refusals(call, path):
    with pytest.raises(InputError) as fault:
        call()
    assert fault.value.path == path

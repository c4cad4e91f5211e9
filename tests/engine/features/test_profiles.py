"""Maxima and minima along lines: found, refined, merged."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from engine import sampling as where
from engine.features import profiles
from engine.features.linear import density_of
from engine.features.profiles import Parts, higher_bound, line_of, merged, parts_of, profile_of, refined
from engine.sampling import AffineGrid, FreePoints
from tests.strategies import CRYSTAL, PLANAR, STACK, listing, refusal_of


def profile_along(wanted, sampling):
    density = density_of(wanted.coefficients())
    return profile_of(density, line_of(density, sampling))


def test_a_lattice_line_is_whole():
    wanted = listing(CRYSTAL, seed=1)
    for include_end in (True, False):
        line = line_of(
            density_of(wanted.coefficients()), where.lattice_line(CRYSTAL, [1, -1, 2], 9, include_end=include_end)
        )
        assert line.periodic
        assert line.length == pytest.approx(np.linalg.norm(CRYSTAL.to_cartesian(np.array([1.0, -1.0, 2.0]))))
        assert np.linalg.norm(CRYSTAL.to_cartesian(line.direction)) == pytest.approx(1)


def test_other_lines_are_not():
    wanted = listing(CRYSTAL, seed=1)
    density = density_of(wanted.coefficients())
    assert not line_of(density, where.normal_line(CRYSTAL, [0, 0, 1], 30)).periodic
    part = line_of(density, where.line(CRYSTAL, [0, 0, 0], [0, 0, 0.9999], 30))
    assert not part.periodic
    assert part.length == pytest.approx(0.9999 * 16.4)


def test_the_axis_counts_from_its_own_start():
    grid = AffineGrid(np.array([0.2]), np.array([[0.01]]), (50,), ("z",), (-7.5,))
    assert line_of(density_of(listing(STACK).coefficients()), grid).start == -7.5


@pytest.mark.parametrize("seed", range(6))
def test_all_extrema_of_random_profiles(seed):
    """As many as a dense grid shows, and where dn/dt vanishes to rounding."""
    wanted = listing(PLANAR, seed=seed)
    profile = profile_along(wanted, where.lattice_line(PLANAR, [1, 1], 8, origin=[0.13, 0.4]))
    parts = parts_of(profile)
    x = np.arange(12000) / 12000
    n = wanted.at(np.array([0.13, 0.4]) + x[:, None] * np.array([1.0, 1.0]))
    peaks = (n > np.roll(n, 1)) & (n > np.roll(n, -1))
    np.testing.assert_allclose(parts.maxima, x[peaks] * profile.line.length, atol=profile.line.length / 12000)
    slopes = profile.derivatives(np.concatenate([parts.maxima, parts.bounds]), (1, 2))
    assert np.abs(slopes[0]).max() < 1e-11 * np.abs(profile.slopes).max() * 10
    assert (slopes[1][: parts.count] < 0).all()
    assert (slopes[1][parts.count :] > 0).all()
    assert parts.bounds[-1] - parts.bounds[0] == pytest.approx(profile.line.length)
    assert parts.depths[0] == pytest.approx(parts.depths[-1])
    assert (parts.bounds[:-1] < parts.maxima).all()
    assert (parts.maxima < parts.bounds[1:]).all()


def test_the_search_does_not_depend_on_the_callers_samples():
    wanted = listing(PLANAR, seed=3)
    coarse = parts_of(profile_along(wanted, where.line(PLANAR, [0, 0.1], [0.9, 0.7], 2)))
    fine = parts_of(profile_along(wanted, where.line(PLANAR, [0, 0.1], [0.9, 0.7], 500)))
    np.testing.assert_allclose(coarse.maxima, fine.maxima, rtol=1e-12)


@given(st.lists(st.floats(-0.9, 0.9), min_size=1, max_size=5), st.booleans())
def test_refined_zeros(roots, rising):
    """Of (t − r)³ + (t − r)/100, whose Newton steps from afar leave the bounds."""
    root = np.array(roots)
    sign = 1.0 if rising else -1.0

    def cubic(t):
        return sign * np.stack([(t - root) ** 3 + (t - root) / 100, 3 * (t - root) ** 2 + 0.01])

    low, high = np.full(root.size, -1.0), np.full(root.size, 1.0)
    found = refined(cubic, low, high, falling=np.full(root.size, not rising), start=np.zeros(root.size))
    np.testing.assert_allclose(found, root, atol=1e-12)


def test_refined_without_any_slope_halves():
    def step(t):
        return np.stack([np.sign(t - 0.3), np.zeros_like(t)])

    found = refined(step, np.zeros(1), np.ones(1), falling=np.zeros(1, bool), start=np.full(1, 0.5))
    assert found[0] == pytest.approx(0.3, abs=1e-8)


def test_the_higher_bound_is_a_minimum_where_there_is_one():
    depths = np.array([9.0, 1.0, 2.0, 5.0])
    assert list(higher_bound(depths, np.array([False, True, True, False]))) == [1, 2, 2]
    assert list(higher_bound(depths, np.ones(4, bool))) == [0, 2, 3]


def wells(heights, depths, *, periodic):
    """Parts as a list of heights and depths, at whole and half places."""
    count = len(heights)
    maxima, bounds = np.arange(count) + 0.5, np.arange(count + 1.0)
    closed = np.ones(count + 1, bool)
    density = density_of(listing(STACK).coefficients())
    line = profiles.Line(np.zeros(1), np.ones(1), float(count), 0.0, periodic)
    profile = profiles.Profile(density, line, 0.0, 1.0, np.array([0.0, 1.0]), np.zeros(2))
    return profile, Parts(maxima, bounds, np.array(heights, float), np.array(depths, float), closed)


def test_merging_over_the_end_of_a_period():
    """The step between the last and the first is the lowest: they become one, around the end."""
    profile, parts = wells([5, 9, 6], [4.5, 1, 0, 4.5], periodic=True)
    made, joined = merged(profile, parts, 1.0, 0.0)
    assert joined == 1
    assert list(made.heights) == [9, 6]
    assert list(made.maxima) == [1.5, 2.5]
    assert list(made.bounds) == [1, 2, 4]
    assert list(made.depths) == [1, 0, 1]
    profile, parts = wells([6, 9, 5], [4.5, 1, 0, 4.5], periodic=True)
    made, _ = merged(profile, parts, 1.0, 0.0)
    assert list(made.maxima) == [0.5, 1.5]
    assert list(made.bounds) == [-1, 1, 2]
    assert list(made.depths) == [0, 1, 0]


def test_merging_goes_on_as_long_as_it_must():
    profile, parts = wells([5, 6, 7, 3], [0, 4.9, 5.8, 2.9, 0], periodic=False)
    made, joined = merged(profile, parts, 0.5, 0.0)
    assert (made.count, joined) == (1, 3)
    assert list(made.maxima) == [2.5]
    assert list(made.bounds) == [0, 4]


def test_merging_a_bump_at_the_end_into_what_lies_beyond():
    """Its higher minimum is the outer one: the line then begins with the next layer's minimum."""
    profile, parts = wells([5, 9], [4.9, 1, 0], periodic=False)
    made, joined = merged(profile, parts, 0.5, 0.0)
    assert joined == 1
    assert list(made.maxima) == [1.5]
    assert list(made.bounds) == [1, 2]


@pytest.mark.parametrize(
    "sampling",
    [
        FreePoints(np.zeros((4, 1))),
        AffineGrid(np.zeros(1), np.array([[0.1]]), (1,), ("z",), (0.0,)),
        AffineGrid(np.zeros(1), np.array([[0.0]]), (5,), ("z",), (0.0,)),
    ],
)
def test_what_is_no_line(sampling):
    assert refusal_of(lambda: line_of(density_of(listing(STACK).coefficients()), sampling)).path == ("samples",)


def test_a_plane_is_no_line():
    plane = AffineGrid(np.zeros(2), np.eye(2) / 9, (9, 9), ("a", "b"), (0.0, 0.0))
    assert refusal_of(lambda: line_of(density_of(listing(PLANAR).coefficients()), plane)).path == ("samples",)


def test_a_line_that_is_too_long():
    wanted = listing(STACK)
    line = AffineGrid(np.zeros(1), np.array([[1e6 + 0.3]]), (3,), ("z",), (0.0,))
    assert refusal_of(lambda: profile_along(wanted, line)).path == ("samples",)

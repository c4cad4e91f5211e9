"""Half widths against scipy's root of the sum written out."""

from __future__ import annotations

import math

import numpy as np
import pytest
from scipy import optimize

from engine import Lattice
from engine.resolution import point_response
from engine.resolution.widths import BINS, _Bins, full_width
from tests.engine.resolution.sets import BIG, ball_indices, equal_series, indices_where, plain_response
from tests.strategies import LATTICES, listing


def plain_width(series, direction, limit, points=4001):
    """Full width by a fine scan and scipy's brentq on the plain sum."""
    t = np.linspace(0, limit, points)
    below = np.flatnonzero(plain_response(series, t[:, None] * direction) <= 0.5)
    if not below.size:
        return math.inf
    end = int(below[0])

    def value(x):
        return float(plain_response(series, x * direction[None])[0]) - 0.5

    return 2 * optimize.brentq(value, t[end - 1], t[end], xtol=1e-13)


def width_of(series, direction, limit):
    weights = series.doubled().real
    components = np.abs(series.lattice.wavevectors(series.indices) @ direction)
    components[components < 1e-9] = 0
    return full_width(series, weights, components, direction, limit)


@pytest.mark.parametrize("d_min", [3.0, 4.8])
def test_widths_are_those_of_the_sum_itself(d_min):
    """More terms than bins, and fewer; along directions that are nobody's axes."""
    indices = ball_indices(BIG, d_min)
    assert (len(indices) > BINS) == (d_min < 4)
    rng = np.random.default_rng(4)
    series = equal_series(BIG, indices, rng.uniform(0.1, 2, len(indices)))
    for direction in rng.normal(size=(4, 3)):
        unit = direction / np.linalg.norm(direction)
        found = width_of(series, unit, 8 * d_min)
        assert found == pytest.approx(plain_width(series, unit, 8 * d_min, 801), rel=1e-7)


@pytest.mark.parametrize("seed", range(4))
@pytest.mark.parametrize("dimension", [1, 2, 3])
def test_ragged_sets_have_the_width_of_their_sum(dimension, seed):
    series = equal_series(LATTICES[dimension], listing(LATTICES[dimension], seed=seed, share=0.3).series().indices)
    found = point_response(series)
    for direction, width in zip(found.directions, found.widths, strict=True):
        reach = 0.5 * np.abs(series.lattice.vectors @ direction).sum()
        assert width == pytest.approx(plain_width(series, direction, reach), rel=1e-7)


def test_a_single_cosine():
    """Zero term and one pair of equal weights: (1 + 2 cos)/3 falls to half where the cosine is ¼."""
    series = equal_series(Lattice.from_period(40.0), np.array([[0], [1]]))
    expected = 2 * math.acos(0.25) / (2 * math.pi) * 40
    assert width_of(series, np.ones(1), 20.0) == pytest.approx(expected, rel=1e-12)


def test_a_cosine_beside_a_strong_zero_term():
    """0.6 + 0.4 cos falls to half where the cosine is −¼; 0.8 + 0.2 cos never does."""
    lattice = Lattice.from_period(40.0)
    series = equal_series(lattice, np.array([[0], [1]]), np.array([0.6, 0.2]))
    assert width_of(series, np.ones(1), 20.0) == pytest.approx(2 * math.acos(-0.25) / (2 * math.pi) * 40, rel=1e-12)
    series = equal_series(lattice, np.array([[0], [1]]), np.array([0.8, 0.1]))
    assert width_of(series, np.ones(1), 20.0) == math.inf


def test_what_never_falls_to_half_is_endless():
    lattice = Lattice.from_parameters(20, 25, 80, 90, 90, 90)
    film = np.array([[0, 0, l] for l in range(30)])
    series = equal_series(lattice, film)
    assert width_of(series, np.array([1.0, 0, 0]), 10.0) == math.inf
    # A few lateral terms vary, but by less than half the peak.
    series = equal_series(lattice, np.concatenate([film, [[2, 0, 0], [3, 0, 0]]]))
    assert width_of(series, np.array([1.0, 0, 0]), 10.0) == math.inf
    assert width_of(series, np.array([0, 0, 1.0]), 40.0) < 4


def test_a_late_fall_is_found():
    """Strong low orders beside weak high ones: the half width lies far beyond the near range of the search."""
    lattice = Lattice.from_period(4000.0)
    indices = np.concatenate([np.arange(0, 3), np.arange(3000, 3003)])[:, None]
    series = equal_series(lattice, indices, np.array([2.0, 2, 2, 0.3, 0.3, 0.3]))
    expected = plain_width(series, np.ones(1), 2000.0, 200_001)
    found = width_of(series, np.ones(1), 2000.0)
    assert found > 100
    # Where the fast terms carry it below half is a matter of the step: the first such place counts.
    assert found == pytest.approx(expected, rel=1e-6)


def test_a_wedge_widens_where_it_is_missing():
    lattice = Lattice.from_parameters(31, 33, 35, 90, 90, 90)
    cut = 2 * np.pi / 2.6

    def inside(g):
        radius = np.linalg.norm(g, axis=1)
        return (radius <= cut) & (np.abs(g[:, 2]) <= 0.7 * radius + 1e-9)

    series = equal_series(lattice, indices_where(lattice, (13, 14, 15), inside))
    found = point_response(series)
    assert np.abs(found.directions[2]) == pytest.approx([0, 0, 1], abs=1e-6)
    assert found.widths[2] > 1.3 * found.widths[1]
    assert found.widths[2] == pytest.approx(plain_width(series, found.directions[2], 10.0, 801), rel=1e-7)


def test_bins_are_right_to_first_order():
    """Components all to one side of their bins, as those of a stack may be: 1e-6 where a set falls to half."""
    rng = np.random.default_rng(0)
    width = 1.0 / (BINS - 1)
    components = np.append((rng.integers(0, BINS - 1, 3 * BINS) + 0.4) * width, 1.0)
    weights = rng.uniform(0, 1, components.size)
    weights /= weights.sum()
    t = np.linspace(0, 3, 7)
    made = _Bins.of(weights, components, 1.0).values(t)
    assert made == pytest.approx(np.cos(t[:, None] * components) @ weights, abs=1e-6)

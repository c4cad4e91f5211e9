"""The most negative value of a response against brute force on a fine grid."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from engine import Lattice
from engine.resolution import point_response
from engine.resolution.ripple import distance_from_lattice
from tests.engine.resolution.sets import BIG, ball_indices, equal_series, indices_where, plain_response
from tests.strategies import LATTICES, lattices, listing


def brute(series, reach, count):
    """Lowest of the plain sum on a grid over half a Cartesian box."""
    d = series.lattice.dimension
    axes = [np.linspace(0 if j == 0 else -reach, reach, count) for j in range(d)]
    where = np.stack(np.meshgrid(*axes, indexing="ij"), axis=-1).reshape(-1, d)
    values = plain_response(series, where)
    return float(values.min())


@pytest.mark.parametrize("seed", range(3))
@pytest.mark.parametrize("dimension", [1, 2, 3])
def test_small_cells_are_searched_whole(dimension, seed):
    lattice = LATTICES[dimension]
    series = equal_series(lattice, listing(lattice, seed=seed, share=0.4).series().indices)
    found = point_response(series)
    assert found.searched == "the whole cell"
    count = {1: 4001, 2: 161, 3: 37}[dimension]
    axes = [np.linspace(0, 0.5 if j == 0 else 1, count) for j in range(dimension)]
    x = np.stack(np.meshgrid(*axes, indexing="ij"), axis=-1).reshape(-1, dimension)
    lowest = float(plain_response(series, x @ lattice.vectors).min())
    assert found.ripple <= lowest + 1e-9
    assert found.ripple == pytest.approx(lowest, rel=0.05)


def test_a_box_finds_the_bottom_beside_a_wedge():
    lattice = Lattice.from_parameters(51, 33, 35, 90, 90, 90)
    cut = 2 * np.pi / 3.2

    def inside(g):
        radius = np.linalg.norm(g, axis=1)
        return (radius <= cut) & (np.abs(g[:, 2]) <= 0.6 * radius + 1e-9)

    series = equal_series(lattice, indices_where(lattice, (16, 11, 12), inside))
    found = point_response(series)
    assert "box" in found.searched
    lowest = brute(series, 5.0, 27)
    assert found.ripple <= lowest + 1e-9
    assert found.ripple == pytest.approx(lowest, abs=6e-3)
    # Beyond the reach of a complete sphere's: the wedge ripples more.
    assert found.ripple < -0.11
    assert 1 < found.ripple_at < 6


def test_the_value_is_that_of_the_sum_at_its_distance():
    """A stack: the distance names the place, two places by inversion."""
    lattice = Lattice.from_period(37.0)
    series = equal_series(lattice, np.array([[1], [2], [3], [5], [9]]))
    found = point_response(series)
    assert plain_response(series, np.array([[found.ripple_at]]))[0] == pytest.approx(found.ripple, abs=1e-9)
    assert 0 < found.ripple_at <= 18.5


def test_distances_are_from_the_nearest_lattice_point():
    """A 3-D cell that is thin along c: the box spans many cells of it."""
    lattice = Lattice.from_parameters(60, 62, 4.0, 90, 90, 90)
    series = equal_series(lattice, ball_indices(lattice, 1.3))
    found = point_response(series)
    assert found.ripple < -0.05
    assert found.ripple_at < 3


def test_nothing_negative():
    """Squared weights of an interval: the Fejér kernel, nowhere negative."""
    n = 20
    lattice = Lattice.from_period(50.0)
    series = equal_series(lattice, np.arange(n)[:, None], 1 - np.arange(n) / n)
    found = point_response(series)
    assert (found.ripple, found.ripple_at) == (0.0, None)


def test_a_million_terms_or_few_end_at_the_same_bottom(monkeypatch):
    """With one step from one sample, as for a million terms, the value is still good to 2e-3."""
    series = equal_series(BIG, ball_indices(BIG, 1.9))
    whole = point_response(series)
    monkeypatch.setattr("engine.resolution.ripple.EVALUATIONS", 1)
    short = point_response(series)
    assert short.ripple == pytest.approx(whole.ripple, abs=2e-3)
    assert short.ripple >= whole.ripple - 1e-9


def test_a_window_moves_the_ripple_out():
    """exp(−4) at the end of a sphere: the deepest ripple lies beyond one and a half of the shortest periods."""
    d_min = 3.5
    indices = ball_indices(BIG, d_min)
    u = np.linalg.norm(indices @ BIG.reciprocal, axis=1) * d_min / (2 * np.pi)
    series = equal_series(BIG, indices, np.exp(-4 * u**2))
    found = point_response(series)
    radii = np.linspace(0, 3 * d_min, 100)
    directions = np.random.default_rng(1).normal(size=(40, 3))
    directions /= np.linalg.norm(directions, axis=1)[:, None]
    lowest = float(plain_response(series, (radii[:, None, None] * directions).reshape(-1, 3)).min())
    assert found.ripple <= lowest + 1e-6
    assert found.ripple == pytest.approx(lowest, rel=0.1)
    assert found.ripple_at > 1.5 * d_min


def test_broad_responses_are_searched_out_to_their_width(monkeypatch):
    """Weak terms out to d = 1 Å beside strong low orders: a peak 16 Å wide with its ripple 17 Å away."""
    monkeypatch.setattr("engine.resolution.ripple.MOST_SAMPLES", 1)
    lattice = Lattice.from_period(300.0)
    l = np.arange(301)
    series = equal_series(lattice, l[:, None], np.where(l <= 12, 1.0, 1e-4))
    found = point_response(series)
    assert "box" in found.searched
    where = np.linspace(0, 150, 60001)[:, None]
    values = plain_response(series, where)
    assert found.ripple == pytest.approx(float(values.min()), rel=1e-3)
    assert found.ripple_at == pytest.approx(float(where[values.argmin(), 0]), abs=0.2)
    assert found.ripple_at > 10


@given(st.sampled_from([2, 3]).flatmap(lattices), st.integers(0, 1000))
@settings(max_examples=20, deadline=None)
def test_the_nearest_lattice_point_is_found_in_any_cell(lattice, seed):
    place = np.random.default_rng(seed).uniform(-40, 40, lattice.dimension)
    d = lattice.dimension
    x = place @ np.linalg.inv(lattice.vectors)
    near = np.stack(np.meshgrid(*[np.arange(-9, 10)] * d, indexing="ij"), axis=-1).reshape(-1, d) + x - np.floor(x)
    assert distance_from_lattice(lattice, place) == pytest.approx(
        float(np.linalg.norm(near @ lattice.vectors, axis=1).min()), abs=1e-9
    )


def test_a_box_reaches_out_to_three_periods(monkeypatch):
    """Orders 3 and 5: both cosines are −1 at half the period, two and a half of the shortest ones away."""
    monkeypatch.setattr("engine.resolution.ripple.MOST_SAMPLES", 1)
    found = point_response(equal_series(Lattice.from_period(60.0), np.array([[3], [5]])))
    assert "box" in found.searched
    assert (found.ripple, found.ripple_at) == (pytest.approx(-1, abs=1e-9), pytest.approx(30, abs=1e-4))

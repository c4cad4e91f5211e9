"""Complete shapes have the closed forms of their transforms; directions are those of the shape."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from scipy import optimize, special

from engine import Lattice, Treatment
from engine.fields import summands
from engine.resolution import point_response
from engine.resolution.response import principal_directions
from engine.series import Series
from tests.engine.resolution.sets import BIG, ball_indices, coefficient_set, equal_series, indices_where
from tests.strategies import listings

RADIAL = {
    1: lambda u: np.sinc(u / np.pi),
    2: lambda u: 2 * special.j1(u) / u,
    3: lambda u: 3 * special.spherical_jn(1, u) / u,
}
COMPLETE = {
    1: Lattice.from_period(500.5),
    2: Lattice.from_planar_parameters(131, 147, 103),
    3: BIG,
}


def closed(dimension):
    """Half width and first minimum of the transform of a sphere, disc or interval, in u = G r."""
    form = RADIAL[dimension]
    half = optimize.brentq(lambda u: form(u) - 0.5, 0.5, 3.0)
    low = optimize.minimize_scalar(form, bounds=(3.5, 6.5), method="bounded", options={"xatol": 1e-10})
    return half, float(low.x), float(low.fun)


@pytest.mark.parametrize(("dimension", "d_min"), [(1, 1.0), (2, 1.0), (3, 1.3)])
def test_complete_spheres_discs_and_intervals(dimension, d_min):
    lattice = COMPLETE[dimension]
    found = point_response(equal_series(lattice, ball_indices(lattice, d_min)))
    half, at, depth = closed(dimension)
    assert found.widths / d_min == pytest.approx(np.full(dimension, half / np.pi), rel=4e-3)
    # The ragged rim of a set of 10⁴ terms deepens the lowest place a little.
    assert found.ripple == pytest.approx(depth, abs=2e-3)
    assert found.ripple_at / d_min == pytest.approx(at / (2 * np.pi), rel=5e-3)
    assert np.all(np.diff(found.widths) >= 0)


def test_an_ellipsoid_is_as_wide_as_its_axes_are_short():
    """G inside an ellipsoid with turned axes: widths 0.795 d along each, d = 2π/semi-axis."""
    lattice = Lattice.from_parameters(42, 44, 47, 84, 97, 101)
    turned, _ = np.linalg.qr(np.random.default_rng(3).normal(size=(3, 3)))
    d = np.array([1.8, 2.7, 4.0])
    semi = 2 * np.pi / d

    def inside(g):
        return ((g @ turned / semi) ** 2).sum(axis=1) <= 1

    found = point_response(equal_series(lattice, indices_where(lattice, (24, 25, 27), inside)))
    half, _, depth = closed(3)
    assert found.widths == pytest.approx(half / np.pi * d, rel=8e-3)
    for direction, axis in zip(found.directions, turned.T, strict=True):
        assert abs(direction @ axis) > 0.9995
    assert found.ripple == pytest.approx(depth, abs=4e-3)
    # Between the axes the ellipsoid of widths holds as well.
    along = np.array([0.3, -0.5, 0.8])
    expected = half / np.pi / np.linalg.norm(along @ turned / d) * np.linalg.norm(along)
    assert found.width_along(along) == pytest.approx(expected, rel=1e-2)


def test_a_film_in_three_dimensions_is_endless_laterally():
    lattice = Lattice.from_parameters(7, 8, 120.3, 90, 90, 104)
    found = point_response(equal_series(lattice, np.array([[0, 0, l] for l in range(61)])))
    interval = point_response(equal_series(Lattice.from_period(120.3), np.arange(61)[:, None]))
    assert found.directions[0] == pytest.approx([0, 0, 1], abs=1e-12)
    assert found.widths[0] == pytest.approx(interval.widths[0], rel=1e-12)
    assert np.all(np.isinf(found.widths[1:]))
    assert found.ripple == pytest.approx(interval.ripple, rel=1e-9)
    assert found.width_along(np.array([1.0, 0, 0])) == math.inf
    assert found.width_along(np.array([1.0, 0, 1.0])) == pytest.approx(found.widths[0] * 2**0.5, rel=1e-9)


def test_the_directions_of_equal_moments_are_the_axes():
    """A cubic set: any axes would do, the Cartesian ones are given, and always the same."""
    lattice = Lattice.from_parameters(15, 15, 15, 90, 90, 90)
    found = point_response(equal_series(lattice, ball_indices(lattice, 2.0)))
    assert np.sort(found.directions.argmax(axis=1)).tolist() == [0, 1, 2]
    assert np.abs(found.directions).max(axis=1) == pytest.approx(np.ones(3), abs=1e-9)
    # A tetragonal one, turned: the axis of its own, and two that span the rest.
    waves = np.diag([1.0, 1, 3]) @ np.linalg.qr(np.random.default_rng(1).normal(size=(3, 3)))[0]
    rows = principal_directions(np.ones(3), waves)
    assert abs(rows[0] @ waves[2]) == pytest.approx(3, abs=1e-9)
    assert rows @ rows.T == pytest.approx(np.eye(3), abs=1e-12)


def test_weights_decide_the_directions():
    """A long G that hardly counts beside a short one that does; a negative weight counts by its size."""
    waves = np.array([[3.0, 0], [0, 1.0]])
    assert principal_directions(np.array([1.0, 1.0]), waves)[0] == pytest.approx([1, 0])
    assert principal_directions(np.array([0.1, 1.0]), waves)[0] == pytest.approx([0, 1])
    assert principal_directions(np.array([-1.0, 1.0]), waves)[0] == pytest.approx([1, 0])


def test_nothing_but_the_zero_term_has_no_response():
    lattice = Lattice.from_period(10.0)
    assert point_response(Series(lattice, np.zeros((1, 1), np.int64), np.ones(1, complex), True)) is None
    assert point_response(Series(lattice, np.zeros((0, 1), np.int64), np.ones(0, complex), True)) is None


def test_the_scale_of_the_series_does_not_matter():
    series = equal_series(BIG, ball_indices(BIG, 4.0))
    scaled = replace(series, values=series.values * 7)
    a, b = point_response(series), point_response(scaled)
    assert a.widths == pytest.approx(b.widths, rel=1e-12)
    assert a.ripple == pytest.approx(b.ripple, rel=1e-9)


@pytest.mark.parametrize("window", [False, True])
def test_both_kinds_of_series_have_one_response(window):
    """A real series, and the same with all mates written out as a complex one."""
    indices = ball_indices(BIG, 3.2)
    factors = np.exp(-((indices**2).sum(axis=1)) / 60) if window else None
    series = equal_series(BIG, indices, factors)
    a, b = point_response(series), point_response(series.complete())
    assert a.widths == pytest.approx(b.widths, rel=1e-9)
    assert a.ripple == pytest.approx(b.ripple, abs=1e-6)


@given(listings(real=True))
@settings(max_examples=40, deadline=None)
def test_laws_of_any_set(one):
    series = one.series()
    made = summands(coefficient_set(series.lattice, series.indices), Treatment(field="response")).series[0]
    found = point_response(made)
    if not series.indices.any():
        assert found is None
        return
    d = series.lattice.dimension
    assert found.directions @ found.directions.T == pytest.approx(np.eye(d), abs=1e-9)
    assert np.all(found.widths > 0)
    assert -1 - 1e-12 <= found.ripple <= 0
    assert (found.ripple_at is None) == (found.ripple == 0)
    # Without a zero term the mean of the response is zero, so it is negative somewhere.
    if series.indices.any(axis=1).all():
        assert found.ripple < 0

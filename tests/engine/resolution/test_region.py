"""Rows, planes and whole lattices of G, against plain enumeration of a box."""

from __future__ import annotations

import itertools
import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from engine import Lattice
from engine.resolution.region import held, region_of
from tests.strategies import LATTICES, forward, lattices


def box(reach):
    return np.array(list(itertools.product(*(range(-n, n + 1) for n in reach))), dtype=np.int64)


def rows_of(indices):
    return sorted(map(tuple, indices.tolist()))


SPANS = {
    "row 1-D": (1, [[4]], [[1]]),
    "row 2-D": (2, [[4, -2], [2, -1]], [[2, -1]]),
    "row 3-D": (3, [[0, 0, 6], [0, 0, 4]], [[0, 0, 1]]),
    "oblique row 3-D": (3, [[2, -4, 6]], [[1, -2, 3]]),
    "whole 2-D": (2, [[2, 0], [2, 1]], [[1, 0], [0, 1]]),
    "plane hk0": (3, [[2, 0, 0], [0, 3, 0], [1, 1, 0]], [[1, 0, 0], [0, 1, 0]]),
    "plane with a divisor": (3, [[2, 4, 0], [0, 0, 3]], [[1, 2, 0], [0, 0, 1]]),
    "oblique plane": (3, [[1, -1, 0], [0, 1, -1], [3, -1, -2]], [[1, -1, 0], [0, 1, -1]]),
    "general plane": (3, [[6, -15, 0], [10, 0, -15]], [[2, -5, 0], [0, 5, -3]]),
    "whole 3-D": (3, [[2, 0, 0], [0, 2, 0], [1, 1, 2]], np.eye(3)),
}


@pytest.mark.parametrize("friedel", [True, False])
@pytest.mark.parametrize("name", SPANS)
def test_points_are_all_of_the_span_within_the_radius(name, friedel):
    dimension, rows, span = SPANS[name]
    lattice = LATTICES[dimension]
    region = region_of(lattice, np.array(rows))
    g_max = 2 * math.pi / {1: 2.2, 2: 1.4, 3: 1.3}[dimension]
    every = box([int(length * g_max / (2 * math.pi)) for length in lattice.lengths])
    solved = np.linalg.lstsq(np.array(span, dtype=float).T, every.T, rcond=None)[0].T
    whole = np.rint(solved)
    inside = np.all(np.abs(whole @ np.array(span) - every) < 1e-9, axis=1) & (np.abs(solved - whole).max(axis=1) < 1e-9)
    magnitude = np.linalg.norm(every @ lattice.reciprocal, axis=1)
    wanted = every[inside & (magnitude <= g_max) & (magnitude > 0)]
    if friedel:
        wanted = wanted[forward(wanted)]
    assert len(wanted)
    points = region.points(g_max, friedel=friedel)
    assert rows_of(points) == rows_of(wanted)
    # Two ranges make up one.
    near, far = region.points(g_max / 2, friedel=friedel), region.points(g_max, friedel=friedel, g_min=g_max / 2)
    assert rows_of(np.concatenate([near, far])) == rows_of(points)
    assert region.whole == (len(span) == dimension)
    assert region.rank == len(span)


def test_the_point_a_limit_was_read_from_is_in():
    lattice = LATTICES[3]
    rows = box((3, 3, 3))
    rows = rows[rows.any(axis=1)]
    region = region_of(lattice, rows)
    for magnitude in lattice.magnitudes(rows):
        points = region.points(float(magnitude), friedel=False)
        assert lattice.magnitudes(points).max() == pytest.approx(magnitude, rel=1e-12)
        assert np.all(
            lattice.magnitudes(region.points(2 * float(magnitude), friedel=False, g_min=float(magnitude)))
            > (magnitude * (1 + 1e-12))
        )


@given(st.sampled_from([2, 3]).flatmap(lattices))
@settings(max_examples=25, deadline=None)
def test_volumes_count_points(lattice):
    region = region_of(lattice, np.eye(lattice.dimension, dtype=np.int64))
    assert region.density == pytest.approx(lattice.volume / (2 * math.pi) ** lattice.dimension)
    g_max = 2 * math.pi * (400 / lattice.volume) ** (1 / lattice.dimension)
    count = len(region.points(g_max, friedel=False)) + 1
    assert count == pytest.approx(region.expected(g_max), rel=0.5 if lattice.lengths.min() < 4 else 0.2)
    assert region.work(g_max) >= region.expected(g_max)


def test_volumes_of_rows_and_planes():
    lattice = LATTICES[3]
    row = region_of(lattice, np.array([[0, 2, -4]]))
    assert row.density == pytest.approx(1 / np.linalg.norm(np.array([0, 1, -2]) @ lattice.reciprocal))
    assert row.expected(3.0, 1.0) == pytest.approx(4 * row.density)
    plane = region_of(lattice, np.array([[2, 4, 0], [0, 0, 3]]))
    one, two = np.array([[1, 2, 0], [0, 0, 1]]) @ lattice.reciprocal
    assert plane.density == pytest.approx(1 / np.linalg.norm(np.cross(one, two)))
    assert plane.expected(2.0) == pytest.approx(math.pi * 4 * plane.density)
    assert "row" in row.words()
    assert "plane" in plane.words()


def test_zero_alone_spans_nothing():
    assert region_of(LATTICES[3], np.zeros((1, 3), dtype=np.int64)) is None
    assert region_of(LATTICES[3], np.zeros((0, 3), dtype=np.int64)) is None


def test_rows_are_found_among_others():
    rng = np.random.default_rng(2)
    a, b = rng.integers(-3, 4, (200, 3)), rng.integers(-3, 4, (60, 3))
    known = set(map(tuple, b.tolist()))
    assert held(a, b).tolist() == [tuple(row) in known for row in a.tolist()]
    # Indices as large as they may be, where no packing into one number holds.
    a, b = a * 2**18, b * 2**18
    known = set(map(tuple, b.tolist()))
    assert held(a, b).tolist() == [tuple(row) in known for row in a.tolist()]
    assert not held(a, np.zeros((0, 3), dtype=np.int64)).any()


def test_a_long_thin_cell():
    """Lines are few where one axis is short, whatever the length of the others."""
    lattice = Lattice.from_parameters(4.0, 300.0, 5.0, 90, 90, 90)
    region = region_of(lattice, np.eye(3, dtype=np.int64))
    points = region.points(2 * math.pi / 2.0, friedel=True)
    every = box((2, 150, 2))
    magnitude = np.linalg.norm(every @ lattice.reciprocal, axis=1)
    wanted = every[(magnitude <= 2 * math.pi / 2.0 * (1 + 1e-9)) & (magnitude > 0)]
    assert rows_of(points) == rows_of(wanted[forward(wanted)])

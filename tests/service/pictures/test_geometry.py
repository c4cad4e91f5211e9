from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from engine import sampling
from engine.errors import InputError
from engine.lattice import Lattice
from service.pictures.geometry import close, lay_flat, outlines, round_length, spans_period
from tests.service.pictures.made import OBLIQUE, TRICLINIC


def flat(lattice, grid, axes=(0, 1)):
    return lay_flat(lattice, grid, axes, tuple(grid.shape[axis] for axis in axes))


def test_the_frame_of_an_oblique_cell_has_its_lengths_and_angle():
    grid = sampling.box(OBLIQUE, [0, 0], [[1, 0], [0, 1]], (11, 15), include_end=True)
    plane = flat(OBLIQUE, grid)
    gamma = np.radians(100)
    expected = [
        [0, 0],
        [10, 0],
        [10 + 14 * np.cos(gamma), 14 * np.sin(gamma)],
        [14 * np.cos(gamma), 14 * np.sin(gamma)],
    ]
    np.testing.assert_allclose(plane.corners(), expected, atol=1e-12)
    assert plane.oblique
    assert plane.angle == pytest.approx(100)


def test_the_outlines_of_an_oblique_lattice_in_closed_form():
    # Two cells by two, begun in the middle of one: x_1 = 1, 2 and x_2 = 1, 2 inside.
    grid = sampling.box(OBLIQUE, [0.5, 0.5], [[2, 0], [0, 2]], (21, 41), include_end=True)
    found = outlines(flat(OBLIQUE, grid))
    a, b = np.array([10.0, 0]), 14 * np.array([np.cos(np.radians(100)), np.sin(np.radians(100))])
    for lines, across, along in ((found[0], a, b), (found[1], b, a)):
        assert lines.shape == (2, 2, 2)
        for number, line in enumerate(lines):
            expected = np.stack([(number + 0.5) * across, (number + 0.5) * across + 2 * along])
            ends = line if np.allclose(line[0], expected[0]) else line[::-1]
            np.testing.assert_allclose(ends, expected, atol=1e-9)


def test_the_edges_of_the_cell_are_drawn_where_the_plane_ends_in_them():
    grid = sampling.box(OBLIQUE, [0, 0], [[1, 0], [0, 1]], (21, 41), include_end=True)
    assert [lines.shape[0] for lines in outlines(flat(OBLIQUE, grid))] == [2, 2]


def test_a_face_has_no_outline_across_itself():
    grid = sampling.plane(TRICLINIC, [0, 0, 0.0], [1, 0, 0], [0, 1, 0], (10, 10), include_end=True)
    assert [lines.shape[0] for lines in outlines(flat(TRICLINIC, grid))] == [2, 2, 0]


def test_a_diagonal_plane_cuts_all_three_families():
    # x_3 = x_1 − x_2 over one cell: 0 along the diagonal, ±1 in two corners.
    grid = sampling.plane(TRICLINIC, [0, 0, 0.0], [1, 0, 1], [0, 1, -1], (31, 31), include_end=True)
    plane = flat(TRICLINIC, grid)
    third = outlines(plane)[2]
    corners = plane.corners()
    assert third.shape == (1, 2, 2)
    np.testing.assert_allclose(sorted(third[0].tolist()), sorted(corners[[0, 2]].tolist()), atol=1e-9)


@st.composite
def planes(draw):
    # As people type them, or with the rounding left over from a computation.
    number = st.builds(lambda n, rest: n / 48 + rest, st.integers(-72, 72), st.sampled_from([0.0, 1e-17, -3e-16]))
    lattice = Lattice.from_parameters(
        *(draw(st.floats(3.0, 20.0)) for _ in range(3)), *(draw(st.floats(70.0, 110.0)) for _ in range(3))
    )
    vectors = [[draw(number) for _ in range(3)] for _ in range(3)]
    if min(np.linalg.norm(edge) for edge in vectors[1:]) < 0.01:
        return None
    shape = (draw(st.integers(2, 30)), draw(st.integers(2, 30)))
    try:
        return lattice, sampling.plane(lattice, *vectors, shape, include_end=True)
    except InputError:
        return None


@settings(max_examples=60, deadline=None)
@given(planes())
def test_outlines_lie_on_faces_end_on_the_frame_and_none_is_missing(drawn):
    if drawn is None:
        return
    lattice, grid = drawn
    plane = flat(lattice, grid)
    corners = grid.origin + np.array([[0, 0], [1, 0], [1, 1], [0, 1]]) * (np.array(grid.shape) - 1) @ grid.steps
    back = np.linalg.inv(plane.flat_steps)
    for axis, lines in enumerate(outlines(plane)):
        counts = (lines - plane.flat_origin) @ back
        position = grid.origin[axis] + counts @ grid.steps[:, axis]
        np.testing.assert_allclose(position, np.rint(position), atol=1e-6)
        share = counts / (np.array(grid.shape) - 1)
        assert np.all(np.abs(share - np.clip(share, 0, 1)) < 1e-6)
        assert np.all(np.min(np.abs(share - np.rint(share)), axis=-1) < 1e-6)
        low, high = corners[:, axis].min(), corners[:, axis].max()
        inside = [n for n in range(-9, 10) if low + 1e-4 < n < high - 1e-4]
        assert set(inside) <= set(np.rint(position[:, 0]).astype(int).tolist())


@settings(max_examples=40, deadline=None)
@given(planes())
def test_distances_in_the_picture_are_those_in_the_crystal(drawn):
    if drawn is None:
        return
    lattice, grid = drawn
    one, other = np.array([0.0, 0.0]), np.array([1.0, 2.0])
    plane = flat(lattice, grid)
    true = np.linalg.norm(lattice.to_cartesian((other - one) @ grid.steps))
    assert np.linalg.norm(plane.flatten(other) - plane.flatten(one)) == pytest.approx(true, rel=1e-9)


def test_too_many_outlines_are_none():
    grid = sampling.plane(TRICLINIC, [0, 0, 0.0], [900, 0, 0], [0, 1, 0], (10, 10))
    assert outlines(flat(TRICLINIC, grid)) is None


def test_a_rectangle_about_a_centre_keeps_its_coordinates():
    grid = sampling.lattice_plane(TRICLINIC, [1, 1, 0], width=8.0, height=6.0, spacing=0.5)
    plane = flat(TRICLINIC, grid)
    np.testing.assert_allclose(plane.corners(), [[-4, -3], [4, -3], [4, 3], [-4, 3]], atol=1e-9)
    assert not plane.oblique


def test_a_single_row_of_samples_is_as_wide_as_a_step():
    grid = sampling.box(OBLIQUE, [0, 0], [[0.5, 0], [0, 0.5]], (1, 5))
    corners = flat(OBLIQUE, grid).corners()
    assert corners[1, 0] - corners[0, 0] == pytest.approx(5.0)


def test_an_outline_through_a_single_row_of_samples():
    # x_1 runs from −0.35 to 0.15 about the one sample at −0.1; Å count from that sample.
    grid = sampling.box(OBLIQUE, [-0.1, 0.2], [[0.5, 0], [0, 0.5]], (1, 5))
    (line,) = outlines(flat(OBLIQUE, grid))[0]
    along = 14 * np.array([np.cos(np.radians(100)), np.sin(np.radians(100))])
    ends = line if line[0, 1] < line[1, 1] else line[::-1]
    np.testing.assert_allclose(ends, [[1.0, 0.0], [1.0, 0.0] + 0.4 * along], atol=1e-9)


def test_a_period_is_closed_and_a_part_of_one_is_not():
    values = np.arange(12.0).reshape(3, 4)
    closed = close(values, np.array([[1 / 3, 0.0], [0.0, 0.25]]))
    assert closed.shape == (4, 5)
    np.testing.assert_array_equal(closed[3, :4], values[0])
    np.testing.assert_array_equal(closed[:, 4], closed[:, 0])
    assert close(values, np.array([[1 / 3, 0.0], [0.0, 0.2]])).shape == (4, 4)
    assert spans_period(np.array([0.5, -0.25]), 4)
    assert not spans_period(np.array([0.5, 0.1]), 4)


@pytest.mark.parametrize(("limit", "length"), [(9.99, 5), (10, 10), (4.9, 2), (0.23, 0.2), (1999, 1000), (2.0, 2)])
def test_round_lengths(limit, length):
    assert round_length(limit) == pytest.approx(length)

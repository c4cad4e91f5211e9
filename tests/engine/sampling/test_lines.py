"""Lines: between points, along lattice directions, along normals."""

from __future__ import annotations

import numpy as np
import pytest

from engine.sampling import lattice_line, line, normal_line
from tests.strategies import CRYSTAL, LATTICES, PLANAR, STACK, refusal_of


@pytest.mark.parametrize("include_end", [True, False])
@pytest.mark.parametrize("dimension", [1, 2, 3])
def test_a_line_between_two_points(dimension, include_end):
    rng = np.random.default_rng(dimension)
    start, end = rng.uniform(-2, 2, (2, dimension))
    made = line(LATTICES[dimension], start, end, 9, include_end=include_end)
    pieces = 8 if include_end else 9
    expected = [start + (end - start) * s / pieces for s in range(9)]
    np.testing.assert_allclose(made.positions(), expected, atol=1e-14)
    (axis,) = made.axes(LATTICES[dimension])
    length = np.linalg.norm((end - start) @ LATTICES[dimension].vectors)
    assert (axis.label, axis.start, axis.count) == ("distance", 0.0, 9)
    np.testing.assert_allclose(axis.step, length / pieces, rtol=1e-13)


def test_the_end_is_included_unless_said_otherwise():
    assert line(STACK, [0], [1], 5).positions()[-1, 0] == 1.0
    assert lattice_line(STACK, [1], 5).positions()[-1, 0] == 1.0
    np.testing.assert_allclose(normal_line(STACK, [1], 5).positions()[-1, 0], 1.0, rtol=1e-15)


def test_a_cartesian_line():
    start, end = np.array([1.0, 2.0, 3.0]), np.array([-4.0, 0.5, 9.0])
    made = line(CRYSTAL, start, end, 4, coordinates="cartesian")
    expected = [start + (end - start) * s / 3 for s in range(4)]
    np.testing.assert_allclose(made.positions() @ CRYSTAL.vectors, expected, atol=1e-12)


@pytest.mark.parametrize("include_end", [True, False])
def test_a_line_along_a_direction_is_one_translation(include_end):
    made = lattice_line(CRYSTAL, [1, -2, 3], 7, origin=[0.1, 0.2, 0.3], include_end=include_end)
    pieces = 6 if include_end else 7
    expected = [np.array([0.1, 0.2, 0.3]) + np.array([1, -2, 3]) * s / pieces for s in range(7)]
    np.testing.assert_allclose(made.positions(), expected, atol=1e-14)


def test_lines_start_at_the_origin_of_the_cell_or_where_they_are_told():
    assert not lattice_line(CRYSTAL, [1, 0, 0], 3).origin.any()
    assert not normal_line(CRYSTAL, [1, 0, 0], 3).origin.any()
    at = np.array([0.3, -0.1, 0.7])
    for made in (
        lattice_line(CRYSTAL, [1, 0, 0], 3, origin=at @ CRYSTAL.vectors, coordinates="cartesian"),
        normal_line(CRYSTAL, [1, 0, 0], 3, origin=at @ CRYSTAL.vectors, coordinates="cartesian"),
    ):
        np.testing.assert_allclose(made.origin, at, atol=1e-14)


@pytest.mark.parametrize("normal", [(1, 0, 0), (0, 0, 1), (1, 1, 1), (2, -1, 3), (2, 0, 0), (6, -3, 9)])
def test_a_normal_is_perpendicular_to_its_planes_and_one_repeat_long(normal):
    made = normal_line(CRYSTAL, normal, 11)
    walk = (made.positions()[-1] - made.positions()[0]) @ CRYSTAL.vectors
    primitive = np.array(normal) // np.gcd.reduce(normal)
    # Two lattice vectors in the plane, from h·u = 0, are perpendicular to the walk.
    h, k, l = primitive
    for u in ([k, -h, 0], [0, l, -k], [l, 0, -h]):
        assert abs(np.array(u) @ CRYSTAL.vectors @ walk) < 1e-11
    # One repeat: the walk leads from one plane h·x = n to the next, along the positive normal.
    np.testing.assert_allclose(made.steps[0] * 10 @ primitive, 1.0, rtol=1e-13)
    np.testing.assert_allclose(np.linalg.norm(walk), CRYSTAL.spacings(primitive[None])[0], rtol=1e-13)


def test_a_normal_of_a_given_length():
    made = normal_line(CRYSTAL, [1, 1, 0], 5, length=12.5, include_end=False)
    np.testing.assert_allclose(np.linalg.norm(made.steps[0] @ CRYSTAL.vectors), 2.5, rtol=1e-13)


def test_the_normal_of_a_stack_and_of_a_planar_lattice():
    np.testing.assert_allclose(normal_line(STACK, [3], 5).positions()[:, 0], [0, 0.25, 0.5, 0.75, 1], rtol=1e-14)
    made = normal_line(PLANAR, [1, 0], 3)
    np.testing.assert_allclose(np.linalg.norm(made.steps[0] @ PLANAR.vectors) * 2, PLANAR.volume / 34.7, rtol=1e-13)


REFUSED = [
    (lambda: line(CRYSTAL, [0, 0, 0], [0, 0, 0], 5), ("to",)),
    (lambda: line(CRYSTAL, [0, 0], [0, 0, 1], 5), ("from",)),
    (lambda: line(CRYSTAL, [0, 0, np.nan], [0, 0, 1], 5), ("from", 2)),
    (lambda: line(CRYSTAL, [0, 0, 0], [0, np.inf, 1], 5), ("to", 1)),
    (lambda: line(CRYSTAL, [0, 0, 0], [0, 0, 1], 1), ("samples",)),
    (lambda: line(CRYSTAL, [0, 0, 0], [0, 0, 1], 2.0), ("samples",)),
    (lambda: line(CRYSTAL, [0, 0, 0], [0, 0, 1], 5, coordinates="polar"), ("coordinates",)),
    (lambda: lattice_line(CRYSTAL, [0, 0, 0], 5), ("along",)),
    (lambda: lattice_line(CRYSTAL, [0, 0.5, 0], 5), ("along",)),
    (lambda: lattice_line(CRYSTAL, [0, 0, 1], 0), ("samples",)),
    (lambda: lattice_line(CRYSTAL, [0, 0, 1], 5, origin=[0, 0]), ("origin",)),
    (lambda: normal_line(CRYSTAL, [0, 0, 0], 5), ("normal_to",)),
    (lambda: normal_line(CRYSTAL, [1.5, 0, 0], 5), ("normal_to",)),
    (lambda: normal_line(CRYSTAL, [1, 0, 0], 5, length=0.0), ("length",)),
    (lambda: normal_line(CRYSTAL, [1, 0, 0], 5, length=np.inf), ("length",)),
    (lambda: normal_line(CRYSTAL, [1, 0, 0], 5, origin=[0, np.nan, 0]), ("origin", 1)),
]


@pytest.mark.parametrize(("call", "path"), REFUSED)
def test_lines_that_are_refused(call, path):
    assert refusal_of(call).path == path

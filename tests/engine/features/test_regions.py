import itertools

import numpy as np
import pytest

from engine.features.regions import ball_region, box_region, images_inside
from tests.strategies import LATTICES, refusal_of


def every_image(lattice, x, reach=6):
    cells = np.array(list(itertools.product(range(-reach, reach + 1), repeat=lattice.dimension)))
    return (x[:, None] + cells).reshape(-1, lattice.dimension)


@pytest.mark.parametrize("dimension", [1, 2, 3])
def test_images_in_a_ball(dimension):
    lattice = LATTICES[dimension]
    x = np.random.default_rng(1).uniform(-2, 2, (5, dimension))
    centre = np.array([0.7, -1.2, 0.4])[:dimension]
    radius = float(lattice.lengths.max()) * 0.9
    rows, places = images_inside(ball_region(lattice, centre, radius), lattice, x)
    images = every_image(lattice, x)
    inside = np.linalg.norm((images - centre) @ lattice.vectors, axis=1) <= radius
    assert len(places) == np.count_nonzero(inside) > 0
    np.testing.assert_allclose(np.sort(places, axis=0), np.sort(images[inside], axis=0), atol=1e-12)
    gap = places - x[rows]
    np.testing.assert_allclose(gap, np.rint(gap), atol=1e-12)


@pytest.mark.parametrize("dimension", [1, 2, 3])
def test_boxes_side_by_side_share_nothing(dimension):
    """A box that is a cell, wherever it is and in whatever setting, holds each position once."""
    lattice = LATTICES[dimension]
    x = np.random.default_rng(2).random((40, dimension))
    x[0] = 0
    edges = np.array([[1, 1, 0], [0, 1, 0], [0, 2, 1]], dtype=float)[:dimension, :dimension]
    for origin in (np.zeros(dimension), np.full(dimension, 0.3), x[3]):
        rows, _ = images_inside(box_region(lattice, origin, edges), lattice, x)
        assert sorted(rows.tolist()) == list(range(40))


def test_a_margin_widens():
    lattice = LATTICES[3]
    box = box_region(lattice, [0, 0, 0], np.eye(3) * 0.3)
    near = lattice.to_fractional(lattice.to_cartesian(np.array([[0.1, 0.1, 0.0]])) - [0, 0, 0.2])
    assert not box.contains(lattice, near)[0]
    assert box.contains(lattice, near, 0.21)[0]
    assert not box.contains(lattice, near, 0.15)[0]
    ball = ball_region(lattice, [1.0, 2.0, 3.0], 1.0, coordinates="cartesian")
    at = lattice.to_fractional(np.array([[1.0, 2.0, 4.1]]))
    assert not ball.contains(lattice, at)[0]
    assert ball.contains(lattice, at, 0.11)[0]


@pytest.mark.parametrize(
    ("call", "path"),
    [
        (lambda one: box_region(one, [0, 0], [[1, 0], [0, 1]]), ("origin",)),
        (lambda one: box_region(one, [0, 0, 0], [[1, 0, 0], [0, 1, 0]]), ("edges",)),
        (lambda one: box_region(one, [0, 0, 0], [[1, 0, 0], [0, 1, 0], [1, 1, 0]]), ("edges",)),
        (lambda one: ball_region(one, [0, 0, 0], -1.0), ("radius",)),
        (lambda one: images_inside(ball_region(one, [0, 0, 0], 1e4), one, np.zeros((1, 3))), ("region",)),
    ],
)
def test_refusals(call, path):
    assert refusal_of(lambda: call(LATTICES[3])).path == path

from __future__ import annotations

import itertools
import math

import numpy as np
import pytest

from engine.surfaces.mesh import CHUNK, Mesh


def mesh_of(vertices, triangles, caps=()):
    vertices = np.array(vertices, dtype=float)
    marked = np.zeros(len(triangles), dtype=bool)
    marked[list(caps)] = True
    return Mesh(vertices, np.tile([0.0, 0.0, 1.0], (len(vertices), 1)), np.array(triangles, dtype=np.int32), marked)


TETRAHEDRON = ([[0, 0, 0], [2, 0, 0], [0, 3, 0], [0, 0, 4]], [[0, 2, 1], [0, 1, 3], [0, 3, 2], [1, 2, 3]])


@pytest.mark.parametrize("shift", [(0, 0, 0), (1e6, -2e6, 3e6)])
def test_volume_of_a_tetrahedron_wherever_it_is(shift):
    vertices, triangles = TETRAHEDRON
    assert mesh_of(np.array(vertices) + shift, triangles).volume() == pytest.approx(4, rel=1e-9)


def test_volume_turned_inside_out_is_negative():
    vertices, triangles = TETRAHEDRON
    assert mesh_of(vertices, [row[::-1] for row in triangles]).volume() == pytest.approx(-4)


def test_caps_are_measured_apart():
    vertices, triangles = TETRAHEDRON
    mesh = mesh_of(vertices, triangles, caps=[0, 1])
    assert mesh.cap_area() == pytest.approx(3 + 4)
    assert mesh.area() == pytest.approx(6 + math.hypot(12, 8, 6) / 2)


def test_more_triangles_than_are_measured_at_a_time():
    count = CHUNK + 5
    vertices, triangles = TETRAHEDRON
    many = np.tile(np.array(triangles), (count // 4 + 1, 1))[:count]
    one = mesh_of(vertices, triangles)
    assert count % 4 == 1
    whole, rest = mesh_of(vertices, many), mesh_of(vertices, triangles[:1])
    assert whole.area() == pytest.approx((count // 4) * one.area() + rest.area())


def test_a_closed_mesh_has_no_unpaired_edge():
    assert mesh_of(*TETRAHEDRON).unpaired_edges() == 0


@pytest.mark.parametrize("lost", range(4))
def test_a_hole_is_found(lost):
    vertices, triangles = TETRAHEDRON
    assert mesh_of(vertices, [row for place, row in enumerate(triangles) if place != lost]).unpaired_edges() == 3


def test_a_triangle_turned_over_is_found():
    vertices, triangles = TETRAHEDRON
    assert mesh_of(vertices, [triangles[0][::-1], *triangles[1:]]).unpaired_edges() == 6


def test_an_edge_of_four_triangles_is_found():
    """Two tetrahedra that share two vertices, and the edge between them."""
    vertices, triangles = TETRAHEDRON
    more = [*vertices, [0, -3, 0], [0, 0, -4]]
    mirrored = [[{0: 0, 1: 1, 2: 4, 3: 5}[place] for place in row] for row in triangles]
    assert mesh_of(more, triangles + mirrored).unpaired_edges() == 2


def test_every_edge_of_a_cube():
    corners = list(itertools.product((0, 1), repeat=3))
    faces = []
    for axis, side in itertools.product(range(3), (0, 1)):
        around = [(0, 0), (1, 0), (1, 1), (0, 1)]
        ring = [corners.index(tuple(np.insert(pair, axis, side))) for pair in around]
        ring = ring if (side == 1) == (axis != 1) else ring[::-1]
        faces += [[ring[0], ring[1], ring[2]], [ring[0], ring[2], ring[3]]]
    cube = mesh_of(corners, faces)
    assert (cube.unpaired_edges(), cube.volume(), cube.area()) == (0, pytest.approx(1), pytest.approx(6))

from __future__ import annotations

import itertools

import numpy as np
import pytest

from engine.surfaces.mesh import Mesh
from tests.engine.surfaces.shapes import meshed

SIDE = 16
RNG = np.random.default_rng(11)
NOISE = {
    "uniform": RNG.uniform(-1, 1, (SIDE,) * 3),
    # Equal sizes: every face of a cube with two opposite corners above the level is a tie.
    "signs": RNG.choice([-1.0, 1.0], (SIDE,) * 3),
    "few": RNG.choice([-1.0, -0.5, 0.5, 1.0], (SIDE,) * 3),
    # Spread over many orders of magnitude.
    "peaked": RNG.choice([-1, 1], (SIDE,) * 3) * 10 ** RNG.uniform(-8, 2, (SIDE,) * 3),
    "zeros": RNG.choice([-1.0, 0.0, 1.0], (SIDE,) * 3),
    "rare": np.where(RNG.random((SIDE,) * 3) < 0.02, 1.0, -1.0),
}
WRAPPED = [(False, False, False), (True, True, True), (True, False, True)]
SKEW = np.array([[1.0, 0, 0], [-0.4, 0.9, 0], [0.3, -0.2, 1.2]])


def doubled_areas(mesh):
    first, second, third = np.moveaxis(mesh.vertices[mesh.triangles], 1, 0)
    return np.cross(second - first, third - first)


@pytest.mark.parametrize("steps", [np.eye(3), SKEW, SKEW[[1, 0, 2]]], ids=["cubic", "skew", "left-handed"])
@pytest.mark.parametrize("wrapped", WRAPPED, ids=str)
@pytest.mark.parametrize("name", NOISE)
def test_a_closed_mesh_is_watertight_whatever_the_values(name, wrapped, steps):
    mesh = meshed(NOISE[name], wrapped=wrapped, closed=True, steps=steps)
    assert mesh.unpaired_edges() == 0
    assert mesh.volume() > 0
    assert mesh.caps.any()
    # Triangles neither vanish nor repeat, and every vertex is used.
    corners = np.sort(mesh.triangles, axis=1)
    assert (np.diff(corners, axis=1) > 0).all()
    assert len(np.unique(corners, axis=0)) == len(corners)
    assert (np.linalg.norm(doubled_areas(mesh), axis=1) > 1e-10).all()
    np.testing.assert_array_equal(np.unique(mesh.triangles), np.arange(len(mesh.vertices)))
    np.testing.assert_allclose(np.linalg.norm(mesh.normals, axis=1), 1, rtol=0, atol=1e-12)


@pytest.mark.parametrize("wrapped", WRAPPED, ids=str)
@pytest.mark.parametrize("name", NOISE)
def test_an_open_mesh_has_a_boundary_in_the_faces_alone(name, wrapped):
    mesh = meshed(NOISE[name], wrapped=wrapped)
    forth = np.concatenate([mesh.triangles[:, [j, (j + 1) % 3]] for j in range(3)]).astype(np.int64)
    keys = forth @ [len(mesh.vertices), 1]
    assert len(np.unique(keys)) == len(keys)
    alone = forth[~np.isin(keys, forth[:, ::-1] @ [len(mesh.vertices), 1])]
    ends = mesh.vertices[alone]
    last = np.array(NOISE[name].shape) - 1 + wrapped
    on_face = (np.abs(ends) < 1e-12) | (np.abs(ends - last) < 1e-12)
    assert on_face.all(axis=1).any(axis=1).all()
    assert not mesh.caps.any()


def test_caps_lie_in_the_faces_to_the_last_digit():
    mesh = meshed(NOISE["uniform"], closed=True)
    corners = mesh.vertices[mesh.triangles[mesh.caps]]
    flat = [(corners[..., axis] == side).all(axis=1) for axis in range(3) for side in (0.0, SIDE - 1.0)]
    assert np.any(flat, axis=0).all()
    assert (np.linalg.norm(doubled_areas(mesh)[mesh.caps], axis=1) > 0).all()


def test_caps_of_a_body_that_fills_all_but_a_corner():
    values = np.ones((4, 5, 6))
    values[0, 0, 0] = -1.0
    mesh = meshed(values, closed=True)
    assert mesh.unpaired_edges() == 0
    # A tetrahedron with edges of half a step is missing.
    assert mesh.volume() == pytest.approx(3 * 4 * 5 - 0.5**3 / 6)
    assert mesh.area() == pytest.approx(np.sqrt(3) / 4 * 0.5)
    assert mesh.cap_area() == pytest.approx(2 * (12 + 15 + 20) - 3 * 0.125)


def test_normals_of_caps_are_those_of_their_faces():
    values = np.ones((4, 4, 4))
    values[1:3, 1:3, 1:3] = -1.0
    mesh = meshed(values, closed=True, steps=SKEW)
    outward = np.linalg.inv(SKEW).T
    outward /= np.linalg.norm(outward, axis=1)[:, None]
    for place in ((3, 1, 1), (1, 3, 1), (1, 1, 3)):
        (row,) = np.flatnonzero((np.abs(mesh.vertices - np.array(place) @ SKEW) < 1e-9).all(axis=1))
        np.testing.assert_allclose(mesh.normals[row], outward[place.index(3)], atol=1e-12)
    # The surface within points into the hollow, where values are lower.
    inner = np.unique(mesh.triangles[~mesh.caps])
    centre = np.full(3, 1.5) @ SKEW
    assert (np.einsum("ij,ij->i", mesh.normals[inner], centre - mesh.vertices[inner]) > 0).all()


@pytest.mark.parametrize("steps", [np.eye(3), SKEW, SKEW[[2, 1, 0]]], ids=["cubic", "skew", "left-handed"])
def test_of_a_linear_field_all_is_exact(steps):
    """A plane: every vertex on it, every normal across it, towards lower values."""
    slope, level = np.array([0.7, -0.3, 0.45]), 0.41
    places = np.stack(np.meshgrid(*(np.arange(n) for n in (5, 6, 7)), indexing="ij"), axis=-1) @ steps
    mesh = meshed(places @ slope, level, steps=steps)
    np.testing.assert_allclose(mesh.vertices @ slope, level, atol=2e-4)
    np.testing.assert_allclose(
        mesh.normals, np.tile(-slope / np.linalg.norm(slope), (len(mesh.normals), 1)), atol=1e-12
    )
    assert (doubled_areas(mesh) @ slope < 0).all()


def test_vertices_are_where_the_straight_line_has_the_level():
    mesh = meshed(NOISE["uniform"])
    lower = np.floor(mesh.vertices).astype(int)
    part = mesh.vertices - lower
    on_edge = np.count_nonzero(part, axis=1) == 1
    assert on_edge.mean() > 0.9
    first, upper = lower[on_edge], lower[on_edge] + (part[on_edge] > 0)
    share = part[on_edge].sum(axis=1)
    low, high = (NOISE["uniform"][tuple(rows.T)] for rows in (first, upper))
    away = (share > 1.1e-4) & (share < 1 - 1.1e-4)
    np.testing.assert_allclose(((1 - share) * low + share * high)[away], 0, atol=1e-12)


def test_copies_in_neighbouring_cells_join():
    """What a mesh leaves open in one face is open at the same places in the opposite face."""
    mesh = meshed(NOISE["uniform"], wrapped=(True, True, True), steps=SKEW)
    inside = np.linalg.solve(SKEW.T, mesh.vertices.T).T
    for axis in range(3):
        others = [one for one in range(3) if one != axis]
        near, far = (inside[np.abs(inside[:, axis] - side) < 1e-9][:, others] for side in (0, SIDE))
        assert len(near) == len(far) > 100
        near, far = (rows[np.lexsort(np.round(rows, 7).T)] for rows in (near, far))
        np.testing.assert_allclose(near, far, rtol=0, atol=1e-11)


def test_copies_of_a_mesh_make_a_closed_one():
    """Eight of them round a corner: edges with one triangle remain in the outer faces alone."""
    mesh = meshed(NOISE["signs"], wrapped=(True, True, True))
    moved = [mesh.vertices + SIDE * np.array(cell) for cell in itertools.product((0, 1), repeat=3)]
    vertices = np.concatenate(moved)
    _, first, inverse = np.unique(np.round(vertices, 6), axis=0, return_index=True, return_inverse=True)
    triangles = np.concatenate([mesh.triangles + number * len(mesh.vertices) for number in range(8)])
    joined = Mesh(vertices[first], np.zeros((len(first), 3)), inverse[triangles].astype(np.int32), np.zeros(0, bool))
    corners = joined.triangles.astype(np.int64)
    forth = np.concatenate([corners[:, [j, (j + 1) % 3]] for j in range(3)])
    keys = forth @ [len(first), 1]
    alone = joined.vertices[forth[~np.isin(keys, forth[:, ::-1] @ [len(first), 1])]]
    outer = (alone == 0) | (np.abs(alone - 2 * SIDE) < 1e-6)
    assert len(alone) > 100
    assert outer.all(axis=1).any(axis=1).all()


def test_a_flat_place_takes_its_normal_from_the_triangles_round_it():
    """With two samples to a period all differences across a sample vanish."""
    values = np.where(np.arange(2)[:, None, None] == 0, 1.0, -1.0) * np.ones((2, 2, 2))
    mesh = meshed(values, wrapped=(True, True, True))
    # Planes at 1/2, pointing up, and at 3/2, pointing down.
    assert set(mesh.vertices[:, 0]) == {0.5, 1.5}
    expected = np.where(mesh.vertices[:, :1] == 0.5, 1.0, -1.0) * np.array([1.0, 0, 0])
    np.testing.assert_allclose(mesh.normals, expected, atol=1e-12)


def test_the_smallest_grid():
    mesh = meshed([[[1.0, -1], [-1, -1]], [[-1, -1], [-1, -1]]], closed=True)
    assert mesh.unpaired_edges() == 0
    assert mesh.volume() == pytest.approx(0.5**3 / 6)

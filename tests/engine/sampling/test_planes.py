"""Planes: by their edges, and parallel to lattice planes."""

from __future__ import annotations

import itertools
import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from engine import Lattice
from engine.sampling import in_plane_axes, lattice_plane, plane
from tests.strategies import CRYSTAL, PLANAR, STACK, lattices, refusal_of


@pytest.mark.parametrize("include_end", [True, False])
@pytest.mark.parametrize("lattice", [PLANAR, CRYSTAL], ids=["planar", "crystal"])
def test_a_plane_is_divided_evenly_along_its_edges(lattice, include_end):
    d = lattice.dimension
    origin, first, second = np.random.default_rng(d).uniform(-1, 1, (3, d))
    made = plane(lattice, origin, first, second, (8, 9), include_end=include_end)
    for i, j in itertools.product(range(8), range(9)):
        u, v = (i / 7, j / 8) if include_end else (i / 8, j / 9)
        np.testing.assert_allclose(made.positions()[i, j], origin + u * first + v * second, atol=1e-14)
    assert made.labels == ("edge_1", "edge_2")


def test_a_cartesian_plane():
    made = plane(CRYSTAL, [1, 2, 3], [4, 0, 0], [0, 5, 1], (5, 6), include_end=True, coordinates="cartesian")
    np.testing.assert_allclose(made.positions()[-1, -1] @ CRYSTAL.vectors, [5, 7, 4], atol=1e-12)


small = st.integers(-3, 3)
normals = st.tuples(small, small, small).filter(any)


def shortest_in_plane(lattice, normal, reach=10):
    """Shortest lattice vector with h·u = 0, by trying all of them; its length."""
    every = np.array(list(itertools.product(range(-reach, reach + 1), repeat=3)))
    inside = every[(every @ np.array(normal) == 0) & every.any(axis=1)]
    return np.linalg.norm(inside @ lattice.vectors, axis=1).min()


@given(lattices(3), normals)
def test_in_plane_axes(lattice, normal):
    across, up = in_plane_axes(lattice, np.array(normal))
    g = np.array(normal) @ (2 * np.pi * np.linalg.inv(lattice.vectors).T)
    out = g / np.linalg.norm(g)
    # Orthonormal, in the plane, and right-handed with its normal.
    frame = np.array([across, up, out])
    np.testing.assert_allclose(frame @ frame.T, np.eye(3), atol=1e-12)
    np.testing.assert_allclose(np.cross(across, up), out, atol=1e-12)
    # The first runs along a lattice vector of the plane, and none there is shorter.
    along = across * shortest_in_plane(lattice, normal)
    u = along @ np.linalg.inv(lattice.vectors)
    np.testing.assert_allclose(u, np.rint(u), atol=1e-9)
    assert np.rint(u) @ normal == 0
    assert across[np.abs(across) > 1e-9][0] > 0


@pytest.mark.parametrize("normal", [(1, 1, 1), (3, 3, 3), (0, 0, 1), (1, -1, 0), (2, 1, 2)])
def test_nets_with_several_shortest_vectors_have_an_end(normal):
    """Projections of exactly one half, which rounding pushes to either side."""
    rng = np.random.default_rng(5)
    for _ in range(100):
        a, c = rng.uniform(2, 30, 2).round(4)
        for lattice in (
            Lattice.from_parameters(a, a, a, 90, 90, 90),
            Lattice.from_parameters(a, a, c, 90, 90, 120),
            Lattice.from_parameters(a, a, a, 60, 60, 60),
        ):
            across, up = in_plane_axes(lattice, np.array(normal))
            assert abs(across @ up) < 1e-12


def test_the_basal_plane_is_shown_along_a():
    for a in (2.464, 3.02, 4.9134, 8.3):
        for gamma in (90, 120):
            across, up = in_plane_axes(Lattice.from_parameters(a, a, 17.4, 90, 90, gamma), np.array([0, 0, 1]))
            np.testing.assert_allclose(across, [1, 0, 0], atol=1e-15)
            np.testing.assert_allclose(up, [0, 1, 0], atol=1e-15)


@pytest.mark.parametrize("normal", [(97, 89, 101), (1001, 997, 1003), (2**20 - 1, 2**20 - 3, 2**20 - 7)])
def test_axes_of_steep_planes_stay_in_them(normal):
    across, up = in_plane_axes(CRYSTAL, np.array(normal))
    out = np.array(normal) @ np.linalg.inv(CRYSTAL.vectors).T
    # The vector itself is exact; its Cartesian form and the normal are rounded once.
    assert abs(across @ out) / np.linalg.norm(out) < 1e-11
    assert abs(across @ up) < 1e-12


@pytest.mark.parametrize(
    ("width", "height", "spacing", "shape"),
    [
        (10, 6, 0.5, (21, 13)),
        (10, 6, 0.1, (101, 61)),
        (0.3, 0.7, 0.1, (4, 8)),
        (1.0, 0.95, 0.1, (11, 10)),
        (0.05, 2.0, 0.1, (1, 21)),
        (7.0, 5.0, 3.0, (3, 2)),
    ],
)
def test_counts_of_a_lattice_plane(width, height, spacing, shape):
    made = lattice_plane(CRYSTAL, [1, 1, 1], width=width, height=height, spacing=spacing)
    assert made.shape == shape
    for axis, count in zip(made.axes(CRYSTAL), shape, strict=True):
        np.testing.assert_allclose(axis.step, spacing, rtol=1e-12)
        np.testing.assert_allclose(axis.start, -spacing * (count - 1) / 2, atol=1e-12)
    assert made.labels == ("across", "up")


@pytest.mark.parametrize("normal", [(0, 0, 1), (1, 1, 0), (2, -1, 3), (4, 0, 2)])
def test_a_lattice_plane_lies_where_it_should(normal):
    centre = np.array([0.2, 0.7, -0.4])
    made = lattice_plane(CRYSTAL, normal, offset=1.7, width=9, height=5, spacing=0.75, centre=centre)
    r = made.positions() @ CRYSTAL.vectors
    out = np.array(normal) @ np.linalg.inv(CRYSTAL.vectors).T
    out /= np.linalg.norm(out)
    middle = centre @ CRYSTAL.vectors
    np.testing.assert_allclose((r - middle) @ out, 1.7, atol=1e-12)
    np.testing.assert_allclose(r.mean(axis=(0, 1)), middle + 1.7 * out, atol=1e-12)
    across, up = in_plane_axes(CRYSTAL, np.array(normal))
    for i, j in itertools.product(*(range(n) for n in made.shape)):
        u, v = 0.75 * (i - (made.shape[0] - 1) / 2), 0.75 * (j - (made.shape[1] - 1) / 2)
        np.testing.assert_allclose(r[i, j], middle + 1.7 * out + u * across + v * up, atol=1e-11)


def test_a_lattice_plane_about_a_cartesian_centre():
    options = {"width": 4, "height": 3, "spacing": 1}
    centre = np.array([0.2, 0.7, -0.4])
    made = lattice_plane(CRYSTAL, [1, 2, 0], centre=centre @ CRYSTAL.vectors, coordinates="cartesian", **options)
    same = lattice_plane(CRYSTAL, [1, 2, 0], centre=centre, **options)
    np.testing.assert_allclose(made.positions(), same.positions(), atol=1e-13)


def test_common_factors_of_the_indices_change_nothing():
    options = {"width": 4, "height": 3, "spacing": 1, "offset": 0.5}
    made, same = (lattice_plane(CRYSTAL, normal, **options) for normal in ([1, -2, 1], [3, -6, 3]))
    np.testing.assert_allclose(made.positions(), same.positions(), atol=1e-13)


def test_the_opposite_normal_shows_the_plane_from_behind():
    one, other = (in_plane_axes(CRYSTAL, np.array(normal)) for normal in ((1, 2, 3), (-1, -2, -3)))
    np.testing.assert_allclose(one[0], other[0], atol=1e-13)
    np.testing.assert_allclose(one[1], -other[1], atol=1e-13)


SIZE = {"width": 4.0, "height": 3.0, "spacing": 1.0}

REFUSED = [
    (lambda: plane(STACK, [0], [1], [1], (4, 5)), ("edge_1",)),
    (lambda: plane(CRYSTAL, [0, 0, 0], [1, 0, 0], [2, 0, 0], (4, 5)), ("edge_2",)),
    (lambda: plane(CRYSTAL, [0, 0, 0], [1, 0, 0], [1, 1e-5, 0], (4, 5)), ("edge_2",)),
    (lambda: plane(CRYSTAL, [0, 0, 0], [0, 0, 0], [1, 0, 0], (4, 5)), ("edge_1",)),
    (lambda: plane(CRYSTAL, [0, 0, 0], [1, 0, 0], [0, 1, 0], (4,)), ("shape",)),
    (lambda: plane(CRYSTAL, [0, 0, 0], [1, 0, 0], [0, 1, 0], (4, 0)), ("shape", 1)),
    (lambda: plane(CRYSTAL, [0, 0, 0], [1, 0, 0], [0, 1, 0], (1, 5), include_end=True), ("shape", 0)),
    (lambda: plane(CRYSTAL, [0, np.inf, 0], [1, 0, 0], [0, 1, 0], (4, 5)), ("origin", 1)),
    (lambda: lattice_plane(PLANAR, [1, 0], **SIZE), ("plane",)),
    (lambda: lattice_plane(CRYSTAL, [0, 0, 0], **SIZE), ("plane",)),
    (lambda: lattice_plane(CRYSTAL, [1, 0.5, 0], **SIZE), ("plane",)),
    (lambda: lattice_plane(CRYSTAL, [1, 0, 0], **{**SIZE, "width": 0.0}), ("width",)),
    (lambda: lattice_plane(CRYSTAL, [1, 0, 0], **{**SIZE, "height": -1.0}), ("height",)),
    (lambda: lattice_plane(CRYSTAL, [1, 0, 0], **{**SIZE, "spacing": math.nan}), ("spacing",)),
    (lambda: lattice_plane(CRYSTAL, [1, 0, 0], **{**SIZE, "spacing": 1e-12}), ("spacing",)),
    (lambda: lattice_plane(CRYSTAL, [1, 0, 0], offset=math.inf, **SIZE), ("offset",)),
    (lambda: lattice_plane(CRYSTAL, [1, 0, 0], centre=[0, 0, math.nan], **SIZE), ("centre", 2)),
]


@pytest.mark.parametrize(("call", "path"), REFUSED)
def test_planes_that_are_refused(call, path):
    assert refusal_of(call).path == path

import itertools

import numpy as np
import pytest

from engine.features.sites import Domain, close_pairs, merged, orbit, site_symmetry, sites_of
from engine.symmetry import Group, plane_group, space_group
from engine.symmetry.operations import parse_operation
from tests.engine.features.densities import apart
from tests.engine.symmetry.crystals import cell_of
from tests.strategies import CRYSTAL, LATTICES, PLANAR, STACK

# International Tables for Crystallography A, memory: a position, its multiplicity, the order of its site symmetry.
POSITIONS = [
    (space_group(225), (0, 0, 0), 4, 48),
    (space_group(225), (0.25, 0.25, 0.25), 8, 24),
    (space_group(225), (0.1, 0.1, 0.1), 32, 6),
    (space_group(136), (0, 0, 0), 2, 8),
    (space_group(136), (0.3048, 0.3048, 0), 4, 4),
    (space_group(194), (1 / 3, 2 / 3, 0.25), 2, 12),
    (space_group(62), (0.1, 0.25, 0.3), 4, 2),
    (space_group(19), (0.1, 0.25, 0.3), 4, 1),
    (plane_group("p6mm"), (1 / 3, 2 / 3), 2, 6),
    (plane_group("p2gg"), (0.5, 0.0), 2, 2),
    (Group.from_operations(["-z"], 1), (0.5,), 1, 2),
]


@pytest.mark.parametrize(("group", "x", "multiplicity", "order"), POSITIONS)
def test_multiplicities_and_site_symmetries(group, x, multiplicity, order):
    """From a position that is off by 3e-6 Å, and from all its images at once: one site, on its elements exactly."""
    lattice = cell_of(group)
    x = np.array(x, dtype=float)
    off = x + lattice.to_fractional(np.full(group.dimension, 3e-6) / np.sqrt(group.dimension))
    given = np.concatenate([[off], [r @ x + t for r, t in zip(group.rotations, group.translations, strict=True)]])
    sites = sites_of(lattice, group, given, np.zeros(len(given), dtype=int))
    assert sites.multiplicity.tolist() == [multiplicity]
    assert sites.rows.tolist() == [0]
    assert np.all((sites.fractional >= 0) & (sites.fractional < 1))
    assert sites.shift[0] <= 3.001e-6
    symmetry = site_symmetry(lattice, group, sites.fractional)
    assert symmetry.order.tolist() == [order]
    for text in symmetry.operations[0]:
        operation = parse_operation(text, group.dimension)
        image = operation.rotation @ sites.fractional[0] + np.array(operation.translation, dtype=float)
        np.testing.assert_allclose(image - np.rint(image - sites.fractional[0]), sites.fractional[0], atol=1e-12)
    # A moved position lands on the element, so that images coincide to rounding.
    assert apart(lattice, sites.fractional, given[1:]).min() < 4e-6


def test_operations_are_written_with_their_lattice_translations():
    group = Group.from_operations(["-z"], 1)
    symmetry = site_symmetry(STACK, group, np.array([[0.5], [0.0], [0.2]]))
    assert symmetry.operations == (("z", "-z+1"), ("z", "-z"), ("z",))


def test_the_representative_is_the_first_and_depends_on_nothing_else():
    group = space_group(19)
    lattice = cell_of(group)
    x = np.array([0.31, 0.87, 0.12])
    images = [(r @ x + t) % 1 for r, t in zip(group.rotations, group.translations, strict=True)]
    expected = min(images, key=lambda image: tuple(image))
    for order in itertools.permutations(range(4)):
        given = np.array(images)[list(order)] + np.arange(12).reshape(4, 3) % 3
        sites = sites_of(lattice, group, given, np.zeros(4, dtype=int))
        np.testing.assert_allclose(sites.fractional, [expected], atol=1e-12)


def test_what_is_apart_or_of_another_kind_stays():
    group = space_group(2)
    x = np.array([[0.1, 0.2, 0.3], [0.1, 0.2, 0.3], [0.9, 0.8, 0.7]])
    x[1] += CRYSTAL.to_fractional(np.array([3e-5, 0, 0]))
    assert len(sites_of(CRYSTAL, group, x, np.zeros(3, dtype=int)).rows) == 2
    assert len(sites_of(CRYSTAL, group, x[[0, 2]], np.array([0, 1])).rows) == 2
    # 3e-5 Å beside a centre are two maxima, related by it, and neither lies on it.
    near = CRYSTAL.to_fractional(np.array([[3e-5, 0, 0], [-3e-5, 0, 0]]))
    sites = sites_of(CRYSTAL, group, near, np.zeros(2, dtype=int))
    assert sites.multiplicity.tolist() == [2]
    assert sites.shift.tolist() == [0.0]


def test_freedom_is_what_the_site_symmetry_allows():
    """A mirror leaves its plane, a twofold axis its line, a centre nothing; general positions all."""
    group = Group.from_operations(["x,y,-z"], 3)
    lattice = cell_of(group, 4)
    made = site_symmetry(lattice, group, np.array([[0.1, 0.2, 0.0], [0.1, 0.2, 0.3]])).freedom
    flat = lattice.vectors[:2]
    np.testing.assert_allclose(made[0] @ flat.T, flat.T, atol=1e-12)
    np.testing.assert_allclose(made[0] @ lattice.reciprocal[2], 0, atol=1e-12)
    np.testing.assert_allclose(made[1], np.eye(3), atol=1e-12)
    axis = Group.from_operations(["-x,y,-z"], 3)
    lattice = cell_of(axis, 4)
    made = site_symmetry(lattice, axis, np.array([[0.5, 0.2, 0.0]])).freedom[0]
    along = lattice.vectors[1] / lattice.lengths[1]
    np.testing.assert_allclose(made, np.outer(along, along), atol=1e-12)
    assert not site_symmetry(CRYSTAL, space_group(2), np.array([[0.5, 0, 0.5]])).freedom.any()


@pytest.mark.parametrize(("group", "x", "multiplicity", "order"), POSITIONS)
def test_orbits(group, x, multiplicity, order):
    lattice = cell_of(group)
    rows, operations, places = orbit(lattice, group, np.array([x, np.array(x) + 0.0317], dtype=float))
    first = places[rows == 0]
    assert len(first) == multiplicity
    assert group.order == multiplicity * order
    gaps = apart(lattice, first, first) + np.eye(len(first))
    assert gaps.min() > 0.01
    for place, row, number in zip(places, rows, operations, strict=True):
        image = group.rotations[number] @ (np.array(x) + 0.0317 * row) + group.translations[number]
        np.testing.assert_allclose(image - np.rint(image - place), place, atol=1e-9)


@pytest.mark.parametrize("dimension", [1, 2, 3])
def test_pairs_across_the_cells_faces(dimension):
    lattice = LATTICES[dimension]
    rng = np.random.default_rng(7)
    first, second = rng.uniform(-1, 2, (40, dimension)), rng.random((50, dimension))
    distance = 0.12 * float(lattice.lengths.min())
    found = {tuple(pair) for pair in close_pairs(lattice, first, second, distance).tolist()}
    assert found == {tuple(pair) for pair in np.argwhere(apart(lattice, first, second) <= distance).tolist()}
    assert found


def test_merging_keeps_one_of_a_kind():
    x = np.array([[0.0, 0.0], [1 - 1e-9, 1e-9], [0.5, 0.5], [0.5, 0.5]])
    assert merged(PLANAR, x, np.array([1, 1, 1, 0]), 1e-3).tolist() == [0, 2, 3]


@pytest.mark.parametrize("number", [2, 19, 136, 194, 227])
def test_a_domain_holds_an_image_of_each_position(number):
    group = space_group(number)
    lattice = cell_of(group)
    x = np.random.default_rng(number).random((300, 3))
    images = np.einsum("nij,mj->nmi", group.rotations, x) + group.translations[:, None]
    held = Domain(group).holds(lattice, images.reshape(-1, 3), 0.0).reshape(group.order, -1)
    assert held.any(axis=0).all()
    # And without a margin hardly more than one.
    assert held.sum() < 1.05 * held.shape[1]
    wide = Domain(group).holds(lattice, images.reshape(-1, 3), 0.3).reshape(group.order, -1)
    assert np.all(wide | ~held)
    # A sample within the margin of a position that is held is held as well.
    off = np.random.default_rng(1).normal(size=(*held.shape, 3))
    off *= 0.3 / np.linalg.norm(off, axis=-1)[..., None]
    near = Domain(group).holds(lattice, (images + lattice.to_fractional(off)).reshape(-1, 3), 0.3)
    assert np.all(near.reshape(held.shape) | ~held)

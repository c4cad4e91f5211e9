"""Averages over regions, against the oracle averaged by quadrature."""

from __future__ import annotations

import itertools

import numpy as np
import pytest

from engine import Treatment, averages, evaluate
from engine.averages import along
from engine.sampling import points
from tests.strategies import CRYSTAL, LATTICES, listing, refusal_of

BOUND = 1e-12
"""Relative to Σ|v|, which no value can exceed. The phases turn less than 30 radians across the regions,
for which the Gaussian quadratures below are exact to rounding."""

NODES, WEIGHTS = np.polynomial.legendre.leggauss(64)

SITES = {d: np.random.default_rng(d).uniform(-1, 1, (5, d)) for d in (1, 2, 3)}


def averaged(lattice, average, real=True, share=0.6):
    """The engine's average of a seeded list at some sites, and the list."""
    wanted = listing(lattice, real=real, seed=61, share=share)
    field = evaluate(
        wanted.coefficients(), points(lattice, SITES[lattice.dimension]), Treatment(average=average), method="direct"
    )
    return wanted, field.values


def mean_over(wanted, offsets, weights):
    """Σ weights n(x + offset) at the sites; offsets fractional (K, d), weights (K,) that sum to 1."""
    sites = SITES[wanted.lattice.dimension]
    return wanted.at(sites[:, None, :] + offsets[None, :, :]) @ weights


def fractional(lattice, cartesian):
    return cartesian @ np.linalg.inv(lattice.vectors)


def unit_normal(lattice, normal):
    g = np.array(normal) @ np.linalg.inv(lattice.vectors).T
    return g / np.linalg.norm(g)


def assert_same(found, expected, wanted):
    assert np.abs(found - expected).max() < BOUND * wanted.weight


# Lateral.


def vectors_in_plane(normal):
    """Independent lattice vectors u with h·u = 0, by search."""
    d = len(normal)
    found = []
    for u in itertools.product(range(-3, 4), repeat=d):
        if any(u) and np.dot(u, normal) == 0 and np.linalg.matrix_rank([*found, u]) > len(found):
            found.append(u)
    assert len(found) == d - 1
    return np.array(found)


NORMALS = [(1, 0), (0, 1), (1, -2), (2, 2), (1, 0, 0), (0, 0, 1), (1, 1, 0), (0, 0, 2), (2, -1, 1), (-1, 1, 0)]


@pytest.mark.parametrize("real", [True, False], ids=["real", "complex"])
@pytest.mark.parametrize("normal", NORMALS, ids=str)
def test_a_lateral_average_is_the_mean_over_the_plane(normal, real):
    """The mean over one period of the plane, by more even samples than any frequency m·u in it: exact."""
    lattice = LATTICES[len(normal)]
    wanted, found = averaged(lattice, averages.lateral(lattice, normal), real)
    inside = vectors_in_plane(normal)
    samples = int(np.abs(wanted.indices @ inside.T).max()) + 1
    parts = np.array(list(itertools.product(np.arange(samples) / samples, repeat=len(inside))))
    assert_same(found, mean_over(wanted, parts @ inside, np.full(len(parts), 1 / len(parts))), wanted)
    # And it is not the mean over the cell, which would be the same everywhere.
    assert np.ptp(found.real) > 0.1


def test_a_stack_has_nothing_to_average_laterally():
    lattice = LATTICES[1]
    wanted, found = averaged(lattice, averages.lateral(lattice, [1]))
    assert_same(found, wanted.at(SITES[1]), wanted)


def test_parallel_is_decided_in_whole_numbers():
    indices = np.array([[0, 0, 0], [2, -4, 6], [-1, 2, -3], [1, -2, 4], [3, -6, 8], [10**6, -2 * 10**6, 3 * 10**6]])
    expected = [True, True, True, False, False, True]
    np.testing.assert_array_equal(along(np.array([1, -2, 3]), indices), expected)
    np.testing.assert_array_equal(along(np.array([1, 0]), np.array([[5, 0], [5, 1], [0, 0]])), [True, False, True])


# Slab.


@pytest.mark.parametrize("thickness", [0.3, 2.0, 11.0])
@pytest.mark.parametrize("normal", [(1,), (3,), (1, 0), (2, -1), (0, 0, 1), (1, 1, 0), (2, -1, 1)], ids=str)
def test_a_slab(normal, thickness):
    lattice = LATTICES[len(normal)]
    wanted, found = averaged(lattice, averages.slab(lattice, normal, thickness), real=False)
    walk = fractional(lattice, 0.5 * thickness * NODES[:, None] * unit_normal(lattice, normal))
    assert_same(found, mean_over(wanted, walk, WEIGHTS / 2), wanted)


def test_a_slab_of_one_spacing_removes_that_order():
    indices = np.array([[0, 0, 1], [0, 0, 2], [0, 0, 0], [1, 0, 0]])
    factors = averages.slab(CRYSTAL, [0, 0, 1], CRYSTAL.spacings(indices[:1])[0]).factors(CRYSTAL, indices)
    np.testing.assert_allclose(factors[:3], [0, 0, 1], atol=1e-15)
    assert 0 < factors[3] < 1


# Box.


@pytest.mark.parametrize(("dimension", "edges"), [(1, 1), (2, 1), (2, 2), (3, 1), (3, 2), (3, 3)])
def test_a_box(dimension, edges):
    lattice = LATTICES[dimension]
    rows = np.random.default_rng(10 * dimension + edges).uniform(-0.4, 0.4, (edges, dimension))
    wanted, found = averaged(lattice, averages.box(lattice, rows), real=False, share=0.1)
    nodes, weights = np.polynomial.legendre.leggauss(20 if edges == 3 else 40)
    parts = np.array(list(itertools.product(0.5 * nodes, repeat=edges)))
    shares = np.array([np.prod(w) for w in itertools.product(0.5 * weights, repeat=edges)])
    assert_same(found, mean_over(wanted, parts @ rows, shares), wanted)


def test_a_box_of_the_whole_cell_leaves_the_mean():
    wanted, found = averaged(CRYSTAL, averages.box(CRYSTAL, np.eye(3)))
    zero = wanted.values[~wanted.indices.any(axis=1)][0].real
    np.testing.assert_allclose(found, zero, atol=BOUND * wanted.weight)


# Ball.


def ball_rule(dimension, radius):
    """Cartesian nodes and weights of an interval, a disc or a ball; polynomials of high order are exact."""
    if dimension == 1:
        return radius * NODES[:, None], WEIGHTS / 2
    nodes, weights = np.polynomial.legendre.leggauss(24)
    r = radius * (nodes + 1) / 2
    turn = 2 * np.pi * np.arange(48) / 48
    if dimension == 2:
        sphere, shares = np.stack([np.cos(turn), np.sin(turn)], axis=-1), np.ones(48)
    else:
        sine, cosine = np.sqrt(1 - nodes**2)[:, None], np.broadcast_to(nodes[:, None], (24, 48))
        sphere = np.stack([sine * np.cos(turn), sine * np.sin(turn), cosine], axis=-1).reshape(-1, 3)
        shares = np.repeat(weights, 48)
    places = r[:, None, None] * sphere
    shares = ((weights * r ** (dimension - 1))[:, None] * shares).ravel()
    return places.reshape(-1, dimension), shares / shares.sum()


@pytest.mark.parametrize("radius", [0.2, 1.0, 3.0])
@pytest.mark.parametrize("dimension", [1, 2, 3])
def test_a_ball(dimension, radius):
    lattice = LATTICES[dimension]
    wanted, found = averaged(lattice, averages.ball(radius), share=0.1)
    places, shares = ball_rule(dimension, radius)
    # Site by site, and two of them, since the rule has many nodes.
    expected = [wanted.at(site + fractional(lattice, places)) @ shares for site in SITES[dimension][:2]]
    assert_same(found[:2], np.array(expected), wanted)


@pytest.mark.parametrize("dimension", [1, 2, 3])
def test_a_small_ball_is_a_point(dimension):
    """The factor falls as 1 − x²/(2(d+2)): no digits may cancel near the centre."""
    lattice = LATTICES[dimension]
    indices = np.concatenate([np.zeros((1, dimension), dtype=np.int64), np.eye(dimension, dtype=np.int64)])
    for radius in (1e-8, 1e-4, 1e-2):
        x = lattice.magnitudes(indices) * radius
        factors = averages.ball(radius).factors(lattice, indices)
        assert factors[0] == 1
        np.testing.assert_allclose(factors, 1 - x**2 / (2 * (dimension + 2)), rtol=0, atol=1e-14 + x.max() ** 4)


# All.


def all_averages(dimension):
    lattice = LATTICES[dimension]
    normal = [1] + [0] * (dimension - 1)
    return [
        averages.lateral(lattice, normal),
        averages.slab(lattice, normal, 2.0),
        averages.box(lattice, 0.3 * np.eye(dimension)),
        averages.ball(1.5),
    ]


@pytest.mark.parametrize("dimension", [1, 2, 3])
def test_no_average_changes_the_mean_or_enlarges_a_coefficient(dimension):
    indices = listing(LATTICES[dimension], seed=1).indices
    zero = ~indices.any(axis=1)
    for average in all_averages(dimension):
        factors = average.factors(LATTICES[dimension], indices)
        assert (factors[zero] == 1).all()
        assert (np.abs(factors) <= 1).all()
        # Regions are centred, so that a coefficient and its mate are treated alike.
        np.testing.assert_array_equal(factors, average.factors(LATTICES[dimension], -indices))
        assert average.describe()


def test_averages_in_words():
    assert "(1 -2 3)" in averages.lateral(CRYSTAL, [1, -2, 3]).describe()
    assert "2.5 Å" in averages.slab(CRYSTAL, [1, 0, 0], 2.5).describe()
    assert "0.5 0 0" in averages.box(CRYSTAL, [[0.5, 0, 0]]).describe()
    assert "1.5 Å" in averages.ball(1.5).describe()


REFUSED = [
    (lambda: averages.lateral(CRYSTAL, [0, 0, 0]), ("normal",)),
    (lambda: averages.lateral(CRYSTAL, [1, 0]), ("normal",)),
    (lambda: averages.lateral(CRYSTAL, [0.5, 0, 0]), ("normal",)),
    (lambda: averages.slab(CRYSTAL, [1, 0, 0], 0.0), ("thickness",)),
    (lambda: averages.slab(CRYSTAL, [1, 0, 0], np.nan), ("thickness",)),
    (lambda: averages.slab(CRYSTAL, [0, 0, 0], 1.0), ("normal",)),
    (lambda: averages.box(CRYSTAL, np.eye(4, 3)), ("edges",)),
    (lambda: averages.box(CRYSTAL, np.empty((0, 3))), ("edges",)),
    (lambda: averages.box(CRYSTAL, [[1, 0]]), ("edges",)),
    (lambda: averages.box(CRYSTAL, [[1, 0, np.inf]]), ("edges", 0, 2)),
    (lambda: averages.ball(-1.0), ("radius",)),
    (lambda: averages.ball(np.inf), ("radius",)),
]


@pytest.mark.parametrize(("call", "path"), REFUSED)
def test_averages_that_are_refused(call, path):
    assert refusal_of(call).path == path

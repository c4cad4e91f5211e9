from dataclasses import replace

import numpy as np
import pytest

from engine import Columns, Lattice, assemble
from engine.features.extrema import find_extrema
from engine.features.geometry import angles, distances, nearest_translations
from engine.features.precision import Displacements, Uncertain
from engine.fields import Treatment, multipliers
from engine.uncertainty import covariance
from tests.engine.features.densities import apart, gaussian_atoms, random_set
from tests.strategies import CRYSTAL, LATTICES, refusal_of


def some(dimension, seed=13, sigma=0.05):
    coefficients, _ = random_set(dimension, seed)
    return find_extrema(replace(coefficients, sigma=None if sigma is None else np.full(coefficients.count, sigma)))


@pytest.mark.parametrize("dimension", [1, 2, 3])
def test_distances_are_to_the_nearest_image(dimension):
    found = some(dimension)
    pairs = np.argwhere(~np.eye(found.count, dtype=bool))
    made = distances(found, pairs)
    expected = apart(found.coefficients.lattice, found.fractional, found.fractional)
    np.testing.assert_allclose(made.value, expected[pairs[:, 0], pairs[:, 1]], atol=1e-9)
    np.testing.assert_allclose(np.linalg.norm(made.vector, axis=1), made.value)
    np.testing.assert_allclose(made.sigma, distances(found, pairs[:, ::-1]).sigma, rtol=1e-9)


def test_the_nearest_image_in_a_very_oblique_cell():
    """Whose shortest vectors are no edges: rounding fractions, or the cells next to that, would miss it."""
    lattice = Lattice.from_vectors([[5.0, 0.0], [24.3, 1.3]])
    rng = np.random.default_rng(0)
    gap = rng.uniform(-3, 3, (200, 2))
    cells = np.stack(np.meshgrid(np.arange(-90, 91), np.arange(-30, 31), indexing="ij"), axis=-1).reshape(-1, 2)
    expected = np.array([np.linalg.norm((one + cells) @ lattice.vectors, axis=1).min() for one in gap])
    made = np.linalg.norm((gap + nearest_translations(lattice, gap)) @ lattice.vectors, axis=1)
    np.testing.assert_allclose(made, expected, atol=1e-9)


def test_given_translations():
    found = some(3)
    made = distances(found, [[0, 1], [1, 1]], translations=[[1, 0, -2], [0, 1, 0]])
    gap = found.fractional[1] + [1, 0, -2] - found.fractional[0]
    assert made.value[0] == pytest.approx(np.linalg.norm(gap @ CRYSTAL.vectors))
    assert made.operation == ("x+1,y,z-2", "x,y+1,z")
    # A period is exact, however uncertain the position.
    assert made.value[1] == pytest.approx(CRYSTAL.lengths[1])
    assert made.sigma[1] < 1e-12 < made.sigma[0]


def test_angles():
    found = some(3)
    made = angles(found, [[0, 1, 2], [2, 1, 0], [1, 0, 2]])
    assert made.value[0] == pytest.approx(made.value[1])
    assert made.sigma[0] == pytest.approx(made.sigma[1])
    for row, (i, j, k) in enumerate(made.rows):
        legs = [
            (found.fractional[end] + shift - found.fractional[j]) @ CRYSTAL.vectors
            for end, shift in zip((i, k), made.translations[row], strict=True)
        ]
        cosine = legs[0] @ legs[1] / np.linalg.norm(legs[0]) / np.linalg.norm(legs[1])
        assert made.value[row] == pytest.approx(np.degrees(np.arccos(cosine)))
    closed = [
        angles(found, [t], translations=np.zeros((1, 2, 3), dtype=int)) for t in ([0, 1, 2], [1, 2, 0], [2, 0, 1])
    ]
    assert sum(one.value[0] for one in closed) == pytest.approx(180)


@pytest.mark.parametrize("dimension", [2, 3])
def test_straight_angles(dimension):
    """Through a lattice translation: exactly straight, and nothing can bend it. Through a point between, something."""
    found = some(dimension)
    step = np.zeros((1, 2, dimension), dtype=int)
    step[0, 0, 0], step[0, 1, 0] = 1, -1
    made = angles(found, [[0, 0, 0]], translations=step)
    assert made.value[0] == pytest.approx(180)
    assert made.sigma[0] < 1e-9
    step[0, 1, 0] = 2
    same = angles(found, [[0, 0, 0]], translations=step)
    assert same.value[0] == pytest.approx(0, abs=1e-6)
    assert same.sigma[0] < 1e-9


def test_the_bend_of_a_straight_row():
    """Three atoms in a row, free to move: by their joint covariance, spelt out, the deviation from 180°."""
    lattice = Lattice.from_parameters(9, 8, 7, 90, 90, 90)
    x = np.array([[0.2, 0.5, 0.5], [0.5, 0.5, 0.5], [0.83, 0.5, 0.5]])
    found = find_extrema(gaussian_atoms(lattice, x, [9, 7, 12], 4.0, 1.2, 0.3), most=3)
    order = np.argsort(found.fractional[:, 0])
    made = angles(found, [order])
    assert made.value[0] == pytest.approx(180, abs=1e-5)
    # The bend is Σ over both axes across of ((δ1 − δ0)/a + (δ1 − δ2)/b)²; each number on its own below.
    uncertain = Uncertain.of(multipliers(found.coefficients, Treatment()))
    slopes = Displacements(found.fractional, np.repeat(order, 3)[:, None], np.tile(np.eye(3), (3, 1))[:, None])
    joint = covariance(uncertain.errors, slopes)
    moves = np.zeros((9, 9))
    for place, row in enumerate(order):
        moves[3 * place : 3 * place + 3, 3 * place : 3 * place + 3] = -np.linalg.inv(found.hessian[row])
    joint = moves @ joint @ moves.T
    legs = np.linalg.norm(np.diff(found.cartesian[order], axis=0), axis=1)
    total = 0.0
    for axis in (1, 2):
        w = np.zeros(9)
        w[axis], w[3 + axis], w[6 + axis] = -1 / legs[0], 1 / legs[0] + 1 / legs[1], -1 / legs[1]
        total += w @ joint @ w
    assert np.radians(made.sigma[0]) == pytest.approx(np.sqrt(total), rel=1e-6)


def test_without_uncertainties():
    found = some(2, sigma=None)
    assert distances(found, [[0, 1]]).sigma is None
    assert angles(found, [[0, 1, 2]]).sigma is None


@pytest.mark.parametrize(
    ("call", "path"),
    [
        (lambda one: distances(one, [[0, 99]]), ("pairs",)),
        (lambda one: distances(one, [[0, -1]]), ("pairs",)),
        (lambda one: distances(one, [[0.0, 1.0]]), ("pairs",)),
        (lambda one: distances(one, [0, 1]), ("pairs",)),
        (lambda one: distances(one, [[0, 1], [2, 2]]), ("pairs",)),
        (lambda one: distances(one, [[0, 1]], translations=[[0.5, 0]]), ("translations",)),
        (lambda one: distances(one, [[0, 1]], translations=[[1, 0, 0]]), ("translations",)),
        (lambda one: angles(one, [[0, 1]]), ("triples",)),
        (lambda one: angles(one, [[0, 0, 1]]), ("triples",)),
    ],
)
def test_refusals(call, path):
    assert refusal_of(lambda: call(some(2))).path == path


def test_a_stack_has_no_angles():
    assert refusal_of(lambda: angles(some(1), [[0, 1, 2]])).path == ("triples",)


def test_one_atom_of_a_stack():
    """Distances of a periodic single maximum from its own images are periods."""
    lattice = LATTICES[1]
    one = assemble(
        lattice,
        Columns(indices=(np.array([0, 1]),), real=np.array([1.0, 0.5]), imag=np.zeros(2), sigma=np.full(2, 0.1)),
        values="density_coefficient",
    )
    found = find_extrema(one)
    assert found.count == 1
    made = distances(found, [[0, 0]], translations=[[3]])
    assert made.value[0] == pytest.approx(3 * lattice.lengths[0])
    assert made.operation == ("z+3",)

import numpy as np
import pytest

from engine.features.jets import EXACT, JetField, blocks, orders_of, thirds_of
from engine.sampling import full_cell
from tests.engine.features.densities import plain_jet, random_set


def field_of(dimension, seed=4, reach=None):
    coefficients, made = random_set(dimension, seed, reach)
    return JetField.of(coefficients.series()), made


@pytest.mark.parametrize("dimension", [1, 2, 3])
def test_derivatives_are_those_of_a_plain_sum(dimension):
    field, made = field_of(dimension)
    x = np.random.default_rng(0).uniform(-3, 3, (9, dimension))
    jets = field.at(x)
    for row in range(len(x)):
        value, gradient, hessian = plain_jet(made, x[row])
        assert jets.value[row] == pytest.approx(value, abs=1e-11 * field.sums[0])
        np.testing.assert_allclose(jets.gradient[row], gradient, atol=1e-11 * field.sums[1])
        np.testing.assert_allclose(jets.hessian[row], hessian, atol=1e-11 * field.sums[2])


def test_a_transform_and_the_direct_sum_agree(monkeypatch):
    field, _ = field_of(3, reach=(6, 7, 8))
    x = np.random.default_rng(1).random((1500, 3))
    direct = field._direct(x)
    monkeypatch.setattr("engine.features.jets.SECONDS_PER_PHASE", 1.0)
    monkeypatch.setattr(JetField, "_direct", None)
    other = field._rows(x, EXACT)
    assert (np.abs(other - direct).max(axis=0) / np.abs(direct).max(axis=0)).max() < 1e-10


@pytest.mark.parametrize(("dimension", "shape"), [(1, (60,)), (2, (24, 27)), (3, (9, 12, 20))])
def test_blocks_are_the_values_at_the_grid_points(dimension, shape):
    field, made = field_of(dimension)
    grid = full_cell(field.series.lattice, shape)
    expected = field.at(grid.positions().reshape(-1, dimension))
    waves = 2j * np.pi * made.indices @ np.linalg.inv(made.lattice.vectors).T
    phases = np.exp(2j * np.pi * grid.positions().reshape(-1, dimension) @ made.indices.T)
    tensor = np.einsum("sn,n,ni,nj,nk->sijk", phases, made.values, waves, waves, waves, optimize=True).real
    norm = np.sqrt((tensor**2).sum(axis=(1, 2, 3)))
    rest = grid.samples // shape[0]
    for block in blocks(field.plans(grid), grid):
        rows = slice(block.start * rest, block.stop * rest)
        np.testing.assert_allclose(block.jets.value, expected.value[rows], atol=1e-9)
        np.testing.assert_allclose(block.jets.gradient, expected.gradient[rows], atol=1e-9)
        np.testing.assert_allclose(block.jets.hessian, expected.hessian[rows], atol=1e-9)
        np.testing.assert_allclose(block.third, norm[rows], atol=1e-9)


def test_which_derivatives():
    assert orders_of(2) == ((), (0,), (1,), (0, 0), (0, 1), (1, 1))
    assert thirds_of(2) == ((0, 0, 0), (0, 0, 1), (0, 1, 1), (1, 1, 1))


def test_bounds():
    field, _ = field_of(2)
    x = np.random.default_rng(2).random((4000, 2))
    jets = field.at(x)
    assert np.abs(jets.value).max() <= field.sums[0]
    assert np.linalg.norm(jets.gradient, axis=1).max() <= field.sums[1]
    assert np.abs(np.linalg.eigvalsh(jets.hessian)).max() <= field.sums[2]
